"""Seams: near 1 for a cube that fits together, far above it where a face does not."""

import numpy as np
import pytest

from skykiln.light.cube_axes import CUBE_AXES, to_cube_space
from skykiln.light.directions import cube_directions
from skykiln.light.seams import seam


def sloping_sky(size):
    """Smooth, and another one in each direction."""
    x, y, z = np.moveaxis(cube_directions(size), -1, 0)
    return (np.exp(1.5 * y + x)[..., None] * [1.0, 0.9, 0.7] + (1 + z)[..., None]).astype(np.float32)


def with_face(faces, face, image):
    changed = faces.copy()
    changed[face] = image
    return changed


@pytest.mark.parametrize("size", [2, 4, 16, 128])
def test_smooth_cube_shows_no_seam(size):
    assert seam(sloping_sky(size)) < 1.4


@pytest.mark.parametrize("size", [16, 128])
@pytest.mark.parametrize("face", range(6))
def test_one_flipped_or_turned_face_shows(size, face):
    faces = sloping_sky(size)
    for image in (faces[face, ::-1], faces[face, :, ::-1], np.rot90(faces[face])):
        assert seam(with_face(faces, face, image)) > 4


def test_exchanged_faces_show():
    faces = sloping_sky(16)
    assert seam(faces[[1, 0, 2, 3, 4, 5]]) > 4


@pytest.mark.parametrize("axes", CUBE_AXES)
def test_every_cube_space_fits_together(axes):
    assert seam(to_cube_space(sloping_sky(32), axes)) == pytest.approx(seam(sloping_sky(32)), rel=0.1)


def test_one_face_a_tenth_of_a_stop_too_bright_shows_on_a_level_sky():
    faces = np.ones((6, 8, 8, 3), np.float32)
    assert seam(faces) == pytest.approx(1)
    brighter = with_face(faces, 2, faces[2] * np.float32(2**0.1))
    assert seam(brighter) == pytest.approx((0.1 + 0.02) / 0.02, rel=0.05)


def test_black_cube_has_no_seam_and_one_texel_a_face_none_to_tell():
    assert seam(np.zeros((6, 4, 4, 3), np.float32)) == pytest.approx(1)
    assert seam(np.ones((6, 1, 1, 3), np.float32)) is None


def test_scale_of_the_light_does_not_matter():
    faces = sloping_sky(16)
    assert seam(faces * np.float32(2.0**-12)) == pytest.approx(seam(faces), rel=1e-4)
