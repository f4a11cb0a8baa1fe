"""What a node of the pyramid keeps, and where: the fields of a record of float32 numbers.

Variances and moments are per unit of flux, of the directions' distances d from MEAN, all channels weighted
alike. First, in one cache line, comes what decides whether a node is opened.
"""

import math

import numpy as np

from skykiln.jit import formula

FLUX = 0  # 3: flux per channel above the base, radiance sr
MEAN = 3  # 3: mean direction
SPREAD = 6  # mean of |d|^2; equals 1 - |MEAN|^2
RADIUS = 7  # largest |d| of any part of the node
THIRD = 8  # what the third moments may amount to: skewness, uneven shape, colours apart
FOURTH = 9  # mean of |d|^4
SHIFT = 10  # largest of the colour shifts
SPREAD_GAP = 11  # largest difference of a channel's own spread from SPREAD
KINK = 12  # how far the mean of the positive part of n . l may be off across a horizon
SLIM = 13  # how much more a node's error counts beside a pole, where cells are slivers side by side
COVARIANCE = 14  # 6: xx, yy, zz, xy, xz, yz of d
COLOUR_SHIFT = 20  # 9: each channel's mean direction minus MEAN
LOPSIDED = 29  # 3: mean of |d|^2 d
RECORD = 32

_f = np.float32


@formula
def third_of(spread, skew, shift):
    """THIRD, in factors calibrated by the error tests; skew = |LOPSIDED|."""
    return _f(0.75) * skew + _f(0.05) * spread * math.sqrt(spread) + _f(3.0) * spread * shift


@formula
def kink_of(spread, skew):
    """KINK, in factors calibrated by the error tests; skew = |LOPSIDED|."""
    deviation = math.sqrt(spread)
    return _f(0.1) * deviation + _f(0.3) * min(deviation, skew / max(spread, _f(1e-30)))


@formula
def set_channel(node, c, flux, sx, sy, sz):
    """A channel's flux and the shift of its mean direction; its spread follows from 1 - |mean|^2."""
    at = COLOUR_SHIFT + 3 * c
    node[FLUX + c] = flux
    node[at], node[at + 1], node[at + 2] = sx, sy, sz
    square = sx * sx + sy * sy + sz * sz
    node[SHIFT] = max(node[SHIFT], np.float32(math.sqrt(square)))
    gap = abs(2.0 * (sx * node[MEAN] + sy * node[MEAN + 1] + sz * node[MEAN + 2]) + square)
    node[SPREAD_GAP] = max(node[SPREAD_GAP], np.float32(gap))


@formula
def sum_up(node):
    """What follows of a record's moments and shifts; and how much more often a sliver's error counts: cells
    of a latitude-longitude grid stand the closer the nearer to a pole."""
    skew = math.sqrt(node[LOPSIDED] ** 2 + node[LOPSIDED + 1] ** 2 + node[LOPSIDED + 2] ** 2)
    from_axis = math.sqrt(node[MEAN] ** 2 + node[MEAN + 2] ** 2)
    node[SLIM] = 1.0 / max(from_axis * from_axis, 1e-12)
    node[THIRD] = third_of(node[SPREAD], skew, node[SHIFT])
    node[KINK] = kink_of(node[SPREAD], skew)
