"""The split sum: limits with a closed form, and the points that pin its conventions."""

import numpy as np
import pytest

from skykiln.light.brdf import brdf_table
from skykiln.light.directions import cube_directions
from skykiln.light.split_sum import ProbeLight, lit_by_probe, table_values


def white_light(levels=3, radiance=1.0):
    chain = tuple(np.full((6, 4 >> k, 4 >> k, 3), radiance) for k in range(levels))
    return ProbeLight(chain, (0.0, 0.5, 1.0), np.full((6, 2, 2, 3), np.pi * radiance), brdf_table(32))


def unit(vectors):
    return vectors / np.linalg.norm(vectors, axis=1)[:, None]


def random_surfaces(count, seed=4):
    n, v = (unit(d) for d in np.random.default_rng(seed).normal(size=(2, count, 3)))
    return n, v * np.sign((n * v).sum(1))[:, None]


def test_white_diffuse_surface_in_a_white_furnace_disappears():
    n, v = random_surfaces(50)
    black, white = np.zeros((50, 3)), np.ones((50, 3))
    seen = lit_by_probe(white_light(radiance=7.0), n, v, white, black, np.full(50, 0.5))
    bias = table_values(white_light().table, (n * v).sum(1), np.full(50, 0.5))[:, 1:]
    np.testing.assert_allclose(seen, np.repeat(7 * (1 + bias), 3, axis=1))


def test_smooth_metal_is_the_mirror():
    light = white_light()._replace(levels=tuple(cube_directions(16 >> k) + 2 for k in range(3)))
    n, v = np.array([unit(np.array([[0.0, 1, 1]]))[0]]), np.array([[0.0, 0, 1]])
    seen = lit_by_probe(light, n, v, np.zeros((1, 3)), np.ones((1, 3)), np.zeros(1))
    np.testing.assert_allclose(seen, [[2, 3, 2]], rtol=0.02)  # what lies at +y


def test_roughness_between_two_levels_mixes_them():
    light = white_light()._replace(levels=tuple(np.full((6, 4 >> k, 4 >> k, 3), 10.0**k) for k in range(3)))
    n = v = np.array([[0.0, 0, 1]])
    seen = lit_by_probe(light, n, v, np.zeros((1, 3)), np.ones((1, 3)), np.array([0.75]))
    albedo = table_values(light.table, np.ones(1), np.array([0.75])).sum()
    assert seen[0, 0] == pytest.approx(55 * albedo)


def test_table_is_read_at_texel_centres_and_held_at_its_edge():
    table = np.arange(32.0).reshape(4, 4, 2)
    at = np.array([0.125, 0.375, 0.0, 1.0]), np.array([0.125, 0.875, 0.0, 1.0])
    np.testing.assert_allclose(table_values(table, *at), [[0, 1], [26, 27], [0, 1], [30, 31]])
    np.testing.assert_allclose(table_values(table, np.array([0.25]), np.array([0.25])), [[5, 6]])
