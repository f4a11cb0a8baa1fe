"""Verdicts and their sentences."""

import json

import pytest
from small_stages import Multiply, ReadNumber, Sum, sketch_of_sum, write_source

from skykiln.engine.chains import chain_of
from skykiln.engine.lots import bake_depth_first
from skykiln.engine.staleness import MAY_RUN, UP_TO_DATE, WILL_RUN, staleness
from skykiln.engine.stamps import void_stamp


@pytest.fixture
def folder(tmp_path):
    write_source(tmp_path, "20 first")
    bake_depth_first(sketch_of_sum(tmp_path), {})
    return tmp_path


def _verdicts(target):
    return {v.stage.title: (v.state, *v.reasons) for v in chain_of(target).verdicts}


def test_what_was_never_baked_will_run(tmp_path):
    assert _verdicts(sketch_of_sum(tmp_path)) == {
        "number": (WILL_RUN, "was never baked"),
        "multiple": (WILL_RUN, "was never baked"),
        "sum": (WILL_RUN, "was never baked"),
    }


def test_what_is_baked_is_up_to_date(folder):
    assert _verdicts(sketch_of_sum(folder)) == dict.fromkeys(("number", "multiple", "sum"), (UP_TO_DATE,))


def test_new_pin_makes_what_follows_wait(folder):
    assert _verdicts(sketch_of_sum(folder, pin="2")) == {
        "number": (WILL_RUN, "source changed"),
        "multiple": (MAY_RUN, "runs if number changes"),
        "sum": (MAY_RUN, "runs if number or multiple changes"),
    }


def test_unreadable_pin_tells_the_cause(folder):
    verdicts = _verdicts(sketch_of_sum(folder, pin="unreadable: No such file or directory"))
    assert verdicts["number"][1] == "source is unreadable: No such file or directory"


def test_setting_tells_its_values_before_and_after(folder):
    assert _verdicts(sketch_of_sum(folder, factor=3))["multiple"] == (WILL_RUN, "factor was 2, is 3")


@pytest.mark.parametrize(
    ("before", "after", "sentence"),
    [
        (3 / 7, 0.4, "factor was 0.4286, is 0.4"),
        (0.42861, 0.42862, "factor was 0.42861, is 0.42862"),
        ([0.0, 1 / 3], [0.0, 0.5], "factor was [0, 0.3333], is [0, 0.5]"),
        (None, 12000.0, "factor was null, is 12000"),
        (True, "auto", "factor was true, is auto"),
    ],
)
def test_numbers_are_told_as_short_as_tells_them_apart(folder, monkeypatch, before, after, sentence):
    monkeypatch.setattr(Multiply, "make", lambda stage, inputs: {"multiple": {"value": 0}})
    bake_depth_first(sketch_of_sum(folder, factor=before, stage=Multiply), {})
    verdict = staleness(sketch_of_sum(folder, factor=after, stage=Multiply), {})
    assert verdict.reasons == (sentence,)


def test_new_and_dropped_settings_are_told(folder, monkeypatch):
    monkeypatch.setattr(Multiply, "settings", lambda stage: {"power": 1})
    assert _verdicts(sketch_of_sum(folder))["multiple"][1:] == (
        "factor is no longer a setting",
        "power is a new setting",
    )


def test_new_and_dropped_inputs_are_told(folder, monkeypatch):
    def other_inputs(stage):
        return {"addend": stage.beside(ReadNumber, plan=stage.plan)}

    monkeypatch.setattr(Multiply, "requires", other_inputs)
    assert _verdicts(sketch_of_sum(folder))["multiple"][1:] == (
        "number is a new input",
        "number is no longer an input",
    )


def test_new_outputs_are_told(folder, monkeypatch):
    monkeypatch.setattr(Multiply, "files", lambda stage: {"multiple": stage.at("multiple.json"), "b": "b"})
    assert _verdicts(sketch_of_sum(folder))["multiple"][1] == "its outputs are other ones now"


def test_code_version_is_told(folder, monkeypatch):
    monkeypatch.setattr(Sum, "version", 7)
    assert _verdicts(sketch_of_sum(folder))["sum"] == (WILL_RUN, "its code's version was 1, is 7")


def test_missing_and_spoiled_outputs_are_told(folder):
    (folder / "multiple.json").unlink()
    (folder / "sum.json").write_text("{}")
    verdicts = _verdicts(sketch_of_sum(folder))
    assert verdicts["multiple"] == (WILL_RUN, "multiple.json is missing")
    assert verdicts["sum"][:2] == (WILL_RUN, "sum.json was changed by something else")


def test_same_size_spoiled_output_is_found_by_its_bytes(folder):
    path = folder / "sum.json"
    path.write_bytes(path.read_bytes().replace(b"60", b"61"))
    assert _verdicts(sketch_of_sum(folder))["sum"][0] == WILL_RUN


@pytest.mark.parametrize("spoil", [b"", b"{", b"[]", b"{}", b'{"outputs": 3}', b"\xff"])
def test_stamp_that_can_t_be_understood_counts_as_an_unended_run(folder, spoil):
    (folder / "sum.json.stamp").write_bytes(spoil)
    assert _verdicts(sketch_of_sum(folder))["sum"] == (WILL_RUN, "its last run did not end")


def test_stamp_of_another_stage_is_not_believed(folder):
    path = folder / "sum.json.stamp"
    path.write_text(json.dumps({**json.loads(path.read_text()), "family": "skykiln.Product"}))
    assert _verdicts(sketch_of_sum(folder))["sum"][1] == "was made by another stage, skykiln.Product"


def test_voided_stamp_tells_its_reason(folder):
    void_stamp(folder / "sum.json.stamp", "was asked for again")
    assert _verdicts(sketch_of_sum(folder))["sum"] == (WILL_RUN, "was asked for again")


def test_diamond_is_judged_once(folder, monkeypatch):
    asked = []
    settings = ReadNumber.settings
    monkeypatch.setattr(ReadNumber, "settings", lambda stage: asked.append(stage) or settings(stage))
    staleness(sketch_of_sum(folder), {})
    assert len(asked) == 1
