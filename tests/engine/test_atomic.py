"""Files that appear whole or not at all, and what is swept."""

import os
import subprocess
import sys
from pathlib import Path

import pytest

from skykiln.engine import atomic
from skykiln.engine.atomic import rename_into_place, sweep, temporary_name, write_atomically, write_beside
from skykiln.errors import FileError


def test_file_appears_only_when_it_is_renamed(tmp_path):
    path = tmp_path / "new folder" / "sky"
    beside = write_beside(path, [b"a", memoryview(b"bc")])
    assert not path.exists()
    rename_into_place(beside, path)
    assert path.read_bytes() == b"abc"
    assert list(path.parent.iterdir()) == [path]


def test_full_disk_is_told_with_the_space_that_is_needed_and_leaves_the_old_file(tmp_path, monkeypatch):
    def no_room(file, views, synced):
        file.write(b"half")
        raise OSError(28, "No space left on device")

    path = tmp_path / "sky"
    path.write_text("old")
    monkeypatch.setattr(atomic, "_write", no_room)
    with pytest.raises(FileError, match=r"sky: .*No space left on device, 2,000 bytes are needed; make room"):
        write_atomically(path, [bytes(1500), memoryview(bytes(500))])
    assert {p.name: p.read_bytes() for p in tmp_path.iterdir()} == {"sky": b"old"}


def test_folder_in_the_way_is_an_error_with_its_name(tmp_path):
    (tmp_path / "sky").mkdir()
    with pytest.raises(FileError, match=r"sky: can't be written"):
        write_atomically(tmp_path / "sky", [b"a"])


def test_sweep_removes_leftovers_of_dead_processes_and_nothing_else(tmp_path):
    dead = subprocess.Popen([sys.executable, "-c", ""])
    dead.wait()
    name = Path(temporary_name(tmp_path / "faces.npy")).name
    dead_name = name.replace(f".{os.getpid()}.", f".{dead.pid}.")
    elsewhere = f".faces.npy.another-host.{dead.pid}.tmp"
    alive = name.replace(f".{os.getpid()}.", f".{os.getppid()}.")
    kept = {elsewhere, alive, "faces.npy", ".hidden", "notes.tmp", ".odd.tmp"}
    for leftover in {name, dead_name} | kept:
        (tmp_path / leftover).write_bytes(b"")
    sweep(tmp_path)
    assert {path.name for path in tmp_path.iterdir()} == kept


def test_sweep_of_a_missing_folder_does_nothing(tmp_path):
    sweep(tmp_path / "none")
