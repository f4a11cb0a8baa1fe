"""r11g11b10f: three small floats without signs in 32 bits.

Five bits of exponent (bias 15) and six of mantissa for red and green, five for blue; denormals exist.
Source: Khronos Data Format specification 1.4, sections 10.2 and 10.3; OpenGL 4.6 core, 2.3.4. OpenGL
lets an encoder cut off; we round to nearest even, and keep what is too large at the largest finite
value (65024, blue 64512).
"""

import numpy as np

from skykiln.jit import exact

_INFINITY = 0x7F800000


def encode_r11g11b10f(colours) -> np.ndarray:
    """(..., 3) float32 -> (...) uint32: red in the low bits."""
    bits = np.ascontiguousarray(colours, np.float32).view(np.uint32).reshape(-1, 3)
    words = np.empty(len(bits), "<u4")
    _encode(bits, words)
    return words.reshape(colours.shape[:-1])


def decode_r11g11b10f(blocks: bytes, shape) -> np.ndarray:
    """Bytes of texels -> (*shape, 3) float32."""
    words = np.frombuffer(blocks, "<u4").reshape(shape)
    colours = np.empty((*shape, 3), np.float32)
    colours[..., 0] = _VALUES_6[words & 0x7FF]
    colours[..., 1] = _VALUES_6[words >> 11 & 0x7FF]
    colours[..., 2] = _VALUES_5[words >> 22]
    return colours


def _values(mantissa_bits: int) -> np.ndarray:
    """The value of every code of a small float."""
    code = np.arange(32 << mantissa_bits)
    exponent, mantissa = code >> mantissa_bits, code & ((1 << mantissa_bits) - 1)
    fraction = mantissa / (1 << mantissa_bits) + (exponent > 0)
    values = fraction * np.exp2(np.maximum(exponent, 1) - 15.0)
    values[exponent == 31] = np.where(mantissa[exponent == 31] > 0, np.nan, np.inf)
    return values.astype(np.float32)


_VALUES_6, _VALUES_5 = _values(6), _values(5)


@exact
def _encode(bits, words):
    for i in range(len(bits)):
        r, g, b = _small_float(bits[i, 0], 6), _small_float(bits[i, 1], 6), _small_float(bits[i, 2], 5)
        words[i] = r | g << 11 | b << 22


@exact
def _small_float(bits, mantissa_bits):
    """The code nearest to the float32 with these bits, ties to even."""
    if bits > _INFINITY:  # a sign, or NaN
        return np.int64(0)
    exponent = np.int64(bits) >> 23
    if exponent >= 113:  # at least 2^-14: take the bias from 127 to 15
        significand, shift = np.int64(bits) - (np.int64(112) << 23), 23 - mantissa_bits
    else:  # a denormal of the code: count its smallest steps
        significand, shift = (np.int64(bits) & 0x7FFFFF) | 0x800000, 136 - mantissa_bits - exponent
    if shift > 25:
        return np.int64(0)
    even = (significand >> shift) & 1
    code = (significand + (np.int64(1) << (shift - 1)) - 1 + even) >> shift
    return min(code, (np.int64(31) << mantissa_bits) - 1)
