"""The bit layout of BC6H, unsigned: fourteen modes, partitions, weights.

Source: Khronos Data Format specification 1.4, section 20.2 (the tables of the Direct3D 11 functional
specification give the same bits). A block is 128 bits, bit 0 the lowest of byte 0. Up to four endpoints
0 to 3 of three channels; those of subset 0 are 0 and 1, of subset 1 they are 2 and 3.
"""

from typing import NamedTuple

import numpy as np


class Mode(NamedTuple):
    """One mode. `fields` lists the bits behind the mode bits in the block's order: 'r0:9-0' is red of
    endpoint 0, bits 0 to 9; 'r0:10-11' is bit 11, then bit 10; 'p' is the partition."""

    subsets: int
    endpoint_bits: int
    delta_bits: tuple[int, int, int] | None  # None: endpoints 1 to 3 are stored whole
    fields: str


MODES = {
    0: Mode(2, 10, (5, 5, 5), "g2:4 b2:4 b3:4 r0:9-0 g0:9-0 b0:9-0 r1:4-0 g3:4 g2:3-0 g1:4-0 b3:0 g3:3-0"
            " b1:4-0 b3:1 b2:3-0 r2:4-0 b3:2 r3:4-0 b3:3 p:4-0"),
    1: Mode(2, 7, (6, 6, 6), "g2:5 g3:4 g3:5 r0:6-0 b3:0 b3:1 b2:4 g0:6-0 b2:5 b3:2 g2:4 b0:6-0 b3:3 b3:5"
            " b3:4 r1:5-0 g2:3-0 g1:5-0 g3:3-0 b1:5-0 b2:3-0 r2:5-0 r3:5-0 p:4-0"),
    2: Mode(2, 11, (5, 4, 4), "r0:9-0 g0:9-0 b0:9-0 r1:4-0 r0:10 g2:3-0 g1:3-0 g0:10 b3:0 g3:3-0 b1:3-0"
            " b0:10 b3:1 b2:3-0 r2:4-0 b3:2 r3:4-0 b3:3 p:4-0"),
    6: Mode(2, 11, (4, 5, 4), "r0:9-0 g0:9-0 b0:9-0 r1:3-0 r0:10 g3:4 g2:3-0 g1:4-0 g0:10 g3:3-0 b1:3-0"
            " b0:10 b3:1 b2:3-0 r2:3-0 b3:0 b3:2 r3:3-0 g2:4 b3:3 p:4-0"),
    10: Mode(2, 11, (4, 4, 5), "r0:9-0 g0:9-0 b0:9-0 r1:3-0 r0:10 b2:4 g2:3-0 g1:3-0 g0:10 b3:0 g3:3-0"
             " b1:4-0 b0:10 b2:3-0 r2:3-0 b3:1 b3:2 r3:3-0 b3:4 b3:3 p:4-0"),
    14: Mode(2, 9, (5, 5, 5), "r0:8-0 b2:4 g0:8-0 g2:4 b0:8-0 b3:4 r1:4-0 g3:4 g2:3-0 g1:4-0 b3:0 g3:3-0"
             " b1:4-0 b3:1 b2:3-0 r2:4-0 b3:2 r3:4-0 b3:3 p:4-0"),
    18: Mode(2, 8, (6, 5, 5), "r0:7-0 g3:4 b2:4 g0:7-0 b3:2 g2:4 b0:7-0 b3:3 b3:4 r1:5-0 g2:3-0 g1:4-0"
             " b3:0 g3:3-0 b1:4-0 b3:1 b2:3-0 r2:5-0 r3:5-0 p:4-0"),
    22: Mode(2, 8, (5, 6, 5), "r0:7-0 b3:0 b2:4 g0:7-0 g2:5 g2:4 b0:7-0 g3:5 b3:4 r1:4-0 g3:4 g2:3-0"
             " g1:5-0 g3:3-0 b1:4-0 b3:1 b2:3-0 r2:4-0 b3:2 r3:4-0 b3:3 p:4-0"),
    26: Mode(2, 8, (5, 5, 6), "r0:7-0 b3:1 b2:4 g0:7-0 b2:5 g2:4 b0:7-0 b3:5 b3:4 r1:4-0 g3:4 g2:3-0"
             " g1:4-0 b3:0 g3:3-0 b1:5-0 b2:3-0 r2:4-0 b3:2 r3:4-0 b3:3 p:4-0"),
    30: Mode(2, 6, None, "r0:5-0 g3:4 b3:0 b3:1 b2:4 g0:5-0 g2:5 b2:5 b3:2 g2:4 b0:5-0 g3:5 b3:3 b3:5 b3:4"
             " r1:5-0 g2:3-0 g1:5-0 g3:3-0 b1:5-0 b2:3-0 r2:5-0 r3:5-0 p:4-0"),
    3: Mode(1, 10, None, "r0:9-0 g0:9-0 b0:9-0 r1:9-0 g1:9-0 b1:9-0"),
    7: Mode(1, 11, (9, 9, 9), "r0:9-0 g0:9-0 b0:9-0 r1:8-0 r0:10 g1:8-0 g0:10 b1:8-0 b0:10"),
    11: Mode(1, 12, (8, 8, 8), "r0:9-0 g0:9-0 b0:9-0 r1:7-0 r0:10-11 g1:7-0 g0:10-11 b1:7-0 b0:10-11"),
    15: Mode(1, 16, (4, 4, 4), "r0:9-0 g0:9-0 b0:9-0 r1:3-0 r0:10-15 g1:3-0 g0:10-15 b1:3-0 b0:10-15"),
}  # fmt: skip

WEIGHTS_3 = np.array([0, 9, 18, 27, 37, 46, 55, 64])
WEIGHTS_4 = np.array([0, 4, 9, 13, 17, 21, 26, 30, 34, 38, 43, 47, 51, 55, 60, 64])

# Of each partition: bit k is the subset of texel k, rows first.
PARTITIONS = np.array([
    0xCCCC, 0x8888, 0xEEEE, 0xECC8, 0xC880, 0xFEEC, 0xFEC8, 0xEC80,
    0xC800, 0xFFEC, 0xFE80, 0xE800, 0xFFE8, 0xFF00, 0xFFF0, 0xF000,
    0xF710, 0x008E, 0x7100, 0x08CE, 0x008C, 0x7310, 0x3100, 0x8CCE,
    0x088C, 0x3110, 0x6666, 0x366C, 0x17E8, 0x0FF0, 0x718E, 0x399C,
])  # fmt: skip
# The texel of subset 1 whose index has no top bit; of subset 0 it is texel 0.
ANCHORS = np.array([15] * 17 + [2, 8, 2, 2, 8, 8, 15, 2, 8, 2, 2, 8, 8, 2, 2])

PARTITION = 12  # the row of the partition among the endpoint values, which are 3 * endpoint + channel


def _places(mode: Mode) -> list[int]:
    """For each bit behind the mode bits: 16 * value + bit, where it belongs."""
    places = []
    for field in mode.fields.split():
        name, _, bits = field.partition(":")
        value = PARTITION if name == "p" else 3 * int(name[1]) + "rgb".index(name[0])
        first, _, last = bits.rpartition("-")
        start, end = int(last), int(first or last)
        step = 1 if start <= end else -1
        places += [16 * value + bit for bit in range(start, end + step, step)]
    return places


def _table(column) -> np.ndarray:
    """(32, ...) array with a row for every mode number; reserved numbers keep zeros."""
    rows = {number: np.atleast_1d(column(mode)) for number, mode in MODES.items()}
    table = np.zeros((32, max(len(row) for row in rows.values())), np.int64)
    for number, row in rows.items():
        table[number, : len(row)] = row
    return table


# The same as arrays for the kernels, by mode number; 0 subsets: a reserved number.
SUBSETS = _table(lambda mode: mode.subsets)[:, 0]
ENDPOINT_BITS = _table(lambda mode: mode.endpoint_bits)[:, 0]
DELTA_BITS = _table(lambda mode: mode.delta_bits or (0, 0, 0))  # 0: stored whole
PLACES = _table(_places)
PLACE_COUNT = _table(lambda mode: len(_places(mode)))[:, 0]
