"""The published bytes depend on sources and pipeline alone: not on workers, threads, kills or history."""

import os
import random
import signal
import subprocess
import sys
import time

import pytest

from skykiln.engine.stamps import read_stamp
from tiny_pipeline import TinyPipeline, published, write_sky

PROBES = [f"berth_{number}" for number in range(6)]


@pytest.fixture(scope="module")
def undisturbed(tmp_path_factory):
    pipeline = TinyPipeline(tmp_path_factory.mktemp("undisturbed"), PROBES)
    pipeline.bake()
    return published(pipeline.build)


def test_two_workers_publish_the_bytes_of_one(tmp_path, undisturbed):
    pipeline = TinyPipeline(tmp_path, PROBES)
    pipeline.bake(workers=2)
    assert published(pipeline.build) == undisturbed


def test_stage_by_stage_under_luigi_publishes_the_bytes_of_lots(tmp_path, undisturbed, monkeypatch):
    monkeypatch.setattr("skykiln.stages.shares.BIG_SECONDS", 0.0)
    pipeline = TinyPipeline(tmp_path, PROBES)
    pipeline.bake(workers=2)
    assert published(pipeline.build) == undisturbed
    assert pipeline.bake() == []


def test_one_thread_publishes_the_bytes_of_all(tmp_path, undisturbed):
    pipeline = TinyPipeline(tmp_path, PROBES)
    pipeline.snapshot()
    subprocess.run(_command(pipeline), check=True, env={**_environment(), "NUMBA_NUM_THREADS": "1"})
    assert published(pipeline.build) == undisturbed


def test_edits_lead_to_the_bytes_of_a_clean_bake(tmp_path, undisturbed):
    pipeline = TinyPipeline(tmp_path, PROBES)
    pipeline.recipe["specular"]["roughness"] = [0, 0.3, 0.9]
    write_sky(tmp_path / "berth_2.exr", seed=77)
    pipeline.bake()
    pipeline.recipe["specular"]["roughness"] = [0, 0.5, 1]
    write_sky(tmp_path / "berth_2.exr", seed=2)
    pipeline.bake()
    assert published(pipeline.build) == undisturbed


def test_kills_at_random_moments_then_a_bake_publish_the_same_bytes(tmp_path, undisturbed):
    _check_kills(tmp_path, undisturbed, kills=8)


@pytest.mark.long
def test_many_kills_then_a_bake_publish_the_same_bytes(tmp_path, undisturbed):
    _check_kills(tmp_path, undisturbed, kills=100)


def _check_kills(folder, undisturbed, kills):
    pipeline = TinyPipeline(folder, PROBES)
    pipeline.snapshot()
    moment = random.Random(1)
    killed = 0
    for number in range(kills):
        workers = 1 + number % 2
        bake = subprocess.Popen(
            [*_command(pipeline), "--again", "--workers", str(workers)],
            env=_environment(),
            start_new_session=True,
            stdout=subprocess.DEVNULL,
            stderr=subprocess.DEVNULL,
        )
        _wait_for_a_stage(pipeline, bake, moment.uniform(0, 0.25))
        killed += bake.poll() is None
        os.killpg(bake.pid, signal.SIGKILL)
        bake.wait()
        _check_stamps(pipeline.build)
    assert killed >= kills / 2  # else the moments test nothing
    pipeline.bake()
    assert published(pipeline.build) == undisturbed
    assert not list(pipeline.build.rglob("*.tmp"))


def _wait_for_a_stage(pipeline, bake, longer):
    """Wait until the bake has begun to write, and a little longer."""
    stamps = _stamp_times(pipeline.build)
    while bake.poll() is None and _stamp_times(pipeline.build) <= stamps:
        time.sleep(0.002)
    time.sleep(longer)


def _stamp_times(build):
    times = []
    for path in build.rglob("*.stamp"):
        try:
            times.append(path.stat().st_mtime_ns)
        except FileNotFoundError:
            continue
    return max(times, default=0)


def _check_stamps(build):
    """No stamp that stands disagrees with the bytes that it tells of."""
    for path in (build / "work").rglob("*.stamp"):
        stamp = read_stamp(path)
        for record in stamp.outputs.values():
            assert record.fits(path.parent / record.file, believed=False), (path, record.file)


def _command(pipeline):
    return [sys.executable, "-m", "skykiln", "bake", "-f", str(pipeline.file)]


def _environment():
    return {**os.environ, "PYTHONPATH": os.pathsep.join(sys.path)}
