"""Sampling a cube map on the CPU: centres, edges, corners, levels."""

import numpy as np
import pytest

from skykiln.light.directions import FACE_AXES, cube_directions
from skykiln.light.sample_cube import face_coordinates, sample_cube, sample_level


def random_faces(size, seed=0):
    return np.random.default_rng(seed).random((6, size, size, 3))


def random_directions(count, seed=0):
    return np.random.default_rng(seed).normal(size=(count, 3))


@pytest.mark.parametrize("size", [1, 2, 8, 32])
def test_texel_centres_give_the_texels(size):
    faces = random_faces(size)
    values = sample_level(faces, cube_directions(size).reshape(-1, 3))
    np.testing.assert_allclose(values, faces.reshape(-1, 3), atol=1e-12)


def test_coordinates_undo_the_table_of_faces():
    rng = np.random.default_rng(1)
    face, s, t = rng.integers(0, 6, 500), rng.random(500), rng.random(500)
    axes = FACE_AXES[face]
    directions = axes[:, 0] + axes[:, 1] * (2 * s - 1)[:, None] + axes[:, 2] * (2 * t - 1)[:, None]
    found = face_coordinates(directions * rng.uniform(0.1, 9, (500, 1)))
    np.testing.assert_array_equal(found[0], face)
    np.testing.assert_allclose(found[1:], [s, t], atol=1e-12)


@pytest.mark.parametrize("size", [1, 2, 16])
def test_constant_stays_constant(size):
    faces = np.full((6, size, size, 3), 7.0)
    np.testing.assert_allclose(sample_level(faces, random_directions(2000)), 7, rtol=1e-12)


@pytest.mark.parametrize("size", [1, 2, 4, 16])
def test_values_are_continuous_across_edges(size):
    faces = random_faces(size)
    edge = np.random.default_rng(2).uniform(-1, 1, (300, 3))
    edge[:, 0], edge[:, 1] = 1, -1  # the edge between +x and -y
    step = np.array([0, 1e-6, 0])
    here, there = sample_level(faces, edge + step), sample_level(faces, edge - step)
    np.testing.assert_allclose(here, there, atol=1e-4)


def test_middle_of_an_edge_is_the_mean_of_the_texels_on_both_sides():
    faces = random_faces(2)
    # Between +x and +z, halfway up: texels (0, 0), (1, 0) of +x and (0, 1), (1, 1) of +z.
    value = sample_level(faces, np.array([[1.0, 0.0, 1.0]]))
    expected = (faces[0, :, 0].sum(0) + faces[4, :, 1].sum(0)) / 4
    np.testing.assert_allclose(value[0], expected, atol=1e-6)


def test_corner_is_the_mean_of_its_three_texels():
    faces = random_faces(4)
    value = sample_level(faces, np.array([[1.0, 1.0, 1.0]]) * (1 - 1e-12))
    # (1, 1, 1): top left of +x, bottom right of +y, top right of +z.
    np.testing.assert_allclose(value[0], (faces[0, 0, 0] + faces[2, 3, 3] + faces[4, 0, 3]) / 3, atol=1e-6)


def test_fractional_levels_interpolate_and_the_ends_hold():
    levels = [random_faces(4, 1), random_faces(2, 2), random_faces(1, 3)]
    d = random_directions(50)
    one, two = sample_level(levels[0], d), sample_level(levels[1], d)
    np.testing.assert_allclose(sample_cube(levels, d, 0.25), 0.75 * one + 0.25 * two)
    np.testing.assert_allclose(sample_cube(levels, d, -3), one)
    np.testing.assert_allclose(sample_cube(levels, d, 9), sample_level(levels[2], d))
    mixed = sample_cube(levels, d, np.where(np.arange(50) < 25, 0.0, 1.0))
    np.testing.assert_allclose(mixed, np.where((np.arange(50) < 25)[:, None], one, two))
