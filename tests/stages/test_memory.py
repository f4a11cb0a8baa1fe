"""What probes are expected to take of a machine, and what their tasks ask Luigi for."""

import os

import pytest

from skykiln.engine import budget
from skykiln.engine.chains import chain_of
from skykiln.engine.night import Standing
from skykiln.stages import shares
from skykiln.stages.memory import PIXEL_BYTES, PROCESS_BYTES, expected_bytes
from skykiln.stages.shares import farm_lots, luigi_tasks
from tiny_pipeline import TinyPipeline

MIB = 2**20


@pytest.fixture
def snapshot(tmp_path, monkeypatch):
    """Two probes; the source of the first fills 300 MiB, though no byte of it is on the disk."""
    snapshot = TinyPipeline(tmp_path).snapshot()
    os.truncate(tmp_path / "ferry_noon.exr", 300 * MIB)
    monkeypatch.setattr(budget, "_memory_budget", lambda: 2 * expected_bytes(snapshot.probes[0].pinned))
    return snapshot


def _standings(snapshot):
    return [Standing.of(chain_of(target)) for target in snapshot.probes]


def test_memory_is_guessed_from_the_source_file(snapshot):
    large, small = (expected_bytes(probe.pinned) for probe in snapshot.probes)
    assert large == PROCESS_BYTES + 200 * MIB * PIXEL_BYTES
    assert PROCESS_BYTES < small < PROCESS_BYTES + MIB


def test_missing_source_takes_what_any_process_takes(snapshot, tmp_path):
    (tmp_path / "ferry_noon.exr").unlink()
    assert expected_bytes(snapshot.probes[0].pinned) == PROCESS_BYTES


def test_lot_asks_for_the_memory_of_its_largest_probe_and_for_one_core(snapshot, monkeypatch):
    monkeypatch.setattr(shares, "BIG_SECONDS", 1e9)
    monkeypatch.setattr("skykiln.stages.bake_lot.available_cores", lambda: 4)
    monkeypatch.setattr("skykiln.stages.bake_lot.BakeLot.threads", None)  # as in a process of its own
    ((lot,), big) = luigi_tasks(_standings(snapshot), snapshot, workers=1)
    assert big == []
    assert lot.resources == {"skykiln_cores": 0.25, "skykiln_memory": pytest.approx(0.5, abs=1e-5)}


def test_stage_of_a_big_probe_takes_all_cores_and_its_memory(snapshot):
    _, big = luigi_tasks(_standings(snapshot)[:1], snapshot, workers=1)
    ((stage, _),) = big
    assert stage.resources == {"skykiln_cores": 1, "skykiln_memory": 0.5}


def test_lots_of_a_farm_ask_for_nothing_of_a_scheduler_that_knows_no_machine(snapshot):
    assert [lot.resources for lot in farm_lots(_standings(snapshot), snapshot)] == [{}, {}]
