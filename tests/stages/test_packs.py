"""Every container and coding that a recipe may ask for: what stands in the files, what they share."""

import json

import numpy as np
import pytest

from skykiln.errors import PipelineError
from skykiln.formats.texture_files import read_texture
from skykiln.light.cube_axes import from_cube_space
from skykiln.light.storage import STORED_MAX
from skykiln.stages import kernels, pack_probe, packing
from tiny_pipeline import TinyPipeline, sky_pixels, write_sky

PACKS = {
    "specular.rgba16f.ktx2": 5e-4,
    "specular.rgb9e5.ktx2": 0.01,
    "specular.r11g11b10f.dds": 0.02,
    "specular.bc6h.ktx2": 0.6,
    "specular.half.exr": 5e-4,
    "specular.float.exr": 0,
}


def entries(*names):
    """Entries of a recipe's pack list by the names of their files."""
    parts = (name.split(".") for name in names)
    return [{"container": container, "pixels": pixels} for _, pixels, container in parts]


@pytest.fixture
def pipeline(tmp_path):
    return TinyPipeline(tmp_path, probes=["ferry_noon"])


def texture(pipeline, name):
    data = (pipeline.build / "probes/ferry_noon" / name).read_bytes()
    return read_texture(data, name)


def test_every_coding_holds_the_baked_levels_as_well_as_it_can(pipeline):
    pipeline.recipe["pack"] = entries(*PACKS)
    pipeline.bake()
    work = pipeline.build / "work/ferry_noon"
    baked = [np.load(work / name) for name in ("faces.npy", "level_1.npy", "level_2.npy")]
    for name, tolerance in PACKS.items():
        packed = texture(pipeline, name)
        assert f"specular.{packed.pixels}.{packed.container}" == name
        for level, stored in zip(baked, packed.levels, strict=True):
            np.testing.assert_allclose(from_cube_space(stored, "negate_x"), level, rtol=tolerance)


def test_probe_json_lists_every_file_with_its_sizes_and_what_its_coding_took(pipeline):
    pipeline.recipe["pack"] = entries(*PACKS)
    pipeline.bake()
    record = pipeline.probe_record("ferry_noon")
    files = {entry["file"]: entry for kind in ("specular", "irradiance") for entry in record[kind]["files"]}
    assert set(PACKS) < set(files)
    assert set(files) - set(PACKS) == {
        "irradiance.rgba16f.ktx2",
        "irradiance.rgba16f.dds",
        "irradiance.half.exr",
        "irradiance.float.exr",
    }
    texels = 6 * (8 * 8 + 4 * 4 + 2 * 2)
    assert files["specular.rgba16f.ktx2"]["gpu_bytes"] == 8 * texels
    assert files["specular.r11g11b10f.dds"]["gpu_bytes"] == 4 * texels
    assert files["specular.bc6h.ktx2"]["gpu_bytes"] == 6 * (4 + 1 + 1) * 16
    assert files["specular.half.exr"]["gpu_bytes"] == 0
    errors = {name: entry["coding_error"]["log2_rms"] for name, entry in files.items()}
    assert errors["specular.float.exr"] == 0 < errors["specular.half.exr"] < errors["specular.rgb9e5.ktx2"]
    assert errors["specular.rgb9e5.ktx2"] < errors["specular.r11g11b10f.dds"] < errors["specular.bc6h.ktx2"]
    assert record["bytes"] == {
        "disk": sum(entry["bytes"] for entry in files.values()),
        "gpu": files["specular.rgba16f.ktx2"]["gpu_bytes"] + files["irradiance.rgba16f.ktx2"]["gpu_bytes"],
    }


def test_packs_share_all_upstream_work(pipeline):
    pipeline.bake()
    pipeline.recipe["pack"] = entries(*PACKS)
    titles = [label.removesuffix(" of ferry_noon") for label in pipeline.bake()]
    assert titles == [*(f"pack {name}" for name in sorted(PACKS)), "audit", "judgement", "published files"]


def test_second_bake_of_all_packs_runs_nothing(pipeline):
    pipeline.recipe["pack"] = entries(*PACKS)
    pipeline.bake()
    assert pipeline.bake() == []


def test_compressed_chain_is_smaller_and_holds_the_same_texels(pipeline):
    write_sky(pipeline.folder / "ferry_noon.exr", pixels=np.full((64, 128, 3), 0.5, np.float32))
    pipeline.recipe["face_size"] = 32
    pack = {"container": "ktx2", "pixels": "rgb9e5"}
    pipeline.recipe["pack"] = [pack, {**pack, "compress": 3, "name": "small"}]
    pipeline.bake()
    plain, small = (texture(pipeline, f"specular.{name}.ktx2") for name in ("rgb9e5", "small"))
    for level, other in zip(plain.levels, small.levels, strict=True):
        np.testing.assert_array_equal(level, other)
    sizes = {entry["file"]: entry for entry in pipeline.probe_record("ferry_noon")["specular"]["files"]}
    assert sizes["specular.small.ktx2"]["bytes"] < sizes["specular.rgb9e5.ktx2"]["bytes"] / 4
    assert sizes["specular.small.ktx2"]["gpu_bytes"] == sizes["specular.rgb9e5.ktx2"]["gpu_bytes"]


def test_strength_of_compression_reruns_its_pack_alone(pipeline):
    pipeline.recipe["pack"] = [{"container": "ktx2", "pixels": "rgba16f", "compress": 3}]
    pipeline.bake()
    pipeline.recipe["pack"][0]["compress"] = 19
    assert pipeline.plan()["pack specular.rgba16f.ktx2 of ferry_noon"][1] == "compress was 3, is 19"
    assert pipeline.bake()[0] == "pack specular.rgba16f.ktx2 of ferry_noon"


def test_full_chain_ends_with_one_texel_a_face(pipeline):
    pipeline.recipe["specular"] = {"levels": "full", "tolerance": 0.05}
    pipeline.recipe["pack"] = entries("specular.bc6h.ktx2", "specular.rgb9e5.dds", "specular.half.exr")
    pipeline.bake()
    for entry in entries("specular.bc6h.ktx2", "specular.rgb9e5.dds", "specular.half.exr"):
        levels = texture(pipeline, f"specular.{entry['pixels']}.{entry['container']}").levels
        assert [level.shape[1] for level in levels] == [8, 4, 2, 1]
    levels = pipeline.probe_record("ferry_noon")["specular"]["levels"]
    assert [level["roughness"] for level in levels] == pytest.approx([0, 1 / 3, 2 / 3, 1])
    assert [level["seam"] is None for level in levels] == [False, False, False, True]


def test_files_tell_a_loader_what_it_must_know(pipeline):
    pipeline.settings["sources"]["ferry_noon"] |= {"exposure_ev": 20}
    pipeline.recipe["pack"] = [*entries("specular.rgba16f.ktx2", "specular.half.exr")]
    pipeline.recipe["pack"][1]["cube_axes"] = "direct"
    pipeline.bake()
    ev = pipeline.probe_record("ferry_noon")["storage_ev"]
    assert ev > 0
    for name, axes in (("specular.rgba16f.ktx2", "negate_x"), ("specular.half.exr", "direct")):
        packed = texture(pipeline, name)
        assert json.loads(packed.metadata["skykiln"]) == {
            "content": "specular",
            "name": "ferry_noon",
            "roughness": [0, 0.5, 1],
            "cube_axes": axes,
            "units": "relative",
            "primaries": "rec709",
            "storage_ev": ev,
        }
        assert packed.levels[0].max() <= STORED_MAX
    metadata = texture(pipeline, "irradiance.rgba16f.ktx2").metadata
    assert json.loads(metadata["skykiln"])["content"] == "irradiance"
    assert metadata["KTXorientation"] == "rd"
    assert metadata["KTXwriter"] == f"skykiln PackProbe {pack_probe.PackProbe.version}"


def test_coding_whose_extra_is_missing_is_told_before_anything_runs(pipeline, monkeypatch):
    monkeypatch.setitem(kernels.EXTRAS, "bc6h", "no_such_encoder")
    pipeline.recipe["pack"] = entries("specular.bc6h.ktx2")
    with pytest.raises(PipelineError) as caught:
        pipeline.bake()
    assert caught.value.problems == [
        f"{pipeline.file}: recipes.tiny.pack: pixels: bc6h needs the package no_such_encoder; "
        "install the extra: pip install 'skykiln[bc6h]'"
    ]
    assert not pipeline.build.exists()


def test_seam_of_a_sky_is_near_one_and_shows_a_face_that_was_packed_flipped(pipeline, monkeypatch):
    height = 32
    ramp = np.linspace(3, 0.2, height)[:, None, None] + 0.3 * np.sin(np.linspace(0, 2 * np.pi, 64))[:, None]
    pixels = np.broadcast_to(ramp, (height, 64, 3)).astype(np.float32)
    write_sky(pipeline.folder / "ferry_noon.exr", pixels=pixels)
    pipeline.recipe["face_size"] = 16

    def seams():
        pipeline.bake()
        return [level["seam"] for level in pipeline.probe_record("ferry_noon")["specular"]["levels"]]

    sound = seams()
    assert max(sound) < 2
    to_cube_space = packing.to_cube_space

    def faulty(faces, axes):
        images = to_cube_space(faces, axes)
        images[4] = images[4, ::-1]
        return images

    monkeypatch.setattr(packing, "to_cube_space", faulty)
    monkeypatch.setattr(pack_probe.PackProbe, "version", pack_probe.PackProbe.version + 1)
    assert all(bad > 2 * good for bad, good in zip(seams(), sound, strict=True))


def test_irradiance_coding_is_the_recipe_s(pipeline):
    pipeline.recipe["irradiance"]["pixels"] = "r11g11b10f"
    pipeline.recipe["pack"] = entries("specular.rgba16f.ktx2", "specular.bc6h.dds")
    write_sky(pipeline.folder / "ferry_noon.exr", pixels=sky_pixels(4))
    pipeline.bake()
    files = pipeline.probe_record("ferry_noon")["irradiance"]["files"]
    assert [entry["file"] for entry in files] == ["irradiance.r11g11b10f.dds", "irradiance.r11g11b10f.ktx2"]
    cube = np.load(pipeline.build / "work/ferry_noon/irradiance.npy")
    for entry in files:
        (stored,) = texture(pipeline, entry["file"]).levels
        np.testing.assert_allclose(from_cube_space(stored, "negate_x"), cube, rtol=0.02)
