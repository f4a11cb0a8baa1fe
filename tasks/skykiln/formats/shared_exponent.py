"""rgb9e5: three mantissas of nine bits and one exponent in 32 bits.

Source: OpenGL 4.6 core, section 8.5.2, "Encoding of Special Internal Formats" (the same text as
EXT_texture_shared_exponent). With m the largest channel:

    e = max(-16, floor(log2 m)) + 16, one more where m rounds up to 512;  mantissa = floor(c 2^(24 - e) + 1/2)

Everything is done on the bits of the float32 values, so no logarithm and no rounding of floats comes in.
"""

import numpy as np

from skykiln.jit import exact

_LARGEST = 0x477F8000  # bits of 65408 = 511/512 * 2^16
_INFINITY = 0x7F800000


def encode_rgb9e5(colours) -> np.ndarray:
    """(..., 3) float32 -> (...) uint32: red in the low bits, the exponent in the top five."""
    bits = np.ascontiguousarray(colours, np.float32).view(np.uint32).reshape(-1, 3)
    words = np.empty(len(bits), "<u4")
    _encode(bits, words)
    return words.reshape(colours.shape[:-1])


def decode_rgb9e5(blocks: bytes, shape) -> np.ndarray:
    """Bytes of texels -> (*shape, 3) float32. Source: OpenGL 4.6 core, section 8.25."""
    words = np.frombuffer(blocks, "<u4").reshape(shape)
    scales = np.exp2(np.arange(32, dtype=np.float32) - 24)[words >> 27]
    colours = np.empty((*shape, 3), np.float32)
    for channel in range(3):
        colours[..., channel] = ((words >> (9 * channel)) & 511) * scales
    return colours


@exact
def _encode(bits, words):
    for i in range(len(bits)):
        r, g, b = _clamped(bits[i, 0]), _clamped(bits[i, 1]), _clamped(bits[i, 2])
        m = max(r, g, b)
        e = max(np.int64(-16), (m >> 23) - 127) + 16
        if _mantissa(m, e) == 512:
            e += 1
        words[i] = _mantissa(r, e) | _mantissa(g, e) << 9 | _mantissa(b, e) << 18 | e << 27


@exact
def _clamped(bits):
    """Bits of a float32, of the value that is kept of it: NaN and negative values become 0."""
    return np.int64(0) if bits > _INFINITY else min(np.int64(bits), np.int64(_LARGEST))


@exact
def _mantissa(bits, e):
    """floor(c 2^(24 - e) + 1/2) of the value c with these bits: its 24-bit significand, shifted."""
    shift = e + 126 - (bits >> 23)
    if shift > 25:
        return np.int64(0)
    significand = (bits & 0x7FFFFF) | 0x800000
    return (significand + (np.int64(1) << (shift - 1))) >> shift
