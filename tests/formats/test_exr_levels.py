"""Levels as OpenEXR: the documented layout, OpenImageIO as outside reader, damaged files."""

import io

import numpy as np
import OpenEXR
import OpenImageIO
import pytest

from skykiln.errors import FileError
from skykiln.formats.exr_levels import ExrLevels, read_exr_levels, write_exr_levels


def chain(pixels="half", size=8, levels=None):
    rng = np.random.default_rng(size)
    count = levels or size.bit_length()
    shapes = [(6, size >> p, size >> p, 3) for p in range(count)]
    return ExrLevels(pixels, tuple(rng.random(s, np.float32) for s in shapes), {"skykiln:probe": "{}"})


@pytest.mark.parametrize("pixels", ["half", "float"])
@pytest.mark.parametrize(("size", "levels"), [(8, 4), (16, 2), (1, 1), (12, 3)])
def test_levels_survive(pixels, size, levels):
    texture = chain(pixels, size, levels)
    read = read_exr_levels(write_exr_levels(texture), "sky")
    assert read.pixels == pixels
    assert read.metadata == texture.metadata
    for level, original in zip(read.levels, texture.levels, strict=True):
        expected = np.float32(np.float16(original)) if pixels == "half" else original
        np.testing.assert_array_equal(level, expected)


def test_faces_stand_side_by_side_in_one_part_per_level_for_openimageio(tmp_path):
    texture = chain("float")
    path = tmp_path / "sky.exr"
    path.write_bytes(write_exr_levels(texture))
    for number, level in enumerate(texture.levels):
        picture = OpenImageIO.ImageBuf(str(path), number, 0)
        assert picture.spec().get_string_attribute("oiio:subimagename") == f"level {number}"
        pixels = picture.get_pixels()
        size = level.shape[1]
        assert pixels.shape == (size, 6 * size, 3)
        for face in range(6):
            np.testing.assert_array_equal(pixels[:, face * size : (face + 1) * size], level[face])


def test_not_a_number_negative_and_infinite_values_never_reach_the_file():
    level = np.ones((6, 1, 1, 3), np.float32)
    level[:4, 0, 0, 0] = [np.nan, -1, np.inf, 1e30]
    for pixels, largest in (("half", 65504), ("float", np.finfo(np.float32).max)):
        read = read_exr_levels(write_exr_levels(ExrLevels(pixels, (level,))), "sky").levels[0]
        np.testing.assert_array_equal(read[:3, 0, 0, 0], [0, 0, largest])


def test_same_levels_give_the_same_bytes():
    assert write_exr_levels(chain()) == write_exr_levels(chain())


def test_every_truncation_is_an_error():
    data = write_exr_levels(chain("half", 4))
    for end in [*range(0, 1200, 13), *range(1200, len(data))]:
        with pytest.raises(FileError, match=r"^sky\.exr: "):
            read_exr_levels(data[:end], "sky.exr")


def test_other_pictures_are_refused():
    with pytest.raises(FileError, match="not a readable OpenEXR"):
        read_exr_levels(b"#?RADIANCE", "sky.exr")
    for shape, words in (((4, 8, 3), "no cube's levels"), ((4, 24, 3), "no level of a cube")):
        file = io.BytesIO()
        header = {"compression": OpenEXR.ZIP_COMPRESSION, "type": OpenEXR.scanlineimage}
        OpenEXR.File(header, {"RGB": np.ones(shape, np.float32)}).write(file)
        with pytest.raises(FileError, match=words):
            read_exr_levels(file.getvalue(), "sky.exr")
