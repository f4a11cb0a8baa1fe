"""Which picture of an OpenEXR file is read: parts, layers, channels, windows, chroma."""

import subprocess
import sys

import numpy as np
import OpenEXR
import OpenImageIO
import pytest
from openexr_files import mip_tiles, scan_lines

from skykiln.errors import FileError
from skykiln.formats.image import ReadOptions
from skykiln.formats.openexr import read_openexr

RNG = np.random.default_rng(7)
PIXELS = RNG.random((24, 48, 3), np.float32) * 100
WHOLE = {"displayWindow": (np.array([0, 0], "i4"), np.array([47, 23], "i4"))}
ACESCG = ((0.713, 0.293), (0.165, 0.83), (0.128, 0.044), (0.32168, 0.33767))


def plane(value=1.0, dtype="float32", shape=(24, 48)):
    return np.full(shape, value, dtype)


def colours(layer="", value=1.0, dtype="float32"):
    start = f"{layer}." if layer else ""
    return {f"{start}{c}": plane(value + i, dtype) for i, c in enumerate("RGB")}


def write(path, *parts, names=(), **header):
    header = {"compression": OpenEXR.ZIP_COMPRESSION, "type": OpenEXR.scanlineimage} | header
    if len(parts) == 1:
        OpenEXR.File(header, parts[0]).write(str(path))
    else:
        made = [OpenEXR.Part(dict(header), part, name) for part, name in zip(parts, names, strict=True)]
        OpenEXR.File(made).write(str(path))
    return path


def read(path, **options):
    return read_openexr(path, ReadOptions(**options))


def message(path, **options):
    with pytest.raises(FileError) as error:
        read(path, **options)
    assert str(error.value).startswith(f"{path}: ")
    return str(error.value)


def test_plain_channels_come_before_layers(tmp_path):
    path = write(tmp_path / "sky.exr", colours(value=5) | colours("sun", 8) | {"Z": plane(), "A": plane()})
    image = read(path)
    np.testing.assert_array_equal(image.pixels[0, 0], [5, 6, 7])
    assert (image.facts["layer"], image.facts["part"]) == ("", 0)
    np.testing.assert_array_equal(read(path, layer="sun").pixels[0, 0], [8, 9, 10])


def test_only_layer_needs_no_name(tmp_path):
    path = write(tmp_path / "sky.exr", colours("light.sky", 3) | {"depth.Z": plane()})
    image = read(path)
    np.testing.assert_array_equal(image.pixels[0, 0], [3, 4, 5])
    assert image.facts["layer"] == "light.sky"


def test_several_layers_without_a_plain_one_are_listed(tmp_path):
    path = write(tmp_path / "sky.exr", colours("sky") | colours("sun"))
    assert message(path).endswith(
        "2 layers are pictures; say which with layer:. It holds layer 'sky' B G R, layer 'sun' B G R"
    )


def test_missing_layer_is_told_with_those_that_are_there(tmp_path):
    path = write(tmp_path / "sky.exr", colours("sky") | {"A": plane()})
    assert message(path, layer="sun").endswith(
        "no layer 'sun'; name one that is there. It holds plain A, layer 'sky' B G R"
    )


@pytest.mark.parametrize(
    ("channels", "words"),
    [
        ({"R": plane(), "G": plane()}, "plain G R"),
        ({"Z": plane()}, "plain Z"),
        ({"Y": plane(), "RY": plane()}, "plain RY Y"),
        ({"X": plane(), "Y": plane(), "Z": plane()}, "plain X Y Z"),
        ({f"c{i:03}": plane() for i in range(100)}, "plain c000 c001 c002 c003 c004 c005 c006 c007 ..."),
    ],
)
def test_missing_channels_are_told_with_those_that_are_there(tmp_path, channels, words):
    said = message(write(tmp_path / "sky.exr", channels))
    assert "no layer has R, G, B, or Y; export one" in said
    assert said.endswith(f"It holds {words}")


def test_named_layer_that_lacks_channels_is_told(tmp_path):
    path = write(tmp_path / "sky.exr", colours() | {"mask.R": plane()})
    assert "layer 'mask' lacks channels" in message(path, layer="mask")


def test_part_is_chosen_by_name_or_number(tmp_path):
    path = write(tmp_path / "sky.exr", colours(value=1), colours(value=4), names=("left", "right"))
    said = message(path)
    assert "2 pictures; say which with part:" in said
    assert said.endswith("part 0 'left': plain B G R; part 1 'right': plain B G R")
    for part in ("right", 1):
        image = read(path, part=part)
        np.testing.assert_array_equal(image.pixels[0, 0], [4, 5, 6])
        assert (image.facts["part"], image.facts["parts"]) == ("right", 2)
    assert message(path, part="middle").endswith("part 1 'right': plain B G R")
    assert "no part 2" in message(path, part=2)


def test_only_part_with_colours_needs_no_name(tmp_path):
    path = write(tmp_path / "sky.exr", {"Z": plane()}, colours("sky", 2), names=("depth", "beauty"))
    np.testing.assert_array_equal(read(path).pixels[0, 0], [2, 3, 4])


def test_parts_are_those_of_openimageio(tmp_path):
    other = RNG.random((8, 16, 3), np.float32)
    path = write(tmp_path / "sky.exr", {"RGB": PIXELS}, {"RGB": other}, names=("a", "b"), **WHOLE)
    for number in (0, 1):
        buffer = OpenImageIO.ImageBuf(str(path), number, 0)
        theirs = buffer.get_pixels(OpenImageIO.FLOAT, buffer.roi_full)
        np.testing.assert_array_equal(read(path, part=number).pixels, theirs)


def test_deep_part_is_refused_even_beside_a_flat_one(tmp_path):
    samples = np.empty((4, 6), object)
    for i in range(24):
        samples.flat[i] = np.ones(i % 3, np.float32)
    deep = {"compression": OpenEXR.ZIPS_COMPRESSION, "type": OpenEXR.deepscanline, **WHOLE}
    flat = {"compression": OpenEXR.ZIP_COMPRESSION, "type": OpenEXR.scanlineimage, **WHOLE}
    path = tmp_path / "sky.exr"
    OpenEXR.File([OpenEXR.Part(flat, {"RGB": PIXELS}, "flat"),
                  OpenEXR.Part(deep, dict.fromkeys("RGB", samples), "deep")]).write(str(path))  # fmt: skip
    assert "part 1 is a deep image; flatten it" in message(path)


def test_unsigned_whole_numbers_are_taken_as_they_are(tmp_path):
    image = read(write(tmp_path / "sky.exr", {c: plane(70000, "uint32") for c in "RGB"}))
    np.testing.assert_array_equal(image.pixels, 70000)
    assert image.facts["pixel_type"] == "uint"


def test_luminance_alone_is_grey(tmp_path):
    luminance = PIXELS[..., 1].astype(np.float16)
    image = read(write(tmp_path / "sky.exr", {"Y": luminance, "A": plane()}))
    np.testing.assert_array_equal(image.pixels, np.repeat(luminance[..., None], 3, 2).astype("f4"))
    assert image.facts["channels"] == "luminance"


def test_largest_of_the_mip_levels_is_read(tmp_path):
    levels = [RNG.random((max(1, 16 >> k), 32 >> k, 3), np.float32) for k in range(6)]
    path = tmp_path / "sky.exr"
    path.write_bytes(mip_tiles(levels))
    assert OpenImageIO.ImageBuf(str(path)).nmiplevels == 6
    np.testing.assert_array_equal(read(path).pixels, levels[0])
    assert read(path).facts["tiled"]


def luminance_chroma(path, luminance, red, blue, step=2, low=(0, 0), **attributes):
    height, width = luminance.shape
    window = (*low, low[0] + width - 1, low[1] + height - 1)
    channels = {"Y": (luminance, 1, 1), "RY": (red, step, step), "BY": (blue, step, step)}
    path.write_bytes(scan_lines(window, channels, **attributes))
    return path


def test_luminance_and_chroma_give_back_the_colour(tmp_path):
    # Y = 0.2126 R + 0.7152 G + 0.0722 B of Rec. 709 (ITU-R BT.709-6, item 3.2), R = 2, G = 1, B = 4.
    luminance = 0.2126 * 2 + 0.7152 + 0.0722 * 4
    red, blue = (plane((c - luminance) / luminance, shape=(6, 8)) for c in (2, 4))
    path = luminance_chroma(tmp_path / "sky.exr", plane(luminance, shape=(12, 16)), red, blue)
    np.testing.assert_allclose(read(path).pixels, np.broadcast_to([2, 1, 4], (12, 16, 3)), rtol=5e-4)
    assert read(path).facts["channels"] == "luminance-chroma"


def test_luminance_and_chroma_use_the_weights_of_the_files_chromaticities(tmp_path):
    # Weights of AP1 (Academy S-2014-004, row Y of its matrix; from memory).
    luminance = 0.2722287 * 2 + 0.6740818 + 0.0536895 * 4
    red, blue = (plane((c - luminance) / luminance) for c in (2, 4))
    channels = {"Y": plane(luminance), "RY": red, "BY": blue}
    path = write(tmp_path / "sky.exr", channels, chromaticities=tuple(np.ravel(ACESCG).tolist()))
    image = read(path)
    np.testing.assert_allclose(image.pixels[3, 4], [2, 1, 4], rtol=1e-5)
    np.testing.assert_allclose(image.chromaticities, ACESCG, rtol=1e-6)


def test_subsampled_chroma_stays_in_place_and_is_linear_between(tmp_path):
    red = np.linspace(0, 1, 8, dtype=np.float32)[None].repeat(6, 0)
    path = luminance_chroma(tmp_path / "sky.exr", plane(1, shape=(12, 16)), red, 0 * red, low=(-4, 6))
    row = read(path).pixels[5, :, 0] - 1
    np.testing.assert_allclose(row, np.minimum(np.arange(16) / 2, 7) / 7, atol=1e-6)


def test_chroma_between_a_bright_and_a_dark_pixel_makes_no_negatives(tmp_path):
    red, blue = RNG.random((2, 20, 20), np.float32) * 2 - 1
    path = luminance_chroma(tmp_path / "sky.exr", plane(1, shape=(40, 40)), red, blue)
    pixels = read(path).pixels
    assert pixels[..., 0].min() >= 0
    assert pixels[..., 2].min() >= 0


def test_smooth_chroma_is_that_of_openimageio(tmp_path):
    # It reads such files through the C++ library's own conversion, if its newer reader is switched off.
    y, x = np.mgrid[0:1:64j, 0:1:64j]
    luminance = (RNG.random((128, 128)) + 0.5).astype(np.float16)
    red, blue = (0.5 * x + 0.2 * y).astype(np.float16), (0.3 - 0.4 * x).astype(np.float16)
    path = luminance_chroma(tmp_path / "sky.exr", luminance, red, blue)
    code = (
        "import sys, numpy as np, OpenImageIO as o; o.attribute('openexr:core', 0);"
        "np.save(sys.argv[2], o.ImageBuf(sys.argv[1]).get_pixels())"
    )
    subprocess.run([sys.executable, "-c", code, str(path), str(tmp_path / "theirs.npy")], check=True)
    theirs = np.load(tmp_path / "theirs.npy")
    inside = slice(30, -30)  # its filter is 27 wide, and it computes in half
    np.testing.assert_allclose(read(path).pixels[inside, inside], theirs[inside, inside], rtol=3e-3)


@pytest.mark.parametrize(
    ("low", "size"),
    [
        ((0, 0), (48, 24)), ((10, 5), (12, 6)), ((-8, -6), (20, 14)), ((40, 16), (20, 14)),
        ((-10, -10), (90, 70)), ((0, 0), (48, 12)), ((20, -3), (4, 40)), ((-2, 7), (60, 1)),
    ],
)  # fmt: skip
def test_data_window_in_every_position_is_cropped_to_the_display_window(tmp_path, low, size):
    data = RNG.random((size[1], size[0], 3), np.float32)
    box = lambda a, b: (np.array(a, "i4"), np.array(b, "i4"))  # noqa: E731
    window = box(low, (low[0] + size[0] - 1, low[1] + size[1] - 1))
    path = write(tmp_path / "sky.exr", {"RGB": data}, dataWindow=window, displayWindow=box((0, 0), (47, 23)))
    expected, there = np.zeros((24, 48, 3), np.float32), np.zeros((24, 48), bool)
    for y in range(24):  # pixel by pixel: what the definition says
        for x in range(48):
            if 0 <= x - low[0] < size[0] and 0 <= y - low[1] < size[1]:
                expected[y, x], there[y, x] = data[y - low[1], x - low[0]], True
    image = read(path)
    np.testing.assert_array_equal(image.pixels, expected)
    np.testing.assert_array_equal(~there if not there.all() else np.zeros_like(there),
                                  np.zeros_like(there) if image.uncovered is None else image.uncovered)
    assert (image.uncovered is None) == there.all()
    theirs = OpenImageIO.ImageBuf(str(path))
    np.testing.assert_array_equal(image.pixels, theirs.get_pixels(OpenImageIO.FLOAT, theirs.roi_full))
    assert (image.facts["width"], image.facts["height"]) == (48, 24)
    assert image.facts["display_window"] == [0, 0, 47, 23]


def test_windows_that_do_not_meet_are_refused(tmp_path):
    windows = {"dataWindow": (100, 0, 147, 23), "displayWindow": (0, 0, 47, 23)}
    windows = {k: (np.array(w[:2], "i4"), np.array(w[2:], "i4")) for k, w in windows.items()}
    assert "outside its display window" in message(write(tmp_path / "sky.exr", {"RGB": PIXELS}, **windows))


def test_large_display_window_counts_against_the_limit(tmp_path):
    display = (np.array([0, 0], "i4"), np.array([99999, 99999], "i4"))
    path = write(tmp_path / "sky.exr", {"RGB": PIXELS}, displayWindow=display)
    assert "100000 x 100000 is more than the limit" in message(path)


def test_display_window_of_nearly_nothing_is_refused(tmp_path):
    display = (np.array([0, 0], "i4"), np.array([48 * 64, 23], "i4"))
    path = write(tmp_path / "sky.exr", {"RGB": PIXELS}, displayWindow=display)
    assert "display window, 3073 x 24, there are 48 x 24 pixels" in message(path)


def test_values_of_all_channels_count_against_the_limit(tmp_path):
    path = write(tmp_path / "sky.exr", {f"c{i}": plane() for i in range(40)} | colours())
    assert "hold 49536 values, more than 16" in message(path, max_pixels=24 * 48)
    assert read(path, max_pixels=24 * 48 * 3).pixels.shape == (24, 48, 3)


def test_white_luminance_and_cube_attribute_are_handed_on(tmp_path):
    path = write(tmp_path / "sky.exr", {"RGB": PIXELS}, whiteLuminance=120.0, envmap=OpenEXR.ENVMAP_CUBE)
    image = read(path)
    assert image.white_luminance == image.facts["white_luminance"] == 120.0
    assert image.envmap == image.facts["envmap"] == "cube"
    plain = read(write(tmp_path / "plain.exr", {"RGB": PIXELS}))
    assert (plain.white_luminance, plain.chromaticities, plain.envmap) == (None, None, None)


@pytest.mark.parametrize(
    ("header", "words"),
    [
        ({"whiteLuminance": 0.0}, "whiteLuminance is 0 cd/m2"),
        ({"whiteLuminance": float("nan")}, "whiteLuminance is nan"),
        ({"chromaticities": (0.0,) * 8}, "span no colour space"),
        ({"chromaticities": (0.3, 0.3, 0.4, 0.4, 0.5, 0.5, 0.3, 0.3)}, "span no colour space"),
        ({"chromaticities": (0.64, 0.33, 0.3, 0.6, 0.15, 0.06, 0.9, 0.05)}, "span no colour space"),
        ({"chromaticities": (float("nan"),) * 8}, "span no colour space"),
    ],
)
def test_attributes_that_can_not_be_are_refused(tmp_path, header, words):
    assert words in message(write(tmp_path / "sky.exr", {"RGB": PIXELS}, **header))
