"""Where everything stands in a KTX2 file (KTX 2.0, "File Structure"): shared by writer, reader, rules."""

import struct
from math import lcm
from typing import NamedTuple

from skykiln.formats.mip_levels import level_size
from skykiln.formats.pixels import PIXELS, Coding

IDENTIFIER = b"\xabKTX 20\xbb\r\n\x1a\n"
PLAIN, ZSTANDARD = 0, 2  # supercompressionScheme
_HEADER = struct.Struct("<13I2Q")
HEADER_BYTES = len(IDENTIFIER) + _HEADER.size
_LEVEL = struct.Struct("<3Q")


class Header(NamedTuple):
    """The header behind the identifier, in the file's order and by the specification's names."""

    vkFormat: int
    typeSize: int
    pixelWidth: int
    pixelHeight: int
    pixelDepth: int
    layerCount: int
    faceCount: int
    levelCount: int
    supercompressionScheme: int
    dfdByteOffset: int
    dfdByteLength: int
    kvdByteOffset: int
    kvdByteLength: int
    sgdByteOffset: int
    sgdByteLength: int


class LevelPlace(NamedTuple):
    """One entry of the level index."""

    byteOffset: int
    byteLength: int
    uncompressedByteLength: int


def write_header(header: Header) -> bytes:
    return IDENTIFIER + _HEADER.pack(*header)


def read_header(data: bytes) -> Header:
    return Header(*_HEADER.unpack_from(data, len(IDENTIFIER)))


def write_index(places: list[LevelPlace]) -> bytes:
    return b"".join(_LEVEL.pack(*place) for place in places)


def read_index(data: bytes, levels: int) -> list[LevelPlace]:
    return [LevelPlace(*_LEVEL.unpack_from(data, HEADER_BYTES + _LEVEL.size * p)) for p in range(levels)]


def index_end(levels: int) -> int:
    """Where the level index ends and the data format descriptor starts."""
    return HEADER_BYTES + _LEVEL.size * levels


def coding_name(vk_format: int) -> str | None:
    """The coding with this Vulkan format."""
    return next((name for name, coding in PIXELS.items() if coding.vk_format == vk_format), None)


def level_lengths(header: Header, coding: Coding) -> list[int]:
    """Bytes of every level before supercompression, the base first."""
    sizes = (level_size(header.pixelWidth, header.pixelHeight, p) for p in range(header.levelCount))
    return [coding.level_bytes(header.faceCount, height, width) for width, height in sizes]


def place_levels(start: int, lengths: list[int], alignment: int) -> list[int]:
    """Offsets of the levels, the base first: in the file the smallest comes first ("Mip Level Array"),
    each on the next multiple of `alignment`."""
    offsets = []
    for length in reversed(lengths):
        offsets.append(start + -start % alignment)
        start = offsets[-1] + length
    return offsets[::-1]


def level_alignment(coding: Coding, scheme: int) -> int:
    """"mipPadding": the least common multiple of a block's bytes and 4; none between packed levels."""
    return lcm(coding.block_bytes, 4) if scheme == PLAIN else 1
