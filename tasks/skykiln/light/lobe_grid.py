"""Where on a face a filtered sky is evaluated: at the texels, or more sparsely where the lobe blurs it all.

A sky filtered by the GGX lobe has no detail much finer than 2 alpha: as a function of angle each point of
light becomes 1/(x^2 + s^2)^2 with s = 2 alpha (times a cosine), analytic but for poles at x = +-i s. Where
texels stand closer than that asks for, the filter is evaluated on a sparser grid of equal angles, which
reaches a few points beyond the face's edges, and interpolated in the angles by Lagrange's formula with
8 points a side. All points of light being positive, the largest relative error of interpolating one is a
bound for the relative error of any sky; it was measured over all offsets and distances:

    s in steps      3      3.5      4        5        6
    error         0.5 %   0.21 %   0.1 %   0.024 %  0.007 %    at most 4 s^-6 from 3 steps on

Not analytic is the horizon: a light that crosses it has a kink there, which `specular` watches.

Source of the formula: Lagrange interpolation, DLMF 3.3(ii). Conventions: `directions`.
"""

import math
from typing import NamedTuple

import numba
import numpy as np

from skykiln.jit import parallel

TAPS = 8
_SHARE = 0.1  # of the tolerance, that interpolation along one axis may take
_FEWEST = 24  # points along a face: with fewer the map from angles to directions bends too much
_WORTH = 0.75  # points per texel, along an edge, from which on the texels themselves are taken
KINK_ERROR = 0.2  # largest error of interpolating max(x, 0), in steps (measured 0.17 along one axis)


class LobeGrid(NamedTuple):
    """Points (a, b) of a face, both out of the same list.

    at : (n,) float64, coordinates on the face's plane, -1 .. 1 across the face.
    step : rad, about the angle from point to point.
    sparse : bool; points are at equal angles for `interpolated`, not at the texels' centres.
    """

    at: np.ndarray
    step: float
    sparse: bool


def texel_grid(face_size):
    """The texels' centres."""
    at = (2 * np.arange(face_size) + 1) / face_size - 1
    return LobeGrid(at, 1.6 / face_size, False)


def lobe_grid(face_size, alpha, tolerance, multiple):
    """The grid that the lobe asks for; the texels' own if it isn't much sparser.

    multiple : the number of points along a sparse grid is a multiple of this.
    """
    steps_per_pole = max(3.0, (4.0 / (_SHARE * tolerance)) ** (1 / 6))
    points = math.pi / 2 * steps_per_pole / (2 * alpha)
    count = multiple * math.ceil((max(points, _FEWEST) + TAPS) / multiple)
    if count > _WORTH * face_size:
        return texel_grid(face_size)
    step = math.pi / 2 / (count - TAPS)
    return LobeGrid(np.tan((np.arange(count) - (count - 1) / 2) * step), step, True)


def interpolated(values, grid, face_size):
    """Values at the texels' centres.

    values : (6, n, n, 3) float32, at the points of a sparse grid.
    Returns: (6, face_size, face_size, 3) float32; it may undershoot 0 where values fall steeply.
    """
    angles = np.arctan(texel_grid(face_size).at) / grid.step + (len(grid.at) - 1) / 2
    first = np.floor(angles).astype(np.int64)
    weights = _lagrange_weights(angles - first)
    return _interpolate(values, first - (TAPS // 2 - 1), weights.astype(np.float32))


def _lagrange_weights(offset):
    """Weights of the points -3 .. 4 for offsets 0 .. 1: (count, TAPS)."""
    points = np.arange(TAPS) - (TAPS // 2 - 1)
    return np.stack([_lagrange_weight(offset, k, points[points != k]) for k in points], axis=1)


def _lagrange_weight(offset, point, others):
    return np.prod((offset[:, None] - others) / (point - others), axis=1)


@parallel
def _interpolate(values, first, weights):
    count, size = values.shape[1], first.shape[0]
    result = np.empty((6, size, size, 3), np.float32)
    for line in numba.prange(6 * size):
        face, j = np.int64(line) // size, np.int64(line) % size
        row = np.zeros((count, 3), np.float32)
        for t in range(TAPS):
            w, source = weights[j, t], values[face, first[j] + t]
            for i in range(count):
                for c in range(3):
                    row[i, c] += w * source[i, c]
        for i in range(size):
            red, green, blue = np.float32(0.0), np.float32(0.0), np.float32(0.0)
            for t in range(TAPS):
                w = weights[i, t]
                red += w * row[first[i] + t, 0]
                green += w * row[first[i] + t, 1]
                blue += w * row[first[i] + t, 2]
            result[face, j, i, 0], result[face, j, i, 1], result[face, j, i, 2] = red, green, blue
    return result
