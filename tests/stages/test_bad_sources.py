"""One bad source among good ones: the good ones are baked, the bad one is named with its cause."""

import os

import numpy as np
import pytest

from skykiln.engine.stage import Stage
from tiny_pipeline import TinyPipeline, published, sky_pixels, write_sky


def _cut(path):
    path.write_bytes(path.read_bytes()[:-200])


def _replace_by_text(path):
    path.write_text("not a picture")


def _remove(path):
    path.unlink()


def _replace_by_folder(path):
    path.unlink()
    path.mkdir()


def _replace_by_pipe(path):
    path.unlink()
    os.mkfifo(path)


@pytest.mark.parametrize("workers", [1, 2])
@pytest.mark.parametrize("spoil", [_cut, _replace_by_text, _remove, _replace_by_folder, _replace_by_pipe])
def test_bad_source_is_named_and_the_others_are_baked(tmp_path, spoil, workers):
    pipeline = TinyPipeline(tmp_path, probes=["deck", "ferry_noon", "quay_night"])
    spoil(tmp_path / "ferry_noon.exr")
    pipeline.bake(workers=workers)
    record = pipeline.night_record()
    assert record["exit_status"] == 1
    assert record["totals"] == {"probes": 3, "rebuilt": 2, "unchanged": 0, "held": 0, "failed": 1}
    entry = record["probes"][1]
    assert (entry["name"], entry["state"], entry["stages"]) == ("ferry_noon", "failed", [])
    assert entry["failure"]["file"] == "ferry_noon.exr"
    assert entry["failure"]["stage"] == "panorama of ferry_noon"
    assert entry["failure"]["cause"].startswith("ferry_noon.exr: ")
    names = {name.split("/")[1] for name in published(pipeline.build) if name.startswith("probes/")}
    assert names == {"deck", "quay_night"}


def test_source_that_goes_bad_keeps_its_last_published_files(tmp_path):
    pipeline = TinyPipeline(tmp_path)
    pipeline.bake()
    before = published(pipeline.build)
    _cut(tmp_path / "ferry_noon.exr")
    assert pipeline.bake() == []
    assert pipeline.night_record()["totals"]["failed"] == 1
    assert published(pipeline.build) == before


def test_mended_source_is_baked_and_its_failure_forgotten(tmp_path):
    pipeline = TinyPipeline(tmp_path)
    good = (tmp_path / "ferry_noon.exr").read_bytes()
    _cut(tmp_path / "ferry_noon.exr")
    pipeline.bake()
    assert list(pipeline.build.rglob("*.failure"))
    (tmp_path / "ferry_noon.exr").write_bytes(good)
    pipeline.bake()
    assert pipeline.night.failures == []
    assert not list(pipeline.build.rglob("*.failure"))


def test_pixels_that_no_sky_has_are_mended_counted_and_reported(tmp_path):
    pipeline = TinyPipeline(tmp_path, probes=["ferry_noon"])
    pixels = sky_pixels(0)
    pixels[2, 3, 0], pixels[4, 4], pixels[5, 1, 2] = np.nan, np.inf, -1
    write_sky(tmp_path / "ferry_noon.exr", pixels=pixels)
    pipeline.bake()
    assert pipeline.probe_record("ferry_noon")["source"]["repaired"] == {"nan": 1, "inf": 1, "negative": 1}


def test_picture_that_is_no_panorama_is_refused_unless_it_is_said_to_be_one(tmp_path):
    pipeline = TinyPipeline(tmp_path, probes=["ferry_noon"])
    write_sky(tmp_path / "ferry_noon.exr", pixels=sky_pixels(0)[:6])
    pipeline.bake()
    (_, failure), = pipeline.night.failures
    assert "16 x 6 is not twice as wide as high" in failure.cause
    pipeline.settings["sources"]["ferry_noon"]["layout"] = "equirect"
    pipeline.bake()
    assert pipeline.night.failures == []


@pytest.mark.parametrize("value", [np.nan, np.inf, -1.0])
@pytest.mark.parametrize(("channels", "lost"), [([0, 1, 2], "R, G, B"), ([1], "G")])
def test_channel_without_a_valid_value_is_told_with_the_file(tmp_path, value, channels, lost):
    pipeline = TinyPipeline(tmp_path)
    pixels = sky_pixels(0)
    pixels[..., channels] = value
    write_sky(tmp_path / "ferry_noon.exr", pixels=pixels)
    pipeline.bake()
    (_, failure), = pipeline.night.failures
    told = f"every value of {lost} is NaN, infinite or negative, so nothing can be repaired; export it again"
    assert (failure.cause, failure.traceback) == (f"{tmp_path}/ferry_noon.exr: {told}", "")


@pytest.mark.parametrize("layout", ["auto", "equirect"])
@pytest.mark.parametrize("shape", [(1, 1), (1, 2), (8, 17), (8, 2), (2, 16)])
def test_absurd_panorama_is_told_with_the_file(tmp_path, shape, layout):
    pipeline = TinyPipeline(tmp_path, probes=["ferry_noon"])
    pipeline.settings["sources"]["ferry_noon"]["layout"] = layout
    write_sky(tmp_path / "ferry_noon.exr", pixels=np.ones((*shape, 3), np.float32))
    pipeline.bake()
    (_, failure), = pipeline.night.failures
    what = "can't be a panorama" if layout == "equirect" else "is not twice as wide as high"
    start = f"{tmp_path}/ferry_noon.exr: {shape[1]} x {shape[0]} {what}"
    assert (failure.cause[: len(start)], failure.traceback) == (start, "")


def test_black_sky_can_t_be_scaled_to_an_illuminance(tmp_path):
    pipeline = TinyPipeline(tmp_path, probes=["ferry_noon"])
    write_sky(tmp_path / "ferry_noon.exr", pixels=0 * sky_pixels(0))
    pipeline.settings["sources"]["ferry_noon"]["horizontal_lux"] = 1000
    pipeline.bake()
    assert "horizontal_lux: the picture has no light there to scale" in pipeline.night.failures[0][1].cause


def test_brightness_beyond_single_precision_is_refused(tmp_path):
    pipeline = TinyPipeline(tmp_path, probes=["ferry_noon"])
    write_sky(tmp_path / "ferry_noon.exr", pixels=sky_pixels(0) * np.float32(1e38))
    pipeline.settings["sources"]["ferry_noon"]["exposure_ev"] = 8
    pipeline.bake()
    assert "overflows" in pipeline.night.failures[0][1].cause


def test_bug_in_one_probe_keeps_its_traceback_and_stops_no_other(tmp_path, monkeypatch):
    pipeline = TinyPipeline(tmp_path)
    run = Stage.settings

    def broken(stage):
        if stage.owner == "ferry_noon":
            raise ZeroDivisionError("seeded")
        return run(stage)

    from skykiln.stages.extract_faces import ExtractFaces

    make = ExtractFaces.make
    monkeypatch.setattr(ExtractFaces, "make", lambda stage, inputs: broken(stage) or make(stage, inputs))
    pipeline.bake()
    (owner, failure), = pipeline.night.failures
    assert owner == "ferry_noon"
    assert failure.cause == "ZeroDivisionError: seeded"
    assert "in broken" in failure.traceback
    assert pipeline.night_record()["totals"]["rebuilt"] == 1


def test_build_folder_that_can_t_be_written_is_told_by_name(tmp_path):
    from skykiln.errors import SkykilnError

    pipeline = TinyPipeline(tmp_path)
    pipeline.build.write_text("a file where the folder should be")
    with pytest.raises(SkykilnError, match=r"build.*can't be written"):
        pipeline.bake()
