"""Copies without supercompression: the blocks are the file's own."""

import numpy as np
import pytest

from skykiln.errors import FileError
from skykiln.formats.ktx2 import Ktx2Texture, read_ktx2, write_ktx2
from skykiln.formats.ktx2_copy import plain_copy
from skykiln.formats.ktx2_layout import read_header, read_index
from skykiln.formats.ktx2_rules import broken_ktx2_rules

METADATA = {"KTXwriter": "skykiln test", "skykiln": "{}"}


def written(pixels, compress=3):
    rng = np.random.default_rng(2)
    levels = tuple(rng.random((6, n, n, 3), np.float32) for n in (8, 4, 2, 1))
    return write_ktx2(Ktx2Texture(pixels, levels, METADATA, "rec2020"), compress)


@pytest.mark.parametrize("pixels", ["rgba16f", "rgb9e5", "r11g11b10f", "bc6h"])
def test_whole_copy_is_the_file_written_plain(pixels):
    assert plain_copy(written(pixels), "f", 0, METADATA) == written(pixels, compress=0)
    assert plain_copy(written(pixels, 0), "f", 0, METADATA) == written(pixels, compress=0)


@pytest.mark.parametrize("pixels", ["rgb9e5", "bc6h"])
def test_copy_without_the_largest_level_starts_with_the_next(pixels):
    copy = plain_copy(written(pixels), "f", 1, {"skykiln": "{\"short\":1}"})
    assert not list(broken_ktx2_rules(copy))
    found, whole = read_ktx2(copy, "copy"), read_ktx2(written(pixels), "whole")
    assert read_header(copy).pixelWidth == 4
    assert (found.primaries, found.metadata["skykiln"]) == ("rec2020", '{"short":1}')
    for level, expected in zip(found.levels, whole.levels[1:], strict=True):
        np.testing.assert_array_equal(level, expected)


def test_damaged_frame_is_named():
    data = bytearray(written("rgb9e5"))
    place = read_index(bytes(data), 4)[0]
    start = place.byteOffset + 7  # the header of the frame's first block: type 3 is reserved (RFC 8878)
    data[start : start + 3] = b"\xff\xff\xff"
    with pytest.raises(FileError, match="sky: level 0: "):
        plain_copy(bytes(data), "sky", 0, METADATA)
    with pytest.raises(FileError, match="sky: not a sound KTX2 texture"):
        plain_copy(bytes(data[:90]), "sky", 0, METADATA)
