"""How far a decoded value may be from what was encoded: half a step of its coding.

Every encoder rounds to nearest (`pixels`), so the bound follows from the number of mantissa bits, and
near zero from the smallest step. BC6H has no such bound: a block keeps two endpoints per subset and puts
every texel on the line between them. What it may be off there is measured: within `BLOCK_SHARE` of the
block's own range plus a 32nd of its peak (the largest share seen on levels of the sample skies was 2.2).
"""

import numpy as np

FINEST_FIRST = ("float", "half", "rgba16f", "rgb9e5", "r11g11b10f", "bc6h")
BLOCK_SHARE = 4.0


def largest_rounding(pixels: str, level) -> np.ndarray:
    """Bounds of |decoded - encoded| for a decoded level.

    Parameters: pixels : the coding; level : (faces, h, w, 3) float32
    Returns:    (faces, h, w, 3) float32
    """
    return _ROUNDINGS[pixels](level)


def _exact(level):
    return np.zeros_like(level)


def _half(level):
    """11 bits of mantissa; the smallest step is 2^-24."""
    return np.maximum(level * np.float32(2.0**-11), np.float32(2.0**-25))


def _shared_exponent(level):
    """Mantissas of 9 bits, of which the largest channel's is at least 256; the smallest step is 2^-24."""
    red, green, blue = np.moveaxis(level, -1, 0)  # far quicker than a reduction of three
    largest = np.maximum(np.maximum(red, green), blue)[..., None]
    return np.broadcast_to(np.maximum(largest * np.float32(2.0**-9), np.float32(2.0**-25)), level.shape)


def _small_floats(level):
    """7 bits of mantissa and steps from 2^-20 in red and green, 6 and 2^-19 in blue."""
    bits = np.float32([2.0**-7, 2.0**-7, 2.0**-6])
    return np.maximum(level * bits, np.float32([2.0**-21, 2.0**-21, 2.0**-20]))


def _blocks(level):
    faces, height, width, channels = level.shape
    padding = (0, 0), (0, -height % 4), (0, -width % 4), (0, 0)
    padded = np.pad(level, padding, mode="edge")
    blocks = padded.reshape(faces, padded.shape[1] // 4, 4, padded.shape[2] // 4, 4, channels)
    largest, smallest = blocks.max((2, 4)), blocks.min((2, 4))
    reach = (largest - smallest).max(-1, keepdims=True) + largest.max(-1, keepdims=True) / np.float32(32)
    texels = np.repeat(np.repeat(reach, 4, axis=1), 4, axis=2)[:, :height, :width]
    return np.broadcast_to(np.float32(BLOCK_SHARE) * texels, level.shape)


_ROUNDINGS = {
    "float": _exact,
    "half": _half,
    "rgba16f": _half,
    "rgb9e5": _shared_exponent,
    "r11g11b10f": _small_floats,
    "bc6h": _blocks,
}
