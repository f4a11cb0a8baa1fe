"""Gates: a probe that breaks one is held, whatever else was published stays, and nothing is packed anew."""

import json
from importlib.resources import files

import jsonschema
import luigi
import pytest

import skykiln
from skykiln.config.model import Gates
from skykiln.engine.staleness import HELD
from skykiln.stages import shares
from skykiln.stages.gates import NIGHT_GATES, PROBE_GATES, broken_gates
from skykiln.stages.nights import accept_held
from tiny_pipeline import TinyPipeline, published, write_sky

GPU = 8 * 6 * (64 + 16 + 4) + 8 * 6 * 4  # of a tiny probe: chain and irradiance cube, 8 bytes a texel
SENTENCE = "bytes.probe_gpu: 4.125 KiB on the GPU, the limit is 4 KiB"


@pytest.fixture(params=["in lots", "stage by stage"])
def pipeline(tmp_path, monkeypatch, request):
    if request.param == "stage by stage":
        monkeypatch.setattr(shares, "BIG_SECONDS", 0.0)
    return TinyPipeline(tmp_path)


def limit(pipeline, size):
    pipeline.settings["gates"] = {"bytes": {"probe_gpu": size}}


def entry(pipeline, name="ferry_noon"):
    record = pipeline.night_record()
    schema = json.loads(files("skykiln.schemas").joinpath("night.schema.json").read_text())
    jsonschema.validate(record, schema)
    return next(probe for probe in record["probes"] if probe["name"] == name)


def make_heavier(pipeline, name="ferry_noon"):
    """A face size of its own, that the limit of 5 KiB doesn't allow."""
    pipeline.settings["recipes"]["heavy"] = {**pipeline.recipe, "face_size": 16}
    pipeline.settings["sources"][name]["recipe"] = "heavy"


def test_probe_within_its_limit_is_published(pipeline):
    limit(pipeline, GPU)
    pipeline.bake()
    assert pipeline.night.held == []
    assert pipeline.night_record()["exit_status"] == 0
    assert entry(pipeline)["gates"] == []
    assert entry(pipeline)["bytes"]["gpu"] == GPU


def test_probe_that_breaks_a_gate_is_held_and_nothing_of_it_published(pipeline):
    limit(pipeline, "4 KiB")
    pipeline.bake()
    assert pipeline.night.held == [("ferry_noon", (SENTENCE,)), ("quay_night", (SENTENCE,))]
    assert {name.split("/")[0] for name in published(pipeline.build)} == {"brdf"}
    assert (pipeline.build / "work/ferry_noon/packed/specular.rgba16f.ktx2").exists()
    record = pipeline.night_record()
    assert record["exit_status"] == 3
    assert record["totals"] == {"probes": 2, "rebuilt": 0, "unchanged": 0, "held": 2, "failed": 0}
    gate, why = SENTENCE.split(": ")
    assert entry(pipeline)["gates"] == [{"gate": gate, "why": why}]
    assert entry(pipeline)["bytes"] is None


def test_held_probe_keeps_last_night_s_files_and_the_others_go_on(pipeline):
    limit(pipeline, "5 KiB")
    pipeline.bake()
    before = published(pipeline.build)
    make_heavier(pipeline)
    write_sky(pipeline.folder / "quay_night.exr", seed=7)
    pipeline.bake()
    assert (entry(pipeline)["state"], entry(pipeline, "quay_night")["state"]) == ("held", "rebuilt")
    after = published(pipeline.build)
    changed = {name for name in after if after[name] != before[name]}
    assert {name.split("/")[1] for name in changed} == {"quay_night"}
    assert entry(pipeline)["bytes"]["gpu"] == GPU  # of what stands published


def test_held_probe_runs_nothing_the_next_night_and_is_told_again(pipeline):
    limit(pipeline, "4 KiB")
    pipeline.bake()
    assert pipeline.bake() == []
    assert entry(pipeline)["state"] == "held"
    assert pipeline.night_record()["exit_status"] == 3
    assert pipeline.plan() == {}
    assert pipeline.snapshot().probes[0].complete()


def test_another_limit_judges_anew_without_packing(pipeline):
    limit(pipeline, "4 KiB")
    pipeline.bake()
    limit(pipeline, "5 KiB")
    assert pipeline.bake("ferry_noon") == ["judgement of ferry_noon", "published files of ferry_noon"]
    limit(pipeline, "6 KiB")
    assert pipeline.bake("ferry_noon") == ["judgement of ferry_noon"]


def test_limit_that_a_published_probe_breaks_holds_it_and_touches_no_file(pipeline):
    pipeline.bake()
    before = published(pipeline.build)
    limit(pipeline, "4 KiB")
    assert pipeline.bake() == ["judgement of ferry_noon", "judgement of quay_night"]
    assert entry(pipeline)["state"] == "held"
    assert published(pipeline.build) == before
    del pipeline.settings["gates"]
    assert pipeline.bake() == ["judgement of ferry_noon", "judgement of quay_night"]
    assert entry(pipeline)["state"] == "rebuilt"
    assert published(pipeline.build) == before


def test_accepted_probe_is_published_and_stays_so_until_it_changes(pipeline):
    limit(pipeline, "4 KiB")
    pipeline.bake()
    assert accept_held(pipeline.snapshot("ferry_noon")) == ["ferry_noon"]
    assert pipeline.bake() == ["judgement of ferry_noon", "published files of ferry_noon"]
    assert (entry(pipeline)["state"], entry(pipeline)["accepted"]) == ("rebuilt", True)
    assert entry(pipeline, "quay_night")["state"] == "held"
    assert pipeline.bake() == []
    assert (entry(pipeline)["state"], entry(pipeline)["accepted"]) == ("unchanged", True)
    assert accept_held(pipeline.snapshot("ferry_noon")) == []
    before = published(pipeline.build)
    write_sky(pipeline.folder / "ferry_noon.exr", seed=7)
    pipeline.bake()
    assert (entry(pipeline)["state"], entry(pipeline)["accepted"]) == ("held", False)
    assert published(pipeline.build) == before


def test_acceptance_outlasts_another_limit(pipeline):
    limit(pipeline, "4 KiB")
    pipeline.bake()
    accept_held(pipeline.snapshot("ferry_noon"))
    pipeline.bake()
    limit(pipeline, "3 KiB")
    pipeline.bake()
    assert entry(pipeline)["state"] == "rebuilt"
    assert entry(pipeline)["gates"][0]["why"].endswith("the limit is 3 KiB")


def test_source_that_changed_after_it_was_held_is_not_accepted_unseen(pipeline):
    limit(pipeline, "4 KiB")
    pipeline.bake()
    write_sky(pipeline.folder / "ferry_noon.exr", seed=7)
    assert accept_held(pipeline.snapshot("ferry_noon")) == []
    pipeline.bake()
    assert entry(pipeline)["state"] == "held"


def test_again_packs_a_held_probe_anew_and_holds_it_still(pipeline):
    limit(pipeline, "4 KiB")
    pipeline.bake()
    ran = pipeline.bake(again=True)
    assert "pack specular.rgba16f.ktx2 of ferry_noon" in ran
    assert "published files of ferry_noon" not in ran
    assert entry(pipeline)["state"] == "held"


def test_failure_goes_before_a_gate(pipeline):
    limit(pipeline, "4 KiB")
    pipeline.bake()
    (pipeline.folder / "ferry_noon.exr").write_text("not a picture")
    pipeline.bake()
    assert entry(pipeline)["state"] == "failed"
    assert pipeline.night_record()["exit_status"] == 1


def test_night_s_gate_breaks_the_night_and_holds_no_probe(pipeline):
    pipeline.settings["gates"] = {"bytes": {"night_disk": 9000}}
    pipeline.bake()
    record = pipeline.night_record()
    assert record["exit_status"] == 3
    assert record["bytes"]["disk"] == sum(probe["bytes"]["disk"] for probe in record["probes"])
    (gate,) = record["gates"]
    assert gate["gate"] == "bytes.night_disk"
    assert gate["why"].endswith(" on disk, the limit is 8.789 KiB")
    assert {probe["state"] for probe in record["probes"]} == {"rebuilt"}
    pipeline.settings["gates"] = {"bytes": {"night_disk": "1 MiB"}}
    assert pipeline.bake() == []  # a limit of the night is in no stage's settings
    assert pipeline.night_record()["exit_status"] == 0


def test_held_probe_s_plan_tells_the_sentence(pipeline):
    limit(pipeline, "4 KiB")
    pipeline.bake()
    from skykiln.engine.chains import chain_of

    verdict = chain_of(pipeline.snapshot().probes[0]).verdicts[-1]
    assert (verdict.state, verdict.reasons) == (HELD, (SENTENCE,))


def test_luigi_task_that_requires_a_held_probe_fails(pipeline):
    limit(pipeline, "4 KiB")
    pipeline.snapshot()
    task = skykiln.BakeProbe(pipeline=str(pipeline.file), name="ferry_noon")
    assert not luigi.build([task], local_scheduler=True, log_level="CRITICAL")
    assert not task.output().exists()


def test_bake_all_under_luigi_writes_the_night_with_its_held_probes(pipeline):
    limit(pipeline, "4 KiB")
    pipeline.snapshot()
    task = skykiln.BakeAll(pipeline=str(pipeline.file), night="2031-05-01T03:00:00+00:00")
    assert luigi.build([task], local_scheduler=True, log_level="CRITICAL")
    assert pipeline.night_record()["exit_status"] == 3
    assert entry(pipeline)["state"] == "held"


def test_every_limit_of_the_pipeline_file_has_a_gate():
    asked = set()
    for name, field in Gates.model_fields.items():
        keys = getattr(field.annotation, "model_fields", None)
        asked |= {f"{name}.{key}" for key in keys} if keys else {name}
    assert asked == set(PROBE_GATES) | set(NIGHT_GATES)


@pytest.mark.parametrize(
    ("gpu", "told"),
    [
        (8 * 2**20, []),
        (8 * 2**20 + 1, ["8388609 bytes on the GPU, the limit is 8388608 bytes"]),
        (9 * 2**20, ["9 MiB on the GPU, the limit is 8 MiB"]),
    ],
)
def test_limit_itself_is_allowed_and_one_byte_more_is_told(gpu, told):
    record = {"bytes": {"disk": 0, "gpu": gpu}}
    broken = broken_gates(PROBE_GATES, record, {"bytes.probe_gpu": 8 * 2**20})
    assert [gate["why"] for gate in broken] == told


@pytest.mark.parametrize(
    ("sun", "units", "told"),
    [
        (None, "cd/m2", ["400 lux on a level surface, the limits are 500 to 2000"]),
        ({"illuminance": 200, "direction": [0, 0.6, 0.8]}, "cd/m2", []),
        ({"illuminance": 9000, "direction": [0, -0.6, 0.8]}, "cd/m2", [
            "400 lux on a level surface, the limits are 500 to 2000"
        ]),
        (None, "relative", []),
    ],
)  # fmt: skip
def test_illuminance_counts_the_sun_above_the_horizon_and_only_where_it_is_lux(sun, units, told):
    record = {"units": units, "sun": sun, "energy": {"horizontal_illuminance": 400}}
    broken = broken_gates(PROBE_GATES, record, {"horizontal_lux": [500, 2000]})
    assert [each["why"] for each in broken] == told


def night_of(**luminances):
    light = {"units": "relative", "sun": None}
    probes = [
        {"name": name, "recipe": "tiny", "light": {**light, "mean_luminance": value}}
        for name, value in luminances.items()
    ]
    return {"probes": [*probes, {"name": "failed", "recipe": "tiny", "light": None}]}


def test_a_probe_far_from_its_recipe_s_median_breaks_the_night_s_gate():
    (broken,) = broken_gates(NIGHT_GATES, night_of(a=1, b=1.9, c=1, d=0.4, e=3), {"brightness.stops": 1})
    assert broken["why"] == (
        "d stands 1.32 stops below the median of recipe 'tiny', 1; the limit is 1; "
        "e stands 1.58 stops above the median of recipe 'tiny', 1; the limit is 1"
    )
    assert broken_gates(NIGHT_GATES, night_of(a=1, b=1.9, c=1, d=0.6), {"brightness.stops": 1}) == []


def test_of_two_probes_none_is_the_odd_one_and_a_black_one_is_far_below():
    assert broken_gates(NIGHT_GATES, night_of(a=1, b=100), {"brightness.stops": 1}) == []
    (broken,) = broken_gates(NIGHT_GATES, night_of(a=1, b=1, c=0), {"brightness.stops": 8})
    assert broken["why"].startswith("c stands inf stops below")


def test_a_night_tells_a_probe_that_is_twice_as_bright_as_its_neighbours(tmp_path):
    pipeline = TinyPipeline(tmp_path, probes=["a", "b", "c"])
    pipeline.settings["gates"] = {"brightness": {"stops": 0.9}}
    pipeline.bake()
    assert pipeline.night_record()["gates"] == []
    pipeline.settings["sources"]["b"]["exposure_ev"] = 1
    pipeline.bake()
    (broken,) = pipeline.night_record()["gates"]
    assert broken["why"].startswith("b stands 0.953 stops above")
    assert pipeline.night_record()["exit_status"] == 3
