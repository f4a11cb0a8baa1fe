"""KTX2 cube maps as sources."""

import json

import numpy as np
import pytest

from skykiln.errors import FileError
from skykiln.formats.cube_textures import ABOUT_KEY, AXES, read_cube_texture
from skykiln.formats.dfd import PRIMARIES
from skykiln.formats.image import ReadOptions
from skykiln.formats.ktx2 import Ktx2Texture, write_ktx2
from skykiln.light.colour import SPACES
from skykiln.light.cube_axes import CUBE_AXES
from skykiln.stages import packing

RNG = np.random.default_rng(1)
LEVELS = tuple(np.float32(np.float16(RNG.random((6, n, n, 3)))) for n in (8, 4, 2, 1))
ABOUT = {"content": "specular", "storage_ev": 3, "name": "quay", "cube_axes": "negate_z", "units": "cd/m2"}


def ktx2(path, about=ABOUT, pixels="rgba16f", levels=LEVELS, compress=0, **options):
    about = json.dumps(about) if isinstance(about, dict) else about
    metadata = {} if about is None else {ABOUT_KEY: about}
    path.write_bytes(write_ktx2(Ktx2Texture(pixels, levels, metadata, **options), compress))
    return path


def message(path, **options):
    with pytest.raises(FileError) as error:
        read_cube_texture(path, ReadOptions(**options))
    assert str(error.value).startswith(f"{path}: ")
    return str(error.value)


@pytest.mark.parametrize("compress", [0, 3])
def test_largest_level_comes_back_as_radiance(tmp_path, compress):
    image = read_cube_texture(ktx2(tmp_path / "cube.ktx2", compress=compress))
    np.testing.assert_array_equal(image.pixels, LEVELS[0] * 8)
    assert image.pixels.flags.c_contiguous
    assert image.facts["cube_axes"] == "negate_z"
    assert image.facts["units"] == "cd/m2"
    assert image.facts["storage_ev"] == 3


def test_file_of_others_says_nothing_of_its_axes(tmp_path):
    image = read_cube_texture(ktx2(tmp_path / "cube.ktx2", about=None))
    np.testing.assert_array_equal(image.pixels, LEVELS[0])
    assert image.facts["cube_axes"] is None


@pytest.mark.parametrize("pixels", ["rgb9e5", "r11g11b10f"])
def test_smaller_codings_are_read(tmp_path, pixels):
    image = read_cube_texture(ktx2(tmp_path / "cube.ktx2", pixels=pixels))
    np.testing.assert_allclose(image.pixels, LEVELS[0] * 8, rtol=0.02, atol=0.05)


@pytest.mark.parametrize("primaries", PRIMARIES)
def test_primaries_of_the_descriptor_are_handed_on(tmp_path, primaries):
    image = read_cube_texture(ktx2(tmp_path / "cube.ktx2", primaries=primaries))
    assert (image.chromaticities is None) == (primaries == "unspecified")
    if primaries in SPACES:
        assert image.chromaticities == tuple(SPACES[primaries])


def test_key_is_the_one_that_is_written():
    assert ABOUT_KEY == packing.ABOUT_KEY
    assert set(AXES) == set(CUBE_AXES)


def test_irradiance_is_refused(tmp_path):
    assert "irradiance, not radiance" in message(ktx2(tmp_path / "a.ktx2", ABOUT | {"content": "irradiance"}))


def test_table_is_refused(tmp_path):
    table = (np.ones((1, 8, 8, 2), np.float32),)
    assert "no cube map" in message(ktx2(tmp_path / "brdf.ktx2", pixels="rg16f", levels=table))


@pytest.mark.parametrize("about", [
    "{", "[1]", "null", b"\xff\xfe", "[" * 100000, '{"storage_ev": 1e9}', '{"storage_ev": -1}',
    '{"storage_ev": 500}', '{"storage_ev": "3"}', '{"cube_axes": "up"}', '{"cube_axes": [1]}',
])  # fmt: skip
def test_damaged_metadata_is_an_error(tmp_path, about):
    assert "bake it again" in message(ktx2(tmp_path / "cube.ktx2", about))


def test_size_over_the_limit_is_refused(tmp_path):
    path = ktx2(tmp_path / "cube.ktx2")
    assert "8 x 48 is more than the limit of 383 pixels" in message(path, max_pixels=383)
    assert read_cube_texture(path, ReadOptions(max_pixels=384)).pixels.shape == (6, 8, 8, 3)


@pytest.mark.parametrize("compress", [0, 3])
def test_every_truncation_is_an_error(tmp_path, compress):
    data = ktx2(tmp_path / "cube.ktx2", compress=compress).read_bytes()
    for end in range(0, len(data), 13):
        (tmp_path / "cube.ktx2").write_bytes(data[:end])
        message(tmp_path / "cube.ktx2")
