"""Float TIFF: every form that tifffile writes, OpenImageIO as an outside reader, damage."""

import numpy as np
import OpenImageIO
import pytest
import tifffile
from hypothesis import given, settings
from hypothesis import strategies as st

from skykiln.errors import FileError
from skykiln.formats.image import ReadOptions
from skykiln.formats.tiff import read_tiff

RNG = np.random.default_rng(9)
PIXELS = RNG.random((40, 80, 3), np.float32) * 100
PIXELS[10:20] = 3
COMPRESSIONS = [None, "zlib", "lzw", "packbits", "zstd", "lzma"]
# PrimaryChromaticities and WhitePoint (TIFF 6.0, section 20), rationals, of ACEScg.
ACESCG = (
    (319, "2I", 6, (713, 1000, 293, 1000, 165, 1000, 830, 1000, 128, 1000, 44, 1000)),
    (318, "2I", 2, (32168, 100000, 33767, 100000)),
)


def write(path, pixels=PIXELS, **options):
    tifffile.imwrite(path, pixels, **{"photometric": "rgb", "rowsperstrip": 8} | options)
    return path


def read(path, **options):
    return read_tiff(path, ReadOptions(**options))


def message(path, **options):
    with pytest.raises(FileError) as error:
        read(path, **options)
    assert str(error.value).startswith(f"{path}: ")
    return str(error.value)


@pytest.mark.parametrize("dtype", ["float16", "float32", "float64"])
@pytest.mark.parametrize("compression", COMPRESSIONS)
@pytest.mark.parametrize("tile", [None, (16, 16)])
def test_plain_forms_give_the_pixels_that_were_written(tmp_path, dtype, compression, tile):
    pixels = PIXELS.astype(dtype)
    image = read(write(tmp_path / "sky.tif", pixels, compression=compression, tile=tile))
    np.testing.assert_array_equal(image.pixels, np.float32(pixels))
    assert image.pixels.dtype == np.float32
    assert image.pixels.flags.c_contiguous
    assert image.facts["pixel_type"] == {"float16": "half", "float32": "float", "float64": "double"}[dtype]
    assert image.facts["tiled"] == (tile is not None)
    assert image.warnings == ()


@pytest.mark.parametrize("compression", ["zlib", "lzw"])
@pytest.mark.parametrize("predictor", [None, True])
@pytest.mark.parametrize("byteorder", ["<", ">"])
@pytest.mark.parametrize("planar", ["contig", "separate"])
def test_pixels_are_those_of_openimageio(tmp_path, compression, predictor, byteorder, planar):
    pixels = PIXELS if planar == "contig" else np.ascontiguousarray(np.moveaxis(PIXELS, -1, 0))
    path = write(tmp_path / "sky.tif", pixels, compression=compression, predictor=predictor,
                 byteorder=byteorder, planarconfig=planar)  # fmt: skip
    np.testing.assert_array_equal(OpenImageIO.ImageBuf(str(path)).get_pixels(), PIXELS)
    np.testing.assert_array_equal(read(path).pixels, PIXELS)


@pytest.mark.parametrize("compression", ["none", "lzw", "zip"])
def test_file_written_by_openimageio_is_read(tmp_path, compression):
    path = tmp_path / "sky.tif"
    specification = OpenImageIO.ImageSpec(80, 40, 3, "float")
    specification.attribute("compression", compression)
    buffer = OpenImageIO.ImageBuf(specification)
    buffer.set_pixels(OpenImageIO.ROI(), PIXELS)
    buffer.write(str(path))
    image = read(path)
    np.testing.assert_array_equal(image.pixels, PIXELS)
    assert image.facts["compression"] == {"none": "none", "lzw": "lzw", "zip": "deflate"}[compression]


def test_big_tiff_is_read(tmp_path):
    np.testing.assert_array_equal(read(write(tmp_path / "sky.tif", bigtiff=True)).pixels, PIXELS)


@pytest.mark.parametrize(("channels", "photometric"), [(1, "minisblack"), (2, "minisblack"), (4, "rgb")])
def test_grey_and_alpha_forms(tmp_path, channels, photometric):
    pixels = RNG.random((6, 8, channels), np.float32)
    stored = pixels[..., 0] if channels == 1 else pixels
    alpha = [] if channels == 1 else ["assocalpha"]
    options = {"photometric": photometric, "extrasamples": alpha, "planarconfig": "contig"}
    image = read(write(tmp_path / "sky.tif", stored, **options))
    colours = pixels[..., :3] if channels == 4 else pixels[..., :1].repeat(3, 2)
    np.testing.assert_array_equal(image.pixels, colours)


@pytest.mark.parametrize("orientation", range(1, 9))
def test_every_orientation_comes_out_upright(tmp_path, orientation):
    # TIFF 6.0, tag 274: where row 0 and column 0 of what is stored lie in the upright picture.
    row0, column0 = {
        1: ("top", "left"), 2: ("top", "right"), 3: ("bottom", "right"), 4: ("bottom", "left"),
        5: ("left", "top"), 6: ("right", "top"), 7: ("right", "bottom"), 8: ("left", "bottom"),
    }[orientation]  # fmt: skip
    upright = RNG.random((3, 5, 3), np.float32)
    edges = {"top": upright[0], "bottom": upright[-1], "left": upright[:, 0], "right": upright[:, -1]}
    rows = {"top": upright, "bottom": upright[::-1], "left": upright.transpose(1, 0, 2),
            "right": upright.transpose(1, 0, 2)[::-1]}[row0]  # fmt: skip
    stored = rows if np.array_equal(rows[:, 0], edges[column0]) or np.array_equal(
        rows[::-1, 0], edges[column0]) else rows[:, ::-1]  # fmt: skip
    path = write(tmp_path / "sky.tif", stored, extratags=[(274, "H", 1, orientation)])
    np.testing.assert_array_equal(read(path).pixels, upright)


def test_chromaticities_are_handed_on(tmp_path):
    image = read(write(tmp_path / "sky.tif", extratags=ACESCG))
    expected = ((0.713, 0.293), (0.165, 0.83), (0.128, 0.044), (0.32168, 0.33767))
    np.testing.assert_allclose(image.chromaticities, expected, rtol=1e-12)
    assert read(write(tmp_path / "plain.tif")).chromaticities is None


def test_colour_profile_is_told(tmp_path):
    image = read(write(tmp_path / "sky.tif", iccprofile=b"profile of some kind"))
    assert image.warnings == ("its colour profile is not read",)


def test_page_is_chosen_by_number(tmp_path):
    path = tmp_path / "sky.tif"
    with tifffile.TiffWriter(path) as file:
        file.write(PIXELS, photometric="rgb")
        file.write(PIXELS[::2, ::2], photometric="rgb", subfiletype=1)
        file.write(PIXELS * 2, photometric="rgb")
    said = message(path)
    assert said.endswith("2 pages; say which with part:. It holds the pages 0: 80 x 40, 2: 80 x 40")
    np.testing.assert_array_equal(read(path, part=2).pixels, PIXELS * 2)
    np.testing.assert_array_equal(read(path, part="0").pixels, PIXELS)
    assert "no page 1" in message(path, part=1)


def test_smaller_copies_are_no_pages(tmp_path):
    path = tmp_path / "sky.tif"
    with tifffile.TiffWriter(path) as file:
        file.write(PIXELS, photometric="rgb")
        file.write(PIXELS[::2, ::2], photometric="rgb", subfiletype=1)
    np.testing.assert_array_equal(read(path).pixels, PIXELS)


def test_size_over_the_limit_is_refused(tmp_path):
    path = write(tmp_path / "sky.tif")
    assert "80 x 40 is more than the limit of 3199 pixels" in message(path, max_pixels=3199)
    assert read(path, max_pixels=3200).pixels.shape == (40, 80, 3)


@pytest.mark.parametrize(
    ("pixels", "options", "words"),
    [
        (PIXELS.astype("uint32"), {}, "its pixels are uint32"),
        (PIXELS.astype("int16"), {}, "its pixels are int16"),
        (PIXELS.astype("uint8"), {"compression": "jpeg"}, "its compression 7"),
        (PIXELS[..., 0].astype("uint8"), {"photometric": "miniswhite"}, "photometric 0"),
        (PIXELS[..., [0, 1, 2, 0]], {"photometric": "separated"}, "photometric 5"),
    ],
)
def test_other_pixels_are_named_and_refused(tmp_path, pixels, options, words):
    assert words in message(write(tmp_path / "sky.tif", pixels, **options))


@pytest.mark.parametrize("compression", [None, "zlib", "lzw", "zstd"])
@pytest.mark.parametrize("tile", [None, (16, 16)])
def test_every_truncation_is_an_error(tmp_path, compression, tile, capfd):
    # The library would fill what is missing with zeros. Pages' descriptions stand before the pixels.
    data = write(tmp_path / "whole.tif", PIXELS[:, :40], compression=compression, tile=tile).read_bytes()
    cut = tmp_path / "cut.tif"
    for end in [*range(4, 600, 7), *range(600, len(data), 331), len(data) - 1]:
        cut.write_bytes(data[:end])
        message(cut)
    assert capfd.readouterr() == ("", "")


@pytest.mark.parametrize("compression", ["zlib", "lzw", "zstd", "lzma", "packbits"])
def test_short_strip_is_an_error(tmp_path, compression):
    path = write(tmp_path / "sky.tif", compression=compression)
    with tifffile.TiffFile(path, mode="r+b") as file:
        counts = file.pages[0].tags["StripByteCounts"]
        counts.overwrite([count // 2 for count in counts.value])
    message(path)


@settings(max_examples=80, deadline=None)
@given(st.data())
def test_any_change_of_bytes_gives_pixels_or_an_error(tmp_path_factory, data):
    folder = tmp_path_factory.mktemp("changed")
    compression = data.draw(st.sampled_from(COMPRESSIONS))
    changed = bytearray(write(folder / "sky.tif", compression=compression).read_bytes())
    for _ in range(data.draw(st.integers(1, 4))):
        changed[data.draw(st.integers(4, 500))] = data.draw(st.integers(0, 255))
    path = folder / "sky.tif"
    path.write_bytes(changed)
    try:
        read(path, allow_ldr=True, max_pixels=1 << 20)
    except FileError as error:
        assert str(error).startswith(f"{path}: ")
