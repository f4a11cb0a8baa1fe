"""DDS files: typed headers, the order of the data, outside readers, broken files."""

import struct

import imagecodecs
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from skykiln.errors import FileError
from skykiln.formats.dds import DdsTexture, broken_dds_rules, read_dds, write_dds
from skykiln.formats.pixels import PIXELS


def chain(pixels, size=8, faces=6, levels=None):
    rng = np.random.default_rng(size)
    count = levels or size.bit_length()
    shapes = [(faces, size >> p, size >> p, PIXELS[pixels].channels) for p in range(count)]
    return DdsTexture(pixels, tuple(rng.random(shape, np.float32) + 0.5 for shape in shapes))


def words(data):
    return struct.unpack_from("<37I", data)


# Microsoft, DDS_HEADER, DDS_PIXELFORMAT, DDS_HEADER_DXT10: the 37 words of a cube of 8 x 8, 4 levels.
CUBE = {
    "rgba16f": (0x2100F, 8 * 8, 10),
    "rgb9e5": (0x2100F, 8 * 4, 67),
    "r11g11b10f": (0x2100F, 8 * 4, 26),
    "bc6h": (0xA1007, 4 * 16, 95),
}


@pytest.mark.parametrize("pixels", CUBE)
def test_cube_map_has_this_header(pixels):
    flags, pitch, dxgi = CUBE[pixels]
    expected = [0x20534444, 124, flags, 8, 8, pitch, 0, 4, *[0] * 11]
    expected += [32, 4, 0x30315844, 0, 0, 0, 0, 0, 0x401008, 0xFE00, 0, 0, 0]
    expected += [dxgi, 3, 4, 1, 0]
    assert list(words(write_dds(chain(pixels)))) == expected


def test_table_has_this_header():
    expected = [0x20534444, 124, 0x100F, 16, 16, 64, 0, 1, *[0] * 11]
    expected += [32, 4, 0x30315844, 0, 0, 0, 0, 0, 0x1000, 0, 0, 0, 0, 34, 3, 0, 1, 0]
    assert list(words(write_dds(chain("rg16f", 16, faces=1, levels=1)))) == expected


def test_data_lies_face_by_face_with_the_largest_level_first():
    texture = chain("rgba16f")
    data = np.frombuffer(write_dds(texture)[148:], np.float16).reshape(-1, 4)
    start = 0
    for face in range(6):
        for level in texture.levels:
            count = level[face].size // 3
            np.testing.assert_array_equal(
                data[start : start + count, :3], np.float16(level[face].reshape(-1, 3))
            )
            start += count
    assert start == len(data)


@settings(max_examples=30, deadline=None)
@given(st.sampled_from(sorted(PIXELS)), st.integers(1, 20), st.sampled_from([1, 6]), st.data())
def test_texture_survives(pixels, size, faces, data):
    levels = data.draw(st.integers(1, size.bit_length()))
    texture = chain(pixels, size, faces, levels)
    written = write_dds(texture)
    assert list(broken_dds_rules(written)) == []
    read = read_dds(written, "sky")
    assert read.pixels == pixels
    coding = PIXELS[pixels]
    for level, original in zip(read.levels, texture.levels, strict=True):
        decoded = coding.decode(coding.encode(original).tobytes(), original.shape[:3])
        np.testing.assert_array_equal(level, decoded)


def test_imagecodecs_reads_a_bc6h_cube_of_one_level():
    # With further levels it takes the wrong bytes for faces 1 to 5.
    data = write_dds(chain("bc6h", 16, levels=1))
    theirs = imagecodecs.dds_decode(data)
    np.testing.assert_array_equal(theirs[..., :3], np.float16(read_dds(data, "sky").levels[0]))


def test_every_truncation_is_an_error():
    data = write_dds(chain("rgb9e5", 4))
    for end in range(len(data)):
        with pytest.raises(FileError, match=r"^sky\.dds: "):
            read_dds(data[:end], "sky.dds")


def put(number, value):
    """Change one of the header's 37 words."""
    return lambda data: data[: 4 * number] + struct.pack("<I", value) + data[4 * number + 4 :]


MUTATIONS = [
    (put(0, 0), "DDS "),
    (put(1, 123), "dwSize"),
    (put(2, 0x1007), "dwFlags"),
    (put(3, 0), "dwHeight"),
    (put(3, 16), "square"),
    (put(4, 0xFFFFFFFF), "square"),
    (put(5, 0), "dwPitchOrLinearSize"),
    (put(6, 1), "dwDepth"),
    (put(7, 0), "dwMipMapCount"),
    (put(7, 5), "dwMipMapCount"),
    (put(7, 3), "bytes, not the|dwMipMapCount"),
    (put(19, 24), "ddspf_dwSize"),
    (put(20, 0x40), "ddspf_dwFlags"),
    (put(21, 0x31545844), "ddspf_dwFourCC"),
    (put(27, 0x1000), "dwCaps"),
    (put(28, 0x200), "dwCaps2"),
    (put(32, 2), "dxgiFormat"),
    (put(32, 95), "dwFlags|dwPitch"),
    (put(33, 4), "resourceDimension"),
    (put(34, 2), "miscFlag"),
    (put(34, 0), "dwCaps2"),
    (put(35, 6), "arraySize"),
    (put(36, 1), "miscFlags2"),
    (lambda data: put(3, 1 << 30)(put(4, 1 << 30)(data)), "dwPitch|bytes, not the"),
    (lambda data: data + b"\0", "bytes, not the"),
    (lambda data: data[:-1], "bytes, not the"),
    (lambda data: data[:100], "inside its headers"),
]


@pytest.mark.parametrize("number", range(len(MUTATIONS)))
def test_broken_rule_is_named(number):
    change, text = MUTATIONS[number]
    with pytest.raises(FileError, match=text) as error:
        read_dds(change(write_dds(chain("rgba16f"))), "probes/sky.dds")
    assert str(error.value).startswith("probes/sky.dds: ")


def test_opaque_alpha_mode_is_read():
    data = write_dds(chain("rgb9e5"))
    assert read_dds(put(36, 3)(data), "sky").pixels == "rgb9e5"
