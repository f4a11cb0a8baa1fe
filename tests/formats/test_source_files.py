"""Which reader a file goes to, and what can't be read at all."""

import os
import socket

import numpy as np
import OpenEXR
import pytest
from radiance_files import hdr

from skykiln.errors import FileError
from skykiln.formats.image import ReadOptions
from skykiln.formats.source_files import read_source

ONE_PIXEL = hdr(1, 1, [128, 128, 128, 129])


def assert_refused(path, words):
    with pytest.raises(FileError, match=words) as error:
        read_source(path)
    assert str(error.value).startswith(f"{path}: ")
    assert ";" in str(error.value)


def test_first_bytes_choose_the_reader_whatever_the_suffix(tmp_path):
    misnamed = tmp_path / "sky.exr"
    misnamed.write_bytes(ONE_PIXEL)
    assert read_source(misnamed).facts["format"] == "radiance"
    other = tmp_path / "sky.hdr"
    header = {"compression": OpenEXR.ZIP_COMPRESSION, "type": OpenEXR.scanlineimage}
    OpenEXR.File(header, {"RGB": np.ones((2, 4, 3), np.float32)}).write(str(other))
    assert read_source(other).facts["format"] == "openexr"


@pytest.mark.parametrize(
    ("data", "words"),
    [
        (b"", "empty"),
        (b"#", "is none of OpenEXR, Radiance .hdr, TIFF, PFM or KTX2"),
        (b"\x76\x2f\x31", "is none of"),
        (b"\x76\x2f\x31\x01", "not a readable OpenEXR file"),
        (b"#?", "header"),
        (b"\x89PNG\r\n\x1a\n", "not that of a PNG picture"),
        (b"DDS " + bytes(200), "is a DDS texture, not OpenEXR, .* KTX2; convert it to OpenEXR"),
        (b"PF rubbish", "not that of a PFM picture"),
        (b"II*\0", "damaged or cut TIFF"),
        (b"\xabKTX 11\xbb", "KTX texture of version 1"),
        (b"\xabKTX 20\xbb", "KTX2"),
        (b"\xff\xd8\xff\xe0", "no range for a sun"),
        (b"ENVI\nsamples = 100\n", "ENVI"),
        (b"\0" * 5000, "is none of .*; convert it to OpenEXR"),
    ],
)
def test_unreadable_content_is_named(tmp_path, data, words):
    path = tmp_path / "sky.exr"
    path.write_bytes(data)
    assert_refused(path, words)


def test_choice_that_a_format_does_not_have_is_refused(tmp_path):
    path = tmp_path / "sky.hdr"
    path.write_bytes(ONE_PIXEL)
    for choice in ("part", "layer"):
        with pytest.raises(FileError, match=f"has no {choice}s; remove {choice}:"):
            read_source(path, ReadOptions(**{choice: "sky"}))


def test_missing_file_is_named(tmp_path):
    assert_refused(tmp_path / "sky.exr", "No such file")


def test_directory_is_refused(tmp_path):
    assert_refused(tmp_path, "a directory")


def test_dangling_link_is_refused(tmp_path):
    link = tmp_path / "sky.exr"
    link.symlink_to(tmp_path / "gone.exr")
    assert_refused(link, "leads nowhere")


def test_link_to_itself_is_refused(tmp_path):
    link = tmp_path / "sky.exr"
    link.symlink_to(link)
    assert_refused(link, "leads nowhere")


def test_fifo_is_refused_without_waiting(tmp_path):
    path = tmp_path / "sky.exr"
    os.mkfifo(path)
    assert_refused(path, "a pipe")


def test_socket_is_refused(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    with socket.socket(socket.AF_UNIX) as listener:
        listener.bind("sky.exr")
        assert_refused(tmp_path / "sky.exr", "a pipe, socket or device")


def test_path_through_a_file_is_refused(tmp_path):
    (tmp_path / "sky.exr").write_bytes(ONE_PIXEL)
    assert_refused(tmp_path / "sky.exr" / "more.exr", "Not a directory")


@pytest.mark.parametrize(("size", "words"), [
    (1 << 40, "sky.hdr: 1099511627776 bytes, more than the 1112576 that 1000 pixels may take;"),
    ((1 << 20) + 8001, "larger than any picture of 1000 pixels"),  # eight bytes a pixel at most
])  # fmt: skip
def test_file_too_large_for_the_limit_is_refused_before_it_is_read(tmp_path, size, words):
    path = tmp_path / "sky.hdr"
    with path.open("wb") as file:
        file.write(ONE_PIXEL)
        file.truncate(size)  # sparse: takes no room
    with pytest.raises(FileError, match=words):
        read_source(path, ReadOptions(max_pixels=1000))


def test_read_error_is_named(tmp_path, monkeypatch):
    path = tmp_path / "sky.hdr"
    path.write_bytes(ONE_PIXEL)

    def fail(self, *arguments):
        raise OSError(5, "Input/output error")

    monkeypatch.setattr(type(path), "open", fail)
    assert_refused(path, "Input/output error")
