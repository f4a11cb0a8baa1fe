"""What a BC6H block costs that is fitted for its texels and for its flux.

    J = sum over texels and channels of  D^2  +  Q sum over texels of max(0, e - b)^2
        + K sum over channels of  max(0, |f|/F - a)^2 / a

with D the difference in half bits over 1,024, about the log2; F the flux that the channel is to have in
the block, f the difference to it, and a the share of it that may be lost or won; e is the share by which
a texel rises above the level's peak, or by which a texel of the peak's own falls below it. K is the
caller's; Q was chosen by trial. Texels that only fill a block have targets of -1 and cost nothing.
"""

import math

import numpy as np

from skykiln.formats.bc6h import half_between, subset_of, unquantise
from skykiln.formats.bc6h_layout import ENDPOINT_BITS, PARTITION, SUBSETS, WEIGHTS_3, WEIGHTS_4
from skykiln.formats.half import half_value
from skykiln.jit import exact

_PEAK_COST, _FREE_PEAK = 1e4, 0.012  # Q and b
_DIM = 0.05  # a channel's flux counts as at least this share of the brightest channel's
_AIM, _SCALE, _FREE, _TOP, _PEAK = 0, 1, 2, 3, 4  # columns of `facts_of`


@exact
def facts_of(aim, free, peak):
    """(3, 5) float64, per channel what J needs: the flux aimed at, 1/F, a, the value that no texel should
    exceed, and the half bits of texels that must not fall."""
    facts = np.zeros((3, 5))
    for c in range(3):
        facts[c, _AIM] = aim[c]
        facts[c, _SCALE] = 1.0 / max(aim[c], _DIM * aim.max(), 2.0**-24)
        facts[c, _FREE] = free[c]
        facts[c, _TOP] = half_value(peak[c]) if peak[c] > 0 else math.inf
        facts[c, _PEAK] = peak[c]
    return facts


@exact
def block_cost(mode, values, indices, target, facts, strength):
    """J with a K of `strength`."""
    cost = 0.0
    for c in range(3):
        cost += channel_cost(mode, values, indices, target, c, facts[c], strength)
    return cost


@exact
def channel_cost(mode, values, indices, target, c, facts, strength):
    """One channel's part of J."""
    two, bits = SUBSETS[mode] == 2, ENDPOINT_BITS[mode]
    low_0, high_0 = unquantise(values[c], bits), unquantise(values[3 + c], bits)
    low_1, high_1 = unquantise(values[6 + c], bits), unquantise(values[9 + c], bits)
    error, total = 0.0, 0.0
    for texel in range(16):
        if target[texel, c] < 0:
            continue
        second = subset_of(texel, two, values[PARTITION]) == 1
        low, high = (low_1, high_1) if second else (low_0, high_0)
        half = half_between(low, high, weight_of(two, indices[texel]))
        value = half_value(half)
        error += texel_cost(half, value, target[texel, c], facts)
        total += value
    return error + flux_cost(total, facts, strength)


@exact
def texel_cost(half, value, target, facts):
    """One value's part of J, of half bits; 1,024 of them are about one in the log2."""
    cost = ((half - target) / 1024.0) ** 2
    excess = value / facts[_TOP] - 1.0
    if target == facts[_PEAK]:
        excess = abs(excess)
    if excess > _FREE_PEAK:
        cost += _PEAK_COST * (excess - _FREE_PEAK) ** 2
    return cost


@exact
def flux_cost(total, facts, strength):
    excess = abs(total - facts[_AIM]) * facts[_SCALE] - facts[_FREE]
    return strength / facts[_FREE] * excess * excess if excess > 0 else 0.0


@exact
def weight_of(two, index):
    """Of an index, in 64ths."""
    return WEIGHTS_3[index] if two else WEIGHTS_4[index]
