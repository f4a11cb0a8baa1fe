"""The data format descriptor of a KTX2 file (Khronos Data Format specification 1.4, chapters 4, 5)."""

import struct
from collections.abc import Iterator

from skykiln.formats.pixels import Coding

_BLOCK = struct.Struct("<IHHBBBB4B8B")
_SAMPLE = struct.Struct("<HBB4BII")
_VERSION = 2  # of KDF 1.3 and later
_BT709, _LINEAR = 1, 1  # KHR_DF_PRIMARIES_BT709, KHR_DF_TRANSFER_LINEAR


def write_dfd(coding: Coding) -> bytes:
    """The whole descriptor, its total size first."""
    side = coding.block_side - 1
    size = _BLOCK.size + _SAMPLE.size * len(coding.samples)
    block = _BLOCK.pack(
        0, _VERSION, size, coding.model, _BT709, _LINEAR, 0, side, side, 0, 0, coding.block_bytes, *[0] * 7
    )
    samples = (
        _SAMPLE.pack(s.bit_offset, s.bit_length, s.channel, 0, 0, 0, 0, s.lower, s.upper)
        for s in coding.samples
    )
    return struct.pack("<I", 4 + size) + block + b"".join(samples)


def broken_dfd_rules(data: bytes, coding: Coding) -> Iterator[str]:
    """What in a descriptor isn't as the coding needs it, field by field."""
    expected = write_dfd(coding)
    if len(data) != len(expected):
        yield f"dfdByteLength is {len(data)}, not the {len(expected)} that this vkFormat takes"
        return
    for name, start, end in _fields(len(coding.samples)):
        if data[start:end] != expected[start:end]:
            yield f"DFD {name} is {data[start:end].hex(' ')}, not {expected[start:end].hex(' ')}"


def _fields(samples: int) -> Iterator[tuple[str, int, int]]:
    """Name, first byte and end of every field, the descriptor's total size included."""
    sizes = {
        "dfdTotalSize": 4, "vendorId and descriptorType": 4, "versionNumber": 2, "descriptorBlockSize": 2,
        "colorModel": 1, "colorPrimaries": 1, "transferFunction": 1, "flags": 1,
        "texelBlockDimension": 4, "bytesPlane": 8,
    }  # fmt: skip
    parts = {"bitOffset": 2, "bitLength": 1, "channelType": 1, "position": 4, "lower": 4, "upper": 4}
    for sample in range(samples):
        sizes |= {f"sample {sample} {name}": size for name, size in parts.items()}
    start = 0
    for name, size in sizes.items():
        yield name, start, start + size
        start += size
