"""The parts of a BC6H block put together: the inverse of `bc6h.unpack_block`."""

import numpy as np

from skykiln.formats.bc6h import is_anchor
from skykiln.formats.bc6h_layout import (
    DELTA_BITS,
    ENDPOINT_BITS,
    PARTITION,
    PLACE_COUNT,
    PLACES,
    SUBSETS,
)
from skykiln.jit import exact


@exact
def pack_block(mode, values, indices, block):
    """Write the 16 bytes of a block of parts that `fits` allows into `block` (2,) uint64."""
    block[:] = 0
    start = 2 if mode < 2 else 5
    _put(block, 0, mode, start)
    mask = (np.int64(1) << ENDPOINT_BITS[mode]) - 1
    for k in range(PLACE_COUNT[mode]):
        place = PLACES[mode, k]
        row, bit = place >> 4, place & 15
        value = values[row]
        if 3 <= row < PARTITION and DELTA_BITS[mode, row % 3]:
            value = (value - values[row % 3]) & mask
        _put(block, start + k, value >> bit & 1, 1)
    two = SUBSETS[mode] == 2
    start, width = (82, 3) if two else (65, 4)
    for texel in range(16):
        bits = width - 1 if is_anchor(texel, two, values[PARTITION]) else width
        _put(block, start, indices[texel], bits)
        start += bits


@exact
def _put(block, start, value, count):
    for k in range(count):
        position = start + k
        block[position >> 6] |= np.uint64(value >> k & 1) << np.uint64(position & 63)


@exact
def fits(mode, values, channel):
    """Whether a channel's endpoints can be stored: in range, and so their differences to endpoint 0."""
    limit = np.int64(1) << ENDPOINT_BITS[mode]
    bits = DELTA_BITS[mode, channel]
    reach = np.int64(1) << (bits - 1) if bits else limit
    for k in range(channel, 6 * SUBSETS[mode], 3):
        delta = values[k] - values[channel]
        if values[k] < 0 or values[k] >= limit or delta < -reach or delta >= reach:
            return False
    return True
