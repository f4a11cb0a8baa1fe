"""The specular filter by hierarchical quadrature: deterministic, noise-free, to a stated tolerance.

    P(n) = (1/N) sum over nodes of F (mean of K over the node)

with a node's flux F (`pyramid`), the lobe's kernel K and its integral N (`ggx`), the mean by moments
(`lobe_sums`). The mean direction leaves no first-order error: a tiny sun stands exactly where it is.

Conventions: `directions`. Source: hierarchical summation after Barnes and Hut 1986.
"""

import math

import numba
import numpy as np

from skykiln.jit import formula, parallel
from skykiln.light.directions import FACE_AXES
from skykiln.light.ggx import ggx_norm
from skykiln.light.group_sums import sum_group
from skykiln.light.lobe_grid import KINK_ERROR, interpolated, lobe_grid, texel_grid

_ERRORS_PER_TEXEL = 2.0  # how many of the largest errors add up, as calibrated by the error tests
_SPARSE_TILE = 8  # points along an edge of a tile of a sparse grid
_KINK_SHARE = 0.2  # of the tolerance, for interpolating kinks
_DARK = 1e-3  # errors count against at least this share of the mean radiance


def filter_level(pyramid, face_size, alpha, tolerance):
    """The environment filtered by the GGX lobe, at texel centres.

    Parameters
    ----------
    pyramid : Pyramid of the source panorama.
    face_size : texels along an edge of the result, a power of two.
    alpha : GGX alpha, 0 < alpha <= 1.
    tolerance : largest relative error per channel, where results below 1e-3 of the mean radiance of the
        brightest channel count as that.

    Returns
    -------
    (6, face_size, face_size, 3) float32, radiance, never negative.
    """
    norm = ggx_norm(alpha)
    grid = lobe_grid(face_size, alpha, tolerance, _SPARSE_TILE)
    sums, kinks = _sums(pyramid, grid, alpha, tolerance, norm)
    if grid.sparse and kinks * KINK_ERROR * grid.step <= _KINK_SHARE * tolerance:
        sums = interpolated(sums, grid, face_size)
    elif grid.sparse:
        sums, _ = _sums(pyramid, texel_grid(face_size), alpha, tolerance, norm)
    return np.maximum(sums * np.float32(1.0 / norm), 0) + pyramid.base


def _sums(pyramid, grid, alpha, tolerance, norm):
    """The sums over all nodes at a grid's points, (6, n, n, 3) float32, and how strong a kink they hold: what
    the lights that cross one horizon weigh, as a part of the smallest sum, per radian."""
    count = len(grid.at)
    tile = _SPARSE_TILE if grid.sparse else _tile_edge(count, grid.step, alpha)
    group = _group_edge(count, grid.step, tile, alpha)
    sums, kinks = _sum_groups(
        pyramid.tree, FACE_AXES, grid.at, grid.step, tile, group, float(alpha), _part(tolerance),
        norm * pyramid.base, norm * _DARK * pyramid.mean.max(),
    )  # fmt: skip
    return sums, kinks.max() * _part(tolerance)


def _part(tolerance):
    """The error allowed for one node. On smooth skies the smaller nodes are, the more alike are their errors,
    and add up."""
    return tolerance / _ERRORS_PER_TEXEL * min(1.0, (tolerance / 0.01) ** 0.45)


def _tile_edge(count, step, alpha):
    """A tile about as wide as the lobe, at most 8 points and 0.3 rad."""
    widest = min(3.0 * alpha, 0.3)
    edge = 1
    while edge < 8 and 2 * edge <= count and 2 * edge * step < widest:
        edge *= 2
    return edge


def _group_edge(count, step, tile, alpha):
    """Up to four tiles, but not many lobes wide: a group looks at all it covers as finely as a lobe."""
    edge = tile
    while edge < 4 * tile and 2 * edge <= count and 2 * edge * step < 12.0 * alpha:
        edge *= 2
    return edge


@parallel
def _sum_groups(tree, face_axes, at, step, tile, group, alpha, part, base, floor):
    count = at.shape[0]
    across = (count + group - 1) // group
    result = np.empty((6, count, count, 3), np.float32)
    kinks = np.empty(6 * across * across)
    for g in numba.prange(6 * across * across):
        face = np.int64(g) // (across * across)
        j0 = np.int64(g) // across % across * group
        i0 = np.int64(g) % across * group
        down, along = at[j0 : min(count, j0 + group)], at[i0 : min(count, i0 + group)]
        texels = _points_by_tiles(face_axes[face], along, down, tile)
        target = result[face, j0 : j0 + down.shape[0], i0 : i0 + along.shape[0]]
        kinks[g] = sum_group(tree, texels, step, tile, alpha, part, base, floor, target)
    return result, kinks


@formula
def _points_by_tiles(axes, along, down, tile):
    """Directions of a group's points, tile after tile. (points, 3) float32."""
    across, area = along.shape[0] // tile, tile * tile
    points = np.empty((along.shape[0] * down.shape[0], 3), np.float32)
    for k in range(points.shape[0]):
        t, inside = k // area, k % area
        a, b = along[t % across * tile + inside % tile], down[t // across * tile + inside // tile]
        h = math.sqrt(1.0 + a * a + b * b)
        for x in range(3):
            points[k, x] = (axes[0, x] + a * axes[1, x] + b * axes[2, x]) / h
    return points
