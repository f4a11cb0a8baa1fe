"""The memory that a probe is expected to take, guessed from the size of its source's file."""

from pathlib import Path

PACKED_PIXEL = 1.5  # bytes of a pixel of a packed half-float file
PROCESS_BYTES = 150 << 20  # numerics and kernels, loaded
PIXEL_BYTES = 60  # of the panorama with its node pyramid (measured: 2.0 GB in all for 8192 x 4096)


def expected_bytes(pinned) -> int:
    """A guess at the memory of a process that bakes a probe; too much for files that are not packed."""
    return PROCESS_BYTES + int(PIXEL_BYTES * source_bytes(pinned) / PACKED_PIXEL)


def source_bytes(pinned) -> int:
    """Size of a probe's source file; 0 if there is none."""
    try:
        return Path(pinned.source_path).stat().st_size
    except OSError:
        return 0
