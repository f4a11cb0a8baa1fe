"""The tree of a panorama: fluxes, caps and drawn directions."""

import numpy as np
import pytest
from panorama_reference import many_lamps, pixel_points, small_sun
from scipy import stats

from skykiln.light.directions import panorama_row_solid_angles
from skykiln.light.source_tree import pixel_at, source_samples, source_tree


def noise(height, width):
    return np.random.default_rng(2).random((height, width, 3)).astype(np.float32)


@pytest.mark.parametrize("shape", [(1, 1), (4, 8), (7, 13), (32, 64)])
def test_every_level_holds_the_whole_flux(shape):
    panorama = noise(*shape)
    tree = source_tree(panorama)
    whole = np.einsum("h,hwc->c", panorama_row_solid_angles(shape[1], shape[0]), panorama)
    for level in range(1, len(tree.offsets)):
        rows, columns = tree.shapes[level]
        nodes = tree.flux[tree.offsets[level] :][: rows * columns]
        np.testing.assert_allclose(nodes[:, :3].sum(axis=0), whole, rtol=1e-5)
        np.testing.assert_allclose(nodes[:, 3], nodes[:, :3].sum(axis=1), rtol=1e-5)


@pytest.mark.parametrize("shape", [(4, 8), (7, 13), (16, 32)])
def test_caps_hold_their_nodes(shape):
    tree = source_tree(noise(*shape))
    points = pixel_points(*shape, 5)[0].reshape(shape[0], 5, shape[1], 5, 3)
    for level, (rows, columns) in enumerate(tree.shapes):
        for j in range(rows):
            for i in range(columns):
                x, z = tree.lines[level, j, 1] * tree.turns[level, i]
                middle = np.array([x, tree.lines[level, j, 0], z])
                part = points[j << level : (j + 1) << level, :, i << level : (i + 1) << level]
                assert (part @ middle).min() >= tree.lines[level, j, 2] - 1e-12


def test_shares_are_the_largest_of_any_pixel():
    panorama = np.ones((2, 4, 3), dtype=np.float32)
    panorama[0, 1] = [0, 0, 5]
    panorama[1, 3] = 0
    tree = source_tree(panorama)
    np.testing.assert_allclose(tree.shares[0], [1 / 3, 1 / 3, 1], rtol=1e-6)
    np.testing.assert_allclose(tree.shares[1], 1 / 3, rtol=1e-6)


@pytest.mark.parametrize("panorama", [many_lamps(16), small_sun(16), noise(7, 13)])
def test_drawn_pixels_follow_brightness(panorama):
    # Chi-square test of samples against densities: Subr and Arvo 2007.
    tree = source_tree(panorama)
    height, width, _ = panorama.shape
    count = 100_000
    directions, densities = source_samples(tree, count, 9)
    places = np.array([pixel_at(tree, *d) for d in directions])
    found = np.bincount(places[:, 0] * width + places[:, 1], minlength=height * width)
    solid_angles = np.repeat(panorama_row_solid_angles(width, height), width)
    weights = panorama.sum(axis=2).ravel() * solid_angles
    expected = count * weights / weights.sum()
    full = expected > 8
    rest = found[~full].sum(), expected[~full].sum()
    statistic = ((found[full] - expected[full]) ** 2 / expected[full]).sum()
    if rest[1] > 8:
        statistic += (rest[0] - rest[1]) ** 2 / rest[1]
    assert stats.chi2.sf(statistic, full.sum() - (rest[1] <= 8)) > 1e-3
    np.testing.assert_allclose(
        densities, (weights / weights.sum() / solid_angles)[places[:, 0] * width + places[:, 1]], rtol=1e-5
    )


def test_directions_are_even_inside_a_pixel():
    panorama = np.zeros((4, 8, 3), dtype=np.float32)
    panorama[1, 2] = [1, 2, 3]
    directions, _ = source_samples(source_tree(panorama), 20_000, 4)
    np.testing.assert_allclose(np.linalg.norm(directions, axis=1), 1, rtol=1e-7)
    y = directions[:, 1] / np.sin(np.pi / 4)
    longitude = (np.pi - np.arctan2(directions[:, 0], directions[:, 2])) / (2 * np.pi) * 8 - 2
    for values in (y, longitude):
        assert stats.kstest(values, "uniform").pvalue > 1e-3


def test_brightness_over_density_has_no_variance():
    panorama = many_lamps(16)
    tree = source_tree(panorama)
    directions, densities = source_samples(tree, 1000, 3)
    values = np.array([panorama[pixel_at(tree, *d)].sum() for d in directions]) / densities
    np.testing.assert_allclose(values, tree.flux[-1, 3], rtol=1e-5)
