"""A panorama as a tree of fluxes, for drawing directions from any part of it.

Level 0 are the pixels; a node of level k holds the flux (radiance x solid angle, per channel) of up to
2^k x 2^k of them. From a node one goes down to a child in proportion to the children's brightness x
solid angle, so that at the pixel the density is brightness over that of the node, per steradian; inside
the pixel it is even. Brightness is the sum of the channels rather than their luminance: a channel is
never more than all of it, where a blue lamp is fourteen times its luminance.

Source: McCool and Harwood 1997, "Probability trees"; sampling in proportion to a light's own
radiance: Pharr, Jakob and Humphreys, "Physically Based Rendering", on infinite area lights.
"""

import math
from typing import NamedTuple

import numpy as np
from numba import prange

from skykiln.jit import formula, parallel
from skykiln.light.random_numbers import next_uniform, stream


class SourceTree(NamedTuple):
    """The tree; nodes of one level lie row by row, levels one after the other from level 1."""

    pixels: np.ndarray  # (H, W, 3) float32, radiance
    heights: np.ndarray  # (H + 1,) float64, sine of latitude of the edges between rows
    flux: np.ndarray  # (nodes, 4) float32, radiance x sr of the channels, and their sum
    shares: np.ndarray  # (nodes, 3) float32, the largest share of brightness a channel has in a pixel
    offsets: np.ndarray  # (levels,) int64, first node of each level; level 0 has none
    shapes: np.ndarray  # (levels, 2) int64, rows and columns of each level
    lines: np.ndarray  # (levels, H, 4) float64: sine and cosine of latitude at a row's middle, cosine and
    # sine of the angular radius of a cap around a node's middle that holds the node
    turns: np.ndarray  # (levels, W, 2) float64: sine and cosine of longitude at a column's middle


def source_tree(panorama):
    """The tree of a panorama (H, W, 3) float32 of radiance, none of it negative."""
    height, width, _ = panorama.shape
    shapes = [(height, width)]
    while shapes[-1] != (1, 1):
        shapes.append(tuple((n + 1) // 2 for n in shapes[-1]))
    sizes = [0] + [rows * columns for rows, columns in shapes[1:]]
    offsets = np.concatenate([[0], np.cumsum(sizes)])[:-1]
    flux = np.empty((sum(sizes), 4), dtype=np.float32)
    shares = np.empty((sum(sizes), 3), dtype=np.float32)
    heights = np.cos(np.pi * np.arange(height + 1) / height)
    if len(shapes) > 1:
        _sum_pixels(panorama, heights, shapes[1][0], shapes[1][1], flux, shares)
    for level in range(2, len(shapes)):
        below = slice(offsets[level - 1], offsets[level])
        _sum_nodes(
            flux[below].reshape(*shapes[level - 1], 4),
            shares[below].reshape(*shapes[level - 1], 3),
            shapes[level][0], shapes[level][1], flux[offsets[level] :], shares[offsets[level] :],
        )  # fmt: skip
    lines, turns = _middles(shapes)
    return SourceTree(panorama, heights, flux, shares, offsets, np.array(shapes), lines, turns)


def source_samples(tree, count, seed):
    """Directions in proportion to the source's brightness, the sum of its channels.

    Returns: directions (count, 3) float64, unit; densities (count,) float64, 1/sr.
    """
    directions, densities = np.empty((count, 3)), np.empty(count)
    _sample(tree, np.uint64(seed), directions, densities)
    return directions, densities


def _middles(shapes):
    """Tables of `lines` and `turns` (SourceTree)."""
    height, width = shapes[0]
    lines, turns = np.zeros((len(shapes), height, 4)), np.zeros((len(shapes), width, 2))
    for level, (rows, columns) in enumerate(shapes):
        v = np.minimum(np.arange(rows + 1) << level, height) / height
        u = np.minimum(np.arange(columns + 1) << level, width) / width
        latitude, longitude = np.pi / 2 - np.pi * v, np.pi - 2 * np.pi * u
        middle = (latitude[1:] + latitude[:-1]) / 2
        widest = np.cos(np.maximum(np.minimum(latitude[:-1], 0), latitude[1:]))
        half_turn = np.pi * np.diff(u).max()
        lines[level, :rows, 0], lines[level, :rows, 1] = np.sin(middle), np.cos(middle)
        # Squared chord to the farthest point: at most dlat^2 + cos cos dlon^2.
        square = (np.pi * np.diff(v) / 2) ** 2 + np.cos(middle) * widest * half_turn**2
        square = np.minimum(square, 4.0)
        lines[level, :rows, 2] = 1.0 - square / 2
        lines[level, :rows, 3] = np.sqrt(square * (1.0 - square / 4))
        middle = (longitude[1:] + longitude[:-1]) / 2
        turns[level, :columns, 0], turns[level, :columns, 1] = np.sin(middle), np.cos(middle)
    return lines, turns


@parallel
def _sum_pixels(panorama, heights, rows, columns, flux, shares):
    height, width = panorama.shape[0], panorama.shape[1]
    turn = 2.0 * math.pi / width
    for j in prange(rows):
        for i in range(columns):
            node = j * columns + i
            flux[node] = 0.0
            shares[node] = 0.0
            for row in range(2 * j, min(2 * j + 2, height)):
                solid_angle = np.float32(turn * (heights[row] - heights[row + 1]))
                for column in range(2 * i, min(2 * i + 2, width)):
                    r, g, b = panorama[row, column, 0], panorama[row, column, 1], panorama[row, column, 2]
                    inverse = np.float32(1.0) / max(r + g + b, np.float32(1e-30))
                    flux[node, 0] += r * solid_angle
                    flux[node, 1] += g * solid_angle
                    flux[node, 2] += b * solid_angle
                    shares[node, 0] = max(shares[node, 0], r * inverse)
                    shares[node, 1] = max(shares[node, 1], g * inverse)
                    shares[node, 2] = max(shares[node, 2], b * inverse)
            flux[node, 3] = flux[node, 0] + flux[node, 1] + flux[node, 2]


@parallel
def _sum_nodes(flux_below, shares_below, rows, columns, flux, shares):
    for j in prange(rows):
        for i in range(columns):
            node = j * columns + i
            for c in range(3):
                total, largest = np.float32(0.0), np.float32(0.0)
                for row in range(2 * j, min(2 * j + 2, flux_below.shape[0])):
                    for column in range(2 * i, min(2 * i + 2, flux_below.shape[1])):
                        total += flux_below[row, column, c]
                        largest = max(largest, shares_below[row, column, c])
                flux[node, c] = total
                shares[node, c] = largest
            flux[node, 3] = flux[node, 0] + flux[node, 1] + flux[node, 2]


@parallel
def _sample(tree, seed, directions, densities):
    for i in prange(densities.size):
        state = stream(seed, np.uint64(i))
        x, y, z, densities[i] = sample_brightness(tree, state)
        directions[i, 0], directions[i, 1], directions[i, 2] = x, y, z


@formula
def sample_brightness(tree, state):
    """A direction in proportion to brightness, and its density."""
    top = tree.shapes.shape[0] - 1
    row, column = descend(tree, top, 0, 0, next_uniform(state))
    x, y, z = direction_in_pixel(tree, row, column, next_uniform(state), next_uniform(state))
    return x, y, z, brightness_density(tree, row, column)


@formula
def brightness_density(tree, row, column):
    """Density of `sample_brightness` over a pixel, 1/sr."""
    return brightness(tree, row, column) / node_brightness(tree, tree.shapes.shape[0] - 1, 0, 0)


@formula
def brightness(tree, row, column):
    """Sum of a pixel's channels."""
    red_green = np.float64(tree.pixels[row, column, 0]) + tree.pixels[row, column, 1]
    return red_green + tree.pixels[row, column, 2]


@formula
def node_brightness(tree, level, j, i):
    """Flux of a node of level 0 or above, summed over the channels."""
    if level == 0:
        turn = 2.0 * math.pi / tree.pixels.shape[1]
        return brightness(tree, j, i) * (tree.heights[j] - tree.heights[j + 1]) * turn
    return np.float64(tree.flux[tree.offsets[level] + j * tree.shapes[level, 1] + i, 3])


@formula
def descend(tree, level, j, i, u):
    """The pixel below a node of level 0 or above that u in 0..1 falls on.

    Without branches: which child it is can't be predicted. The fourth child takes what is left.
    """
    u *= node_brightness(tree, level, j, i)
    while level > 0:
        level, j, i = level - 1, 2 * j, 2 * i
        below, beside = j + 1 < tree.shapes[level, 0], i + 1 < tree.shapes[level, 1]
        a = node_brightness(tree, level, j, i)
        b = node_brightness(tree, level, j, i + 1) if beside else 0.0
        c = node_brightness(tree, level, j + 1, i) if below else 0.0
        upper = a + b
        down = (u >= upper) & below
        u -= upper if down else 0.0
        first = c if down else a
        right = (u >= first) & beside
        u -= first if right else 0.0
        j += 1 if down else 0
        i += 1 if right else 0
    return j, i


@formula
def direction_in_pixel(tree, row, column, u, v):
    """A direction even in the solid angle of a pixel, for u and v in 0..1."""
    y = tree.heights[row] + v * (tree.heights[row + 1] - tree.heights[row])
    across = math.sqrt(max(0.0, 1.0 - y * y))
    # The longitude of the column's middle turned by a small angle d: series of sine and cosine.
    d = (1.0 - 2.0 * u) * math.pi / tree.pixels.shape[1]
    dd = d * d
    sine = d * (1.0 - dd * (1.0 / 6.0 - dd * (1.0 / 120.0 - dd / 5040.0)))
    cosine = 1.0 - dd * (0.5 - dd * (1.0 / 24.0 - dd * (1.0 / 720.0 - dd / 40320.0)))
    s, c = tree.turns[0, column, 0], tree.turns[0, column, 1]
    return across * (s * cosine + c * sine), y, across * (c * cosine - s * sine)


@formula
def pixel_at(tree, x, y, z):
    """Row and column of the pixel that a direction falls on."""
    height, width = tree.pixels.shape[0], tree.pixels.shape[1]
    row = int(math.acos(max(-1.0, min(1.0, y))) * height / math.pi)
    column = int((math.pi - math.atan2(x, z)) * width / (2.0 * math.pi))
    return min(max(row, 0), height - 1), min(max(column, 0), width - 1)
