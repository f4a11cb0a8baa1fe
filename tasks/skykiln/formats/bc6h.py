"""BC6H, unsigned: blocks of 4 x 4 texels in 16 bytes, decoded exactly in all modes.

Source: Khronos Data Format specification 1.4, section 20.2. What the tables say stands in
`bc6h_layout`; reserved modes decode to 0.
"""

import numpy as np

from skykiln.formats.bc6h_layout import (
    ANCHORS,
    DELTA_BITS,
    ENDPOINT_BITS,
    PARTITION,
    PARTITIONS,
    PLACE_COUNT,
    PLACES,
    SUBSETS,
    WEIGHTS_3,
    WEIGHTS_4,
)
from skykiln.jit import exact


def decode_bc6h(blocks: bytes, shape) -> np.ndarray:
    """Bytes of blocks, row by row -> (*shape, 3) float32; `shape` is (..., height, width) in texels."""
    *outer, height, width = shape
    rows, columns = -(-height // 4), -(-width // 4)
    texels = decode_blocks(np.frombuffer(blocks, "<u8").reshape(-1, 2)).reshape(-1, rows, columns, 4, 4, 3)
    picture = texels.transpose(0, 1, 3, 2, 4, 5).reshape(*outer, 4 * rows, 4 * columns, 3)
    return picture[..., :height, :width, :].view(np.float16).astype(np.float32)


def decode_blocks(blocks) -> np.ndarray:
    """(count, 2) uint64, low half first -> (count, 16, 3) uint16: the bits of half floats."""
    halves = np.empty((len(blocks), 16, 3), np.uint16)
    _decode(blocks, halves)
    return halves


@exact
def _decode(blocks, halves):
    values, indices = np.empty(13, np.int64), np.empty(16, np.int64)
    for i in range(len(blocks)):
        mode = unpack_block(blocks[i], values, indices)
        interpolate(mode, values, indices, halves[i])


@exact
def bits_at(block, start, count):
    """`count` bits of a block from bit `start` on."""
    bits = np.int64(0)
    for k in range(count):
        position = start + k
        bit = block[position >> 6] >> np.uint64(position & 63) & np.uint64(1)
        bits |= np.int64(bit) << k
    return bits


@exact
def unpack_block(block, values, indices):
    """A block's parts: the endpoints' whole values (3 * endpoint + channel) with the partition behind
    them, and the indices. Returns the mode's number."""
    mode = bits_at(block, 0, 2)
    start = 2
    if mode > 1:
        mode, start = bits_at(block, 0, 5), 5
    values[:] = 0
    for k in range(PLACE_COUNT[mode]):
        place = PLACES[mode, k]
        values[place >> 4] |= bits_at(block, start + k, 1) << (place & 15)
    _add_deltas(mode, values)
    _unpack_indices(block, mode, values[PARTITION], indices)
    return mode


@exact
def _add_deltas(mode, values):
    """Endpoints 1 to 3 are stored as two's complement differences to endpoint 0."""
    mask = (np.int64(1) << ENDPOINT_BITS[mode]) - 1
    for k in range(3, 6 * SUBSETS[mode]):
        bits = DELTA_BITS[mode, k % 3]
        if bits:
            sign = np.int64(1) << (bits - 1)
            values[k] = (values[k % 3] + ((values[k] ^ sign) - sign)) & mask


@exact
def _unpack_indices(block, mode, partition, indices):
    two = SUBSETS[mode] == 2
    start, width = (82, 3) if two else (65, 4)
    for texel in range(16):
        bits = width - 1 if is_anchor(texel, two, partition) else width
        indices[texel] = bits_at(block, start, bits)
        start += bits


@exact
def is_anchor(texel, two, partition):
    """Whether a texel's index is stored without its top bit, which is then 0."""
    return texel == 0 or (two and texel == ANCHORS[partition])


@exact
def subset_of(texel, two, partition):
    return PARTITIONS[partition] >> texel & 1 if two else np.int64(0)


@exact
def unquantise(value, bits):
    """An endpoint in 0..65535."""
    if bits >= 15 or value == 0:
        return value
    if value == (np.int64(1) << bits) - 1:
        return np.int64(0xFFFF)
    return ((value << 15) + 0x4000) >> (bits - 1)


@exact
def half_between(low, high, weight):
    """The half float's bits between two unquantised endpoints, weight in 64ths."""
    return (((64 - weight) * low + weight * high + 32) >> 6) * 31 >> 6


@exact
def interpolate(mode, values, indices, halves):
    """The sixteen texels of a block: (16, 3) half bits."""
    two, bits = SUBSETS[mode] == 2, ENDPOINT_BITS[mode]
    if SUBSETS[mode] == 0:
        halves[:] = 0
        return
    for texel in range(16):
        first = 6 * subset_of(texel, two, values[PARTITION])
        weight = WEIGHTS_3[indices[texel]] if two else WEIGHTS_4[indices[texel]]
        for c in range(3):
            low, high = unquantise(values[first + c], bits), unquantise(values[first + 3 + c], bits)
            halves[texel, c] = half_between(low, high, weight)
