"""Radiance pictures: known bytes, the three ways of packing, other readers, damaged files."""

import imagecodecs
import numpy as np
import OpenImageIO
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from radiance_files import hdr, old_line, packed_line, radiance, random_rgbe

from skykiln.errors import FileError
from skykiln.formats.radiance_hdr import read_radiance_hdr


def read(data, max_pixels=1 << 20):
    return read_radiance_hdr(data, "sky.hdr", max_pixels)


def test_known_pixels_have_the_values_of_radiances_own_reader():
    # (m + 0.5) 2^(e - 136): the half step of Radiance's colour code; e = 0 is black whatever else.
    body = [128, 64, 0, 129, 200, 100, 50, 0, 255, 255, 255, 255]
    pixels = read(hdr(3, 1, body)).pixels
    step = 2.0**-7
    np.testing.assert_array_equal(pixels[0, 0], [128.5 * step, 64.5 * step, 0.5 * step])
    np.testing.assert_array_equal(pixels[0, 1], 0)
    np.testing.assert_array_equal(pixels[0, 2], np.float32(255.5 * 2.0**119))


def test_result_is_float32_contiguous_and_names_its_facts():
    image = read(hdr(2, 1, [128, 128, 128, 128] * 2))
    assert image.pixels.dtype == np.float32
    assert image.pixels.flags.c_contiguous
    assert image.chromaticities is None
    assert image.facts == {
        "format": "radiance", "width": 2, "height": 1, "pixel_type": "rgbe", "orientation": "-Y +X",
        "exposure": 1.0, "colour_correction": [1, 1, 1], "chromaticities": None,
    }  # fmt: skip


@pytest.mark.parametrize("pack", [packed_line, old_line, lambda line: line.tobytes()])
@pytest.mark.parametrize("width", [1, 7, 8, 9, 130, 1000])
@pytest.mark.parametrize("runs", [False, True])
def test_every_packing_gives_the_same_pixels(pack, width, runs):
    if pack is packed_line and width < 8:
        pack = old_line  # narrower pictures are never packed the new way
    rgbe = random_rgbe(width, 5, runs=runs)
    data = hdr(width, 5, b"".join(pack(line) for line in rgbe))
    np.testing.assert_array_equal(read(data).pixels, radiance(rgbe).astype(np.float32))


def test_packings_may_change_from_line_to_line():
    rgbe = random_rgbe(700, 3, runs=True)
    body = packed_line(rgbe[0]) + old_line(rgbe[1]) + rgbe[2].tobytes()
    np.testing.assert_array_equal(read(hdr(700, 3, body)).pixels, np.float32(radiance(rgbe)))


def test_pixel_one_one_one_inside_new_run_lengths_is_an_ordinary_pixel():
    line = np.full((8, 4), [1, 1, 1, 130], np.uint8)
    np.testing.assert_array_equal(read(hdr(8, 1, packed_line(line))).pixels[0, 0], 1.5 * 2.0**-6)


def test_flat_line_may_begin_with_two_twos_and_a_high_byte():
    line = np.array([[2, 2, 200, 128]] * 9, np.uint8)
    np.testing.assert_array_equal(read(hdr(9, 1, line.tobytes())).pixels, np.float32(radiance(line[None])))


def test_count_of_128_is_a_run_of_literals():
    line = random_rgbe(128, 1)[0]
    body = bytes([2, 2, 0, 128]) + b"".join(bytes([128]) + line[:, c].tobytes() for c in range(4))
    np.testing.assert_array_equal(read(hdr(128, 1, body)).pixels, np.float32(radiance(line[None])))


def test_lines_wider_than_32767_are_flat():
    line = random_rgbe(32768, 1)
    line[0, 0] = [2, 2, 127, 128]
    data = hdr(32768, 1, line.tobytes())
    np.testing.assert_array_equal(read(data).pixels, np.float32(radiance(line)))


def test_exposures_multiply_and_are_taken_out_of_the_pixels():
    header = (b"#?RADIANCE", b"EXPOSURE=4", b"pfilt -e 2", b"\tEXPOSURE=100", b"EXPOSURE= 0.5  ")
    image = read(hdr(1, 1, [128, 128, 128, 129], header))
    np.testing.assert_array_equal(image.pixels[0, 0], 128.5 * 2.0**-7 / 2)
    assert image.facts["exposure"] == 2.0


def test_colour_corrections_multiply_per_channel_on_top_of_the_exposure():
    header = (b"#?RADIANCE", b"COLORCORR=2 1 0.5", b"EXPOSURE=4", b"COLORCORR= 1 8 0.5", b" COLORCORR=9 9 9")
    image = read(hdr(1, 1, [128, 128, 128, 129], header))
    np.testing.assert_allclose(image.pixels[0, 0], 128.5 * 2.0**-7 / np.array([8, 32, 1]), rtol=1e-7)
    assert image.facts["colour_correction"] == [2, 8, 0.25]


@pytest.mark.parametrize("rows", ["-Y", "+Y"])
@pytest.mark.parametrize("columns", ["+X", "-X"])
@pytest.mark.parametrize("by_columns", [False, True])
def test_every_orientation_comes_out_upright(rows, columns, by_columns):
    # Radiance counts Y from the bottom, X from the left; the axis that comes first is the scan lines'.
    upright = random_rgbe(9, 5)
    stored = [[upright[y, x] for x in (range(9) if columns == "+X" else reversed(range(9)))]
              for y in (range(5) if rows == "-Y" else reversed(range(5)))]  # fmt: skip
    axes = [f"{rows} 5", f"{columns} 9"]
    if by_columns:
        stored, axes = list(zip(*stored, strict=True)), axes[::-1]
    pack = packed_line if len(stored[0]) >= 8 else old_line
    body = b"".join(pack(np.array(line)) for line in stored)
    image = read(hdr(9, 5, body).replace(b"-Y 5 +X 9", " ".join(axes).encode()))
    np.testing.assert_array_equal(image.pixels, np.float32(radiance(upright)))
    assert image.pixels.flags.c_contiguous
    assert (image.facts["width"], image.facts["height"]) == (9, 5)
    assert image.facts["orientation"] == " ".join(axis[:2] for axis in axes)


def test_last_primaries_are_handed_on():
    header = (b"#?RADIANCE", b"PRIMARIES=1 0 0 1 0 0 .3 .3", b"PRIMARIES= .64 .33 .29 .6 .15 .06 .3333 .3333")
    image = read(hdr(1, 1, [128, 128, 128, 129], header))
    assert image.chromaticities == ((0.64, 0.33), (0.29, 0.6), (0.15, 0.06), (0.3333, 0.3333))


def test_tristimulus_values_are_told_as_the_space_of_cie_xyz():
    header = (b"#?RADIANCE", b"FORMAT=32-bit_rle_xyze")
    image = read(hdr(1, 1, [128, 64, 32, 129], header))
    np.testing.assert_array_equal(image.pixels[0, 0], np.array([128.5, 64.5, 32.5]) * 2.0**-7)
    assert image.chromaticities == ((1, 0), (0, 1), (0, 0), (1 / 3, 1 / 3))
    assert image.facts["pixel_type"] == "xyze"


def test_header_forms_of_other_writers_are_read():
    header = (b"#?RGBE\r", b"# made by hand\r", b"GAMMA=1\r", b"VIEW=" + b"x" * 4000 + b"\r", b"\r")
    data = b"\n".join(header) + b"\n-Y %8d +X %8d\r\n" % (1, 2) + bytes([128, 0, 0, 128] * 2)
    assert read(data).pixels.shape == (1, 2, 3)


@pytest.mark.parametrize(
    ("data", "words"),
    [
        (hdr(2, 2, [0] * 16).replace(b"-Y 2 +X 2", b"+Y 2"), "resolution line"),
        (hdr(2, 2, [0] * 16).replace(b"-Y 2 +X 2", b"-Y 2 +Y 2"), "resolution line"),
        (hdr(2, 2, [0] * 16).replace(b"-Y 2 +X 2", b"pixels"), "resolution line"),
        (hdr(2, 2, [0] * 16).replace(b"32-bit_rle_rgbe", b"Radiance_rle_spectra"), "spectra"),
        (hdr(0, 2, []), "empty picture"),
        (hdr(999999999, 999999999, [0] * 16), "limit"),
        (hdr(1025, 1024, []), "limit"),
        (hdr(1, 1, [0] * 4, (b"#?RADIANCE", b"PRIMARIES=.6 .3 .3 .6 .1 .1 .3")), "doesn't hold 8 numbers"),
        (hdr(1, 1, [0] * 4, (b"#?RADIANCE", b"PRIMARIES=.3 .3 .3 .3 .3 .3 .3 .3")), "span no colour space"),
        (hdr(1, 1, [0] * 4, (b"#?RADIANCE", b"COLORCORR=1 2")), "doesn't hold 3 numbers"),
        (hdr(1, 1, [0] * 4, (b"#?RADIANCE", b"COLORCORR=1 2 0")), "exposure"),
        (hdr(1, 1, [0] * 4, (b"#?RADIANCE", b"EXPOSURE=0")), "exposure"),
        (hdr(1, 1, [0] * 4, (b"#?RADIANCE", b"EXPOSURE=nan")), "doesn't hold 1 number;"),
        (hdr(1, 1, [0] * 4, (b"#?RADIANCE", b"EXPOSURE=bright")), "doesn't hold 1 number;"),
        (hdr(1, 1, [0] * 4, (b"#?RADIANCE", b"EXPOSURE=-1")), "exposure"),
        (hdr(1, 1, [0] * 4, (b"#?RADIANCE", *[b"EXPOSURE=1e20"] * 2)), "exposure"),
        (b"#?RADIANCE\nno end", "header"),
        (hdr(9, 1, [2, 2, 0, 8] + [0] * 40), "another width"),
        (hdr(9, 1, [2, 2, 0, 9, 0, 0, 0]), "run of no pixels"),
        (hdr(9, 1, [2, 2, 0, 9, 138, 0, 0]), "over the end"),
        (hdr(9, 1, [2, 2, 0, 9, 10] + [0] * 40), "over the end"),
        (hdr(2, 1, [1, 1, 1, 1, 0, 0, 0, 0]), "no pixel to repeat"),
        (hdr(2, 1, [9, 9, 9, 9, 1, 1, 1, 2]), "over the end"),
        (hdr(3, 1, [9, 9, 9, 9] + [1, 1, 1, 0] * 40), "ends inside scan line 0"),
    ],
)
def test_what_is_wrong_is_said_with_the_files_name(data, words):
    with pytest.raises(FileError, match=words) as error:
        read(data)
    assert str(error.value).startswith("sky.hdr: ")


@pytest.mark.parametrize("pack", [packed_line, old_line, lambda line: line.tobytes()])
def test_every_truncation_is_an_error(pack):
    rgbe = random_rgbe(20, 4)
    rgbe[2, 3:18] = rgbe[2, 3]
    data = hdr(20, 4, b"".join(pack(line) for line in rgbe))
    read(data)
    for end in range(len(data)):
        with pytest.raises(FileError):
            read(data[:end])


def test_huge_picture_in_a_small_file_is_refused_at_the_first_missing_line():
    data = hdr(30000, 4000, packed_line(random_rgbe(30000, 1, runs=True)[0]))
    with pytest.raises(FileError, match="scan line 1"):
        read(data, max_pixels=1 << 27)


@settings(max_examples=60, deadline=None)
@given(st.binary(max_size=400), st.integers(1, 40), st.integers(1, 4))
def test_any_bytes_give_pixels_or_an_error(body, width, height):
    try:
        assert read(hdr(width, height, body)).pixels.shape == (height, width, 3)
    except FileError as error:
        assert str(error).startswith("sky.hdr: ")


@settings(max_examples=100, deadline=None)
@given(st.data())
def test_any_change_of_a_byte_gives_pixels_or_an_error(data):
    rgbe = random_rgbe(16, 3, runs=True)
    original = bytearray(hdr(16, 3, b"".join(packed_line(line) for line in rgbe)))
    for _ in range(data.draw(st.integers(1, 3))):
        original[data.draw(st.integers(0, len(original) - 1))] = data.draw(st.integers(0, 255))
    try:
        read(bytes(original))
    except FileError as error:
        assert str(error).startswith("sky.hdr: ")


def without_half_steps(rgbe):
    """What readers give that leave the half step out."""
    return np.float32(np.where(rgbe[..., 3:] > 0, rgbe[..., :3] * np.exp2(rgbe[..., 3:] - 136.0), 0))


def test_pixels_are_those_of_openimageio_plus_the_half_step(tmp_path):
    # OpenImageIO reads new run lengths and flat lines; not old run lengths, and no EXPOSURE.
    rgbe = random_rgbe(640, 6, runs=True)
    path = tmp_path / "sky.hdr"
    path.write_bytes(hdr(640, 6, b"".join(packed_line(line) for line in rgbe)))
    theirs = OpenImageIO.ImageBuf(str(path)).get_pixels()
    np.testing.assert_array_equal(theirs, without_half_steps(rgbe))
    half_step = np.exp2(rgbe[..., 3:] - 137.0)
    np.testing.assert_array_equal(read(path.read_bytes()).pixels, np.float32(theirs + half_step))


def test_pixels_are_those_of_imagecodecs_plus_the_half_step():
    # imagecodecs reads new run lengths only.
    rgbe = random_rgbe(64, 6)
    data = hdr(64, 6, b"".join(packed_line(line) for line in rgbe))
    theirs = imagecodecs.rgbe_decode(data)
    half_step = np.exp2(rgbe[..., 3:] - 137.0)
    np.testing.assert_array_equal(read(data).pixels, np.float32(theirs + half_step))
