"""Node moments against sums over finely cut texels."""

import numpy as np
import pytest

from skykiln.light import pyramid as p
from skykiln.light.directions import cube_directions, cube_texel_solid_angles

SIZE, PARTS = 8, 32


def z_order(j, i):
    return sum((((i >> k) & 1) << (2 * k)) | (((j >> k) & 1) << (2 * k + 1)) for k in range(12))


@pytest.fixture(scope="module")
def sky():
    return (np.random.default_rng(0).random((6, SIZE, SIZE, 3)) ** 6).astype(np.float32)


def summed(sky, level, face, j, i):
    d = cube_directions(SIZE * PARTS)
    flux = np.repeat(np.repeat(sky, PARTS, 1), PARTS, 2) * cube_texel_solid_angles(SIZE * PARTS)[..., None]
    side = PARTS << level
    here = np.s_[face, j * side : (j + 1) * side, i * side : (i + 1) * side]
    return d[here].reshape(-1, 3), flux[here].reshape(-1, 3)


@pytest.mark.parametrize("place", [(1, 0, 0, 0), (1, 2, 3, 1), (2, 3, 1, 0), (2, 5, 0, 1), (3, 1, 0, 0)])
def test_moments_are_those_of_the_texels(sky, place):
    level, face, j, i = place
    tree = p.build_pyramid(sky)
    d, flux = summed(sky, *place)
    weight = (flux / tree.mean).sum(1)
    weight /= weight.sum()
    mean = weight @ d
    off = d - mean
    square = (off**2).sum(1)
    covariance = np.einsum("k,kx,ky->xy", weight, off, off)
    across = SIZE >> level
    node = tree.nodes[tree.offsets[level] + face * across**2 + z_order(j, i)]
    spread = weight @ square
    np.testing.assert_allclose(node[p.FLUX : p.FLUX + 3], flux.sum(0), rtol=2e-4)
    np.testing.assert_allclose(node[p.MEAN : p.MEAN + 3], mean, atol=0.002 * np.sqrt(spread))
    np.testing.assert_allclose(node[p.SPREAD], spread, rtol=5e-3)
    np.testing.assert_allclose(
        node[p.COVARIANCE : p.COVARIANCE + 6],
        covariance[[0, 1, 2, 0, 0, 1], [0, 1, 2, 1, 2, 2]],
        atol=0.01 * spread,
    )
    np.testing.assert_allclose(node[p.FOURTH], weight @ square**2, rtol=0.2)
    own = flux.T @ d / flux.sum(0)[:, None]
    np.testing.assert_allclose(
        node[p.COLOUR_SHIFT : p.COLOUR_SHIFT + 9], (own - mean).ravel(), atol=0.004 * np.sqrt(spread)
    )
    assert node[p.RADIUS] >= np.sqrt(square.max()) * 0.99


def test_whole_flux_reaches_the_top(sky):
    tree = p.build_pyramid(sky)
    flux = np.einsum("fjic,ji->c", sky.astype(np.float64), cube_texel_solid_angles(SIZE))
    top = tree.nodes[tree.offsets[-2] :, p.FLUX : p.FLUX + 3].sum(0)
    np.testing.assert_allclose(top, flux, rtol=3e-4)


def test_black_nodes_carry_nothing():
    sky = np.zeros((6, 4, 4, 3), np.float32)
    sky[2, 1, 1] = 1.0
    nodes = p.build_pyramid(sky).nodes
    assert np.count_nonzero(nodes[:, p.FLUX]) == 2
    assert np.all(np.isfinite(nodes))


def test_single_texel_faces_have_no_stored_level():
    assert len(p.build_pyramid(np.ones((6, 1, 1, 3), np.float32)).nodes) == 0
