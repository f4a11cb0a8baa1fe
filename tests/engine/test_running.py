"""Running a stage: what is written in which order, what is left after a failure."""

import json
import os
from pathlib import Path

import pytest
from small_stages import Multiply, ReadNumber, Sum, sketch_of_sum, write_source

from skykiln.engine.failures import read_failure
from skykiln.engine.lots import bake_depth_first, bake_lot
from skykiln.engine.running import run_stage
from skykiln.engine.staleness import staleness
from skykiln.engine.stamps import read_stamp
from skykiln.errors import FileError, SkykilnError


def _value(folder):
    return json.loads((folder / "sum.json").read_text())["value"]


def _ran(folder, **asked):
    """Titles of the stages that a bake runs."""
    ran = []
    for stage in (ReadNumber, Multiply, Sum):
        make = stage.make
        stage.make = lambda self, inputs, make=make: ran.append(self.title) or make(self, inputs)
        stage.undo = make
    try:
        bake_depth_first(sketch_of_sum(folder, **asked), {})
    finally:
        for stage in (ReadNumber, Multiply, Sum):
            stage.make = stage.undo
            del stage.undo
    return ran


def test_only_what_a_change_reaches_runs(tmp_path):
    write_source(tmp_path, "20 first")
    assert _ran(tmp_path) == ["number", "multiple", "sum"]
    assert _ran(tmp_path) == []
    assert _ran(tmp_path, factor=3) == ["multiple", "sum"]
    assert _value(tmp_path) == 80
    write_source(tmp_path, "20 second")
    assert _ran(tmp_path, factor=3, pin="2") == ["number", "sum"]
    write_source(tmp_path, "5 second")
    assert _ran(tmp_path, factor=3, pin="3") == ["number", "multiple", "sum"]
    assert _value(tmp_path) == 20


def test_equal_output_stays_untouched_and_stops_the_rerun(tmp_path):
    write_source(tmp_path, "0 first")
    _ran(tmp_path)
    before = (tmp_path / "multiple.json").stat()
    assert _ran(tmp_path, factor=3) == ["multiple"]  # 0 times anything
    after = (tmp_path / "multiple.json").stat()
    assert (after.st_ino, after.st_mtime_ns) == (before.st_ino, before.st_mtime_ns)


def test_stamp_tells_what_made_the_output(tmp_path):
    write_source(tmp_path, "20 first")
    _ran(tmp_path)
    stamp = read_stamp(tmp_path / "multiple.json.stamp")
    number = read_stamp(tmp_path / "number.json.stamp")
    assert (stamp.family, stamp.version, stamp.settings) == ("skykiln.Multiply", 1, {"factor": 2})
    assert stamp.inputs == {"number": number.outputs["number"].digest}
    assert number.inputs == {"source": "1"}
    assert stamp.reason == "was never baked"


def test_stamp_goes_before_outputs_appear_and_comes_after(tmp_path, monkeypatch):
    write_source(tmp_path, "20 first")
    _ran(tmp_path)
    write_source(tmp_path, "30 second")
    seen = []

    def replace(beside, path):
        seen.append((Path(path).name, (tmp_path / "number.json.stamp").exists()))
        return original(beside, path)

    original = os.replace
    monkeypatch.setattr(os, "replace", replace)
    bake_depth_first(sketch_of_sum(tmp_path, pin="2", stage=ReadNumber), {})
    assert seen == [("number.json", False), ("remark.json", False), ("number.json.stamp", False)]


def test_failure_is_recorded_with_its_cause_and_removed_by_success(tmp_path):
    write_source(tmp_path, "none")
    target = sketch_of_sum(tmp_path)
    reader = sketch_of_sum(tmp_path, stage=ReadNumber)
    with pytest.raises(FileError):
        bake_depth_first(target, {})
    failure = read_failure(reader)
    assert failure == ("number of numbers", f"{tmp_path}/source.txt: no number; write one", "")
    write_source(tmp_path, "1")
    bake_depth_first(target, {})
    assert read_failure(reader) is None


def test_failure_leaves_the_last_good_output_and_its_stamp(tmp_path):
    write_source(tmp_path, "20 first")
    _ran(tmp_path)
    before = {path.name: path.read_bytes() for path in tmp_path.iterdir() if path.name != "source.txt"}
    write_source(tmp_path, "none")
    with pytest.raises(FileError):
        _ran(tmp_path, pin="2")
    after = {path.name: path.read_bytes() for path in tmp_path.iterdir() if path.name in before}
    assert after == before


def test_input_that_changes_while_it_is_read_is_not_built_upon(tmp_path, monkeypatch):
    write_source(tmp_path, "20 first")
    bake_depth_first(sketch_of_sum(tmp_path, stage=ReadNumber), {})
    make = Multiply.make

    def other_process_rebuilds(stage, inputs):
        write_source(tmp_path, "21 first")
        bake_depth_first(sketch_of_sum(tmp_path, pin="2", stage=ReadNumber), {})
        return make(stage, inputs)

    monkeypatch.setattr(Multiply, "make", other_process_rebuilds)
    target = sketch_of_sum(tmp_path, stage=Multiply)
    with pytest.raises(SkykilnError, match="number changed while it was read; bake again"):
        run_stage(target, staleness(target, {}))
    assert not (tmp_path / "multiple.json").exists()


def test_stage_does_not_run_on_stale_inputs(tmp_path):
    target = sketch_of_sum(tmp_path)
    with pytest.raises(SkykilnError, match="number, remark, multiple is not up to date"):
        target.run()


def test_run_of_a_complete_stage_does_nothing(tmp_path, monkeypatch):
    write_source(tmp_path, "20 first")
    _ran(tmp_path)
    monkeypatch.setattr(Sum, "make", lambda *_: pytest.fail("ran"))
    sketch_of_sum(tmp_path).run()


def test_bad_target_does_not_stop_its_lot(tmp_path):
    targets = []
    for name, text in (("a", "1"), ("b", "none"), ("c", "3")):
        (tmp_path / name).mkdir()
        write_source(tmp_path / name, text)
        targets.append(sketch_of_sum(tmp_path / name))
    assert bake_lot(targets) == ["numbers"]
    assert [(tmp_path / name / "sum.json").exists() for name in "abc"] == [True, False, True]
