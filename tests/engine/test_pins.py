"""Pins: when a source is read again and when its digest is believed."""

import os
import time

import pytest

from skykiln.engine import pins as pins_module
from skykiln.engine.digests import digest_chunks, digest_file
from skykiln.engine.pins import Pins

OLD = 10_000_000_000  # nanoseconds: older than any clock's grain


@pytest.fixture
def source(tmp_path):
    path = tmp_path / "sky.exr"
    path.write_bytes(b"light")
    _age(path, OLD)
    return path


@pytest.fixture
def read(monkeypatch):
    """Names of the files whose bytes were read."""
    names = []
    monkeypatch.setattr(pins_module, "digest_file", lambda path: names.append(path.name) or digest_file(path))
    return names


def _age(path, nanoseconds):
    then = time.time_ns() - nanoseconds
    os.utime(path, ns=(then, then))


def test_pin_is_the_digest_of_the_bytes(tmp_path, source):
    assert Pins(tmp_path / "pins.json").pin(source) == digest_chunks([b"light"])


def test_unchanged_file_is_read_once_even_across_bakes(tmp_path, source, read):
    first = Pins(tmp_path / "pins.json")
    first.pin(source)
    first.pin(source)
    first.save()
    Pins(tmp_path / "pins.json").pin(source)
    assert read == ["sky.exr"]


def test_young_file_is_not_trusted(tmp_path, source, read):
    _age(source, 0)
    pins = Pins(tmp_path / "pins.json")
    pins.pin(source)
    pins.pin(source)
    assert read == ["sky.exr"] * 2
    pins.save()
    assert not (tmp_path / "pins.json").exists()


def test_file_from_the_future_is_not_trusted(tmp_path, source, read):
    _age(source, -3600 * 10**9)
    pins = Pins(tmp_path / "pins.json")
    pins.pin(source)
    pins.pin(source)
    assert len(read) == 2


@pytest.mark.parametrize("change", ["size", "time", "inode"])
def test_file_of_other_size_time_or_inode_is_read_again(tmp_path, source, change):
    pins = Pins(tmp_path / "pins.json")
    pins.pin(source)
    times = source.stat().st_mtime_ns
    if change == "inode":
        (tmp_path / "other").write_bytes(b"night")
        (tmp_path / "other").replace(source)
    else:
        source.write_bytes(b"night" if change == "time" else b"lights")
    os.utime(source, ns=(times, times + (change == "time")))
    assert pins.pin(source) == digest_file(source)


@pytest.mark.parametrize("text", ["", "[", "[1]", "null"])
def test_spoiled_cache_is_started_anew(tmp_path, source, text):
    (tmp_path / "pins.json").write_text(text)
    assert Pins(tmp_path / "pins.json").pin(source) == digest_file(source)


def test_a_file_larger_than_any_picture_is_not_read(tmp_path, source, read):
    pins = Pins(tmp_path / "pins.json")
    with source.open("r+b") as file:
        file.truncate(1 << 40)
    _age(source, OLD)
    told = "unreadable: 1099511627776 bytes, more than the limit of 1000"
    assert pins.pin(source, largest=1000) == told
    assert read == []
    source.write_bytes(bytes(1000))
    assert pins.pin(source, largest=1000) == digest_chunks([bytes(1000)])


def test_what_can_t_be_read_gets_a_pin_that_tells_why(tmp_path):
    pins = Pins(tmp_path / "pins.json")
    assert pins.pin(tmp_path / "gone.exr") == "unreadable: No such file or directory"
    assert pins.pin(tmp_path) == "unreadable: not a file"
    os.mkfifo(tmp_path / "pipe.exr")
    assert pins.pin(tmp_path / "pipe.exr") == "unreadable: not a file"
