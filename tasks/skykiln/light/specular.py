"""The specular filter by hierarchical quadrature: deterministic, noise-free, to a stated tolerance.

    P(n) = (1/N) sum over nodes of F (mean of K over the node)

with a node's flux F (`pyramid`), the lobe's kernel K and its integral N (`ggx`), the mean by moments
(`lobe_sums`). The mean direction leaves no first-order error: a tiny sun stands exactly where it is.

Groups of tiles, and then each tile of output texels, walk the pyramid once and share lists of nodes
(`walk`). How exact a node must be follows from the smallest result expected in the tile: far from the
lobe, where the kernel is small, large parts of the sky will do; a sun is followed down to its pixels.

Conventions: `directions`. Source: hierarchical summation after Barnes and Hut 1986.
"""

import math

import numba
import numpy as np

from skykiln.jit import formula, parallel
from skykiln.light.directions import FACE_AXES
from skykiln.light.ggx import ggx_norm
from skykiln.light.lobe_grid import KINK_ERROR, interpolated, lobe_grid, texel_grid
from skykiln.light.lobe_sums import ENTRY, append, sum_above, sum_across, sum_coloured
from skykiln.light.node_record import FLUX, RADIUS, RECORD, SPREAD
from skykiln.light.walk import (
    ACROSS,
    BATCH,
    COLOURED,
    DROP,
    OPEN,
    STACK,
    fetch,
    judge,
    lower_bounds,
    pop_batch,
    push_quarters,
    push_roots,
)

_BLOCK = 256  # entries of a list that are summed at a time: they fit the nearest cache
_DEFERRED = 8192  # nodes that a group may leave to its tiles
_ERRORS_PER_TEXEL = 2.0  # how many of the largest errors add up, as calibrated by the error tests
_ROUGH = 0.2  # relative error of the first look at a group
_SPARSE_TILE = 8  # points along an edge of a tile of a sparse grid
_KINK_PARTS = 0.4  # allowed for interpolating kinks
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
    if grid.sparse and kinks * KINK_ERROR * grid.step <= _KINK_PARTS:
        sums = interpolated(sums, grid, face_size)
    elif grid.sparse:
        sums, _ = _sums(pyramid, texel_grid(face_size), alpha, tolerance, norm)
    return np.maximum(sums * np.float32(1.0 / norm), 0) + pyramid.base


def _sums(pyramid, grid, alpha, tolerance, norm):
    """The sums over all nodes at a grid's points, (6, n, n, 3) float32, and how strong a kink they hold, in
    parts per radian: what the lights that cross one horizon weigh."""
    count = len(grid.at)
    tile = _SPARSE_TILE if grid.sparse else _tile_edge(count, grid.step, alpha)
    group = _group_edge(count, grid.step, tile, alpha)
    sums, kinks = _sum_groups(
        pyramid.tree, FACE_AXES, grid.at, grid.step, tile, group, float(alpha), tolerance / _ERRORS_PER_TEXEL,
        norm * pyramid.base, norm * _DARK * pyramid.mean.max(),
    )  # fmt: skip
    return sums, kinks.max()


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
        kinks[g] = _sum_group(tree, texels, step, tile, alpha, part, base, floor, target)
    return result, kinks


@formula
def _sum_group(tree, texels, step, tile, alpha, part, base, floor, target):
    """All points of a group: one walk for what its tiles share, then one per tile for the rest. Returns
    the strongest kink."""
    b, a2 = 1.0 - alpha * alpha, 2.0 * alpha * alpha
    across, area = target.shape[1] // tile, tile * tile
    count = texels.shape[0] // area
    sums = np.zeros((texels.shape[0], 3), np.float32)
    centre = np.empty(3)
    radius = _bounds(texels, centre)
    per_part = np.empty((count + 1, 3))
    _tile_limits(tree, texels, tile, centre, radius, b, a2, per_part)
    for c in range(3):
        for t in range(count):
            per_part[t, c] = 1.0 / (part * max(per_part[t, c] + base[c], floor))
        per_part[count, c] = per_part[:count, c].max()
    levels, deferred = np.empty(_DEFERRED, np.int32), np.empty(_DEFERRED, np.int64)
    none_level, none = np.empty(0, np.int32), np.empty(0, np.int64)
    roots_level, roots = np.empty(2, np.int32), np.empty(2, np.int64)
    push_roots(tree, roots_level, roots)
    space = _workspace()
    shared_flux, own_flux = np.zeros(3), np.zeros(3)
    left = _sum_nodes(
        tree, texels, centre, radius, b, a2, per_part[count],
        roots_level, roots, levels, deferred, space, sums, step, shared_flux,
    )  # fmt: skip
    kink = 0.0
    for t in range(count):
        own, own_sums = texels[t * area : t * area + area], sums[t * area : t * area + area]
        radius = _bounds(own, centre)
        own_flux[:] = shared_flux
        _sum_nodes(
            tree, own, centre, radius, b, a2, per_part[t],
            levels[:left], deferred[:left], none_level, none, space, own_sums, step, own_flux,
        )  # fmt: skip
        for c in range(3):
            kink = max(kink, own_flux[c] * per_part[t, c] / ((b + a2) * (b + a2)))  # K'(0) = 1/A^2
        for k in range(area):
            target[t // across * tile + k // tile, t % across * tile + k % tile] = own_sums[k]
    return kink


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


@formula
def _bounds(texels, centre):
    """Mean direction of some texels (into `centre`), and the largest distance from it."""
    centre[:] = 0.0
    for k in range(texels.shape[0]):
        for x in range(3):
            centre[x] += texels[k, x]
    centre /= math.sqrt(centre[0] ** 2 + centre[1] ** 2 + centre[2] ** 2)
    largest = 0.0
    for k in range(texels.shape[0]):
        square = 0.0
        for x in range(3):
            square += (texels[k, x] - centre[x]) ** 2
        largest = max(largest, square)
    return math.sqrt(largest)


@formula
def _tile_limits(tree, texels, tile, centre, radius, b, a2, limits):
    """The smallest sums expected in each tile, from its corners and its middle, into limits (tiles, 3)."""
    area, last = tile * tile, tile - 1
    count = texels.shape[0] // area
    corners = np.array([0, last, tile * last, tile * last + last, tile // 2 * tile + tile // 2])
    probes = np.empty((3, 5 * count), np.float32)
    for p in range(5 * count):
        for x in range(3):
            probes[x, p] = texels[p // 5 * area + corners[p % 5], x]
    sums = np.zeros((3, 5 * count), np.float32)
    lower_bounds(tree, probes, centre, radius, b, a2, _ROUGH, sums)
    for t in range(count):
        for c in range(3):
            limits[t, c] = 0.7 * sums[c, 5 * t : 5 * t + 5].min()


@formula
def _workspace():
    """What a walk needs besides its result: stack, batch, and the lists of entries."""
    return (
        np.empty(STACK, np.int32), np.empty(STACK, np.int64),
        np.empty(BATCH, np.int64), np.empty(BATCH, np.int64), np.empty(BATCH, np.int32),
        np.empty((BATCH, RECORD), np.float32),
        np.empty((ENTRY, _BLOCK), np.float32), np.empty((ENTRY, _BLOCK), np.float32),
        np.empty((ENTRY, _BLOCK), np.float32),
    )  # fmt: skip


@formula
def _sum_nodes(tree, texels, centre, radius, b, a2, per_part,
               seed_levels, seeds, deferred_levels, deferred, space, sums, step, kinked_flux):  # fmt: skip
    """Walks down from the seeds and sums what is taken into sums (texels, 3).

    A node to be opened that is smaller than the texels' group is left to its tiles while `deferred` has
    room. Returns how many were. The flux of what may stand across a horizon is added to `kinked_flux`, of
    nodes wider than a step in part: over an even stretch the errors of interpolating kinks cancel.
    """
    stack_level, stack_node, batch, rows, verdicts, scratch, above, coloured, kinked = space
    n_above, n_coloured, n_kinked = 0, 0, 0
    left, used, top = 0, 0, 0
    while used < seeds.shape[0] or top > 0:
        while top < BATCH and used < seeds.shape[0] and (top == 0 or seed_levels[used] == stack_level[0]):
            stack_level[top], stack_node[top] = seed_levels[used], seeds[used]
            top, used = top + 1, used + 1
        level, count, top = pop_batch(stack_level, stack_node, top, batch)
        records = fetch(tree, level, batch, count, scratch, rows)
        judge(records, rows, count, centre, radius, b, a2, per_part, verdicts)
        for e in range(count):
            verdict, node = verdicts[e] & 3, records[rows[e]]
            if verdict == OPEN:
                if left < deferred.shape[0] and (level <= 0 or node[RADIUS] < 1.2 * radius):
                    deferred_levels[left], deferred[left] = level, batch[e]
                    left += 1
                else:
                    top = push_quarters(stack_level, stack_node, top, level, batch[e])
            elif verdict == DROP:
                continue
            elif verdicts[e] & ACROSS:
                n_kinked = append(kinked, n_kinked, node, True)
                narrow = min(1.0, step / (2.0 * math.sqrt(max(node[SPREAD], np.float32(1e-20)))))
                for c in range(3):
                    kinked_flux[c] += narrow * node[FLUX + c]
                if n_kinked == _BLOCK:
                    sum_across(kinked, n_kinked, texels, b, a2, sums)
                    n_kinked = 0
            elif verdict == COLOURED:
                n_coloured = append(coloured, n_coloured, node, True)
                if n_coloured == _BLOCK:
                    sum_coloured(coloured, n_coloured, texels, b, a2, sums)
                    n_coloured = 0
            else:
                n_above = append(above, n_above, node, False)
                if n_above == _BLOCK:
                    sum_above(above, n_above, texels, b, a2, sums)
                    n_above = 0
    sum_above(above, n_above, texels, b, a2, sums)
    sum_coloured(coloured, n_coloured, texels, b, a2, sums)
    sum_across(kinked, n_kinked, texels, b, a2, sums)
    return left
