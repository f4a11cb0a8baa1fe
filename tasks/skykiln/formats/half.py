"""Half floats (IEEE 754 binary16): four channels with an alpha of 1, two, or one."""

import numpy as np

from skykiln.jit import exact

LARGEST = 65504.0
_SCALES = np.ldexp(1.0, np.maximum(np.arange(32), 1) - 25)  # of a mantissa, by exponent bits


def nearest_half(values) -> np.ndarray:
    """float32 -> little-endian float16, rounded to nearest even; never NaN, negative or infinite."""
    # fmax takes the number where the other is NaN; adding 0 turns -0 into 0. NumPy rounds to nearest
    # even, but makes infinity of what is too large, so that is cut off before.
    return (np.fmin(np.fmax(values, np.float32(0)), np.float32(LARGEST)) + np.float32(0)).astype("<f2")


def encode_rgba(colours) -> np.ndarray:
    """(..., 3) float32 -> (..., 4) float16 with alpha 1.0."""
    texels = np.ones((*colours.shape[:-1], 4), "<f2")
    texels[..., :3] = nearest_half(colours)
    return texels


def decode_rgba(blocks: bytes, shape) -> np.ndarray:
    """Bytes of texels -> (*shape, 3) float32; alpha is left out."""
    texels = np.frombuffer(blocks, "<f2").reshape(*shape, 4)
    return texels[..., :3].astype(np.float32)


def encode_rg(values) -> np.ndarray:
    """(..., 2) float32 -> (..., 2) float16."""
    return nearest_half(values)


def decode_rg(blocks: bytes, shape) -> np.ndarray:
    """Bytes of texels -> (*shape, 2) float32."""
    return np.frombuffer(blocks, "<f2").reshape(*shape, 2).astype(np.float32)


def decode_r(blocks: bytes, shape) -> np.ndarray:
    """Bytes of texels -> (*shape, 1) float32."""
    return np.frombuffer(blocks, "<f2").reshape(*shape, 1).astype(np.float32)


@exact
def half_value(bits):
    """The value of a half float's bits."""
    return ((bits & 1023) + (1024 if bits >= 1024 else 0)) * _SCALES[bits >> 10]
