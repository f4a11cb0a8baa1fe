"""The nightly audit end to end: what is packed wrong is told, and held where the gate says so."""

import numpy as np
import pytest

from skykiln.cli import main
from skykiln.errors import ALL_WELL, GATE_BROKEN
from skykiln.light import cube_axes
from skykiln.stages import auditing, packing
from skykiln.stages.filter_level import FilterLevel
from skykiln.stages.nights import accept_held
from tiny_pipeline import TinyPipeline, published, write_sky

PACKS = ["rgba16f", "rgb9e5", "r11g11b10f", "bc6h"]


def lamps(seed):
    """A quay at night, 64 x 32: a dark sky and some coloured lamps."""
    random = np.random.default_rng(seed)
    sky = np.full((32, 64, 3), 0.2, np.float32)
    rows, columns = random.integers(4, 28, 9), random.integers(0, 64, 9)
    sky[rows, columns] = random.uniform(5, 60, (9, 3))
    return sky


@pytest.fixture
def pipeline(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    pipeline = TinyPipeline(tmp_path, probes=["quay_night"])
    write_sky(tmp_path / "quay_night.exr", pixels=lamps(1))
    specular = {"levels": 5, "tolerance": 0.005}
    pipeline.recipe.update(face_size=16, irradiance={"face_size": 4}, specular=specular)
    return pipeline


def audit_of(pipeline):
    return pipeline.probe_record("quay_night")["audit"]


def plant_next_roughness(monkeypatch, planted=2):
    """Level 2 is filtered with the roughness of level 3."""
    make = FilterLevel.make

    def wrong(stage, inputs):
        if stage.level != planted:
            return make(stage, inputs)
        next_level = FilterLevel.sketch(pinned=stage.pinned, level=stage.level + 1)
        (level,) = make(next_level, inputs).values()
        return {"level": np.repeat(np.repeat(level, 2, axis=1), 2, axis=2)}

    monkeypatch.setattr(FilterLevel, "make", wrong)


def test_every_file_is_audited_the_finest_against_the_source_and_the_others_against_it(pipeline):
    pipeline.recipe["pack"] = [{"container": "ktx2", "pixels": pixels} for pixels in PACKS]
    pipeline.recipe["pack"].append({"container": "exr", "pixels": "half", "cube_axes": "direct"})
    pipeline.recipe["irradiance"]["pixels"] = "rgb9e5"
    pipeline.bake()
    audit = audit_of(pipeline)
    assert audit["passed"], audit["why"]
    assert audit["share_passed"] == 1
    against = {entry["file"]: entry["against"] for entry in audit["files"]}
    assert against == {
        "specular.half.exr": "the source",
        **{f"specular.{pixels}.ktx2": "specular.half.exr" for pixels in PACKS},
        "irradiance.half.exr": "the source",
        "irradiance.rgb9e5.ktx2": "irradiance.half.exr",
    }
    assert [row["map"] for row in audit["maps"]] == [*(f"level {k}" for k in range(5)), "irradiance", "all"]
    (entry,) = pipeline.night_record()["probes"]
    assert entry["audit"]["passed"] and entry["audit"]["texels"] == audit["texels"]


def test_a_level_of_the_next_roughness_is_held_and_last_night_s_files_stay(pipeline, monkeypatch):
    pipeline.settings["gates"] = {"audit": True}
    pipeline.bake()
    assert pipeline.night_record()["exit_status"] == ALL_WELL
    before = published(pipeline.build)
    write_sky(pipeline.folder / "quay_night.exr", pixels=lamps(2))
    plant_next_roughness(monkeypatch)
    pipeline.bake()
    assert published(pipeline.build) == before
    record = pipeline.night_record()
    (entry,) = record["probes"]
    assert (record["exit_status"], entry["state"]) == (GATE_BROKEN, "held")
    (broken,) = entry["gates"]
    assert broken == {"gate": "audit", "why": entry["audit"]["why"]}
    assert broken["why"].startswith("level 2 is off by ")
    assert entry["audit"]["worst"]["map"] == "level 2"
    assert accept_held(pipeline.snapshot("quay_night")) == ["quay_night"]
    pipeline.bake()
    assert published(pipeline.build) != before
    audit = audit_of(pipeline)
    assert not audit["passed"] and audit["share_passed"] < 1
    assert audit["worst"]["map"] == "level 2" and audit["worst"]["used"] > 1
    assert abs(audit["worst"]["z"]) > 5 and abs(audit["worst"]["deviation"]) > 0.02


def test_without_the_gate_a_failed_audit_is_published_and_told(pipeline, monkeypatch, capsys):
    plant_next_roughness(monkeypatch)
    pipeline.snapshot()
    assert main(["bake"]) == ALL_WELL
    told = capsys.readouterr().err.splitlines()
    assert told[-1].startswith("quay_night: audit: level 2 is off by ")
    assert not audit_of(pipeline)["passed"]


def test_faces_packed_mirrored_are_caught_by_the_audit(pipeline, monkeypatch):
    stored = packing.stored_images
    wrong = lambda levels, axes, stops: stored([level[:, :, ::-1] for level in levels], axes, stops)  # noqa: E731
    monkeypatch.setattr(packing, "stored_images", wrong)
    pipeline.bake()
    assert not audit_of(pipeline)["passed"]


def test_another_file_s_exchanged_faces_are_caught_without_draws(pipeline, monkeypatch):
    pipeline.recipe["pack"] = [{"container": "ktx2", "pixels": pixels} for pixels in ("rgba16f", "bc6h")]
    pack = packing.pack_images

    def wrong(images, container, pixels, *rest):
        swapped = [image[[1, 0, 2, 3, 4, 5]] for image in images] if pixels == "bc6h" else images
        return pack(swapped, container, pixels, *rest)

    monkeypatch.setattr(packing, "pack_images", wrong)
    pipeline.bake()
    audit = audit_of(pipeline)
    assert audit["why"].startswith("specular.bc6h.ktx2 is not what specular.rgba16f.ktx2 holds: ")
    assert {entry["file"]: entry["passed"] for entry in audit["files"]} == {
        "specular.rgba16f.ktx2": True,
        "specular.bc6h.ktx2": False,
        "irradiance.rgba16f.ktx2": True,
    }


def test_of_blocks_alone_the_filtered_levels_are_audited_in_their_place(pipeline, monkeypatch):
    pipeline.recipe["pack"] = [{"container": "ktx2", "pixels": "bc6h"}]
    pipeline.bake()
    against = {entry["file"]: (entry["against"], entry["passed"]) for entry in audit_of(pipeline)["files"]}
    assert against == {
        "specular.bc6h.ktx2": ("the filtered levels", True),
        "irradiance.rgba16f.ktx2": ("the source", True),
    }
    plant_next_roughness(monkeypatch)
    pipeline.bake(again=True)
    assert audit_of(pipeline)["why"].startswith("level 2 is off by ")


@pytest.mark.parametrize("axes", cube_axes.CUBE_AXES)
@pytest.mark.parametrize("yaw", [0, 40])
def test_axes_turns_and_darkening_are_undone(pipeline, axes, yaw):
    pipeline.settings["cube_axes"] = axes
    pipeline.settings["sources"]["quay_night"] |= {"yaw_deg": yaw, "exposure_ev": 14}
    pipeline.bake()
    assert pipeline.probe_record("quay_night")["storage_ev"] > 0
    assert audit_of(pipeline)["passed"], audit_of(pipeline)["why"]


def test_a_separated_sun_is_not_missed(pipeline):
    sky = lamps(1)
    sky[6, 20] = 4000
    write_sky(pipeline.folder / "quay_night.exr", pixels=sky)
    pipeline.recipe["sun"] = {"action": "separate"}
    pipeline.bake()
    record = pipeline.probe_record("quay_night")
    assert record["sun"] is not None
    assert record["audit"]["passed"], record["audit"]["why"]


def test_texels_follow_from_what_is_audited(pipeline):
    pipeline.bake()
    first = audit_of(pipeline)
    pipeline.bake(again=True)
    assert audit_of(pipeline) == first
    write_sky(pipeline.folder / "quay_night.exr", pixels=lamps(2))
    pipeline.bake()
    assert audit_of(pipeline)["worst"]["direction"] != first["worst"]["direction"]


def test_a_black_sky_is_audited(pipeline):
    write_sky(pipeline.folder / "quay_night.exr", pixels=np.zeros((32, 64, 3), np.float32))
    pipeline.bake()
    assert audit_of(pipeline)["passed"]
    assert audit_of(pipeline)["texels"] >= auditing.PER_FACE * 6
