"""The sheen chain: baked where a recipe asks for it, and for nobody else."""

import json

import jsonschema
import numpy as np
import pytest

from skykiln.formats.texture_files import read_texture
from skykiln.light import sheen
from skykiln.light.cube_axes import from_cube_space
from skykiln.light.pyramid import build_pyramid
from skykiln.light.sheen import sheen_lobe
from skykiln.light.zonal_filter import filter_level_by
from skykiln.schemas import shipped_schema
from tiny_pipeline import TinyPipeline


@pytest.fixture
def pipeline(tmp_path):
    pipeline = TinyPipeline(tmp_path, probes=["ferry_noon"])
    pipeline.recipe["sheen"] = {"levels": 2, "face_size": 4}
    return pipeline


def texture(pipeline, name):
    return read_texture((pipeline.build / "probes/ferry_noon" / name).read_bytes(), name)


def test_file_holds_the_sky_filtered_by_the_sheen_lobe_of_each_level(pipeline):
    pipeline.bake()
    packed = texture(pipeline, "sheen.rgba16f.ktx2")
    pyramid = build_pyramid(np.load(pipeline.build / "work/ferry_noon/panorama.npy"))
    for level, roughness, size in zip(packed.levels, (0.5, 1.0), (4, 2), strict=True):
        expected = filter_level_by(sheen_lobe(roughness**2), pyramid, size, 0.05)
        np.testing.assert_allclose(from_cube_space(level, "negate_x"), expected, rtol=1e-3)
    about = json.loads(packed.metadata["skykiln"])
    assert (about["content"], about["roughness"]) == ("sheen", [0.5, 1.0])


def test_probe_json_lists_its_levels_and_files_and_keeps_to_the_schema(pipeline):
    pipeline.recipe["sheen"]["roughness"] = [0.3, 0.9]
    codings = {"ktx2": "rgb9e5", "exr": "half"}
    pipeline.recipe["pack"] = [{"container": it, "pixels": pixels} for it, pixels in codings.items()]
    pipeline.bake()
    record = pipeline.probe_record("ferry_noon")
    levels = [(level["roughness"], level["face_size"]) for level in record["sheen"]["levels"]]
    assert levels == [(0.3, 4), (0.9, 2)]
    files = {entry["file"]: entry for entry in record["sheen"]["files"]}
    assert set(files) == {"sheen.rgb9e5.ktx2", "sheen.half.exr"}
    assert files["sheen.rgb9e5.ktx2"]["gpu_bytes"] == 4 * 6 * (16 + 4)
    kinds = [entry for kind in ("specular", "irradiance", "sheen") for entry in record[kind]["files"]]
    assert record["bytes"]["disk"] == sum(entry["bytes"] for entry in kinds)
    assert record["bytes"]["gpu"] == sum(
        entry["gpu_bytes"] for entry in kinds if entry["container"] == "ktx2"
    )
    jsonschema.validate(record, shipped_schema("probe"))


def test_asking_for_it_reruns_nothing_that_was_filtered_and_taking_it_back_removes_it(pipeline):
    sheen = pipeline.recipe.pop("sheen")
    pipeline.bake()
    assert "sheen" not in pipeline.probe_record("ferry_noon")
    pipeline.recipe["sheen"] = sheen
    titles = {label.removesuffix(" of ferry_noon") for label in pipeline.bake()}
    made = {"sheen level 0", "sheen level 1", "pack specular.rgba16f.ktx2", "judgement", "published files"}
    assert made <= titles
    assert not any(title.startswith(("specular", "faces", "irradiance", "panorama")) for title in titles)
    assert pipeline.bake() == []
    del pipeline.recipe["sheen"]
    pipeline.bake()
    assert not (pipeline.build / "probes/ferry_noon/sheen.rgba16f.ktx2").exists()
    assert "sheen" not in pipeline.probe_record("ferry_noon")


def test_roughness_of_one_level_reruns_that_level(pipeline):
    pipeline.recipe["sheen"]["roughness"] = [0.3, 0.9]
    pipeline.bake()
    pipeline.recipe["sheen"]["roughness"] = [0.4, 0.9]
    titles = [label.removesuffix(" of ferry_noon") for label in pipeline.bake()]
    assert titles[:2] == ["sheen level 0", "pack specular.rgba16f.ktx2"]


def test_levels_have_one_value_of_storage_ev_with_the_other_files(pipeline):
    pipeline.settings["sources"]["ferry_noon"]["exposure_ev"] = 20
    pipeline.bake()
    stops = {json.loads(texture(pipeline, f"{kind}.rgba16f.ktx2").metadata["skykiln"])["storage_ev"]
             for kind in ("specular", "irradiance", "sheen")}  # fmt: skip
    assert stops == {pipeline.probe_record("ferry_noon")["storage_ev"]}


def test_audit_holds_it_against_the_source(pipeline, monkeypatch):
    pipeline.recipe["specular"]["tolerance"] = 0.005
    pipeline.recipe["pack"] = [{"container": "ktx2", "pixels": pixels} for pixels in ("rgba16f", "bc6h")]
    pipeline.bake()
    audit = pipeline.probe_record("ferry_noon")["audit"]
    assert audit["passed"], audit["why"]
    maps = [row["map"] for row in audit["maps"]]
    assert maps[-3:] == ["sheen level 0", "sheen level 1", "all"]
    assert against(audit)["sheen.rgba16f.ktx2"] == "the source"
    assert against(audit)["sheen.bc6h.ktx2"] == "sheen.rgba16f.ktx2"
    monkeypatch.setattr(sheen, "sheen_lobe", lambda alpha: sheen_lobe(alpha**2))
    pipeline.bake(again=True)
    assert pipeline.probe_record("ferry_noon")["audit"]["why"].startswith("sheen level 0 is off by ")


def test_of_blocks_alone_its_levels_are_audited_as_they_were_filtered(pipeline):
    pipeline.recipe["pack"] = [{"container": "ktx2", "pixels": "bc6h"}]
    pipeline.bake()
    audit = pipeline.probe_record("ferry_noon")["audit"]
    assert audit["passed"], audit["why"]
    assert against(audit)["sheen.bc6h.ktx2"] == "the filtered levels"


def against(audit):
    """What each file was held against."""
    return {entry["file"]: entry["against"] for entry in audit["files"]}
