"""A night on a farm without a server: shards side by side, then the bake that finishes."""

import json
import os
import signal
import subprocess
import sys
import time

import jsonschema
import pytest

from skykiln.cli import ALL_WELL, SOURCE_FAILED, WRONG, main
from skykiln.engine import pins
from skykiln.schemas import shipped_schema
from tiny_pipeline import TinyPipeline, published

PROBES = [f"berth_{number}" for number in range(8)]


@pytest.fixture
def pipeline(tmp_path):
    pipeline = TinyPipeline(tmp_path, PROBES)
    pipeline.snapshot()
    return pipeline


@pytest.fixture(scope="module")
def undisturbed(tmp_path_factory):
    pipeline = TinyPipeline(tmp_path_factory.mktemp("undisturbed"), PROBES)
    pipeline.bake()
    return published(pipeline.build)


def _bake(pipeline, *options):
    return main(["bake", "-f", str(pipeline.file), "--workers", "1", *options])


def _start(pipeline, *options):
    command = [sys.executable, "-m", "skykiln", "bake", "-f", str(pipeline.file), "--workers", "1", *options]
    environment = {**os.environ, "PYTHONPATH": os.pathsep.join(sys.path)}
    return subprocess.Popen(command, env=environment, start_new_session=True)


def test_shards_side_by_side_publish_the_bytes_of_one_bake(pipeline, undisturbed):
    running = [_start(pipeline, "--shard", f"{number}/3") for number in range(3)]
    assert [shard.wait() for shard in running] == [ALL_WELL] * 3
    assert not (pipeline.build / "night.json").exists()
    assert published(pipeline.build) == undisturbed
    assert _bake(pipeline, "--finish") == ALL_WELL
    record = pipeline.night_record()
    jsonschema.validate(record, shipped_schema("night"))
    assert record["totals"]["rebuilt"] == len(PROBES)
    assert record["shared"][0]["stage"] == "BRDF table"


def test_finish_bakes_what_a_killed_shard_left(pipeline, undisturbed):
    killed = _start(pipeline, "--shard", "0/2")
    while not list((pipeline.build / "work").glob("*/faces.npy.stamp")):
        time.sleep(0.002)
    killed.send_signal(signal.SIGKILL)
    killed.wait()
    assert _bake(pipeline, "--shard", "1/2") == ALL_WELL
    assert _bake(pipeline, "--finish") == ALL_WELL
    assert published(pipeline.build) == undisturbed
    assert pipeline.night_record()["totals"]["rebuilt"] == len(PROBES)


def test_shard_reads_only_its_own_sources_and_finish_none_again(pipeline, monkeypatch, capsys):
    for name in PROBES:
        os.utime(pipeline.folder / f"{name}.exr", (time.time() - 60, time.time() - 60))
    read = []
    digest_file = pins.digest_file
    monkeypatch.setattr(pins, "digest_file", lambda path: read.append(path.stem) or digest_file(path))
    _bake(pipeline, "--shard", "0/2")
    first = set(read)
    _bake(pipeline, "--shard", "1/2")
    assert set(read) == set(PROBES)
    assert len(read) == len(PROBES)
    assert 0 < len(first) < len(PROBES)
    _bake(pipeline, "--finish")
    assert len(read) == len(PROBES)


def test_status_of_finish_is_that_of_the_whole_night(pipeline, capsys):
    (pipeline.folder / "berth_3.exr").write_text("not a picture")
    statuses = {_bake(pipeline, "--shard", f"{number}/2") for number in range(2)}
    assert statuses == {ALL_WELL, SOURCE_FAILED}
    assert _bake(pipeline, "--finish") == SOURCE_FAILED
    assert "berth_3: berth_3.exr: " in capsys.readouterr().err
    assert pipeline.night_record()["totals"] == {
        "probes": 8, "rebuilt": 7, "unchanged": 0, "held": 0, "failed": 1
    }  # fmt: skip


def test_next_night_tells_only_of_itself(pipeline, capsys):
    _bake(pipeline, "--shard", "0/1")
    _bake(pipeline, "--finish")
    first = pipeline.night_record()
    _bake(pipeline, "--shard", "0/1")
    _bake(pipeline, "--finish")
    second = pipeline.night_record()
    assert second["started"] > first["started"]
    assert second["totals"]["unchanged"] == len(PROBES)
    assert second["stages_run"] == 0


def test_two_bakes_at_once_do_the_work_once(pipeline, undisturbed):
    first, second = _start(pipeline), _start(pipeline)
    assert (first.wait(), second.wait()) == (ALL_WELL, ALL_WELL)
    assert published(pipeline.build) == undisturbed
    nights = json.loads((pipeline.build / "night.json").read_bytes())
    assert nights["totals"]["unchanged"] == len(PROBES)  # that of whoever came second


@pytest.mark.parametrize("options", [["--shard", "2/2"], ["--shard", "x"], ["--shard", "0/2", "--finish"]])
def test_wrong_share_is_a_wrong_command(pipeline, options, capsys):
    with pytest.raises(SystemExit) as end:
        _bake(pipeline, *options)
    assert end.value.code == WRONG
