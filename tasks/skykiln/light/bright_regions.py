"""Compact bright regions of a panorama: suns, moons, lamps, glints.

From a bright pixel a region grows while a threshold falls, a quarter of a stop at a time, by all connected
pixels above it. Where something compact shines, its solid angle stays while the threshold falls through
many stops; the region kept is that at the end of the longest such stretch, and the stretch's length tells
how far it stands above its surroundings. This is the maximally stable extremal region (Matas, Chum,
Urban and Pajdla 2002), with growth measured against the solid angle; no threshold has to be known.

The pixels that touch it are taken too: what a lens or a pixel's edge has spread of the light ends there.

Stable is a region that no more than doubles. Growth within what a sun's disc and a pixel cover does not
count, so that the pixels which it covers in part belong to it. A region may have the solid angle that
direct sunlight has by definition, half an opening of 2.5 degrees (WMO guide to instruments and methods of
observation, pyrheliometers; number from memory), or four pixels if these are more.
"""

import math
from typing import NamedTuple

import numpy as np
from numba import prange

from skykiln.jit import parallel, serial
from skykiln.light.directions import panorama_row_solid_angles
from skykiln.light.panorama_rows import neighbour

# Nominal solar radius over one astronomical unit (IAU 2015 resolution B3, IAU 2012 resolution B2).
SUN_RADIUS = math.asin(6.957e8 / 1.495978707e11)
SUNLIGHT_RADIUS = math.radians(2.5)

_STEPS_PER_STOP = 4
_STOPS = 40
_SEED_WIDTH = math.radians(0.5)  # brightness is compared over a sun's width, so that no hot pixel wins


class Region(NamedTuple):
    """Pixels of a compact bright region."""

    rows: np.ndarray  # (n,) int64
    columns: np.ndarray  # (n,) int64
    contrast_ev: float  # stops through which the region hardly grows


def compact_regions(brightness, count):
    """Compact regions around the `count` brightest separate places, brightest first.

    Parameters: brightness : (H, W) float32, none negative
    Returns:    list of Region; places where nothing compact shines give none
    """
    height, width = brightness.shape
    angles = panorama_row_solid_angles(width, height)
    seen = np.zeros((height, width), dtype=np.int32)
    regions, tried = [], 0
    for row, column in _seeds(brightness):
        if seen[row, column] or brightness[row, column] <= 0:
            continue
        tried += 1
        region = _region_around(brightness, angles, row, column, tried, seen)
        regions += [region] if region else []
        if tried == count:
            break
    return regions


def rim_of(rows, columns, height, width):
    """Rows and columns of the pixels around a region, across seam and poles."""
    steps = np.array([(j, i) for j in (-1, 0, 1) for i in (-1, 0, 1)])
    r = (rows[:, None] + steps[:, 0]).ravel()
    c = (columns[:, None] + steps[:, 1]).ravel()
    over = (r < 0) | (r >= height)
    c = np.where(over, c + width // 2, c) % width
    r = np.clip(r, 0, height - 1)
    outside = np.setdiff1d(r * width + c, rows * width + columns)
    return outside // width, outside % width


def filled_from_rim(panorama, rows, columns):
    """What the surroundings would be under a region: a mean of its rim, the nearer the heavier.

    Weights 1/distance^2: on a disc that is Poisson's integral, the smoothest surface that joins the rim.
    Returns (n, 3) float64, radiance.
    """
    height, width, _ = panorama.shape
    rim_rows, rim_columns = rim_of(rows, columns, height, width)
    weights = panorama_row_solid_angles(width, height)[rim_rows]
    inside = pixel_centres(rows, columns, width, height)
    rim = pixel_centres(rim_rows, rim_columns, width, height)
    out = np.empty((len(rows), 3))
    _weigh_rim(inside, rim, weights, panorama[rim_rows, rim_columns].astype(np.float64), out)
    return out


def pixel_centres(rows, columns, width, height):
    """Unit directions (n, 3) float64 of the centres of single pixels."""
    longitude = np.pi - 2 * np.pi * (columns + 0.5) / width
    latitude = np.pi / 2 - np.pi * (rows + 0.5) / height
    across = np.cos(latitude)
    return np.stack(
        [across * np.sin(longitude), np.sin(latitude), across * np.cos(longitude)], axis=1
    )


def cap_solid_angle(radius):
    """Solid angle of a cap of an angular radius in rad: 4 pi sin^2(radius/2)."""
    return 4 * math.pi * math.sin(radius / 2) ** 2


def _seeds(brightness):
    """Rows and columns of the brightest pixel of each block, blocks by falling mean brightness."""
    height, width = brightness.shape
    block = max(1, int(_SEED_WIDTH * width / (2 * math.pi)))
    starts = np.arange(0, height, block), np.arange(0, width, block)
    sums = np.add.reduceat(np.add.reduceat(brightness, starts[0], axis=0), starts[1], axis=1)
    shape = np.outer(np.diff([*starts[0], height]), np.diff([*starts[1], width]))
    for at in np.argsort(-sums / shape, axis=None, kind="stable"):
        j, i = (starts[axis][k] for axis, k in enumerate(np.unravel_index(at, sums.shape)))
        part = brightness[j : j + block, i : i + block]
        row, column = np.unravel_index(np.argmax(part), part.shape)
        yield j + row, i + column


def _region_around(brightness, angles, row, column, label, seen):
    """The region that shines around a pixel, or None."""
    height, width = brightness.shape
    limit = max(cap_solid_angle(SUNLIGHT_RADIUS), 4 * angles[row])
    spared = cap_solid_angle(SUN_RADIUS + math.hypot(np.pi / height, 2 * np.pi / width) / 2)
    thresholds = brightness[row, column] * 2.0 ** (
        -np.arange(1, _STOPS * _STEPS_PER_STOP + 1) / _STEPS_PER_STOP
    )
    members = np.empty(brightness.size, dtype=np.int64)
    waiting = np.empty(brightness.size, dtype=np.int64)
    areas, counts = np.zeros(len(thresholds)), np.zeros(len(thresholds), dtype=np.int64)
    levels = _grow(
        brightness, angles, row, column, thresholds, limit, label, seen, members, waiting, areas, counts
    )
    if levels == 0:
        return None
    first, last = _longest_stretch(np.maximum(areas[:levels], spared))
    rows, columns = members[: counts[last]] // width, members[: counts[last]] % width
    around = rim_of(rows, columns, height, width)
    rows, columns = np.concatenate([rows, around[0]]), np.concatenate([columns, around[1]])
    return Region(rows, columns, (last - first + (first == 0)) / _STEPS_PER_STOP)


def _longest_stretch(areas):
    """First and last level of the longest stretch over which the area no more than doubles."""
    last = np.searchsorted(areas, 2 * areas, side="right") - 1
    first = int(np.argmax(last - np.arange(len(areas))))
    return first, int(last[first])


@serial
def _grow(brightness, angles, row, column, thresholds, limit, label, seen, members, waiting, areas, counts):
    """Solid angle and number of pixels of the region at each threshold; returns how many thresholds
    were reached before the region passed the limit."""
    height, width = brightness.shape
    waiting[0] = row * width + column
    seen[row, column] = label
    wait, count, area = 1, 0, 0.0
    for level in range(len(thresholds)):
        at = 0
        while at < wait:
            pixel = waiting[at]
            j, i = pixel // width, pixel % width
            if brightness[j, i] < thresholds[level]:
                at += 1
                continue
            area += angles[j]
            if area > limit:
                return level
            members[count] = pixel
            count += 1
            wait -= 1
            waiting[at] = waiting[wait]
            for k in range(9):
                r, c = neighbour(j, i, k, height, width)
                if seen[r, c] != label:
                    seen[r, c] = label
                    waiting[wait] = r * width + c
                    wait += 1
        areas[level], counts[level] = area, count
    return len(thresholds)


@parallel
def _weigh_rim(inside, rim, weights, radiance, out):
    for i in prange(inside.shape[0]):
        total, r, g, b = 0.0, 0.0, 0.0, 0.0
        for k in range(rim.shape[0]):
            dx, dy, dz = inside[i, 0] - rim[k, 0], inside[i, 1] - rim[k, 1], inside[i, 2] - rim[k, 2]
            w = weights[k] / (dx * dx + dy * dy + dz * dz)
            total += w
            r += w * radiance[k, 0]
            g += w * radiance[k, 1]
            b += w * radiance[k, 2]
        out[i, 0], out[i, 1], out[i, 2] = r / total, g / total, b / total
