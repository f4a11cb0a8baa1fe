"""BC6H blocks whose flux came out wrong, fitted again.

Interpolation is linear in the bits of half floats, about the logarithm: where a sun stands in a block,
an encoder that looks for the nearest texels alone can lose a part of the sun's flux. Here the cost J of
`bc6h_cost` is made small, which also counts the flux.

First the block as it came is improved: one endpoint or one index at a time is moved to where J is least,
then all endpoints of a channel together. Where its flux is then right, and J about what D was before, it
stays. Otherwise new blocks are begun by least squares along the principal axes of the texels' colours: of
one subset, or of two by each of the partitions, every texel alike or weighted by its radiance, each in the
finest mode that holds it. The best beginnings are improved alike, and the cheapest of all is kept.

K and the beginnings were chosen by trial on skies with a sun, for energy first, then log2 error.
"""

import math

import numpy as np

from skykiln.formats.bc6h import half_between, is_anchor, subset_of, unpack_block, unquantise
from skykiln.formats.bc6h_cost import block_cost, channel_cost, facts_of, flux_cost, texel_cost, weight_of
from skykiln.formats.bc6h_layout import ENDPOINT_BITS, PARTITION, PARTITIONS, SUBSETS
from skykiln.formats.bc6h_least_squares import least_squares
from skykiln.formats.bc6h_pack import fits, pack_block
from skykiln.formats.half import half_value
from skykiln.jit import exact

_FLUX_COST = 10.0  # K
_TRIED = 4  # beginnings that are improved
_ROUNDS = 2
_FIRST_FLUX_COST = 3.0  # while beginnings are compared: near is near enough
_CHEAP = 1.05  # a block put right that costs about what its own errors did before stays
_STEPS = np.array([8, 4, 2, 1])
_REACH = 3  # steps around every end of a channel that are tried together
_WIDE = 2 * _REACH + 1
_NEARBY = _WIDE**2  # shifts of the two ends of a subset
_STAY = _NEARBY // 2  # the one that moves neither
# Where the texels' spread ends: not at the last weight, values between it and the end can be hit finer.
_SPREADS = np.array([64, 60, 55]) / 64.0


def refit_blocks(blocks, halves, aims, free, peak, seen) -> np.ndarray:
    """Fit blocks again.

    Parameters
    ----------
    blocks : (count, 2) uint64, as an encoder made them.
    halves : (count, 16, 3) uint16, the half bits that they stand for.
    aims : (count, 3) float64, per channel the sum of values that the block is to have.
    free : (count, 3) float64, the relative error of that sum that costs nothing.
    peak : (3,) int, half bits of the level's largest values, which are to come out near; 0 for none.
    seen : (16,) bool, texels that count; the others fill the block.

    Returns
    -------
    (count, 2) uint64, each block the cheapest that was found.
    """
    refitted = np.empty_like(blocks)
    _refit(blocks, np.where(seen[:, None], halves.astype(np.int64), -1), aims, free, peak, refitted)
    return refitted


@exact
def _refit(blocks, targets, aims, frees, peak, refitted):
    values, indices = np.empty(13, np.int64), np.empty(16, np.int64)
    for i in range(len(blocks)):
        target, facts = targets[i], facts_of(aims[i], frees[i], peak)
        best = math.inf
        mode = unpack_block(blocks[i], values, indices)
        if SUBSETS[mode] > 0:
            before = block_cost(mode, values, indices, target, facts, 0.0)
            best = _improve(mode, values, indices, target, facts)
            pack_block(mode, values, indices, refitted[i])
            without_flux = block_cost(mode, values, indices, target, facts, 0.0)
            if best == without_flux and best <= _CHEAP * before:
                continue
        for start in _best_starts(target, facts):
            mode = _begin(start, target, facts, values, indices)
            cost = _improve(mode, values, indices, target, facts)
            if cost < best:
                best = cost
                pack_block(mode, values, indices, refitted[i])


@exact
def _best_starts(target, facts):
    """Numbers of the cheapest beginnings."""
    values, indices = np.empty(13, np.int64), np.empty(16, np.int64)
    costs = np.empty(2 * (len(_SPREADS) + len(PARTITIONS)))
    for start in range(len(costs)):
        mode = _begin(start, target, facts, values, indices)
        costs[start] = block_cost(mode, values, indices, target, facts, _FIRST_FLUX_COST)
    return np.argsort(costs)[:_TRIED]


@exact
def _begin(start, target, facts, values, indices):
    """A new block, in place: one of two weightings, and a spread of one subset, or a partition of two."""
    one = start // 2 < len(_SPREADS)
    spread = _SPREADS[start // 2] if one else 1.0
    partition = -1 if one else start // 2 - len(_SPREADS)
    mode = least_squares(target, partition, start % 2 == 1, spread, values, indices)
    _improve_indices(mode, values, indices, target, facts, _FIRST_FLUX_COST)
    return mode


@exact
def _improve(mode, values, indices, target, facts):
    """Move endpoints and indices downhill, in place. Returns the cost."""
    _move_once(mode, values, indices, target, facts, _FIRST_FLUX_COST)
    for _ in range(_ROUNDS):
        for c in range(3):
            _improve_ends(mode, values, indices, target, c, facts[c], _FLUX_COST)
        _improve_indices(mode, values, indices, target, facts, _FLUX_COST)
    for c in range(3):
        _improve_ends(mode, values, indices, target, c, facts[c], _FLUX_COST)
    return block_cost(mode, values, indices, target, facts, _FLUX_COST)


@exact
def _move_once(mode, values, indices, target, facts, strength):
    """Every endpoint, then every index, once. Returns the cost."""
    for c in range(3):
        _improve_channel(mode, values, indices, target, c, facts[c], strength)
    _improve_indices(mode, values, indices, target, facts, strength)
    return block_cost(mode, values, indices, target, facts, strength)


@exact
def _improve_channel(mode, values, indices, target, c, facts, strength):
    """Try every endpoint of one channel at smaller and smaller steps."""
    best = channel_cost(mode, values, indices, target, c, facts, strength)
    for step in _STEPS:
        for k in range(c, 6 * SUBSETS[mode], 3):
            for change in (-step, step):
                while True:
                    values[k] += change
                    cost = math.inf
                    if fits(mode, values, c):
                        cost = channel_cost(mode, values, indices, target, c, facts, strength)
                    if cost >= best:
                        values[k] -= change
                        break
                    best = cost


@exact
def _improve_ends(mode, values, indices, target, c, facts, strength):
    """Try the ends of all subsets together, every combination nearby: the flux is the sum of all."""
    two = SUBSETS[mode] == 2
    errors, totals = np.zeros((2, _NEARBY)), np.zeros((2, _NEARBY))
    for subset in range(SUBSETS[mode]):
        _price_ends(mode, values, indices, target, c, facts, subset, errors[subset], totals[subset])
    best, best_0, best_1 = math.inf, _STAY, _STAY
    for i in range(_NEARBY):
        for k in range(0 if two else _STAY, _NEARBY if two else _STAY + 1):
            error = errors[0, i] + errors[1, k]
            if error < best:
                cost = error + flux_cost(totals[0, i] + totals[1, k], facts, strength)
                if cost < best and _shifts_fit(mode, values, c, i, k):
                    best, best_0, best_1 = cost, i, k
    _shift_ends(values, c, best_0, 1)
    _shift_ends(values, 6 + c, best_1, 1)


@exact
def _shift_ends(values, low, number, sign):
    """Move two ends by the shifts of a number below `_NEARBY`, or back; `_STAY` moves none."""
    values[low] += sign * (number // _WIDE - _REACH)
    values[low + 3] += sign * (number % _WIDE - _REACH)


@exact
def _shifts_fit(mode, values, c, first, second):
    _shift_ends(values, c, first, 1)
    _shift_ends(values, 6 + c, second, 1)
    possible = fits(mode, values, c)
    _shift_ends(values, c, first, -1)
    _shift_ends(values, 6 + c, second, -1)
    return possible


@exact
def _price_ends(mode, values, indices, target, c, facts, subset, errors, totals):
    """Of every shift of a subset's ends: what its texels add to J, and to the flux."""
    two, bits, low = SUBSETS[mode] == 2, ENDPOINT_BITS[mode], 6 * subset + c
    most = (np.int64(1) << bits) - 1
    for number in range(_NEARBY):
        _shift_ends(values, low, number, 1)
        first, second = values[low], values[low + 3]
        _shift_ends(values, low, number, -1)
        if min(first, second) < 0 or max(first, second) > most:
            errors[number] = math.inf
            continue
        first, second = unquantise(first, bits), unquantise(second, bits)
        for texel in range(16):
            if subset_of(texel, two, values[PARTITION]) == subset and target[texel, c] >= 0:
                half = half_between(first, second, weight_of(two, indices[texel]))
                value = half_value(half)
                errors[number] += texel_cost(half, value, target[texel, c], facts)
                totals[number] += value


@exact
def _improve_indices(mode, values, indices, target, facts, strength):
    """Give each texel in turn the index that makes J least, the others staying as they are."""
    two, bits = SUBSETS[mode] == 2, ENDPOINT_BITS[mode]
    count = 8 if two else 16
    halves = np.empty((2, 16, 3), np.int64)
    for subset in range(SUBSETS[mode]):
        for c in range(3):
            low, high = values[6 * subset + c], values[6 * subset + 3 + c]
            low, high = unquantise(low, bits), unquantise(high, bits)
            for index in range(count):
                halves[subset, index, c] = half_between(low, high, weight_of(two, index))
    total = np.zeros(3)
    for texel in range(16):
        for c in range(3 if target[texel, 0] >= 0 else 0):
            total[c] += half_value(halves[subset_of(texel, two, values[PARTITION]), indices[texel], c])
    for texel in range(16):
        if target[texel, 0] < 0:
            continue
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
            value = half_value(palette[index, c])
            cost += texel_cost(palette[index, c], value, target[c], facts[c])
            cost += flux_cost(total[c] + value, facts[c], strength)
        if cost < best:
            best, indices[texel] = cost, index
    for c in range(3):
        total[c] += half_value(palette[indices[texel], c])
