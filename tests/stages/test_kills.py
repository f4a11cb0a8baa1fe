"""SIGKILL at random moments, with edits in between: nothing that stands is ever wrong."""

import json
import os
import random
import signal
import subprocess
import sys
import time

import pytest

from skykiln.engine.digests import digest_chunks
from skykiln.engine.stamps import read_stamp
from tiny_pipeline import TinyPipeline, published, write_sky

PROBES = [f"berth_{number}" for number in range(6)]


def test_kills_between_edits_leave_nothing_wrong(tmp_path, tmp_path_factory):
    _check_kills(tmp_path, tmp_path_factory.mktemp("clean"), kills=6)


@pytest.mark.long
def test_many_kills_between_edits_leave_nothing_wrong(tmp_path, tmp_path_factory):
    _check_kills(tmp_path, tmp_path_factory.mktemp("clean"), kills=300)


def _check_kills(folder, clean_folder, kills):
    pipeline, moment = TinyPipeline(folder, PROBES), random.Random(5)
    pipeline.bake()
    killed = 0
    for number in range(kills):
        _edit(pipeline, moment)
        killed += _kill_a_bake(pipeline, moment, workers=1 + number % 2)
        _check_stamps(pipeline.build)
        _check_readers(pipeline.build)
    assert killed >= kills / 2  # else the moments test nothing
    pipeline.bake()
    clean = TinyPipeline(clean_folder, PROBES)
    clean.settings = pipeline.settings
    for name in PROBES:
        (clean_folder / f"{name}.exr").write_bytes((folder / f"{name}.exr").read_bytes())
    clean.bake()
    assert published(pipeline.build) == published(clean.build)
    assert not list(pipeline.build.rglob("*.tmp"))


def _edit(pipeline, moment):
    """Other sources for two probes, or another roughness for all."""
    if moment.random() < 0.5:
        pipeline.recipe["specular"]["roughness"] = [0, round(moment.uniform(0.3, 0.7), 3), 1]
    else:
        for name in moment.sample(PROBES, 2):
            write_sky(pipeline.folder / f"{name}.exr", seed=moment.randrange(1000))
    pipeline.snapshot()


def _kill_a_bake(pipeline, moment, workers):
    """Returns: whether the bake was still at work."""
    command = [sys.executable, "-m", "skykiln", "bake", "-f", str(pipeline.file), "--workers", str(workers)]
    environment = {**os.environ, "PYTHONPATH": os.pathsep.join(sys.path)}
    bake = subprocess.Popen(
        command, env=environment, start_new_session=True,
        stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL,
    )  # fmt: skip
    stamps = _newest_stamp(pipeline.build)
    while bake.poll() is None and _newest_stamp(pipeline.build) <= stamps:
        time.sleep(0.001)
    time.sleep(moment.uniform(0, 0.08))
    at_work = bake.poll() is None
    os.killpg(bake.pid, signal.SIGKILL)
    bake.wait()
    return at_work


def _newest_stamp(build):
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


def _check_readers(build):
    """What a probe.json that stands names is there and has the digests that it says."""
    for path in (build / "probes").rglob("probe.json"):
        record = json.loads(path.read_bytes())
        for entry in (*record["specular"]["files"], *record["irradiance"]["files"]):
            assert digest_chunks([(path.parent / entry["file"]).read_bytes()]) == entry["digest"]
