"""OpenEXR pictures: every plain form, OpenImageIO as an outside reader, and the package's traps."""

import os
import struct

import numpy as np
import OpenEXR
import OpenImageIO
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from skykiln.errors import FileError
from skykiln.formats.image import ReadOptions
from skykiln.formats.openexr import read_openexr

RNG = np.random.default_rng(5)
PIXELS = RNG.random((24, 48, 3), np.float32) * 100
COMPRESSIONS = ["NO", "RLE", "ZIPS", "ZIP", "PIZ", "PXR24", "B44", "B44A", "DWAA", "DWAB"]
REC709 = (0.64, 0.33, 0.30, 0.60, 0.15, 0.06, 0.3127, 0.3290)

ACESCG = (0.713, 0.293, 0.165, 0.83, 0.128, 0.044, 0.32168, 0.33767)


def write(path, channels=None, **header):
    header = {"compression": OpenEXR.ZIP_COMPRESSION, "type": OpenEXR.scanlineimage} | header
    if header["type"] == OpenEXR.tiledimage:
        header["tiles"] = OpenEXR.TileDescription()
    OpenEXR.File(header, {"RGB": PIXELS} if channels is None else channels).write(str(path))
    return path


def read(path, max_pixels=1 << 20, **options):
    return read_openexr(path, ReadOptions(max_pixels=max_pixels, **options))


def assert_refused(path, words, **options):
    with pytest.raises(FileError, match=words) as error:
        read(path, **options)
    assert str(error.value).startswith(f"{path}: ")


@pytest.mark.parametrize("dtype", ["float16", "float32"])
@pytest.mark.parametrize("names", ["RGB", "RGBA"])
@pytest.mark.parametrize("storage", ["scanlineimage", "tiledimage"])
def test_plain_forms_give_the_pixels_that_were_written(tmp_path, dtype, names, storage):
    pixels = np.ones((24, 48, len(names)), dtype)
    pixels[..., :3] = PIXELS
    path = write(tmp_path / "sky.exr", {names: pixels}, type=getattr(OpenEXR, storage))
    image = read(path)
    np.testing.assert_array_equal(image.pixels, np.float32(pixels[..., :3]))
    assert image.pixels.dtype == np.float32
    assert image.pixels.flags.c_contiguous
    assert image.facts["pixel_type"] == ("half" if dtype == "float16" else "float")
    assert image.facts["tiled"] == (storage == "tiledimage")
    assert (image.facts["width"], image.facts["height"]) == (48, 24)


@pytest.mark.parametrize("compression", COMPRESSIONS)
def test_pixels_are_those_of_openimageio(tmp_path, compression):
    half = PIXELS.astype(np.float16)
    kind = getattr(OpenEXR, compression + "_COMPRESSION")
    path = write(tmp_path / "sky.exr", {"RGB": half}, compression=kind)
    image = read(path)
    np.testing.assert_array_equal(image.pixels, OpenImageIO.ImageBuf(str(path)).get_pixels())
    assert image.facts["compression"] == compression.lower()


def test_file_written_by_openimageio_is_read(tmp_path):
    path = tmp_path / "sky.exr"
    buffer = OpenImageIO.ImageBuf(OpenImageIO.ImageSpec(48, 24, 3, "float"))
    buffer.set_pixels(OpenImageIO.ROI(), PIXELS)
    buffer.write(str(path))
    np.testing.assert_array_equal(read(path).pixels, PIXELS)


def test_row_zero_is_the_top_row(tmp_path):
    pixels = np.zeros((3, 2, 3), np.float32)
    pixels[0] = [1, 2, 3]
    np.testing.assert_array_equal(read(write(tmp_path / "sky.exr", {"RGB": pixels})).pixels, pixels)


def test_not_a_numbers_infinities_and_negatives_pass_through(tmp_path):
    pixels = PIXELS.copy()
    pixels[0, :3, 0] = [np.nan, np.inf, -1]
    np.testing.assert_array_equal(read(write(tmp_path / "sky.exr", {"RGB": pixels})).pixels, pixels)


def test_lat_long_attribute_and_rec709_chromaticities_are_stated(tmp_path):
    path = write(tmp_path / "sky.exr", envmap=OpenEXR.ENVMAP_LATLONG, chromaticities=REC709)
    facts = read(path).facts
    assert facts["envmap"] == "latlong"
    assert facts["chromaticities"] == pytest.approx(REC709)
    assert read(write(tmp_path / "plain.exr")).facts["envmap"] is None


def test_same_window_away_from_the_origin_is_read(tmp_path):
    window = (np.array([-5, 7], np.int32), np.array([42, 30], np.int32))
    path = write(tmp_path / "sky.exr", dataWindow=window, displayWindow=window)
    np.testing.assert_array_equal(read(path).pixels, PIXELS)


def test_mixed_half_and_float_channels_are_read(tmp_path):
    channels = {"R": PIXELS[..., 0].astype("f2"), "G": PIXELS[..., 1], "B": PIXELS[..., 2]}
    channels = {name: np.ascontiguousarray(plane) for name, plane in channels.items()}
    image = read(write(tmp_path / "sky.exr", channels))
    np.testing.assert_array_equal(image.pixels[..., 0], np.float32(PIXELS[..., 0].astype("f2")))
    assert image.facts["pixel_type"] == "float"


def test_deep_image_is_refused(tmp_path):
    samples = np.empty((4, 6), object)
    for i in range(24):
        samples.flat[i] = np.ones(i % 3, np.float32)
    path = tmp_path / "sky.exr"
    header = {"compression": OpenEXR.ZIPS_COMPRESSION, "type": OpenEXR.deepscanline}
    OpenEXR.File(header, dict.fromkeys("RGB", samples)).write(str(path))
    assert_refused(path, "deep image")


def test_size_over_the_limit_is_refused_before_pixels_are_read(tmp_path):
    path = write(tmp_path / "sky.exr")
    assert_refused(path, "more than the limit of 1151 pixels", max_pixels=1151)
    assert read(path, max_pixels=1152).pixels.shape == (24, 48, 3)


def test_giant_tiles_are_refused_before_memory_is_taken_for_them(tmp_path):
    path = write(tmp_path / "sky.exr", type=OpenEXR.tiledimage)
    # The attribute "tiles" ("OpenEXR File Layout"): name, type, size of 9, x and y size, mode.
    entry, giant = (b"tiles\0tiledesc\0" + struct.pack("<iII", 9, 32, high) for high in (32, 1 << 24))
    assert path.read_bytes().count(entry) == 1
    path.write_bytes(path.read_bytes().replace(entry, giant))
    assert_refused(path, "tiles are far larger")


@pytest.mark.parametrize("storage", ["scanlineimage", "tiledimage"])
def test_every_truncation_is_an_error(tmp_path, storage, capsys):
    data = write(tmp_path / "whole.exr", type=getattr(OpenEXR, storage)).read_bytes()
    cut = tmp_path / "cut.exr"
    for end in [*range(4, 600, 7), *range(600, len(data), 331), len(data) - 1]:
        cut.write_bytes(data[:end])
        assert_refused(cut, "damaged or cut")
    assert capsys.readouterr().out == ""


@settings(max_examples=60, deadline=None)
@given(st.data())
def test_any_change_of_bytes_gives_pixels_or_an_error(tmp_path_factory, data):
    folder = tmp_path_factory.mktemp("changed")
    changed = bytearray(write(folder / "sky.exr").read_bytes())
    for _ in range(data.draw(st.integers(1, 4))):
        changed[data.draw(st.integers(4, 600))] = data.draw(st.integers(0, 255))
    path = folder / "sky.exr"
    path.write_bytes(changed)
    try:
        read(path)
    except FileError as error:
        assert str(error).startswith(f"{path}: ")


def test_what_others_print_meanwhile_reaches_the_screen(tmp_path, capsys, monkeypatch):
    path = write(tmp_path / "sky.exr")
    opened = OpenEXR.File

    def chatty(*arguments, **options):
        print("progress: 3 of 7")
        return opened(*arguments, **options)

    monkeypatch.setattr(OpenEXR, "File", chatty)
    read(path)
    assert capsys.readouterr().out.splitlines() == ["progress: 3 of 7"] * 2


@pytest.mark.parametrize("storage", ["scanlineimage", "tiledimage"])
def test_cut_file_writes_nothing_to_the_screen(tmp_path, capfd, storage):
    path = write(tmp_path / "sky.exr", type=getattr(OpenEXR, storage))
    data = path.read_bytes()
    path.write_bytes(data[: len(data) * 3 // 4])
    assert_refused(path, "cut")
    assert capfd.readouterr() == ("", "")


def test_what_others_write_to_stderr_meanwhile_reaches_it(tmp_path, capfd, monkeypatch):
    path = write(tmp_path / "sky.exr")
    reader = OpenEXR.File

    def speak(*arguments, **options):
        os.write(2, b"from another thread\n")
        os.write(2, b"sky.exr: (EXR_ERR_BAD_CHUNK_LEADER) a line of the library\n")
        return reader(*arguments, **options)

    monkeypatch.setattr(OpenEXR, "File", speak)
    read(path)
    assert capfd.readouterr().err == "from another thread\n" * 2
