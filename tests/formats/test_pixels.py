"""Half-float codings, against NumPy's float16 and typed bits."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from skykiln.formats.half import half_value, nearest_half
from skykiln.formats.pixels import PIXELS


def test_every_finite_half_survives():
    halves = np.arange(0x7C00, dtype="<u2").view("<f2")
    np.testing.assert_array_equal(nearest_half(halves.astype(np.float32)), halves)


@pytest.mark.parametrize(
    ("value", "bits"),
    # IEEE 754 binary16: one, the largest and smallest values; ties go to the even neighbour.
    [
        (1.0, 0x3C00),
        (65504.0, 0x7BFF),
        (65519.0, 0x7BFF),
        (65520.0, 0x7BFF),
        (1e30, 0x7BFF),
        (np.inf, 0x7BFF),
        (np.nan, 0),
        (-1.0, 0),
        (-np.inf, 0),
        (-0.0, 0),
        (2.0**-24, 1),
        (2.0**-25, 0),
        (1.5 * 2.0**-25, 1),
        (1 + 2.0**-11, 0x3C00),
        (1 + 3 * 2.0**-11, 0x3C02),
    ],
)
def test_values_have_these_bits(value, bits):
    assert nearest_half(np.float32([value])).view("<u2")[0] == bits


@given(st.floats(0, 65472, width=32))
def test_rounding_is_to_nearest(value):
    stored = float(nearest_half(np.float32([value]))[0])
    neighbours = np.nextafter(np.float16(stored), np.float16([-np.inf, np.inf]))
    assert all(abs(stored - value) <= abs(float(n) - value) for n in neighbours)


def test_alpha_is_one_and_channels_stand_in_order():
    colour = np.float32([[[1, 2, 0.5]]])
    assert PIXELS["rgba16f"].encode(colour).tobytes() == bytes.fromhex("003c 0040 0038 003c")
    assert PIXELS["rg16f"].encode(colour[..., :2]).tobytes() == bytes.fromhex("003c 0040")


@pytest.mark.parametrize("name", PIXELS)
def test_decoder_undoes_the_encoder(name):
    coding = PIXELS[name]
    ramp = np.linspace(0.5, 1, 6 * 8 * 8, dtype=np.float32).reshape(6, 8, 8, 1)
    values = np.repeat(ramp, coding.channels, axis=-1)
    blocks = coding.encode(values)
    assert blocks.nbytes == coding.level_bytes(6, 8, 8)
    decoded = coding.decode(blocks.tobytes(), (6, 8, 8))
    assert decoded.dtype == np.float32
    assert decoded.flags.writeable
    # Half a step of the coarsest coding, relative to the brightest channel.
    assert (np.abs(decoded - values) <= values.max(-1, keepdims=True) / 63).all()


def test_half_bits_have_numpys_values():
    bits = np.arange(0, 0x7C00, 7, dtype=np.uint16)
    assert [half_value(int(b)) for b in bits] == bits.view(np.float16).astype(float).tolist()
