"""BC6H blocks whose flux came out wrong, fitted again.

Interpolation is linear in the bits of half floats, about the logarithm: where a sun stands in a block,
an encoder that looks for the nearest texels alone can lose a part of the sun's flux. Here a block costs

    J = sum over texels and channels of  D^2 + P/a (d/F)^2  +  Q/a sum over peaks of max(0, |d|/L - b)^2
        + K/a sum over channels of max(0, |f|/F - a)^2

with D the difference in log2, d in value, L the value, F the channel's flux in the block, f the
difference in it, and a the share of the flux that may be lost or won; peaks are texels as bright as the
level's brightest. The cheapest of these is kept: the block as it came, with its endpoints and indices
improved; and one-subset blocks of modes 3, 7, 11 and 15, begun by least squares along the principal axis
of the texels' colours (every texel alike, or weighted by its radiance) and improved alike. To improve is
to move one endpoint or one index at a time to where J is least, while K rises round by round, so that
the flux is put right last.

P, Q, K and the starts were chosen by trial on skies with a sun, for energy first, then log2 error.
"""

import math

import numpy as np

from skykiln.formats.bc6h import half_between, is_anchor, subset_of, unpack_block, unquantise
from skykiln.formats.bc6h_layout import (
    ENDPOINT_BITS,
    PARTITION,
    SUBSETS,
    WEIGHTS_3,
    WEIGHTS_4,
)
from skykiln.formats.bc6h_least_squares import least_squares
from skykiln.formats.bc6h_pack import fits, pack_block
from skykiln.formats.half import half_value
from skykiln.jit import exact

_VALUE_COST = 0.3  # P: keeps a sun's own texels near their values
_PEAK_COST, _FREE_PEAK = 10.0, 0.015  # Q and b
_FLUX_COSTS = np.array([1.0, 10.0, 100.0, 300.0])  # K, round by round: first near, then exact
_DIM = 0.05  # a channel's flux counts as at least this share of the brightest channel's
_STEPS = np.array([32, 16, 8, 4, 2, 1])
_CHEAP = 1.05  # an improved block that costs about what its own errors did before is kept at once
_FLUX, _SCALE, _FREE, _PEAK = 0, 1, 2, 3  # columns of `_facts`
_REACH = 4  # steps around both ends of a subset that are tried together at last
# Where the texels' spread ends: not at the last weight, values between it and the end can be hit finer.
_SPREADS = np.array([64, 60, 55]) / 64.0
_ONE_SUBSET_MODES = np.array([3, 7, 11, 15])


def refit_blocks(blocks, halves, free, peak) -> np.ndarray:
    """Fit blocks again.

    Parameters
    ----------
    blocks : (count, 2) uint64, as an encoder made them.
    halves : (count, 16, 3) uint16, the half bits that they stand for.
    free : (count, 3) float64, per channel the relative error of the block's flux that costs nothing.
    peak : (3,) int, half bits of values that must come out near; 0 for none.

    Returns
    -------
    (count, 2) uint64, each block the cheapest that was found.
    """
    refitted = np.empty_like(blocks)
    _refit(blocks, halves.astype(np.int64), free, peak, refitted)
    return refitted


@exact
def _refit(blocks, targets, frees, peak, refitted):
    values, indices = np.empty(13, np.int64), np.empty(16, np.int64)
    for i in range(len(blocks)):
        facts = _facts(targets[i], frees[i], peak)
        mode = unpack_block(blocks[i], values, indices)
        best = math.inf
        if SUBSETS[mode] > 0:
            unpaid = _cost_without_flux(mode, values, indices, targets[i], facts)
            best = _improve(mode, values, indices, targets[i], facts)
            pack_block(mode, values, indices, refitted[i])
            if best < _CHEAP * unpaid:
                continue
        for start in range(len(_ONE_SUBSET_MODES) * len(_SPREADS) * 2):
            mode = _ONE_SUBSET_MODES[start // 2 % len(_ONE_SUBSET_MODES)]
            spread = _SPREADS[start // 2 // len(_ONE_SUBSET_MODES)]
            least_squares(mode, targets[i], start % 2 == 1, spread, values, indices)
            cost = _improve(mode, values, indices, targets[i], facts)
            if cost < best:
                best = cost
                pack_block(mode, values, indices, refitted[i])


@exact
def _facts(target, free, peak):
    """(3, 4) float64, per channel what J needs of the target: the sum of its values, 1/F, the error of
    the flux that costs nothing, and the half bits of values that must come out near."""
    facts = np.zeros((3, 4))
    for texel in range(16):
        for c in range(3):
            facts[c, _FLUX] += half_value(target[texel, c])
    for c in range(3):
        dimmest = max(_DIM * facts[:, _FLUX].max(), 2.0**-24)
        facts[c, _SCALE] = 1.0 / max(facts[c, _FLUX], dimmest)
        facts[c, _FREE] = free[c]
        facts[c, _PEAK] = peak[c]
    return facts


@exact
def _improve(mode, values, indices, target, facts):
    """Move endpoints and indices downhill, in place. Returns the cost."""
    for strength in _FLUX_COSTS:
        for c in range(3):
            _improve_channel(mode, values, indices, target, c, facts[c], strength)
        _improve_indices(mode, values, indices, target, facts, strength)
    cost = 0.0
    for c in range(3):
        cost += _improve_ends(mode, values, indices, target, c, facts[c])
    return cost


@exact
def _cost_without_flux(mode, values, indices, target, facts):
    cost = 0.0
    for c in range(3):
        cost += _channel_cost(mode, values, indices, target, c, facts[c], 0.0)
    return cost


@exact
def _weight(two, index):
    return WEIGHTS_3[index] if two else WEIGHTS_4[index]


@exact
def _channel_cost(mode, values, indices, target, c, facts, strength):
    """One channel's part of J."""
    two, bits = SUBSETS[mode] == 2, ENDPOINT_BITS[mode]
    error, total = 0.0, 0.0
    for texel in range(16):
        first = 6 * subset_of(texel, two, values[PARTITION]) + c
        low, high = unquantise(values[first], bits), unquantise(values[first + 3], bits)
        half = half_between(low, high, _weight(two, indices[texel]))
        error += _texel_cost(half, target[texel, c], facts)
        total += half_value(half)
    return error + _flux_cost(total, facts, strength)


@exact
def _texel_cost(half, target, facts):
    """One value's part of J, of half bits; 1,024 of them are about one in the log2."""
    value = (half_value(half) - half_value(target)) * facts[_SCALE]
    cost = ((half - target) / 1024.0) ** 2 + _VALUE_COST / facts[_FREE] * value * value
    if target > 0 and target == facts[_PEAK]:
        excess = abs(half_value(half) / half_value(target) - 1.0) - _FREE_PEAK
        if excess > 0:
            cost += _PEAK_COST / facts[_FREE] * excess * excess
    return cost


@exact
def _flux_cost(total, facts, strength):
    excess = abs(total - facts[_FLUX]) * facts[_SCALE] - facts[_FREE]
    return strength / facts[_FREE] * excess * excess if excess > 0 else 0.0


@exact
def _improve_channel(mode, values, indices, target, c, facts, strength):
    """Try every endpoint of one channel at smaller and smaller steps. Returns the channel's cost."""
    best = _channel_cost(mode, values, indices, target, c, facts, strength)
    for step in _STEPS:
        for k in range(c, 6 * SUBSETS[mode], 3):
            for change in (-step, step):
                while True:
                    values[k] += change
                    cost = math.inf
                    if fits(mode, values, c):
                        cost = _channel_cost(mode, values, indices, target, c, facts, strength)
                    if cost >= best:
                        values[k] -= change
                        break
                    best = cost
    return best


@exact
def _improve_ends(mode, values, indices, target, c, facts):
    """Try the ends of each subset together, all pairs nearby. Returns the channel's cost."""
    strength = _FLUX_COSTS[-1]
    best = _channel_cost(mode, values, indices, target, c, facts, strength)
    for low in range(c, 6 * SUBSETS[mode], 6):
        first, second = values[low], values[low + 3]
        best_first, best_second = first, second
        for i in range(-_REACH, _REACH + 1):
            for k in range(-_REACH, _REACH + 1):
                values[low], values[low + 3] = first + i, second + k
                if fits(mode, values, c):
                    cost = _channel_cost(mode, values, indices, target, c, facts, strength)
                    if cost < best:
                        best, best_first, best_second = cost, values[low], values[low + 3]
        values[low], values[low + 3] = best_first, best_second
    return best


@exact
def _improve_indices(mode, values, indices, target, facts, strength):
    """Give each texel in turn the index that makes J least, the others staying as they are."""
    two, bits = SUBSETS[mode] == 2, ENDPOINT_BITS[mode]
    count = 8 if two else 16
    halves = np.empty((2, 16, 3), np.int64)
    for subset in range(SUBSETS[mode]):
        for index in range(count):
            for c in range(3):
                low, high = values[6 * subset + c], values[6 * subset + 3 + c]
                low, high = unquantise(low, bits), unquantise(high, bits)
                halves[subset, index, c] = half_between(low, high, _weight(two, index))
    total = np.zeros(3)
    for texel in range(16):
        for c in range(3):
            total[c] += half_value(halves[subset_of(texel, two, values[PARTITION]), indices[texel], c])
    for texel in range(16):
        palette = halves[subset_of(texel, two, values[PARTITION])]
        usable = count // 2 if is_anchor(texel, two, values[PARTITION]) else count
        _choose_index(texel, palette[:usable], indices, target[texel], total, facts, strength)


@exact
def _choose_index(texel, palette, indices, target, total, facts, strength):
    for c in range(3):
        total[c] -= half_value(palette[indices[texel], c])
    best = math.inf
    for index in range(len(palette)):
        cost = 0.0
        for c in range(3):
            cost += _texel_cost(palette[index, c], target[c], facts[c])
            cost += _flux_cost(total[c] + half_value(palette[index, c]), facts[c], strength)
        if cost < best:
            best, indices[texel] = cost, index
    for c in range(3):
        total[c] += half_value(palette[indices[texel], c])
