"""A sky filtered by any zonal lobe: hierarchical quadrature with the lobe's tables.

    P(n) = sum over nodes of F (mean of K over the node),  K as in `zonal_lobe`

Tiles of output texels walk the pyramid and take nodes whole where what the sum leaves out is small beside
the smallest result expected in the tile, as `specular` does for GGX alone with closed forms and several
times faster. Over a node whose directions have the covariance C about their mean m, c = n.l has the mean
n.m and the variance v = (n - m)^T C (n - m) + r c^2 (`lobe_sums`), and the mean of K is Taylor's series in c
to fourth order. The cosines of a node that stands across the horizon are taken as spread evenly over
c - w .. c + w, w = sqrt(3 v), and cut there: a kernel's kink needs nothing more.

Conventions: `directions`. Source: hierarchical summation after Barnes and Hut 1986.
"""

import math

import numba
import numpy as np

from skykiln.jit import formula, parallel
from skykiln.light.directions import FACE_AXES
from skykiln.light.lobe_grid import texel_grid
from skykiln.light.node_record import (
    COLOUR_SHIFT,
    COVARIANCE,
    FLUX,
    FOURTH,
    KINK,
    MEAN,
    RADIUS,
    RECORD,
    SHIFT,
    SLIM,
    SPREAD,
    SPREAD_GAP,
    THIRD,
)
from skykiln.light.walk import BATCH, STACK, fetch, has_room, pop_batch, push_quarters, push_roots

_BLOCK = 256  # entries of a list that are summed at a time: they fit the nearest cache
_ENTRY = 24  # mean 3, spread, covariance 6, h, flux 3, flux times colour shift 9, r
_H, _FLUX, _SHIFT, _R = 10, 11, 14, 23
_ERRORS_PER_TEXEL = 2.0  # how many of the largest errors add up, as calibrated by the error tests
_ROUGH = 0.2  # relative error of the first look at a tile
_DARK = 1e-3  # errors count against at least this share of the mean radiance
_WIDEST_TILE = 8

_f = np.float32


def filter_level_by(lobe, pyramid, face_size, tolerance):
    """The environment filtered by a lobe, at texel centres.

    Parameters
    ----------
    lobe : ZonalLobe
    pyramid : Pyramid of the source panorama.
    face_size : texels along an edge of the result, a power of two.
    tolerance : largest relative error per channel, where results below 1e-3 of the mean radiance of the
        brightest channel count as that.

    Returns
    -------
    (6, face_size, face_size, 3) float32, radiance, never negative.
    """
    grid = texel_grid(face_size)
    tile = _tile_edge(face_size, grid.step, lobe.width)
    part = tolerance / _ERRORS_PER_TEXEL
    sums = _sum_tiles(
        pyramid.tree, FACE_AXES, grid.at, tile, lobe.values, lobe.bounds, lobe.steepest,
        part, pyramid.base.astype(np.float64), _DARK * pyramid.mean.max(),
    )  # fmt: skip
    return np.maximum(sums, 0) + pyramid.base


def _tile_edge(face_size, step, width):
    """Texels along a tile: about six times the lobe's width, at most 8 and 0.3 rad."""
    widest = min(6.0 * width, 0.3)
    edge = 1
    while edge < _WIDEST_TILE and 2 * edge <= face_size and 2 * edge * step < widest:
        edge *= 2
    return edge


@parallel
def _sum_tiles(tree, face_axes, at, tile, values, bounds, steepest, part, base, floor):
    count = at.shape[0]
    across = count // tile
    result = np.empty((6, count, count, 3), np.float32)
    for t in numba.prange(6 * across * across):
        face = np.int64(t) // (across * across)
        j0 = np.int64(t) // across % across * tile
        i0 = np.int64(t) % across * tile
        texels = _directions(face_axes[face], at[i0 : i0 + tile], at[j0 : j0 + tile])
        sums = _sum_tile(tree, texels, values, bounds, steepest, part, base, floor)
        for k in range(tile * tile):
            result[face, j0 + k // tile, i0 + k % tile] = sums[k]
    return result


@formula
def _directions(axes, along, down):
    """Directions of the points of a tile, row by row. (points, 3) float32."""
    points = np.empty((along.shape[0] * down.shape[0], 3), np.float32)
    for k in range(points.shape[0]):
        a, b = along[k % along.shape[0]], down[k // along.shape[0]]
        h = math.sqrt(1.0 + a * a + b * b)
        for x in range(3):
            points[k, x] = (axes[0, x] + a * axes[1, x] + b * axes[2, x]) / h
    return points


@formula
def _sum_tile(tree, texels, values, bounds, steepest, part, base, floor):
    """Two walks: a rough one at the corners and the middle, which says how exact the nodes must be, and one
    for all texels. Returns (texels, 3) float32."""
    count, edge = texels.shape[0], int(math.sqrt(texels.shape[0]))
    corners = np.array([0, edge - 1, count - edge, count - 1, edge // 2 * edge + edge // 2])
    centre, per_part = np.empty(3), np.empty(3)
    radius, runs = _bounds(texels, centre), _runs(bounds)
    points, rough, sums = texels[corners], _ROUGH, np.zeros((5, 3), np.float32)
    for c in range(3):
        per_part[c] = 1.0 / (0.1 * _ROUGH * max(base[c], floor))
    for look in range(2):  # one call: it compiles but once
        if look == 1:
            for c in range(3):
                smallest = 0.7 * max(sums[:, c].min(), _f(0.0)) + base[c]
                per_part[c] = 1.0 / (part * max(smallest, floor))
            points, rough, sums = texels, 0.0, np.zeros((count, 3), np.float32)
        _walk(tree, points, centre, radius, values, bounds, runs, steepest, per_part, rough, sums)
    return sums


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
def _runs(bounds):
    """Which level of the bounds serves a stretch of so many bins: the largest power of two in it."""
    runs = np.zeros(bounds.shape[1] + 1, np.int64)
    for length in range(2, runs.shape[0]):
        runs[length] = runs[length // 2] + 1
    return runs


@formula
def _walk(tree, texels, centre, radius, values, bounds, runs, steepest, per_part, rough, sums):
    """Adds all nodes to sums (texels, 3). A node is taken whole when its error is at most one part, or
    `rough` of its own largest contribution."""
    stack_level, stack_node = np.empty(STACK, np.int32), np.empty(STACK, np.int64)
    batch, rows = np.empty(BATCH, np.int64), np.empty(BATCH, np.int32)
    scratch = np.empty((BATCH, RECORD), np.float32)
    entries, filled = np.empty((_ENTRY, _BLOCK), np.float32), 0
    top = push_roots(tree, stack_level, stack_node)
    while top > 0:
        level, count, top = pop_batch(stack_level, stack_node, top, batch)
        records = fetch(tree, level, batch, count, scratch, rows)
        for e in range(count):
            node = records[rows[e]]
            error, largest = _error(node, centre, radius, bounds, runs, steepest, per_part)
            if largest <= 0.0:
                continue
            if error > max(1.0, rough * largest) and has_room(top):
                top = push_quarters(stack_level, stack_node, top, level, batch[e])
                continue
            filled = _append(entries, filled, node)
            if filled == _BLOCK:
                _sum_entries(entries, filled, texels, values, sums)
                filled = 0
    _sum_entries(entries, filled, texels, values, sums)


@formula
def _error(node, centre, radius, bounds, runs, steepest, per_part):
    """(error of taking a node whole, the most that it can add) in parts, for any texel of a tile."""
    strength = max(node[FLUX] * per_part[0], max(node[FLUX + 1] * per_part[1], node[FLUX + 2] * per_part[2]))
    height = centre[0] * node[MEAN] + centre[1] * node[MEAN + 1] + centre[2] * node[MEAN + 2]
    reach = radius + node[RADIUS]
    if strength <= 0.0 or height <= -reach:
        return 0.0, 0.0
    dx, dy, dz = centre[0] - node[MEAN], centre[1] - node[MEAN + 1], centre[2] - node[MEAN + 2]
    distance = math.sqrt(dx * dx + dy * dy + dz * dz)
    bins = bounds.shape[1]
    first = min(int(math.sqrt(max(distance - reach, 0.0) * math.sqrt(0.5)) * bins), bins - 1)
    last = min(int(math.sqrt((distance + reach) * math.sqrt(0.5)) * bins), bins - 1)
    run = runs[last - first + 1]
    left, right = bounds[run, first], bounds[run, last + 1 - (1 << run)]
    largest = max(left[0], right[0])
    second = max(left[1], right[1]) * (2.0 * node[SPREAD_GAP] + 4.0 * node[SHIFT] * node[SHIFT])
    third, fourth = max(left[2], right[2]) * node[THIRD], max(left[3], right[3]) * node[FOURTH]
    error = min(second + third + fourth, largest)
    if height < 2.0 * reach:
        error += steepest * node[KINK]
    return strength * node[SLIM] * error, strength * largest


@formula
def _append(entries, filled, node):
    """Adds a node's entry to a list (_ENTRY, capacity); returns the new length."""
    spread = node[SPREAD]
    squares, crossed = _f(0.0), _f(0.0)
    for x in range(3):
        entries[x, filled] = node[MEAN + x]
        entries[4 + x, filled] = node[COVARIANCE + x]
        entries[7 + x, filled] = _f(2.0) * node[COVARIANCE + 3 + x]
        entries[_FLUX + x, filled] = node[FLUX + x]
        squares += node[COVARIANCE + x] * node[COVARIANCE + x]
        crossed += node[COVARIANCE + 3 + x] * node[COVARIANCE + 3 + x]
        for c in range(3):
            entries[_SHIFT + 3 * c + x, filled] = node[FLUX + c] * node[COLOUR_SHIFT + 3 * c + x]
    entries[3, filled] = spread
    even = spread * spread + _f(2.0) * squares + _f(4.0) * crossed
    entries[_H, filled] = _f(3.0) * node[FOURTH] / max(even, _f(1e-36))
    entries[_R, filled] = _f(0.25) * max(node[FOURTH] - spread * spread, _f(0.0))
    return filled + 1


@formula
def _sum_entries(entries, filled, texels, values, sums):
    """Adds the first `filled` entries to sums (texels, 3)."""
    half, one, two, three, zero, tiny = _f(0.5), _f(1.0), _f(2.0), _f(3.0), _f(0.0), _f(1e-20)
    third, six = _f(1.0 / 3.0), _f(6.0)
    bins, last = _f(values.shape[0]), np.int32(values.shape[0] - 1)
    for k in range(texels.shape[0]):
        nx, ny, nz = texels[k, 0], texels[k, 1], texels[k, 2]
        red, green, blue = zero, zero, zero
        for e in range(filled):
            dx, dy, dz = nx - entries[0, e], ny - entries[1, e], nz - entries[2, e]
            xx, yy, zz = dx * dx, dy * dy, dz * dz
            q = half * (xx + yy + zz + entries[3, e])
            c = one - q
            v = (
                entries[4, e] * xx + entries[5, e] * yy + entries[6, e] * zz
                + entries[7, e] * dx * dy + entries[8, e] * dx * dz + entries[9, e] * dy * dz
                + entries[_R, e] * c * c
            )  # fmt: skip
            # The part of c - w .. c + w that is above the horizon.
            w = math.sqrt(three * max(v, tiny))
            below = min(max(w - c, zero), two * w)
            share = one - half * below / w
            reach = w - half * below
            q = max(q - half * below, tiny)
            at = np.uint32(min(np.int32(math.sqrt(math.sqrt(q)) * bins), last))
            inverse = values[at, 5]
            x = min(one - q * inverse, one)
            y = min(reach * reach * third * inverse * inverse, one)
            xx = x * x
            first, second, fourth = values[at, 1], values[at, 2], values[at, 4]
            value = share * (
                values[at, 0] + first * x + second * (xx + y) + values[at, 3] * x * (xx + three * y)
                + fourth * (xx * xx + six * xx * y + entries[_H, e] * y * y)
            )  # fmt: skip
            slope = share * inverse * (
                first + two * second * x + three * values[at, 3] * (xx + y)
            )  # fmt: skip
            red += value * entries[11, e] + slope * (
                nx * entries[14, e] + ny * entries[15, e] + nz * entries[16, e]
            )  # fmt: skip
            green += value * entries[12, e] + slope * (
                nx * entries[17, e] + ny * entries[18, e] + nz * entries[19, e]
            )  # fmt: skip
            blue += value * entries[13, e] + slope * (
                nx * entries[20, e] + ny * entries[21, e] + nz * entries[22, e]
            )  # fmt: skip
        sums[k, 0] += red
        sums[k, 1] += green
        sums[k, 2] += blue
