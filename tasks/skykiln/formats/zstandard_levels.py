"""Mip levels as Zstandard frames (KTX 2.0, "Supercompression Scheme Notes"; RFC 8878).

Each level is one frame of its own, with the size of its content in the frame's header.
"""

from collections.abc import Iterator

import zstandard

_MAGIC = b"\x28\xb5\x2f\xfd"
# The densest frame there is: blocks of 128 KiB, each one byte repeated, in four bytes (RFC 8878, 3.1.1.2).
_DENSEST = 1 << 15


def compress_level(level: bytes, strength: int) -> bytes:
    """One frame; the same bytes for the same library version."""
    return zstandard.ZstdCompressor(level=strength, write_content_size=True).compress(level)


def decompress_level(frame: bytes, size: int) -> bytes:
    """The frame's content, of the size that `broken_frame_rules` has checked.

    Raises: ValueError if the frame is damaged, or more than one frame.
    """
    try:
        level = zstandard.ZstdDecompressor().decompress(frame, size, allow_extra_data=False)
    except (zstandard.ZstdError, MemoryError) as error:
        raise ValueError(f"its Zstandard frame can't be read ({error})") from error
    if len(level) != size:
        raise ValueError(f"its Zstandard frame holds {len(level)} bytes, not {size}")
    return level


def broken_frame_rules(frame: bytes, size: int, level: int) -> Iterator[str]:
    """What the frame's header says, before any memory is taken for its content."""
    if frame[:4] != _MAGIC:
        yield f"level {level}: does not begin with the magic number of a Zstandard frame"
        return
    try:
        content = zstandard.frame_content_size(frame)
    except zstandard.ZstdError as error:
        yield f"level {level}: its Zstandard frame header can't be read ({error})"
        return
    if content != size:
        yield f"level {level}: its Zstandard frame gives a content of {content} bytes, not {size}"
    elif size > _DENSEST * len(frame):
        yield f"level {level}: {len(frame)} bytes of Zstandard can't hold {size} bytes"
