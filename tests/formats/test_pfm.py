"""Portable float maps: both byte orders, rows from the bottom, lengths."""

import numpy as np
import OpenImageIO
import pytest

from skykiln.errors import FileError
from skykiln.formats.image import ReadOptions
from skykiln.formats.pfm import read_pfm

PIXELS = np.random.default_rng(3).random((4, 6, 3), np.float32) * 50


def pfm(path, header=b"PF\n6 4\n-1.0\n", pixels=PIXELS, order="<f4"):
    path.write_bytes(header + pixels[::-1].astype(order).tobytes())
    return path


def message(path, **options):
    with pytest.raises(FileError) as error:
        read_pfm(path, ReadOptions(**options))
    assert str(error.value).startswith(f"{path}: ")
    return str(error.value)


@pytest.mark.parametrize(("scale", "order"), [(b"-1.0", "<f4"), (b"1.0", ">f4"), (b"-1", "<f4")])
def test_both_byte_orders_come_out_upright(tmp_path, scale, order):
    image = read_pfm(pfm(tmp_path / "sky.pfm", b"PF\n6 4\n" + scale + b"\n", order=order))
    np.testing.assert_array_equal(image.pixels, PIXELS)
    assert image.pixels.flags.c_contiguous
    assert image.facts["byte_order"] == ("little" if order == "<f4" else "big")
    assert image.warnings == ()


def test_first_floats_of_the_file_are_the_lower_left_pixel(tmp_path):
    (tmp_path / "sky.pfm").write_bytes(b"PF 1 2 -1 " + np.arange(6, dtype="<f4").tobytes())
    np.testing.assert_array_equal(read_pfm(tmp_path / "sky.pfm").pixels[:, 0], [[3, 4, 5], [0, 1, 2]])


def test_grey_is_spread_to_three_channels(tmp_path):
    image = read_pfm(pfm(tmp_path / "sky.pfm", b"Pf\n6 4\n-1.0\n", PIXELS[..., :1]))
    np.testing.assert_array_equal(image.pixels, PIXELS[..., :1].repeat(3, 2))


def test_values_are_those_of_openimageio(tmp_path):
    # It leaves the rows as they are stored.
    path = pfm(tmp_path / "sky.pfm")
    np.testing.assert_array_equal(OpenImageIO.ImageBuf(str(path)).get_pixels()[::-1], read_pfm(path).pixels)


def test_scale_that_readers_take_in_different_ways_is_told(tmp_path):
    image = read_pfm(pfm(tmp_path / "sky.pfm", b"PF\n6 4\n-2.5\n"))
    np.testing.assert_array_equal(image.pixels, PIXELS)
    assert "the scale 2.5" in image.warnings[0]
    assert image.facts["scale"] == 2.5


@pytest.mark.parametrize(
    "header",
    [b"PF\n6 4\n0\n", b"PF\n6 4\nnan\n", b"PF\n6\n-1.0\n", b"PF\n6 -4\n-1.0\n", b"PF6 4 -1.0 ",
     b"PF4\n6 4\n-1\n"],
)  # fmt: skip
def test_other_headers_are_refused(tmp_path, header):
    assert "header is not that of a PFM picture" in message(pfm(tmp_path / "sky.pfm", header))


def test_every_other_length_is_an_error(tmp_path):
    data = pfm(tmp_path / "sky.pfm").read_bytes()
    for wrong in (*(data[:end] for end in range(len(data))), data + b"\n"):
        (tmp_path / "sky.pfm").write_bytes(wrong)
        message(tmp_path / "sky.pfm")


def test_sizes_are_judged_by_the_header(tmp_path):
    path = pfm(tmp_path / "sky.pfm", b"PF\n999999999 999999999\n-1.0\n")
    assert "more than the limit" in message(path)
    assert "empty picture" in message(pfm(tmp_path / "sky.pfm", b"PF\n0 4\n-1.0\n"))
    assert "288 bytes of pixels, where 7 x 4 take 336" in message(pfm(tmp_path / "a.pfm", b"PF 7 4 -1.0 "))
