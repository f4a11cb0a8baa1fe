"""What reruns after which change: no more and no less."""

import dataclasses

import pytest

from skykiln.engine.staleness import MAY_RUN, WILL_RUN
from skykiln.stages import shares
from skykiln.stages.decode_source import DecodeSource
from skykiln.stages.filter_level import FilterLevel
from tiny_pipeline import TinyPipeline, everything, sky_pixels, touch, without_pages, write_sky

CHAIN = [
    "panorama of ferry_noon",
    "irradiance of ferry_noon",
    "faces of ferry_noon",
    "specular level 1 of ferry_noon",
    "specular level 2 of ferry_noon",
    "pictures of ferry_noon",
    "pack specular.rgba16f.ktx2 of ferry_noon",
    "audit of ferry_noon",
    "judgement of ferry_noon",
    "published files of ferry_noon",
]


@pytest.fixture(params=["in lots", "stage by stage"])
def pipeline(tmp_path, monkeypatch, request):
    if request.param == "stage by stage":
        monkeypatch.setattr(shares, "BIG_SECONDS", 0.0)
    pipeline = TinyPipeline(tmp_path)
    pipeline.bake()
    return pipeline


def test_first_bake_runs_every_stage_once(tmp_path):
    ran = TinyPipeline(tmp_path).bake()
    assert len(ran) == len(set(ran)) == 1 + 2 * len(CHAIN)
    assert set(CHAIN) < set(ran)


def test_second_bake_runs_nothing_and_leaves_every_file_alone(pipeline):
    before = everything(pipeline.build)
    first_night = pipeline.night_record()
    assert pipeline.bake() == []
    assert everything(pipeline.build) == before
    assert pipeline.night_record() != first_night
    totals = {"probes": 2, "rebuilt": 0, "unchanged": 2, "held": 0, "failed": 0}
    assert pipeline.night_record()["totals"] == totals


def test_edited_sky_reruns_its_chain_alone(pipeline):
    write_sky(pipeline.folder / "ferry_noon.exr", seed=9)
    assert sorted(pipeline.bake()) == sorted(CHAIN)


def test_one_level_s_roughness_reruns_that_level_its_packing_and_publishing(pipeline):
    pipeline.settings["sources"].pop("quay_night")
    pipeline.recipe["specular"]["roughness"] = [0, 0.4, 1]
    assert pipeline.plan()["specular level 1 of ferry_noon"] == (WILL_RUN, "roughness was 0.5, is 0.4")
    assert pipeline.plan()["published files of ferry_noon"][0] == MAY_RUN
    assert pipeline.bake() == [CHAIN[3], *CHAIN[5:]]


def test_touched_source_reruns_nothing(pipeline):
    touch(pipeline.folder / "ferry_noon.exr")
    assert pipeline.bake() == []


def test_touched_output_reruns_nothing(pipeline):
    touch(pipeline.build / "work/ferry_noon/faces.npy")
    assert pipeline.bake() == []


def test_reordered_and_commented_pipeline_reruns_nothing(pipeline):
    pipeline.recipe["pack"] = [
        {"container": "ktx2", "pixels": "rgba16f"},
        {"container": "ktx2", "pixels": "rgba16f", "name": "mirrored", "cube_axes": "direct"},
    ]
    pipeline.bake()
    pipeline.settings["sources"] = dict(reversed(pipeline.settings["sources"].items()))
    pipeline.recipe["pack"].reverse()
    pipeline.remark = "# a remark\n"
    assert pipeline.bake() == []


def test_equal_pixels_under_another_header_rerun_decoding_and_rewrite_probe_json(pipeline):
    write_sky(pipeline.folder / "ferry_noon.exr", seed=0, comments="exported again")
    before = everything(pipeline.build)
    assert pipeline.bake() == [CHAIN[0], *CHAIN[8:]]
    after = without_pages(everything(pipeline.build))
    changed = {name for name in after if after[name] != before.get(name)}
    assert {name for name in changed if not name.endswith((".stamp", ".seal", ".pins.json"))} == {
        "work/ferry_noon/source.json",
        "work/ferry_noon/record.json",
        "work/ferry_noon/judgement.json",
        "probes/ferry_noon/probe.json",
    }


def test_another_pack_runs_its_packing_and_the_publishing(pipeline):
    pipeline.settings["sources"].pop("quay_night")
    pipeline.recipe["pack"] = [
        {"container": "ktx2", "pixels": "rgba16f"},
        {"container": "ktx2", "pixels": "rgba16f", "name": "mirrored", "cube_axes": "direct"},
    ]
    assert pipeline.bake() == ["pack specular.mirrored.ktx2 of ferry_noon", *CHAIN[7:]]


def test_dropped_pack_takes_its_published_files_along(pipeline):
    pack = {"container": "ktx2", "pixels": "rgba16f"}
    pipeline.recipe["pack"] = [pack, {**pack, "name": "mirrored"}]
    pipeline.bake()
    folder = pipeline.build / "probes/ferry_noon"
    (folder / "notes.txt").write_text("not skykiln's")
    assert (folder / "specular.mirrored.ktx2").exists()
    pipeline.recipe["pack"] = [pack]
    pipeline.bake()
    names = {path.name for path in folder.iterdir()}
    assert names == {"specular.rgba16f.ktx2", "irradiance.rgba16f.ktx2", "probe.json", "notes.txt"}


def test_extra_and_the_recipe_s_name_only_touch_probe_json(pipeline):
    pipeline.settings["sources"]["ferry_noon"]["extra"] = {"position": [1, 2, 3]}
    assert pipeline.bake() == ["judgement of ferry_noon", "published files of ferry_noon"]
    pipeline.settings["recipes"]["renamed"] = pipeline.settings["recipes"].pop("tiny")
    for source in pipeline.settings["sources"].values():
        source["recipe"] = "renamed"
    assert pipeline.bake() == [
        f"{title} of {name}"
        for name in ("ferry_noon", "quay_night")
        for title in ("judgement", "published files")
    ]


def test_spoiled_and_deleted_outputs_come_back(pipeline):
    before = without_pages(everything(pipeline.build))
    (pipeline.build / "work/ferry_noon/level_1.npy").write_bytes(b"spoiled")
    (pipeline.build / "probes/ferry_noon/irradiance.rgba16f.ktx2").unlink()
    ran = pipeline.bake()
    assert ran == ["specular level 1 of ferry_noon", "published files of ferry_noon"]
    after = without_pages(everything(pipeline.build))
    assert {name: data for name, (_, data) in after.items() if not name.endswith((".stamp", ".seal"))} == {
        name: data for name, (_, data) in before.items() if not name.endswith((".stamp", ".seal"))
    }


def test_new_code_version_reruns_the_stage_and_what_changed_by_it(pipeline, monkeypatch):
    version = FilterLevel.version
    monkeypatch.setattr(FilterLevel, "version", version + 1)
    why = pipeline.plan()["specular level 2 of quay_night"][1]
    assert why == f"its code's version was {version}, is {version + 1}"
    ran = pipeline.bake()
    assert sorted(ran) == sorted(
        f"specular level {level} of {name}" for level in (1, 2) for name in ("ferry_noon", "quay_night")
    )


def test_again_runs_everything_and_publishes_the_same_bytes(pipeline):
    before = {name: stat for name, stat in everything(pipeline.build).items() if name.startswith("probes/")}
    assert len(pipeline.bake(again=True)) == 1 + 2 * len(CHAIN)
    after = everything(pipeline.build)
    assert {name: after[name] for name in before} == before  # not even the times changed
    assert pipeline.night_record()["shared"][0]["reason"] == "was asked for again"


def test_name_with_characters_of_patterns_means_itself(tmp_path):
    pipeline = TinyPipeline(tmp_path, probes=["stair [up]", "stair u", "stair"])
    assert [probe.owner for probe in pipeline.snapshot("stair [up]").probes] == ["stair [up]"]
    assert [probe.owner for probe in pipeline.snapshot("stair [u]").probes] == ["stair u"]


def test_name_that_leads_out_of_the_build_folder_is_a_bug(tmp_path):
    pinned = TinyPipeline(tmp_path).snapshot().probes[0].pinned
    for name in ("../elsewhere", "/elsewhere", "a/../../b"):
        with pytest.raises(ValueError, match="leads out of the build folder"):
            dataclasses.replace(pinned, probe=dataclasses.replace(pinned.probe, name=name))


def test_named_probe_is_baked_alone(tmp_path):
    ran = TinyPipeline(tmp_path).bake("ferry_*")
    assert ran == ["BRDF table of all probes", *CHAIN]


def test_source_that_changes_during_the_bake_fails_and_is_baked_next_time(tmp_path, monkeypatch):
    pipeline = TinyPipeline(tmp_path, probes=["ferry_noon"])
    make = DecodeSource.make

    def edited_meanwhile(stage, inputs):
        write_sky(pipeline.folder / "ferry_noon.exr", seed=5)
        return make(stage, inputs)

    with monkeypatch.context() as patch:
        patch.setattr(DecodeSource, "make", edited_meanwhile)
        pipeline.bake()
    (owner, failure), = pipeline.night.failures
    assert owner == "ferry_noon"
    assert failure.cause.endswith("changed since the bake began; bake again")
    assert CHAIN[-1] in pipeline.bake()


def test_more_levels_than_the_face_has_is_an_error_with_the_sizes(tmp_path):
    pipeline = TinyPipeline(tmp_path, probes=["ferry_noon"])
    pipeline.recipe["face_size"] = "auto"
    write_sky(tmp_path / "ferry_noon.exr", pixels=sky_pixels(0, height=4))
    pipeline.bake()
    (_, failure), = pipeline.night.failures
    assert "recipe 'tiny' asks for 3 levels, but a face of 2 texels has 2" in failure.cause
