"""Pixel codings by name: what one block of a texture is in memory, and how it is told to a loader.

Every encoder takes radiance as float32 and keeps what it can: NaN and negative values become 0, too
large ones the coding's largest finite value, all others are rounded to nearest. The sources are the
Khronos Data Format specification 1.4 ("KDF") and the format lists of Vulkan and of DXGI.
"""

from collections.abc import Callable
from typing import NamedTuple

from skykiln.formats import half
from skykiln.formats.bc6h import decode_bc6h
from skykiln.formats.bc6h_encode import encode_bc6h
from skykiln.formats.packed_floats import decode_r11g11b10f, encode_r11g11b10f
from skykiln.formats.shared_exponent import decode_rgb9e5, encode_rgb9e5

MODEL_RGBSDA, MODEL_BC6H = 1, 133  # KDF 5.6, KHR_DF_MODEL_...
_RED, _GREEN, _BLUE, _ALPHA = 0, 1, 2, 15  # KDF, channels of RGBSDA
_SIGNED_FLOAT, _FLOAT, _EXPONENT = 0xC0, 0x80, 0x20  # KDF 5.15, qualifiers
_ONE, _MINUS_ONE = 0x3F800000, 0xBF800000  # float32 bits


class Sample(NamedTuple):
    """One sample of a data format descriptor, as its bytes are (KDF 5.12 - 5.17)."""

    bit_offset: int
    bit_length: int  # minus one
    channel: int  # channel id and qualifiers
    lower: int
    upper: int


class Coding(NamedTuple):
    """A pixel coding.

    encode : (..., h, w, channels) float32 -> array whose bytes are the blocks, row by row
    decode : (blocks: bytes, shape (..., h, w)) -> (..., h, w, channels) float32
    """

    channels: int
    block_side: int  # texels
    block_bytes: int
    type_size: int  # of KTX2's header
    vk_format: int
    dxgi_format: int
    model: int
    samples: tuple[Sample, ...]
    encode: Callable
    decode: Callable

    def level_bytes(self, faces: int, height: int, width: int) -> int:
        """Bytes of one mip level of `faces` faces: partial blocks are stored whole."""
        side = self.block_side
        return faces * -(-height // side) * -(-width // side) * self.block_bytes


def _half_samples(*channels):
    return tuple(
        Sample(16 * i, 15, _SIGNED_FLOAT | channel, _MINUS_ONE, _ONE) for i, channel in enumerate(channels)
    )


# KDF 5.20 and chapter 11, example E5B9G9R9: every channel is a mantissa and the shared exponent; 8448 is
# the mantissa that stands for 1.0 at the exponent's bias of 15.
_SHARED_EXPONENT_SAMPLES = tuple(
    sample
    for channel in (_RED, _GREEN, _BLUE)
    for sample in (Sample(9 * channel, 8, channel, 0, 8448), Sample(27, 4, _EXPONENT | channel, 15, 31))
)
_SMALL_FLOAT_SAMPLES = (
    Sample(0, 10, _FLOAT | _RED, 0, _ONE),
    Sample(11, 10, _FLOAT | _GREEN, 0, _ONE),
    Sample(22, 9, _FLOAT | _BLUE, 0, _ONE),
)

PIXELS = {
    "rgba16f": Coding(
        channels=3, block_side=1, block_bytes=8, type_size=2, vk_format=97, dxgi_format=10,
        model=MODEL_RGBSDA, samples=_half_samples(_RED, _GREEN, _BLUE, _ALPHA),
        encode=half.encode_rgba, decode=half.decode_rgba,
    ),
    "rg16f": Coding(
        channels=2, block_side=1, block_bytes=4, type_size=2, vk_format=83, dxgi_format=34,
        model=MODEL_RGBSDA, samples=_half_samples(_RED, _GREEN), encode=half.encode_rg, decode=half.decode_rg,
    ),
    "r16f": Coding(
        channels=1, block_side=1, block_bytes=2, type_size=2, vk_format=76, dxgi_format=54,
        model=MODEL_RGBSDA, samples=_half_samples(_RED), encode=half.nearest_half, decode=half.decode_r,
    ),
    "rgb9e5": Coding(
        channels=3, block_side=1, block_bytes=4, type_size=4, vk_format=123, dxgi_format=67,
        model=MODEL_RGBSDA, samples=_SHARED_EXPONENT_SAMPLES, encode=encode_rgb9e5, decode=decode_rgb9e5,
    ),
    "r11g11b10f": Coding(
        channels=3, block_side=1, block_bytes=4, type_size=4, vk_format=122, dxgi_format=26,
        model=MODEL_RGBSDA, samples=_SMALL_FLOAT_SAMPLES, encode=encode_r11g11b10f, decode=decode_r11g11b10f,
    ),
    "bc6h": Coding(
        channels=3, block_side=4, block_bytes=16, type_size=1, vk_format=143, dxgi_format=95,
        model=MODEL_BC6H, samples=(Sample(0, 127, _FLOAT, 0, _ONE),), encode=encode_bc6h, decode=decode_bc6h,
    ),
}  # fmt: skip
