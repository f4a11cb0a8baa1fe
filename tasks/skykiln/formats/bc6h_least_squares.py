"""A first BC6H block of one or two subsets: indices along principal axes, endpoints by least squares.

The fit is made where BC6H interpolates, in half bits times 64/31 (0..65535): Khronos Data Format
specification 1.4, section 20.2.
"""

import math

import numpy as np

from skykiln.formats.bc6h import is_anchor, subset_of
from skykiln.formats.bc6h_layout import ENDPOINT_BITS, PARTITION, WEIGHTS_3, WEIGHTS_4
from skykiln.formats.bc6h_pack import fits
from skykiln.formats.half import half_value
from skykiln.jit import exact

# Modes of one subset and of two, the finest first; the last of each holds any endpoints.
_FINEST_FIRST = np.array([15, 11, 7, 3])
_FINEST_OF_TWO_FIRST = np.array([2, 6, 10, 0, 14, 18, 22, 26, 1, 30])


@exact
def least_squares(target, partition, by_radiance, spread, values, indices):
    """Begin a block, in place.

    Parameters: target : (16, 3) half bits, or -1 of texels that only fill the block
                partition : 0 to 31, or -1 for one subset
                by_radiance : whether bright texels weigh more; else all weigh alike
                spread : at which share of the way from end to end the texels' first spread is taken to end
    Returns:    the mode: the finest that holds the endpoints
    """
    two = partition >= 0
    weights, ends = np.empty(16), np.empty((4, 3))
    values[PARTITION] = max(partition, 0)
    indices[:] = 0
    for subset in range(2 if two else 1):
        for texel in range(16):
            mine = subset_of(texel, two, values[PARTITION]) == subset and target[texel, 0] >= 0
            weights[texel] = 1.0 if mine else 0.0
            if mine and by_radiance:
                brightest = half_value(target.max()), half_value(target[texel].max())
                weights[texel] *= 1e-3 * brightest[0] + brightest[1]
        _fit_subset(target, weights, two, spread, indices, ends[2 * subset], ends[2 * subset + 1])
        _turn_anchor(two, subset, values[PARTITION], indices, ends)
    for mode in _FINEST_OF_TWO_FIRST if two else _FINEST_FIRST:
        for k in range(6 * (2 if two else 1)):
            values[k] = _quantise(ends[k // 3, k % 3], ENDPOINT_BITS[mode])
        if fits(mode, values, 0) and fits(mode, values, 1) and fits(mode, values, 2):
            break
    return mode


@exact
def _fit_subset(target, weights, two, spread, indices, low, high):
    """Indices of the texels that weigh something, and both ends."""
    place = np.empty(16)
    _along_principal_axis(target, weights, spread, place)
    for _ in range(2):
        _nearest_indices(place, weights, two, indices)
        _solve_endpoints(target, weights, two, indices, low, high)
        _project(target, low, high, place)
    _nearest_indices(place, weights, two, indices)


@exact
def _turn_anchor(two, subset, partition, indices, ends):
    """The anchor's index has no top bit: where it needs one, the subset's ends are turned around."""
    most = 7 if two else 15
    for anchor in range(16):
        mine = subset_of(anchor, two, partition) == subset
        if mine and is_anchor(anchor, two, partition) and indices[anchor] > most // 2:
            for texel in range(16):
                if subset_of(texel, two, partition) == subset:
                    indices[texel] = most - indices[texel]
            for c in range(3):
                low = ends[2 * subset, c]
                ends[2 * subset, c], ends[2 * subset + 1, c] = ends[2 * subset + 1, c], low


@exact
def _nearest_indices(place, weights, two, indices):
    """Weights of indices are evenly spaced, to within 1/64."""
    most = 7 if two else 15
    for texel in range(16):
        if weights[texel] > 0:
            indices[texel] = min(max(np.int64(math.floor(place[texel] * most + 0.5)), 0), most)


@exact
def _along_principal_axis(target, weights, spread, place):
    """Where each texel lies between the ends of the texels' spread, 0..`spread`, into `place` (16,)."""
    mean, axis, turned = np.zeros(3), np.ones(3), np.empty(3)
    for c in range(3):
        mean[c] = (weights * target[:, c]).sum() / max(weights.sum(), 1e-30)
    for _ in range(8):  # power iteration on the weighted covariance
        turned[:] = 0.0
        for texel in range(16):
            along = 0.0
            for c in range(3):
                along += (target[texel, c] - mean[c]) * axis[c]
            for c in range(3):
                turned[c] += weights[texel] * along * (target[texel, c] - mean[c])
        length = math.sqrt(turned[0] ** 2 + turned[1] ** 2 + turned[2] ** 2)
        if length == 0.0:
            break
        for c in range(3):
            axis[c] = turned[c] / length
    low, high = math.inf, -math.inf
    for texel in range(16):
        place[texel] = 0.0
        for c in range(3):
            place[texel] += (target[texel, c] - mean[c]) * axis[c]
        if weights[texel] > 0:
            low, high = min(low, place[texel]), max(high, place[texel])
    for texel in range(16):
        place[texel] = spread * (place[texel] - low) / (high - low) if high > low else 0.0


@exact
def _solve_endpoints(target, weights, two, indices, low, high):
    """Ends in 0..65535 that make the weighted squared differences least, the indices given."""
    aa, ab, bb = 0.0, 0.0, 0.0
    at, bt = np.zeros(3), np.zeros(3)
    for texel in range(16):
        if weights[texel] == 0:
            continue
        b = (WEIGHTS_3[indices[texel]] if two else WEIGHTS_4[indices[texel]]) / 64.0
        a, w = 1.0 - b, weights[texel]
        aa, ab, bb = aa + w * a * a, ab + w * a * b, bb + w * b * b
        for c in range(3):
            v = target[texel, c] * 64.0 / 31.0 + 1.0
            at[c], bt[c] = at[c] + w * a * v, bt[c] + w * b * v
    det = aa * bb - ab * ab
    for c in range(3):
        mean = (at[c] + bt[c]) / max(aa + 2 * ab + bb, 1e-30)
        singular = det <= 1e-9 * (aa + bb) ** 2
        low[c] = mean if singular else (bb * at[c] - ab * bt[c]) / det
        high[c] = mean if singular else (aa * bt[c] - ab * at[c]) / det
        low[c], high[c] = min(max(low[c], 0.0), 65535.0), min(max(high[c], 0.0), 65535.0)


@exact
def _project(target, low, high, place):
    """Where each texel lies between the two ends."""
    length = 0.0
    for c in range(3):
        length += (high[c] - low[c]) ** 2
    for texel in range(16):
        along = 0.0
        for c in range(3):
            along += (target[texel, c] * 64.0 / 31.0 + 1.0 - low[c]) * (high[c] - low[c])
        place[texel] = along / length if length > 0 else 0.0


@exact
def _quantise(v, bits):
    """An end in 0..65535 as a number of a mode's bits, to nearest: the inverse of `unquantise`."""
    return min(max(np.int64(math.floor(v * 2.0 ** (bits - 16))), np.int64(0)), (np.int64(1) << bits) - 1)
