"""Conventions of directions, against the specifications' own statements."""

import numpy as np
import pytest

from skykiln.light.cube_axes import SAMPLING_SIGNS, from_cube_space, to_cube_space
from skykiln.light.directions import (
    FACES,
    cube_directions,
    cube_texel_solid_angles,
    panorama_directions,
    panorama_row_solid_angles,
)


def test_face_centres_look_along_their_axes():
    centres = cube_directions(1)[:, 0, 0]
    axes = {"x": 0, "y": 1, "z": 2}
    for name, centre in zip(FACES, centres, strict=True):
        expected = np.zeros(3)
        expected[axes[name[1]]] = 1.0 if name[0] == "+" else -1.0
        np.testing.assert_allclose(centre, expected)


@pytest.mark.parametrize(
    ("face", "corner"),
    # OpenGL 4.6 core, section 8.13: direction of the texel at s = t = 0 (top left), up to length.
    [(0, (1, 1, 1)), (1, (-1, 1, -1)), (2, (-1, 1, -1)), (3, (-1, -1, 1)), (4, (-1, 1, 1)), (5, (1, 1, -1))],
)
def test_first_texel_of_each_face_lies_in_the_specified_corner(face, corner):
    first = cube_directions(64)[face, 0, 0]
    np.testing.assert_array_equal(np.sign(first), corner)


def test_cube_solid_angles_are_the_published_ones():
    # Closed form of a rectangular pyramid; values for n = 4.
    np.testing.assert_allclose(
        cube_texel_solid_angles(4)[:2, :2],
        [[0.08145558759534528, 0.1203926336063114], [0.1203926336063114, 0.2013579207903308]],
        rtol=1e-13,
    )


@pytest.mark.parametrize("size", [1, 2, 8, 64])
def test_cube_solid_angles_cover_the_sphere(size):
    assert 6 * cube_texel_solid_angles(size).sum() == pytest.approx(4 * np.pi, rel=1e-13)


def test_panorama_solid_angles_are_the_published_ones():
    rows = panorama_row_solid_angles(1024, 512)
    assert rows[0] == pytest.approx(1.1550701930889488e-07, rel=1e-9)
    assert rows[256] == pytest.approx(3.764931667394157e-05, rel=1e-9)
    assert 1024 * rows.sum() == pytest.approx(4 * np.pi, rel=1e-13)


def test_panorama_axes_are_those_of_openexr():
    # ImfEnvmap.h: top is +y, the centre looks along +z, +x lies left of the centre.
    d = panorama_directions(8, 4)
    assert d[0, :, 1].min() > 0.9
    np.testing.assert_allclose(d[1, 3] * [-1, 1, 1], d[1, 4], atol=1e-15)
    assert d[1, 3, 2] > 0.8
    assert d[1, 2, 0] > 0.3
    assert d[1, 0, 2] < -0.8


@pytest.mark.parametrize("cube_axes", SAMPLING_SIGNS)
def test_file_face_holds_what_the_renderers_vector_asks_for(cube_axes):
    world = cube_directions(4)
    file_images = to_cube_space(world, cube_axes)
    sampled_with = world  # in cube space the table direction of a texel is the sampling vector
    np.testing.assert_allclose(file_images * SAMPLING_SIGNS[cube_axes], sampled_with, atol=1e-15)
    np.testing.assert_array_equal(from_cube_space(file_images, cube_axes), world)
