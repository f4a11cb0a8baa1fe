"""Node moments against sums over finely cut pixels."""

import numpy as np
import pytest
from reference import panorama_points

from skykiln.light import node_record as p
from skykiln.light.cells import cell_moments
from skykiln.light.directions import panorama_row_solid_angles
from skykiln.light.pyramid import build_pyramid

WIDTH = 32


@pytest.fixture(autouse=True)
def pixels_stay_whole(monkeypatch):
    monkeypatch.setattr("skykiln.light.pyramid._SMALL", 0)


def z_order(j, i):
    return sum((((i >> k) & 1) << (2 * k)) | (((j >> k) & 1) << (2 * k + 1)) for k in range(12))


@pytest.fixture(scope="module")
def sky():
    return (np.random.default_rng(0).random((WIDTH // 2, WIDTH, 3)) ** 6).astype(np.float32)


def record(tree, level, j, i):
    """The stored record of the block (j, i) of a level."""
    nodes, offsets = tree.tree[4], tree.tree[5]
    across = int(((offsets[level + 1] - offsets[level]) // 2) ** 0.5)
    half, i = divmod(i, across)
    return nodes[offsets[level] + half * across**2 + z_order(j, i)]


def assert_moments(node, d, flux, mean_radiance):
    weight = (flux / mean_radiance).sum(1)
    weight /= weight.sum()
    mean = weight @ d
    off = d - mean
    square = (off**2).sum(1)
    spread = weight @ square
    covariance = np.einsum("k,kx,ky->xy", weight, off, off)
    own = flux.T @ d / flux.sum(0)[:, None]
    size = np.sqrt(spread)
    np.testing.assert_allclose(node[p.FLUX : p.FLUX + 3], flux.sum(0), rtol=1e-5)
    np.testing.assert_allclose(node[p.MEAN : p.MEAN + 3], mean, atol=1e-5 * size)
    np.testing.assert_allclose(node[p.SPREAD], spread, rtol=3e-3)
    np.testing.assert_allclose(
        node[p.COVARIANCE : p.COVARIANCE + 6],
        covariance[[0, 1, 2, 0, 0, 1], [0, 1, 2, 1, 2, 2]],
        atol=0.03 * spread,  # pixels are 0.2 rad wide: second order in that
    )
    np.testing.assert_allclose(
        node[p.LOPSIDED : p.LOPSIDED + 3], (weight * square) @ off, atol=0.06 * spread * size
    )
    np.testing.assert_allclose(node[p.FOURTH], weight @ square**2, rtol=0.05)
    np.testing.assert_allclose(
        node[p.COLOUR_SHIFT : p.COLOUR_SHIFT + 9], (own - mean).ravel(), atol=1e-5 * size
    )
    assert node[p.RADIUS] >= np.sqrt(square.max()) * 0.98


@pytest.mark.parametrize("place", [(1, 0, 0), (1, 3, 13), (1, 7, 5), (2, 2, 7), (3, 1, 0), (4, 0, 1)])
@pytest.mark.parametrize("yaw", [0.0, 0.7])
def test_moments_are_those_of_the_pixels(sky, place, yaw):
    level, j, i = place
    tree = build_pyramid(sky, yaw)
    side = tree.tree[6] << (level - 1)
    here = np.zeros_like(sky)
    block = np.s_[j * side : (j + 1) * side, i * side : (i + 1) * side]
    here[block] = sky[block]
    d, flux = panorama_points(here, 4, 4)
    turn = np.array([[np.cos(yaw), 0, np.sin(yaw)], [0, 1, 0], [-np.sin(yaw), 0, np.cos(yaw)]])
    assert_moments(record(tree, level, j, i), d @ turn.T, flux, tree.mean)


@pytest.mark.parametrize(("level", "j", "i"), [(0, 3, 9), (0, 13, 30), (-1, 12, 45), (-3, 60, 200)])
def test_single_pixels_and_their_parts_are_patches_of_constant_radiance(sky, level, j, i):
    tree = build_pyramid(sky)
    parts = 1 << -level
    node = np.zeros(p.RECORD, np.float32)
    across = (WIDTH // 2) * parts
    cell = (i // across) * across**2 + z_order(j, i % across)
    cell_moments(tree.tree, level, cell, node)
    fine = np.zeros((*np.array(sky.shape[:2]) * parts, 3), np.float32)
    fine[j, i] = sky[j // parts, i // parts]
    d, flux = panorama_points(fine, 1, 6)
    assert_moments(node, d, flux, tree.mean)


@pytest.mark.parametrize("shape", [(1, 2), (3, 6), (16, 32), (100, 200)])
def test_whole_flux_reaches_the_top(shape):
    sky = np.random.default_rng(1).random((*shape, 3)).astype(np.float32)
    tree = build_pyramid(sky)
    flux = np.einsum("jic,j->c", sky.astype(float), panorama_row_solid_angles(shape[1], shape[0]))
    above = flux - 4 * np.pi * sky.min(axis=(0, 1))
    np.testing.assert_allclose(tree.tree[4][-2:, p.FLUX : p.FLUX + 3].sum(0), above, rtol=1e-5)
    np.testing.assert_allclose(tree.mean * 4 * np.pi, flux, rtol=1e-6)


@pytest.mark.parametrize("width", [128, 100])
def test_blocks_made_many_at_a_time_equal_blocks_made_alone(width):
    sky = (np.random.default_rng(3).random((width // 2, width, 3)) ** 6).astype(np.float32)
    sky[5:9, 3:30] = 0
    tree = build_pyramid(sky, 0.3).tree
    alone = np.zeros((int(tree[5][2]), p.RECORD), np.float32)
    for cell, node in enumerate(alone):
        cell_moments(tree, 1, cell, node)
    stored = tree[4][: len(alone)]
    scale = np.abs(alone).max(axis=0)
    assert scale.min() > 0
    np.testing.assert_array_less(np.abs(stored - alone).max(axis=0) / scale, 3e-5)


def test_black_nodes_carry_nothing():
    sky = np.zeros((8, 16, 3), np.float32)
    sky[2, 1] = 1.0
    nodes = build_pyramid(sky).tree[4]
    assert np.count_nonzero(nodes[:, p.FLUX]) == 3
    assert np.all(np.isfinite(nodes))


def test_small_pixels_are_cut_in_four_of_the_same_sky(monkeypatch, sky):
    whole = build_pyramid(sky)
    monkeypatch.undo()
    cut = build_pyramid(sky)
    assert cut.tree[0].shape == (WIDTH, 2 * WIDTH, 3)
    np.testing.assert_allclose(cut.mean, whole.mean, rtol=1e-6)
    top = np.s_[-2:, : p.THIRD]  # the two halves of the sphere
    np.testing.assert_allclose(cut.tree[4][top], whole.tree[4][top], rtol=0.03, atol=1e-3)
