"""The same work under Luigi's own command line and inside a user's pipeline."""

import os
import subprocess
import sys
import textwrap

import luigi
import pytest

import skykiln
from skykiln.stages.snapshot import Snapshot
from tiny_pipeline import TinyPipeline, everything, published, write_sky


@pytest.fixture
def pipeline(tmp_path):
    pipeline = TinyPipeline(tmp_path)
    pipeline.snapshot()
    return pipeline


def _luigi(*arguments, **options):
    environment = {**os.environ, "PYTHONPATH": os.pathsep.join(sys.path)}
    command = [sys.executable, "-m", "luigi", "--local-scheduler", "--log-level", "WARNING", *arguments]
    return subprocess.run(command, env=environment, check=True, **options)


def _build(task, workers=1):
    return luigi.build([task], local_scheduler=True, workers=workers, log_level="WARNING")


def test_luigi_s_command_line_publishes_the_bytes_of_skykiln_bake(pipeline, tmp_path_factory):
    _luigi("--module", "skykiln", "skykiln.BakeAll", "--pipeline", str(pipeline.file), "--workers", "2")
    other = TinyPipeline(tmp_path_factory.mktemp("other"))
    other.bake()
    assert published(pipeline.build) == published(other.build)
    assert pipeline.night_record()["totals"] == other.night_record()["totals"]
    assert pipeline.bake() == []


def test_bake_all_reruns_what_an_edit_reaches_and_writes_every_night(pipeline):
    assert _build(skykiln.BakeAll(pipeline=str(pipeline.file), night="2024-05-01T03:00:00+00:00"))
    write_sky(pipeline.folder / "ferry_noon.exr", seed=9)
    assert _build(skykiln.BakeAll(pipeline=str(pipeline.file), night="2024-05-02T03:00:00+00:00"))
    record = pipeline.night_record()
    assert record["started"] == "2024-05-02T03:00:00+00:00"
    assert [probe["state"] for probe in record["probes"]] == ["rebuilt", "unchanged"]
    assert not list((pipeline.build / "work/.lots").iterdir())


def test_bake_all_is_complete_only_for_its_own_night(pipeline):
    _build(skykiln.BakeAll(pipeline=str(pipeline.file), night="2024-05-01T03:00:00+00:00"))
    before = everything(pipeline.build)
    assert skykiln.BakeAll(pipeline=str(pipeline.file), night="2024-05-01T03:00:00+00:00").complete()
    next_night = skykiln.BakeAll(pipeline=str(pipeline.file), night="2024-05-02T03:00:00+00:00")
    assert not next_night.complete()
    assert _build(next_night)
    assert everything(pipeline.build) == before


def test_one_task_object_sees_edits_between_two_builds(pipeline):
    task = skykiln.BakeProbe(pipeline=str(pipeline.file), name="ferry_noon")
    assert _build(task)
    before = published(pipeline.build)
    write_sky(pipeline.folder / "ferry_noon.exr", seed=9)
    assert _build(task)
    assert published(pipeline.build) != before


def test_bad_source_under_luigi_lets_the_others_bake(pipeline):
    (pipeline.folder / "ferry_noon.exr").write_text("not a picture")
    _build(skykiln.BakeAll(pipeline=str(pipeline.file), night="2024-05-01T03:00:00+00:00"))
    assert {name.split("/")[1] for name in published(pipeline.build) if "probes" in name} == {"quay_night"}


def test_luigi_s_own_log_names_every_bad_source_with_its_cause(pipeline):
    for name in ("ferry_noon", "quay_night"):
        (pipeline.folder / f"{name}.exr").write_text("not a picture")
    arguments = ("--module", "skykiln", "skykiln.BakeAll", "--pipeline", str(pipeline.file))
    log = _luigi(*arguments, capture_output=True, text=True).stderr
    causes = [line for line in log.splitlines() if line.startswith("skykiln.errors.SkykilnError: ")]
    told = "; ".join(causes)
    for name in ("ferry_noon", "quay_night"):
        assert f"{name}: {name}.exr: is none of OpenEXR, Radiance .hdr" in told


@pytest.mark.parametrize("workers", ["1", "2"])
def test_user_s_own_task_can_require_a_probe(pipeline, workers):
    module = pipeline.folder / "level_build.py"
    module.write_text(
        textwrap.dedent(
            f"""
            import json
            import luigi
            import skykiln

            class CopyManifest(luigi.Task):
                def requires(self):
                    return skykiln.BakeProbe(pipeline={str(pipeline.file)!r}, name="ferry_noon")

                def output(self):
                    return luigi.LocalTarget({str(pipeline.folder / "copied.json")!r})

                def run(self):
                    with self.input().open() as source, self.output().open("w") as copy:
                        copy.write(json.load(source)["name"])
            """
        )
    )
    environment = {**os.environ, "PYTHONPATH": os.pathsep.join([str(pipeline.folder), *sys.path])}
    command = ["luigi", "--local-scheduler", "--module", "level_build", "CopyManifest"]
    subprocess.run([sys.executable, "-m", *command, "--workers", workers], env=environment, check=True)
    assert (pipeline.folder / "copied.json").read_text() == "ferry_noon"
    assert not (pipeline.build / "probes/quay_night").exists()


def test_task_names_say_probe_and_stage(pipeline):
    target = pipeline.snapshot("ferry_noon").probes[0]
    assert isinstance(pipeline.snapshot(), Snapshot)
    assert repr(target.full()) == "PublishProbe(published files of ferry_noon)"
    assert target.full().task_family == "skykiln.PublishProbe"


def test_full_task_and_sketch_agree_on_everything_that_is_recorded(pipeline):
    sketch = pipeline.snapshot("ferry_noon").probes[0]
    full = sketch.full()
    parsed = type(full).from_str_params(full.to_str_params())
    assert parsed.pinned == sketch.pinned
    for task in (full, parsed):
        assert (task.files(), task.settings(), task.stamp_path) == (
            sketch.files(),
            sketch.settings(),
            sketch.stamp_path,
        )
        assert not any(dependency.sketched for dependency in task.requires().values())
