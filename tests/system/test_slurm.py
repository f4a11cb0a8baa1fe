"""A night as a job array of a real Slurm, with the scripts of docs/farm."""

import configparser
import json
import os
import shlex
import subprocess
import sys
from pathlib import Path

import pytest
from slurm_node import SlurmNode

from tiny_pipeline import TinyPipeline, published

FARM = Path(__file__).parents[2] / "docs" / "farm"
PROBES = [f"berth_{number:03}" for number in range(120)]


@pytest.fixture(scope="module")
def slurm(tmp_path_factory):
    node = SlurmNode(tmp_path_factory.mktemp("slurm"))
    yield node
    node.end()


@pytest.fixture
def environment(tmp_path):
    """One in which `skykiln` is a command."""
    command = tmp_path / "bin" / "skykiln"
    command.parent.mkdir()
    command.write_text(f'#!/bin/sh\nexec {shlex.quote(sys.executable)} -m skykiln "$@"\n')
    command.chmod(0o755)
    path = f"{command.parent}:{os.environ['PATH']}"
    return {"PATH": path, "PYTHONPATH": os.pathsep.join(sys.path), "HOME": str(Path.home())}


@pytest.fixture
def pipeline(tmp_path):
    (tmp_path / "share").mkdir()
    pipeline = TinyPipeline(tmp_path / "share", PROBES)
    pipeline.snapshot()
    return pipeline


@pytest.fixture(scope="module")
def undisturbed(tmp_path_factory):
    pipeline = TinyPipeline(tmp_path_factory.mktemp("undisturbed"), PROBES)
    pipeline.bake()
    return published(pipeline.build)


def _submit(slurm, pipeline, environment):
    """(job of the array, job that finishes)"""
    slurm.environment.update(environment)
    finish = slurm.run(FARM / "submit_night.sh", "--array=0-2", cwd=pipeline.folder).strip()
    return int(finish) - 1, int(finish)


def test_night_of_three_shards_ends_with_the_status_of_the_whole(slurm, pipeline, environment, undisturbed):
    _, finish = _submit(slurm, pipeline, environment)
    slurm.wait(lambda: slurm.state(finish) == "COMPLETED", seconds=120)
    assert published(pipeline.build) == undisturbed
    record = json.loads((pipeline.build / "night.json").read_bytes())
    assert record["totals"] == {**record["totals"], "probes": len(PROBES), "rebuilt": len(PROBES)}


def test_killed_and_requeued_element_goes_on_where_it_was(slurm, pipeline, environment, undisturbed):
    array, finish = _submit(slurm, pipeline, environment)
    slurm.wait(lambda: len(list(pipeline.build.glob("work/*/faces.npy.stamp"))) > 5, seconds=60)
    running = slurm.run("squeue", "--noheader", "--array", "--states=R", f"--jobs={array}", "--format=%i")
    element = running.split()[0]
    slurm.run("scontrol", "requeue", element)
    done = len(list(pipeline.build.glob("probes/*/probe.json")))
    assert done < len(PROBES)

    def ended():
        slurm.run("scontrol", "update", f"jobid={element}", "starttime=now")  # else held for two minutes
        return slurm.state(finish) == "COMPLETED"

    slurm.wait(ended, seconds=200)
    assert "Restarts=1" in slurm.run("scontrol", "show", "job", element)
    assert published(pipeline.build) == undisturbed
    record = json.loads((pipeline.build / "night.json").read_bytes())
    assert record["totals"]["rebuilt"] == len(PROBES)
    assert record["exit_status"] == 0


def test_bad_source_fails_the_job_that_finishes(slurm, pipeline, environment):
    (pipeline.folder / f"{PROBES[7]}.exr").write_text("not a picture")
    _, finish = _submit(slurm, pipeline, environment)
    slurm.wait(lambda: slurm.state(finish) == "FAILED", seconds=120)
    assert "ExitCode=1:0" in slurm.run("scontrol", "show", "job", str(finish))


def test_unit_of_the_timer_bakes_a_night(pipeline, environment):
    """What systemd would start, in the pipeline's folder."""
    unit = configparser.ConfigParser(interpolation=None, strict=False)
    unit.optionxform = str
    unit.read(FARM / "skykiln-night.service")
    command = shlex.split(unit["Service"]["ExecStart"])
    assert subprocess.run(command, cwd=pipeline.folder, env=environment, check=False).returncode == 0
    assert (pipeline.build / "night.json").exists()
    timer = (FARM / "skykiln-night.timer").read_text()
    assert "OnCalendar=*-*-* 02:00:00" in timer
