"""Pictures and pages of a night: drawn when content changes, told against what stood published."""

import json

import numpy as np
import pytest
from PIL import Image

from skykiln.errors import ALL_WELL, GATE_BROKEN
from skykiln.stages.draw_probe import SKY_PICTURES, DrawProbe, is_sky
from skykiln.stages.nights import accept_held
from tiny_pipeline import TinyPipeline, everything, sky_pixels, write_sky

SKY = "probes/ferry_noon"


@pytest.fixture
def pipeline(tmp_path):
    pipeline = TinyPipeline(tmp_path)
    pipeline.bake()
    return pipeline


def _entry(pipeline, name="ferry_noon"):
    return next(entry for entry in pipeline.night_record()["probes"] if entry["name"] == name)


def _page(pipeline, name="index.html"):
    return (pipeline.build / "report" / name).read_text()


def _brighten(pipeline, factor=1.25):
    write_sky(pipeline.folder / "ferry_noon.exr", pixels=sky_pixels(0) * np.float32(factor))


def test_first_night_changes_nothing_that_was_published(pipeline):
    assert _entry(pipeline)["change"] is None
    assert "first night on record" in _page(pipeline)
    assert f'href="{SKY}/index.html"' in _page(pipeline)


def test_change_is_told_against_what_was_published(pipeline):
    _brighten(pipeline)
    pipeline.bake()
    change = _entry(pipeline)["change"]
    assert change["mean"] == pytest.approx(0.25, rel=3e-3)
    assert [level["largest"] for level in change["levels"]] == pytest.approx([0.25] * 3, rel=2e-2)
    assert change["illuminance"]["ratio"] == pytest.approx(1.25, rel=1e-4)
    assert change["moved_deg"] == pytest.approx(0, abs=0.01)
    assert change["source_changed"]
    picture = Image.open(pipeline.build / "report" / SKY / "change.png")
    assert picture.size == (384, 3 * 64)
    assert _entry(pipeline, "quay_night")["change"] is None
    assert "illuminance +25 %" in _page(pipeline)
    pipeline.bake()
    assert _entry(pipeline)["change"] is None


def test_a_lamp_that_moved_is_told_in_degrees(pipeline):
    for column in (9, 10):  # of 16
        pixels = np.full((8, 16, 3), 0.1, np.float32)
        pixels[4, column] = 50
        write_sky(pipeline.folder / "ferry_noon.exr", pixels=pixels)
        pipeline.bake()
    assert _entry(pipeline)["change"]["moved_deg"] == pytest.approx(22.5, abs=5)  # texels of 11 degrees


def test_gate_holds_pixels_that_changed_without_their_source(pipeline):
    pipeline.settings["gates"] = {"change": {"same_source": 0.01}}
    pipeline.settings["sources"]["ferry_noon"]["exposure_ev"] = 1
    write_sky(pipeline.folder / "quay_night.exr", seed=9)
    published = (pipeline.build / SKY / "probe.json").read_bytes()
    pipeline.bake()
    assert _entry(pipeline)["state"] == "held"
    assert _entry(pipeline, "quay_night")["state"] == "rebuilt"
    assert pipeline.night_record()["exit_status"] == GATE_BROKEN
    told = _entry(pipeline)["gates"][0]
    assert told["gate"] == "change.same_source"
    assert told["why"].startswith("the source did not change, the pixels did by ")
    assert (pipeline.build / SKY / "probe.json").read_bytes() == published
    assert "is not published" in _page(pipeline, f"{SKY}/index.html")
    assert accept_held(pipeline.snapshot()) == ["ferry_noon"]
    pipeline.bake()
    assert pipeline.night_record()["exit_status"] == ALL_WELL
    assert pipeline.probe_record("ferry_noon")["source"]["scale"] == 2
    assert _entry(pipeline)["change"]["mean"] == pytest.approx(1, rel=1e-2)


def test_gate_of_any_change_lets_a_small_one_pass(pipeline):
    pipeline.settings["gates"] = {"change": {"mean": 0.1}}
    _brighten(pipeline, 1.05)
    pipeline.bake()
    assert _entry(pipeline)["state"] == "rebuilt"
    _brighten(pipeline, 1.25)
    pipeline.bake()
    assert _entry(pipeline)["gates"][0]["why"] == "the pixels changed by 19 %, the limit is 10 %"


def test_unchanged_probes_are_not_drawn_again_and_an_unchanged_night_writes_no_page(pipeline):
    _brighten(pipeline)
    before = everything(pipeline.build)
    pipeline.bake()
    after = everything(pipeline.build)
    still = [name for name in after if name.startswith("report/probes/quay_night")]
    assert len(still) == 3
    assert all(after[name] == before[name] for name in still)
    assert after["report/index.html"] != before["report/index.html"]
    pipeline.bake()
    assert everything(pipeline.build) == after


def test_new_way_of_drawing_draws_anew_and_publishes_nothing(pipeline, monkeypatch):
    monkeypatch.setattr(DrawProbe, "version", DrawProbe.version + 1)
    assert pipeline.bake() == ["pictures of ferry_noon", "pictures of quay_night"]


def test_failure_is_told_once_it_is_there_and_no_longer_once_it_is_mended(pipeline):
    source = pipeline.folder / "ferry_noon.exr"
    data = source.read_bytes()
    source.write_bytes(data[:300])
    pipeline.bake()
    assert 'class="urgent"' in _page(pipeline)
    assert 'class="urgent"' in _page(pipeline, f"{SKY}/index.html")
    source.write_bytes(data)
    assert pipeline.bake() == []
    assert 'class="urgent"' not in _page(pipeline)
    assert "Recovered: ferry_noon." in _page(pipeline)
    assert 'class="urgent"' not in _page(pipeline, f"{SKY}/index.html")


def test_night_of_one_probe_shows_the_others_as_they_stand(pipeline):
    _brighten(pipeline)
    pipeline.bake("ferry_noon")
    assert "not asked for" in _page(pipeline)
    assert "quay_night" in _page(pipeline)


def test_nights_are_kept_up_to_the_number_asked_for(pipeline):
    pipeline.settings["report"] = {"nights": 2}
    for factor in (1.5, 1.6, 1.7):
        _brighten(pipeline, factor)
        pipeline.bake()
    kept = sorted((pipeline.build / "report/nights").iterdir())
    assert len(kept) == 2
    assert json.loads(kept[-1].read_bytes()) == pipeline.night_record()


def test_page_of_a_probe_that_no_entry_asks_for_goes(pipeline):
    pipeline.settings["sources"].pop("ferry_noon")
    pipeline.bake()
    assert not (pipeline.build / "report" / SKY / "index.html").exists()
    assert "No longer asked for: ferry_noon." in _page(pipeline)


def test_skies_are_drawn_closely_with_the_scene_that_their_files_light(tmp_path):
    pipeline = TinyPipeline(tmp_path, probes=["ferry_noon"])
    pipeline.recipe["face_size"] = 128
    pipeline.recipe["sun"] = {"action": "separate"}
    write_sky(tmp_path / "ferry_noon.exr", pixels=np.repeat(np.repeat(sky_pixels(0), 8, 0), 8, 1))
    pipeline.bake()
    folder = pipeline.build / "report" / SKY
    names = {path.name for path in folder.iterdir()}
    assert names == {"index.html", "small.png", "change.png", *(f"{name}.png" for name in SKY_PICTURES)}
    looks = json.loads((pipeline.build / "work/ferry_noon/looks.json").read_bytes())
    assert looks["scene_difference"]["median"] < 0.05
    assert Image.open(folder / "levels.png").size == (192, 4 * 96)
    assert 'class="mark"' in _page(pipeline, f"{SKY}/index.html")


def test_pictures_of_a_sky_go_when_it_is_none_any_more(pipeline):
    folder = pipeline.build / "report" / SKY
    (folder / "scene.png").write_bytes(b"of a larger recipe")
    _brighten(pipeline)
    pipeline.bake()
    assert not (folder / "scene.png").exists()


def test_what_is_a_sky_follows_from_the_recipe_or_from_the_source_s_size(pipeline):
    pinned = pipeline.snapshot().probes[0].pinned
    assert not is_sky(pinned)
    pipeline.recipe["face_size"] = "auto"
    pinned = pipeline.snapshot().probes[0].pinned
    assert not is_sky(pinned)
    noise = np.random.default_rng(1).random((256, 512, 3), np.float32)
    write_sky(pipeline.folder / "ferry_noon.exr", pixels=noise)
    assert is_sky(pipeline.snapshot().probes[0].pinned)
