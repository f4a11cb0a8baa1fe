"""Pixels that no sky can have: NaN, infinite or negative. They are counted and mended.

A pixel counts once, as the worst it holds: NaN before infinity before negative. Mended is only the
channel at fault (a saturated lamp may have one small negative channel and two good ones), by the mean
of its valid neighbours among the eight around it. Holes close from the rim inwards: each ring is the
mean of what was valid, or had been mended, before it. Columns wrap around; above the top row lies the
same row, half a turn away. -0 is a valid zero.

The kernels look at bit patterns (IEEE 754 binary32), so that fast arithmetic can't hide a NaN.
"""

from typing import NamedTuple

import numpy as np
from numba import prange

from skykiln.jit import formula, parallel, serial
from skykiln.light.panorama_rows import neighbour

LARGEST_VALID = 0x7F7FFFFF  # bits of the largest finite float32; greater: infinite, NaN, sign set
INFINITE = 0x7F800000
NEGATIVE_ZERO = 0x80000000
MAGNITUDE = 0x7FFFFFFF

GOOD, NAN, INF, NEGATIVE, WAITING = 0, 1, 2, 3, 4


class Repairs(NamedTuple):
    """Pixels mended, each counted once."""

    nan: int
    inf: int
    negative: int


NO_PLACES = np.empty((0, 3), dtype=np.int32)


def repair_pixels(pixels):
    """Mends a panorama (H, W, 3) float32 of radiance.

    Returns
    -------
    pixels : the same array when nothing was wrong, else a mended copy.
    repairs : Repairs.
    places : (n, 3) int32, row, column and kind (`NAN`, `INF` or `NEGATIVE`) of each mended pixel.

    Raises
    ------
    ValueError : a channel has no valid value to start from.
    """
    bits = pixels.view(np.uint32)
    if bits.max(initial=0) <= LARGEST_VALID:
        return pixels, Repairs(0, 0, 0), NO_PLACES
    faults = np.empty(pixels.shape, dtype=np.uint8)
    counts = np.empty((pixels.shape[0], 3), dtype=np.int64)
    _find_faults(bits, faults, counts)
    repairs = Repairs(*(int(n) for n in counts.sum(axis=0)))
    if sum(repairs) == 0:
        return pixels, repairs, NO_PLACES
    lost = [name for name, bad in zip("RGB", (faults != GOOD).all(axis=(0, 1)), strict=True) if bad]
    if lost:
        raise ValueError(f"every value of {', '.join(lost)} is NaN, infinite or negative")
    places = _places(faults)
    mended = pixels.copy()
    for channel in range(3):
        _close_holes(mended, faults, channel)
    return mended, repairs, places


def _places(faults):
    worst = np.where(faults == GOOD, WAITING, faults).min(axis=2)
    rows, columns = np.nonzero(worst < WAITING)
    return np.stack([rows, columns, worst[rows, columns]], axis=1).astype(np.int32)


@parallel
def _find_faults(bits, faults, counts):
    for row in prange(bits.shape[0]):
        nans = 0
        infs = 0
        negatives = 0
        for column in range(bits.shape[1]):
            worst = NEGATIVE + 1
            for channel in range(3):
                value = bits[row, column, channel]
                kind = GOOD
                if value > LARGEST_VALID and value != NEGATIVE_ZERO:
                    magnitude = value & MAGNITUDE
                    kind = NEGATIVE
                    if magnitude == INFINITE:
                        kind = INF
                    elif magnitude > INFINITE:
                        kind = NAN
                    worst = min(worst, kind)
                faults[row, column, channel] = kind
            nans += worst == NAN
            infs += worst == INF
            negatives += worst == NEGATIVE
        counts[row, 0] = nans
        counts[row, 1] = infs
        counts[row, 2] = negatives


@serial
def _close_holes(pixels, faults, channel):
    """Mends one channel in place, ring by ring; each value is visited a fixed number of times."""
    height, width = faults.shape[:2]
    wanting = 0
    for row in range(height):
        for column in range(width):
            wanting += faults[row, column, channel] != GOOD
    queue = np.empty(wanting, dtype=np.int64)
    values = np.empty(wanting, dtype=np.float32)
    end = 0
    for row in range(height):
        for column in range(width):
            if faults[row, column, channel] != GOOD and _valid_neighbours(
                pixels, faults, row, column, channel
            )[0]:
                queue[end] = row * width + column
                end += 1
    start = 0
    while start < end:
        for i in range(start, end):
            row, column = queue[i] // width, queue[i] % width
            faults[row, column, channel] = WAITING
            count, total = _valid_neighbours(pixels, faults, row, column, channel)
            values[i] = total / count
        for i in range(start, end):
            row, column = queue[i] // width, queue[i] % width
            pixels[row, column, channel] = values[i]
            faults[row, column, channel] = GOOD
        ring = end
        for i in range(start, ring):
            row, column = queue[i] // width, queue[i] % width
            for k in range(9):
                r, c = neighbour(row, column, k, height, width)
                if NAN <= faults[r, c, channel] <= NEGATIVE:
                    faults[r, c, channel] = WAITING
                    queue[end] = r * width + c
                    end += 1
        start = ring


@formula
def _valid_neighbours(pixels, faults, row, column, channel):
    """How many of the eight neighbours are valid, and their sum."""
    height, width = faults.shape[:2]
    count = 0
    total = 0.0
    for k in range(9):
        r, c = neighbour(row, column, k, height, width)
        if faults[r, c, channel] == GOOD:
            count += 1
            total += np.float64(pixels[r, c, channel])
    return count, total
