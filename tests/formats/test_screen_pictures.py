"""Pictures of whole numbers: refused, or read by the sRGB curve with a warning."""

import io

import colour as colour_science
import imagecodecs
import imageio.v3 as imageio
import numpy as np
import pytest
import tifffile
from hypothesis import given, settings
from hypothesis import strategies as st
from PIL import Image as Pillow

from skykiln.errors import FileError
from skykiln.formats.image import ReadOptions
from skykiln.formats.source_files import read_source

RNG = np.random.default_rng(4)
BYTES = RNG.integers(0, 256, (24, 48, 3), np.uint8)
WORDS = RNG.integers(0, 65536, (24, 48, 3), np.uint16)


def png(pixels):
    return imagecodecs.png_encode(pixels)


def jpeg(pixels, **options):
    file = io.BytesIO()
    Pillow.fromarray(pixels).save(file, "JPEG", **options)
    return file.getvalue()


def tiff(pixels):
    file = io.BytesIO()
    tifffile.imwrite(file, pixels, photometric="rgb", rowsperstrip=8)
    return file.getvalue()


def read(path, data, **options):
    path.write_bytes(data)
    return read_source(path, ReadOptions(**{"allow_ldr": True} | options))


def message(path, data, **options):
    with pytest.raises(FileError) as error:
        read(path, data, **options)
    assert str(error.value).startswith(f"{path}: ")
    return str(error.value)


@pytest.mark.parametrize(
    ("data", "what"),
    [
        (png(BYTES), "an 8-bit PNG"), (png(WORDS), "a 16-bit PNG"), (jpeg(BYTES), "an 8-bit JPEG"),
        (tiff(BYTES), "an 8-bit TIFF"), (tiff(WORDS), "a 16-bit TIFF"),
    ],
)  # fmt: skip
def test_whole_numbers_are_refused_unless_allowed_and_then_told(tmp_path, data, what):
    said = message(tmp_path / "sky.png", data, allow_ldr=False)
    assert f"{what} picture: whole numbers have no range for a sun" in said
    assert said.endswith("allow_ldr: true")
    image = read(tmp_path / "sky.png", data)
    assert len(image.warnings) == 1
    assert image.warnings[0].startswith(f"read from {what} picture, taken as sRGB: it has no range for a sun")
    assert image.chromaticities[3] == (0.3127, 0.3290)
    assert 0 <= image.pixels.min() <= image.pixels.max() <= 1


@pytest.mark.parametrize(("pixels", "largest"), [(BYTES, 255), (WORDS, 65535)])
@pytest.mark.parametrize("encode", [png, tiff])
def test_values_are_those_of_the_srgb_curve(tmp_path, pixels, largest, encode):
    theirs = colour_science.models.eotf_sRGB(pixels / largest)
    np.testing.assert_allclose(read(tmp_path / "sky", encode(pixels)).pixels, theirs, rtol=1e-6)


def test_known_values_of_the_srgb_curve(tmp_path):
    # IEC 61966-2-1: below 0.04045 a line of slope 1 / 12.92; 0.5 is 0.21404 (from memory).
    image = read(tmp_path / "sky.png", png(np.array([[[0, 10, 255], [32768, 65535, 655]]], np.uint16)))
    expected = [[0, 10 / 65535 / 12.92, 255 / 65535 / 12.92], [0.214050, 1, 655 / 65535 / 12.92]]
    np.testing.assert_allclose(image.pixels[0], expected, rtol=1e-5)


def test_share_of_clipped_pixels_is_told(tmp_path):
    pixels = np.full((10, 10, 3), 100, np.uint8)
    pixels[:3, 0, 1] = 255
    assert "3.00% of its pixels" in read(tmp_path / "sky.png", png(pixels)).warnings[0]


@pytest.mark.parametrize("mode", ["L", "LA", "P", "1", "RGBA"])
def test_other_forms_of_png_are_those_of_pillow(tmp_path, mode):
    picture = Pillow.fromarray(BYTES).convert(mode)
    file = io.BytesIO()
    picture.save(file, "PNG")
    theirs = np.asarray(picture.convert("RGB")) / 255
    ours = read(tmp_path / "sky.png", file.getvalue())
    np.testing.assert_allclose(ours.pixels, colour_science.models.eotf_sRGB(theirs), rtol=1e-6)


def test_transparency_is_told(tmp_path):
    alpha = np.full((24, 48, 1), 255, np.uint8)
    assert len(read(tmp_path / "sky.png", png(np.dstack([BYTES, alpha]))).warnings) == 1
    alpha[3, 4] = 0
    assert "transparency" in read(tmp_path / "sky.png", png(np.dstack([BYTES, alpha]))).warnings[1]


def test_pixels_of_jpeg_are_those_of_imageio(tmp_path):
    data = jpeg(BYTES, quality=90)
    theirs = colour_science.models.eotf_sRGB(imageio.imread(data, extension=".jpg") / 255)
    np.testing.assert_allclose(read(tmp_path / "sky.jpg", data).pixels, theirs, rtol=1e-6)


@pytest.mark.parametrize("orientation", range(1, 9))
def test_jpeg_comes_out_upright_as_pillow_turns_it(tmp_path, orientation):
    exif = Pillow.Exif()
    exif[274] = orientation
    data = jpeg(BYTES, exif=exif)
    from PIL import ImageOps

    theirs = np.asarray(ImageOps.exif_transpose(Pillow.open(io.BytesIO(data)))) / 255
    ours = read(tmp_path / "sky.jpg", data).pixels
    np.testing.assert_allclose(ours, colour_science.models.eotf_sRGB(theirs), rtol=1e-6)


def test_ink_and_other_sizes_are_refused(tmp_path):
    ink = io.BytesIO()
    Pillow.fromarray(BYTES).convert("CMYK").save(ink, "JPEG")
    assert "CMYK" in message(tmp_path / "sky.jpg", ink.getvalue())
    for data in (png(BYTES), jpeg(BYTES)):
        assert "48 x 24 is more than the limit" in message(tmp_path / "sky.png", data, max_pixels=1151)


@pytest.mark.parametrize(("data", "tail"), [(png(BYTES), 12), (png(WORDS), 12), (jpeg(BYTES), 2)])
def test_every_truncation_is_an_error(tmp_path, data, tail):
    # The tail is the mark of the end, behind the pixels.
    for end in [*range(4, 300, 3), *range(300, len(data) - tail, 37), len(data) - tail - 1]:
        message(tmp_path / "sky.png", data[:end])


@settings(max_examples=60, deadline=None)
@given(st.data())
def test_any_change_of_bytes_gives_pixels_or_an_error(tmp_path_factory, data):
    changed = bytearray(data.draw(st.sampled_from([png(BYTES), png(WORDS), jpeg(BYTES)])))
    for _ in range(data.draw(st.integers(1, 4))):
        changed[data.draw(st.integers(3, len(changed) - 1))] = data.draw(st.integers(0, 255))
    path = tmp_path_factory.mktemp("changed") / "sky.png"
    try:
        read(path, bytes(changed), max_pixels=1 << 20)
    except FileError as error:
        assert str(error).startswith(f"{path}: ")
