"""Seals: when they vouch for a chain, and when its stamps are asked."""

import os
from pathlib import Path

import pytest
from small_stages import Multiply, ReadNumber, Sum, sketch_of_sum, write_source

from skykiln.engine import seals, stamps
from skykiln.engine.chains import chain_of, glance_at
from skykiln.engine.lots import bake_lot
from skykiln.engine.staleness import UP_TO_DATE
from skykiln.engine.stamps import read_stamp


@pytest.fixture
def folder(tmp_path, monkeypatch):
    for stage in (ReadNumber, Multiply, Sum):
        monkeypatch.setattr(stage, "seal_path", property(lambda stage: stage.at("sum.json.seal")))
    monkeypatch.setattr(Sum, "wanted", property(lambda stage: stage.plan))
    write_source(tmp_path, "20 first")
    bake_lot([sketch_of_sum(tmp_path)])
    return tmp_path


def test_seal_vouches_for_all_stages(folder):
    assert glance_at(sketch_of_sum(folder)).sealed == 3
    assert glance_at(sketch_of_sum(folder)).stale == []


@pytest.mark.parametrize("change", [{"pin": "2"}, {"factor": 3}])
def test_seal_does_not_vouch_for_what_was_not_asked_for(folder, change):
    assert not glance_at(sketch_of_sum(folder, **change)).sealed


def test_seal_does_not_vouch_for_other_code(folder, monkeypatch):
    monkeypatch.setattr(Multiply, "version", 2)
    assert [verdict.stage.title for verdict in glance_at(sketch_of_sum(folder)).stale] == ["multiple", "sum"]


@pytest.mark.parametrize("name", ["number.json", "copied_remark.json"])
@pytest.mark.parametrize("spoil", [os.unlink, lambda path: path.write_text("other")])
def test_seal_does_not_vouch_for_changed_outputs(folder, name, spoil):
    spoil(folder / name)
    assert glance_at(sketch_of_sum(folder)).stale


@pytest.mark.parametrize("text", ["", "{", "[]", "{}", '{"asked": 1}'])
def test_seal_that_can_t_be_understood_vouches_for_nothing(folder, text):
    (folder / "sum.json.seal").write_text(text)
    chain = glance_at(sketch_of_sum(folder))
    assert not chain.sealed
    assert chain.stale == []


def test_run_of_any_stage_breaks_the_seal(folder, monkeypatch):
    monkeypatch.setattr(Sum, "make", lambda *_: 1 / 0)
    assert bake_lot([sketch_of_sum(folder, factor=3)]) == ["numbers"]
    assert not (folder / "sum.json.seal").exists()


def test_seal_tells_what_ran_in_its_night_and_no_more(folder):
    target = sketch_of_sum(folder)
    assert [ran.title for ran in seals.ran_in("", chain_of(target).verdicts)] == ["number", "multiple", "sum"]
    bake_lot([sketch_of_sum(folder, factor=3, night="the next")])
    seal = seals.read_seal(target)
    assert [title for _, title, _, _ in seal.ran] == ["multiple", "sum"]
    assert seal.ran[0][2] == "factor was 2, is 3"


def _read_files(monkeypatch, judge):
    read = []
    digest_file = stamps.digest_file
    monkeypatch.setattr(stamps, "digest_file", lambda path: read.append(Path(path).name) or digest_file(path))
    assert all(verdict.state == UP_TO_DATE for verdict in judge().verdicts)
    return sorted(read)


def test_outputs_of_a_lot_are_believed_unread_while_a_seal_knows_them(folder, monkeypatch):
    assert not read_stamp(folder / "number.json.stamp").on_disk
    assert _read_files(monkeypatch, lambda: chain_of(sketch_of_sum(folder))) == []


def test_outputs_of_a_lot_that_was_cut_short_are_believed_by_their_bytes_alone(folder, monkeypatch):
    (folder / "sum.json.seal").unlink()
    read = _read_files(monkeypatch, lambda: chain_of(sketch_of_sum(folder)))
    assert read == ["multiple.json", "number.json", "remark.json"]


def test_verified_chain_is_judged_by_all_its_bytes(folder, monkeypatch):
    read = _read_files(monkeypatch, lambda: chain_of(sketch_of_sum(folder), believing=False))
    assert read == ["copied_remark.json", "multiple.json", "number.json", "remark.json", "sum.json"]


def test_byte_that_turned_over_behind_the_same_size_and_time_is_found_by_verifying(folder):
    path = folder / "multiple.json"
    times = path.stat()
    path.write_bytes(path.read_bytes().replace(b"40", b"41"))
    os.utime(path, ns=(times.st_atime_ns, times.st_mtime_ns))
    assert glance_at(sketch_of_sum(folder)).stale == []
    stale = chain_of(sketch_of_sum(folder), believing=False).stale
    assert stale[0].reasons == ("multiple.json was changed by something else",)


def test_code_digest_tells_versions_apart():
    known = Sum.known_versions()
    assert ("Sum", 1) in known
    assert seals.code_digest(known) != seals.code_digest((*known, ("Other", 1)))
