"""The data format descriptor of a KTX2 file (Khronos Data Format specification 1.4, chapters 4, 5)."""

import struct
from collections.abc import Iterator

from skykiln.formats.pixels import Coding

_BLOCK = struct.Struct("<IHHBBBB4B8B")
_SAMPLE = struct.Struct("<HBB4BII")
_VERSION = 2  # of KDF 1.3 and later
_LINEAR = 1  # KHR_DF_TRANSFER_LINEAR
# KDF 1.4, colorPrimaries; 7 is called ACESCC there, whose primaries are those of ACEScg.
PRIMARIES = {
    "unspecified": 0, "rec709": 1, "rec2020": 4, "aces2065_1": 6, "acescg": 7, "display_p3": 10,
}  # fmt: skip
_PRIMARIES_BYTE = 13


def write_dfd(coding: Coding, primaries: str) -> bytes:
    """The whole descriptor, its total size first; `primaries` is a key of `PRIMARIES`."""
    side = coding.block_side - 1
    size = _BLOCK.size + _SAMPLE.size * len(coding.samples)
    block = _BLOCK.pack(
        0, _VERSION, size, coding.model, PRIMARIES[primaries], _LINEAR, 0,
        side, side, 0, 0, coding.block_bytes, *[0] * 7,
    )  # fmt: skip
    samples = (
        _SAMPLE.pack(s.bit_offset, s.bit_length, s.channel, 0, 0, 0, 0, s.lower, s.upper)
        for s in coding.samples
    )
    return struct.pack("<I", 4 + size) + block + b"".join(samples)


def read_primaries(data: bytes) -> str:
    """The primaries' name, of a descriptor without broken rules."""
    return _primaries_name(data[_PRIMARIES_BYTE])


def _primaries_name(number: int) -> str | None:
    return next((name for name, known in PRIMARIES.items() if known == number), None)


def broken_dfd_rules(data: bytes, coding: Coding) -> Iterator[str]:
    """What in a descriptor isn't as the coding needs it, field by field."""
    expected = write_dfd(coding, "rec709")
    if len(data) != len(expected):
        yield f"dfdByteLength is {len(data)}, not the {len(expected)} that this vkFormat takes"
        return
    primaries = _primaries_name(data[_PRIMARIES_BYTE])
    if primaries is None:
        yield f"DFD colorPrimaries is {data[_PRIMARIES_BYTE]}, none of {sorted(PRIMARIES.values())}"
        return
    expected = write_dfd(coding, primaries)
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
