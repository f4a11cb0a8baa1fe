"""Malformed files of every format: always an error that names the file, in little time and memory."""

import json
import subprocess
import sys
from pathlib import Path

import pytest
from hostile_corpus import sound_files, write_corpus
from hypothesis import given, settings
from hypothesis import strategies as st
from read_corpus import SECONDS, told

HERE = Path(__file__).parent
MEGABYTES = 300


@pytest.fixture(scope="module")
def corpus(tmp_path_factory):
    folder = tmp_path_factory.mktemp("corpus") / "files"
    return folder, write_corpus(folder)


def test_every_malformed_file_is_refused_by_name_in_little_time_and_memory(corpus):
    folder, paths = corpus
    assert len(paths) >= 200
    command = [sys.executable, str(HERE / "read_corpus.py"), str(folder)]
    run = subprocess.run(command, capture_output=True, text=True)
    lines = [json.loads(line) for line in run.stdout.splitlines()]
    assert run.returncode == 0, f"crashed, or took more than {SECONDS} s, at {lines[-1]}: {run.stderr}"
    answers = {line["file"]: line for line in lines if "megabytes" in line}
    assert answers.keys() == {path.name for path in paths}
    for name, answer in answers.items():
        assert answer["told"] is not None, f"{name} was read"
        assert answer["told"].startswith(f"{folder / name}: ")
        assert ";" in answer["told"] or "It holds" in answer["told"]  # what to do
        assert answer["megabytes"] < MEGABYTES, name
    assert run.stderr == ""


def test_sound_files_of_the_corpus_are_read(tmp_path):
    # Else their malformed copies would prove nothing.
    for name, data in sound_files().items():
        (tmp_path / name).write_bytes(data)
        assert told(tmp_path / name) is None


@st.composite
def changed_files(draw):
    """A sound file with bytes changed, numbers overwritten, or a stretch left out or doubled."""
    data = bytearray(draw(st.sampled_from(list(sound_files().values()))))
    for _ in range(draw(st.integers(1, 4))):
        at = draw(st.integers(4, draw(st.sampled_from([64, 400, len(data)])) - 1)) % len(data)
        how = draw(st.sampled_from(["byte", "number", "cut", "double"]))
        if how == "byte":
            data[at] = draw(st.integers(0, 255))
        elif how == "number":
            number = draw(st.sampled_from([0, 1, 0x7FFF, 0x7FFFFFFF, 0x80000000, 0xFFFFFFFF]))
            data[at : at + 4] = number.to_bytes(4, draw(st.sampled_from(["little", "big"])))
        else:
            stretch = data[at : at + draw(st.integers(1, 40))]
            data[at : at + len(stretch)] = stretch * 2 if how == "double" else b""
    return bytes(data)


def check_changed(folder, data):
    path = folder / "sky.exr"
    path.write_bytes(data)
    said = told(path)
    assert said is None or said.startswith(f"{path}: ")


@settings(max_examples=250, deadline=None)
@given(data=changed_files())
def test_any_change_gives_pixels_or_an_error(tmp_path_factory, data):
    check_changed(tmp_path_factory.getbasetemp(), data)


@pytest.mark.long
@settings(max_examples=20000, deadline=None)
@given(data=changed_files())
def test_very_many_changes_give_pixels_or_an_error(tmp_path_factory, data):
    check_changed(tmp_path_factory.getbasetemp(), data)
