"""Odd names, links, clocks and disks that fill up while a bake is at work."""

import os
import time

import pytest

from skykiln.cli import SOURCE_FAILED, main
from skykiln.engine import atomic
from skykiln.errors import FileError
from tiny_pipeline import TinyPipeline, published, write_sky

ODD = ["pier 7", "Überseebrücke", "岸壁", "stair [up]", "a&b'c\"d$e"]


def _bake(pipeline, *options):
    pipeline.snapshot()
    return main(["bake", "-f", str(pipeline.file), "--workers", "1", *options])


@pytest.mark.parametrize("workers", ["1", "2"])
def test_names_with_blanks_and_other_alphabets_are_baked_under_them(tmp_path, workers):
    pipeline = TinyPipeline(tmp_path, ODD)
    assert _bake(pipeline, "--workers", workers) == 0
    assert {path.parent.name for path in pipeline.build.rglob("probes/*/probe.json")} == set(ODD)
    assert pipeline.bake() == []


def test_build_folder_behind_a_link_is_baked_into_and_stays_a_link(tmp_path):
    pipeline = TinyPipeline(tmp_path)
    (tmp_path / "other disk").mkdir()
    pipeline.build.symlink_to(tmp_path / "other disk")
    pipeline.bake()
    assert pipeline.build.is_symlink()
    assert (tmp_path / "other disk/probes/ferry_noon/probe.json").exists()
    assert pipeline.bake() == []


def test_intermediates_on_a_disk_of_their_own_behind_a_link(tmp_path, tmp_path_factory):
    pipeline = TinyPipeline(tmp_path)
    scratch = tmp_path_factory.mktemp("scratch")
    pipeline.build.mkdir()
    (pipeline.build / "work").symlink_to(scratch)
    pipeline.bake()
    assert (scratch / "ferry_noon/faces.npy").exists()
    assert pipeline.bake() == []
    (pipeline.build / "probes/ferry_noon/probe.json").write_text("{}")
    assert pipeline.bake() == ["published files of ferry_noon"]


def test_source_with_an_older_time_than_before_is_read_again(tmp_path):
    """A clock that was put back, or a copy that kept the time of an older version."""
    pipeline = TinyPipeline(tmp_path)
    pipeline.bake()
    write_sky(tmp_path / "ferry_noon.exr", seed=9)
    os.utime(tmp_path / "ferry_noon.exr", (time.time() - 9e6, time.time() - 9e6))
    assert "panorama of ferry_noon" in pipeline.bake()


def test_outputs_written_under_a_clock_that_jumped_back_are_believed(tmp_path, monkeypatch):
    pipeline = TinyPipeline(tmp_path)
    pipeline.bake()
    write_sky(tmp_path / "ferry_noon.exr", seed=9)
    now = time.time_ns
    monkeypatch.setattr(time, "time_ns", lambda: now() - 86_400 * 10**9)
    assert "published files of ferry_noon" in pipeline.bake()
    assert pipeline.bake() == []


class FillingDisk:
    """A disk on which so many bytes can still be written."""

    def __init__(self, monkeypatch, room):
        self.room = room
        self._write = atomic._write
        monkeypatch.setattr(atomic, "_write", self.write)

    def write(self, file, views, synced):
        self.room -= sum(view.nbytes for view in views)
        if self.room < 0:
            raise OSError(28, "No space left on device")
        self._write(file, views, synced)


@pytest.mark.parametrize("room", [100, 3000, 8000, 15_000, 25_000])
def test_disk_that_fills_is_told_keeps_what_was_there_and_the_next_bake_completes(
    tmp_path, tmp_path_factory, monkeypatch, capsys, room
):
    pipeline = TinyPipeline(tmp_path)
    pipeline.bake()
    before = published(pipeline.build)
    for number, name in enumerate(("ferry_noon", "quay_night")):
        write_sky(tmp_path / f"{name}.exr", seed=70 + number)
    with monkeypatch.context() as patch:
        FillingDisk(patch, room)
        assert _bake(pipeline) == SOURCE_FAILED
    told = capsys.readouterr().err
    assert "No space left on device" in told
    assert "bytes are needed; make room, then bake again" in told
    clean = TinyPipeline(tmp_path_factory.mktemp("clean"))
    clean.settings = pipeline.settings
    for name in ("ferry_noon", "quay_night"):
        (clean.folder / f"{name}.exr").write_bytes((tmp_path / f"{name}.exr").read_bytes())
    clean.bake()
    wanted = published(clean.build)
    for name in ("ferry_noon", "quay_night"):  # the old files or the new ones, never some of both
        found = _of(published(pipeline.build), name)
        assert found in (_of(before, name), _of(wanted, name))
    pipeline.bake()
    assert published(pipeline.build) == wanted
    assert not list(pipeline.build.rglob("*.tmp"))


def _of(files, name):
    return {path: data for path, data in files.items() if path.startswith(f"probes/{name}/")}


def test_output_that_may_not_be_written_is_told_by_name(tmp_path, monkeypatch):
    pipeline = TinyPipeline(tmp_path)
    created = atomic._created

    def forbidden(path):
        if ".faces.npy." in path:
            raise PermissionError(13, "Permission denied")
        return created(path)

    monkeypatch.setattr(atomic, "_created", forbidden)
    pipeline.bake()
    owner, failure = pipeline.night.failures[0]
    assert owner == "ferry_noon"
    assert "work/ferry_noon/faces.npy: can't be written: Permission denied; give write" in failure.cause


def test_build_folder_that_may_not_be_written_ends_the_bake_with_its_name(tmp_path, monkeypatch):
    pipeline = TinyPipeline(tmp_path)

    def forbidden(path):
        raise OSError(30, "Read-only file system")

    monkeypatch.setattr(atomic, "_created", forbidden)
    with pytest.raises(FileError, match=r"build/.*: can't be written: Read-only file system"):
        pipeline.bake()
