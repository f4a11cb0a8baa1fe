"""Locks: who waits for whom, told by processes that really hold them."""

import subprocess
import sys
import time

import pytest

from skykiln.engine.locks import at_work_in
from skykiln.engine.shards import Shard

HOLD = """
import sys, time
from pathlib import Path
from skykiln.engine.locks import at_work_in
from skykiln.engine.shards import Shard
shard = Shard.parse(sys.argv[2]) if len(sys.argv) > 2 else None
with at_work_in(Path(sys.argv[1]), shard, lambda: None):
    print("held", flush=True)
    time.sleep(60)
"""


@pytest.fixture
def hold(tmp_path):
    """Lets another process hold the lock; it is killed when the test ends."""
    running = []

    def start(*shard):
        command = [sys.executable, "-c", HOLD, str(tmp_path), *shard]
        environment = {"PYTHONPATH": ":".join(sys.path)}
        process = subprocess.Popen(command, stdout=subprocess.PIPE, env=environment)
        running.append(process)
        assert process.stdout.readline() == b"held\n"
        return process

    yield start
    for process in running:
        process.kill()
        process.wait()


@pytest.mark.parametrize(
    ("other", "mine"), [((), None), ((), Shard(0, 2)), (("0/2",), None), (("0/2",), Shard(0, 2))]
)
def test_second_bake_waits_until_the_first_is_gone(tmp_path, hold, other, mine):
    first = hold(*other)
    with at_work_in(tmp_path, mine, waiting=first.kill):
        assert first.poll() is not None or first.wait() < 0


def test_shards_of_a_night_work_side_by_side(tmp_path, hold):
    hold("0/2")
    began = time.monotonic()
    with at_work_in(tmp_path, Shard(1, 2), waiting=lambda: pytest.fail("waited")):
        assert time.monotonic() - began < 30


def test_file_system_without_locks_is_worked_on_without(tmp_path, monkeypatch):
    def no_locks(file, kind):
        raise OSError(37, "No locks available")

    monkeypatch.setattr("fcntl.flock", no_locks)
    with at_work_in(tmp_path, None, waiting=lambda: pytest.fail("waited")):
        pass
