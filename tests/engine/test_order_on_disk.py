"""The order in which bytes and names reach the disk, traced call by call."""

import os
from pathlib import Path

import pytest
from small_stages import Multiply, ReadNumber, Sum, sketch_of_sum, write_source

from skykiln.engine import lots
from skykiln.engine.lots import bake_lot
from skykiln.engine.running import run_stage
from skykiln.engine.staleness import staleness


@pytest.fixture
def steps(monkeypatch):
    """What is done to files and folders from now on: 'sync', 'remove' or 'rename', and the name."""
    done = []

    def fsync(handle):
        path = Path(f"/proc/self/fd/{handle}").readlink()
        done.append("sync folder" if path.is_dir() else f"sync {_final_name(path.name)}")

    def unlink(path):
        if Path(path).exists():
            done.append(f"remove {Path(path).name}")
        original_unlink(path)

    def replace(beside, path):
        done.append(f"rename {Path(path).name}")
        original_replace(beside, path)

    original_unlink, original_replace = os.unlink, os.replace
    monkeypatch.setattr(os, "fsync", fsync)
    monkeypatch.setattr(os, "unlink", unlink)
    monkeypatch.setattr(os, "replace", replace)
    monkeypatch.setattr(lots, "sync_file_systems", lambda folders: done.append("sync all"))
    return done


def _final_name(temporary):
    return ".".join(temporary.lstrip(".").split(".")[:2])


@pytest.fixture
def folder(tmp_path):
    write_source(tmp_path, "20 first")
    bake_lot([sketch_of_sum(tmp_path)])
    write_source(tmp_path, "30 second")
    return tmp_path


def test_stage_syncs_its_outputs_before_the_old_stamp_goes(folder, steps):
    stage = sketch_of_sum(folder, pin="2", stage=ReadNumber)
    run_stage(stage, staleness(stage, {}))
    assert steps == [
        "sync number.json",
        "sync remark.json",
        "remove number.json.stamp",
        "rename number.json",
        "rename remark.json",
        "rename number.json.stamp",
    ]


def test_published_file_that_tells_of_the_others_goes_first_and_comes_last(folder, steps, monkeypatch):
    monkeypatch.setattr(ReadNumber, "published", True)
    stage = sketch_of_sum(folder, pin="2", stage=ReadNumber)
    run_stage(stage, staleness(stage, {}))
    assert steps == [
        "sync number.json",
        "sync remark.json",
        "remove number.json.stamp",
        "remove remark.json",
        "rename number.json",
        "rename remark.json",
        "sync folder",
        "rename number.json.stamp",
    ]


def test_lot_waits_for_the_disk_twice_whatever_the_number_of_its_targets(folder, steps, monkeypatch):
    monkeypatch.setattr(Sum, "published", True)
    other = folder / "other"
    other.mkdir()
    write_source(other, "7 other")
    assert bake_lot([sketch_of_sum(folder, pin="2"), sketch_of_sum(other)]) == []
    first, second = (step for step, name in enumerate(steps) if name == "sync all")
    assert not [step for step in steps if step.startswith("sync") and step != "sync all"]
    assert not {"rename sum.json", "rename sum.json.stamp"} & set(steps[:first])
    assert [step for step in steps[first + 1 : second] if not step.endswith(".seal")] == [
        "remove sum.json.stamp",
        "remove copied_remark.json",
        "rename sum.json",
        "rename copied_remark.json",
        "rename sum.json",
        "rename copied_remark.json",
    ]
    assert steps[second + 1 :] == ["rename sum.json.stamp", "rename sum.json.seal"] * 2


def test_seal_goes_before_the_first_output_of_its_chain_changes(folder, steps, monkeypatch):
    for stage in (ReadNumber, Multiply, Sum):
        monkeypatch.setattr(stage, "seal_path", property(lambda stage: stage.at("sum.json.seal")))
    write_source(folder, "20 first")
    bake_lot([sketch_of_sum(folder)])
    steps.clear()
    write_source(folder, "30 second")
    bake_lot([sketch_of_sum(folder, pin="2")])
    assert steps[0] == "remove sum.json.seal"
    assert steps[-1] == "rename sum.json.seal"
