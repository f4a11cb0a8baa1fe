"""The BC6H decoder: imagecodecs bit for bit in all modes, and blocks worked by hand."""

import imagecodecs
import numpy as np
import pytest

from skykiln.formats.bc6h import decode_bc6h, decode_blocks
from skykiln.formats.bc6h_layout import MODES, PLACE_COUNT, PLACES

RESERVED = (19, 23, 27, 31)


def random_blocks(mode, count, seed=0):
    """(count, 2) uint64 with the bits of a mode and random others."""
    blocks = np.random.default_rng((seed, mode)).integers(0, 1 << 64, (count, 2), np.uint64)
    mask = np.uint64(3 if mode < 2 else 31)
    blocks[:, 0] = blocks[:, 0] & ~mask | np.uint64(mode)
    return blocks


@pytest.mark.parametrize("mode", [*MODES, *RESERVED])
def test_random_blocks_decode_as_imagecodecs_decodes_them(mode):
    blocks = random_blocks(mode, 2000)
    theirs = imagecodecs.bcn_decode(blocks.tobytes(), 6, shape=(4, 8000, 3))
    by_block = theirs.view(np.uint16).reshape(4, 2000, 4, 3).transpose(1, 0, 2, 3).reshape(2000, 16, 3)
    np.testing.assert_array_equal(decode_blocks(blocks), by_block)


def block_of(*fields):
    """A block of (value, bits) pairs, the first in the lowest bits."""
    number, start = 0, 0
    for value, bits in fields:
        number |= value << start
        start += bits
    return number.to_bytes(16, "little")


def test_block_of_mode_3_worked_by_hand():
    # KDF 1.4, 20.2: mode 00011, six endpoints of 10 bits, then indices of 3 + 15 x 4 bits.
    ends = [(v, 10) for v in (0, 512, 1023, 1023, 512, 0)]
    indices = [(0, 3), (15, 4), (7, 4)] + [(0, 4)] * 13
    decoded = decode_bc6h(block_of((3, 5), *ends, *indices), (4, 4)).astype(np.float16).view(np.uint16)
    # 512 -> (512 << 15) + 0x4000 >> 9 = 32800; half bits v * 31 >> 6; the largest is 65504 = 0x7BFF.
    middle = 32800 * 31 >> 6
    np.testing.assert_array_equal(decoded[0, 0], [0, middle, 0x7BFF])
    np.testing.assert_array_equal(decoded[0, 1], [0x7BFF, middle, 0])
    # Weight 7 of 15 is 30/64.
    low, high = (34 * 0 + 30 * 65535 + 32 >> 6), (34 * 65535 + 32 >> 6)
    np.testing.assert_array_equal(decoded[0, 2], [low * 31 >> 6, middle, high * 31 >> 6])
    np.testing.assert_array_equal(decoded[3, 3], decoded[0, 0])


def test_mode_15_keeps_any_half_exactly():
    # Sixteen bits: the ten low ones of endpoint 0, deltas 0, then bits 15 to 10 of endpoint 0.
    value = 0x5A3C * 64 // 31 + 1
    low, high = value & 1023, int(f"{value >> 10:06b}"[::-1], 2)
    block = block_of((15, 5), *[(low, 10)] * 3, *[(0, 4), (high, 6)] * 3)
    decoded = decode_bc6h(block, (4, 4)).astype(np.float16).view(np.uint16)
    np.testing.assert_array_equal(decoded, 0x5A3C)


def test_negative_delta_counts_from_endpoint_0():
    # Mode 7: 11 bits, deltas of 9 in two's complement; bit 10 of endpoint 0 stands behind each delta.
    block = block_of((7, 5), *[(600, 10)] * 3, *[(511, 9), (0, 1)] * 3, (0, 3), (15, 4))
    decoded = decode_bc6h(block, (4, 4)).astype(np.float16).view(np.uint16)
    unquantised = [(v << 15) + 0x4000 >> 10 for v in (600, 599)]
    assert [decoded[0, 0, 0], decoded[0, 1, 0]] == [u * 31 >> 6 for u in unquantised]


def test_every_mode_fills_the_bits_before_its_indices():
    for number, mode in MODES.items():
        places = PLACES[number, : PLACE_COUNT[number]]
        assert len(set(places)) == len(places)
        assert len(places) + (2 if number < 2 else 5) == (65 if mode.subsets == 1 else 82)


def test_blocks_lie_row_by_row_and_partial_ones_are_cut():
    blocks = b"".join(block_of((3, 5), *[(v, 10)] * 6) for v in range(0, 480, 80))
    decoded = decode_bc6h(blocks, (1, 6, 9))
    assert decoded.shape == (1, 6, 9, 3)
    assert decoded.dtype == np.float32
    corners = decoded[0, ::4, ::4, 0]
    assert (np.diff(corners.ravel()) > 0).all()
    assert (decoded[0, 4:, 8] == corners[1, 2]).all()
