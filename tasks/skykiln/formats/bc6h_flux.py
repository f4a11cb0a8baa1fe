"""Which blocks of a BC6H level are to be fitted again, so that the level keeps its energy and its peak.

A block that is off by 1 % of its flux is put right if that is anything of the level's energy: a dark one
that holds a millionth of it needs nothing. Then, while the level's energy as a whole is off, the blocks
that lost or won most are aimed at what is missing, a little each.

In a level of a few blocks each is a good part of the whole, and its errors may stay where those of others
cancel them: several fits of every block are made, and those are kept that together come nearest to the
texels while the level's energy is right, as the sum of all texels and by their solid angles.
"""

from itertools import combinations, product

import numpy as np

from skykiln.formats.bc6h import decode_blocks
from skykiln.formats.bc6h_measure import measure_blocks
from skykiln.formats.bc6h_refit import refit_blocks

_OFF = 0.01  # a channel's flux in a block that is wrong by this share,
_OFF_LEVEL = 1e-4  # and by this share of the level's
_LEVEL = 1e-3  # share of a level's flux that may be lost or won, of its 3e-3
_SHARES = np.array([0.003, 0.02])  # of its flux, by which a block may make up for others; round by round
_TRIES = 64  # blocks in each round
_FEW = 6  # blocks of a level (4 x 4 faces and less) that are chosen together
_LEVEL_OF_FEW = 2e-3  # of which this share may be lost or won
_AIMS = (1.0, 0.99, 1.01, 0.98, 1.02)  # shares of a block's flux that its fits aim at,
_FREE = (0.02, 0.01)  # and the relative error that they are allowed
_FLUX_COST = 1e6  # of the squared share that a level's energy is off, beside its squared error
_DIM = 0.05  # a channel's flux counts as at least this share of the brightest channel's
_LARGE = 384  # blocks of a level (32 x 32 faces) whose peak is kept; fewer have no bits to spare for it
_PEAK = 0.015  # the peak's own relative error
_NO_PEAK = np.zeros(3, np.int64)


def put_flux_right(level, weights, threads):
    """Refit blocks of a `CodedLevel` in place, on the threads of an executor.

    Parameters: weights (2, 16) : of a block's texels in the level's energy, if it has one block a face
    """
    whole = _not_dim(level.flux.sum(0))
    seen = weights[0] > 0
    peak = level.tallest[:, 0].max(0) if len(level.blocks) >= _LARGE else _NO_PEAK
    if len(level.blocks) <= _FEW:
        return _choose_together(level, weights, threads)
    _refit_those_off(level, whole, peak, seen, threads)
    for share in _SHARES:
        _balance(level, whole, peak, seen, share)


def _not_dim(flux):
    return np.maximum(flux, _DIM * flux.max(-1, keepdims=True)) + 1e-9


def _refit(level, numbers, aims, free, peak, seen):
    """Blocks of the level fitted again: a `CodedLevel` of these alone."""
    blocks = refit_blocks(level.blocks[numbers], level.halves[numbers], aims, free, peak, seen)
    return measure_blocks(level.halves[numbers], blocks, seen)


def _refit_those_off(level, whole, peak, seen, threads):
    allowed = np.maximum(_OFF * _not_dim(level.flux), _OFF_LEVEL * whole)
    off = np.flatnonzero((np.abs(level.error) > allowed).any(1) | _is_peak_off(level, peak))

    def refit_some(numbers):
        flux = level.flux[numbers]
        free = allowed[numbers] / _not_dim(flux)
        level.replace(numbers, _refit(level, numbers, flux, free, peak, seen))

    list(threads.map(refit_some, (off[k : k + 8] for k in range(0, len(off), 8))))


def _is_peak_off(level, peak):
    """Blocks of texels that rose above the level's peak, or whose peak was the level's and fell."""
    wanted, coded = (_values(bits) for bits in level.tallest.transpose(1, 0, 2))
    top = _values(peak)
    fell = (wanted == top) & (coded < (1 - _PEAK) * top)
    return ((peak > 0) & ((coded > (1 + _PEAK) * top) | fell)).any(1)


def _values(bits):
    return bits.astype(np.uint16).view(np.float16).astype(np.float64)


def _choose_together(level, weights, threads):
    """Of every block the fit that makes the level's squared error and its energy's together least: pairs
    of blocks are changed for as long as that helps."""
    every, seen = np.arange(len(level.blocks)), weights[0] > 0

    def fit(aim, free):
        return _refit(level, every, level.flux * aim, np.full_like(level.flux, free), _NO_PEAK, seen)

    fits = [level, *threads.map(fit, *zip(*product(_AIMS, _FREE), strict=True))]
    squared = np.stack([fit.squared for fit in fits])
    wanted, *coded = (
        _energies(halves, weights) for halves in (level.halves, *(decode_blocks(fit.blocks) for fit in fits))
    )
    errors = (np.stack(coded) - wanted) / _not_dim(wanted.sum(0))[None, None]
    chosen = np.zeros(len(every), np.int64)
    while any(_choose_pair(squared, errors, chosen, pair) for pair in combinations(every, 2)):
        pass
    for number, choice in enumerate(chosen):
        level.replace(number, fits[choice], number)


def _energies(halves, weights):
    """(blocks, 2, 3): sums over each block's texels by both weights."""
    return np.einsum("wt,btc->bwc", weights, _values(halves))


def _choose_pair(squared, errors, chosen, pair) -> bool:
    """Choose the best fits of two blocks, the others staying as they are. Returns whether that changed any.

    Parameters: squared (fits, blocks); errors (fits, blocks, 2, 3), in shares of the level's energy
                chosen (blocks,), changed in place
    """
    a, b = pair
    before = chosen[a], chosen[b]
    others = errors[chosen, np.arange(len(chosen))].sum(0) - errors[before[0], a] - errors[before[1], b]
    off = np.abs(others + errors[:, None, a] + errors[None, :, b])
    costs = squared[:, None, a] + squared[None, :, b]
    costs = costs + _FLUX_COST * np.square(np.maximum(off - _LEVEL_OF_FEW, 0)).sum((-2, -1))
    if costs.min() >= costs[before]:
        return False
    chosen[a], chosen[b] = np.unravel_index(costs.argmin(), costs.shape)
    return True


def _balance(level, whole, peak, seen, share):
    """Aim blocks, the most guilty first, at what the level lacks or has too much."""
    left = level.error.sum(0)
    for number in np.argsort(-(np.abs(level.error) / whole).max(1), kind="stable")[:_TRIES]:
        if (np.abs(left) <= _LEVEL * whole).all():
            return
        numbers, flux = np.array([number]), level.flux[number]
        others = left - level.error[number]
        aim = flux - np.clip(others, -share * flux, share * flux)
        free = np.clip(_LEVEL / 2 * whole / np.maximum(flux, 1e-9), 5e-4, _OFF)
        again = _refit(level, numbers, aim[None], free[None], peak, seen)
        now = others + again.error[0]
        if (np.abs(now) / whole).max() < (np.abs(left) / whole).max():
            level.replace(numbers, again)
            left = now
