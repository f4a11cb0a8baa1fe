"""Coded BC6H blocks beside what they stand for: how far each is off."""

from typing import NamedTuple

import numpy as np

from skykiln.formats.bc6h import decode_blocks
from skykiln.formats.half import half_value
from skykiln.jit import exact


class CodedLevel(NamedTuple):
    """Blocks of a level, or of some of it."""

    halves: np.ndarray  # (count, 16, 3) uint16, the half bits that were to be coded
    blocks: np.ndarray  # (count, 2) uint64, low half first
    squared: np.ndarray  # (count,) float64, sum of squared differences in half bits / 1024, about the log2
    flux: np.ndarray  # (count, 3) float64, the sum of the values wanted
    error: np.ndarray  # (count, 3) float64, what the coded values add to that sum
    tallest: np.ndarray  # (count, 2, 3) int64, half bits of the largest value: wanted, and coded

    def replace(self, numbers, others: "CodedLevel", chosen=slice(None)):
        """Take over what the chosen ones of other codings of the same texels became."""
        for mine, theirs in zip(self[1:], others[1:], strict=True):
            mine[numbers] = theirs[chosen]


def measure_blocks(halves, blocks, seen) -> CodedLevel:
    """Decode blocks and compare them with the half bits that they stand for, at the texels that are seen:
    (16,) bool."""
    count = len(halves)
    level = CodedLevel(
        halves, blocks.copy(), np.empty(count), *(np.empty((count, 3)) for _ in range(2)),
        np.empty((count, 2, 3), np.int64),
    )  # fmt: skip
    texels = slice(None) if seen.all() else seen
    _measure(halves[:, texels], decode_blocks(blocks)[:, texels], *level[2:])
    return level


@exact
def _measure(wanted, coded, squared, flux, error, tallest):
    for i in range(len(wanted)):
        squared[i] = 0.0
        for c in range(3):
            flux[i, c], error[i, c] = 0.0, 0.0
            tallest[i, 0, c], tallest[i, 1, c] = wanted[i, :, c].max(), coded[i, :, c].max()
            for texel in range(wanted.shape[1]):
                a, b = np.int64(wanted[i, texel, c]), np.int64(coded[i, texel, c])
                squared[i] += ((a - b) / 1024.0) ** 2
                flux[i, c] += half_value(a)
                error[i, c] += half_value(b) - half_value(a)
