"""A first BC6H block of one subset: indices along the principal axis, endpoints by least squares.

The fit is made where BC6H interpolates, in half bits times 64/31 (0..65535): Khronos Data Format
specification 1.4, section 20.2.
"""

import math

import numpy as np

from skykiln.formats.bc6h_layout import DELTA_BITS, ENDPOINT_BITS, PARTITION, WEIGHTS_4
from skykiln.formats.half import half_value
from skykiln.jit import exact


@exact
def least_squares(mode, target, by_radiance, spread, values, indices):
    """A one-subset block: indices along the principal axis, endpoints by least squares, twice."""
    weights = np.ones(16)
    if by_radiance:
        for texel in range(16):
            weights[texel] = 1e-3 * half_value(target.max()) + half_value(target[texel].max())
    place = spread * _along_principal_axis(target, weights)
    low, high = np.empty(3), np.empty(3)
    for _ in range(2):
        for texel in range(16):
            indices[texel] = np.argmin(np.abs(WEIGHTS_4 / 64.0 - place[texel]))
        _solve_endpoints(target, weights, indices, low, high)
        _project(target, low, high, place)
    for texel in range(16):
        indices[texel] = np.argmin(np.abs(WEIGHTS_4 / 64.0 - place[texel]))
    if indices[0] >= 8:  # the anchor's index has no top bit: turn the block's ends around
        indices[:] = 15 - indices
        _quantise_ends(mode, high, low, values)
    else:
        _quantise_ends(mode, low, high, values)
    values[PARTITION] = 0


@exact
def _along_principal_axis(target, weights):
    """Where each texel lies between the ends of the texels' spread, 0..1: (16,) float64."""
    mean, axis = np.zeros(3), np.array([1.0, 1.0, 1.0])
    for c in range(3):
        mean[c] = (weights * target[:, c]).sum() / weights.sum()
    for _ in range(8):  # power iteration on the weighted covariance
        turned = np.zeros(3)
        for texel in range(16):
            along = 0.0
            for c in range(3):
                along += (target[texel, c] - mean[c]) * axis[c]
            for c in range(3):
                turned[c] += weights[texel] * along * (target[texel, c] - mean[c])
        length = math.sqrt((turned * turned).sum())
        if length == 0.0:
            break
        axis[:] = turned / length
    place = np.zeros(16)
    for texel in range(16):
        for c in range(3):
            place[texel] += (target[texel, c] - mean[c]) * axis[c]
    low, high = place.min(), place.max()
    return (place - low) / (high - low) if high > low else np.zeros(16)


@exact
def _solve_endpoints(target, weights, indices, low, high):
    """Ends in 0..65535 that make the weighted squared differences least, the indices given."""
    aa, ab, bb = 0.0, 0.0, 0.0
    at, bt = np.zeros(3), np.zeros(3)
    for texel in range(16):
        b = WEIGHTS_4[indices[texel]] / 64.0
        a, w = 1.0 - b, weights[texel]
        aa, ab, bb = aa + w * a * a, ab + w * a * b, bb + w * b * b
        for c in range(3):
            v = target[texel, c] * 64.0 / 31.0 + 1.0
            at[c], bt[c] = at[c] + w * a * v, bt[c] + w * b * v
    det = aa * bb - ab * ab
    for c in range(3):
        mean = (at[c] + bt[c]) / (aa + 2 * ab + bb)
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
def _quantise_ends(mode, low, high, values):
    """Ends as the mode can store them; the second is moved to where its difference fits."""
    bits = ENDPOINT_BITS[mode]
    most = (np.int64(1) << bits) - 1
    for c in range(3):
        first = _quantise(low[c], bits)
        second = _quantise(high[c], bits)
        delta_bits = DELTA_BITS[mode, c]
        if delta_bits:
            reach = np.int64(1) << (delta_bits - 1)
            second = min(max(second, first - reach), first + reach - 1)
        values[c], values[3 + c] = first, min(max(second, np.int64(0)), most)


@exact
def _quantise(v, bits):
    """The inverse of `unquantise` (KDF 1.4, 20.2), to nearest."""
    return min(max(np.int64(math.floor(v * 2.0 ** (bits - 16))), np.int64(0)), (np.int64(1) << bits) - 1)
