"""The published bytes depend on sources and pipeline alone: not on workers, threads, kills or history."""

import os
import subprocess
import sys

import pytest

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


def _command(pipeline):
    return [sys.executable, "-m", "skykiln", "bake", "-f", str(pipeline.file)]


def _environment():
    return {**os.environ, "PYTHONPATH": os.pathsep.join(sys.path)}
