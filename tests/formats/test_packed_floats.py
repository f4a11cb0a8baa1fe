"""r11g11b10f against a search among all values that the codes have, and words worked by hand."""

import numpy as np
import pytest

from skykiln.formats.packed_floats import decode_r11g11b10f, encode_r11g11b10f


def code_values(mantissa_bits):
    """Values of all finite codes, from the text of KDF 1.4, 10.2: float64, rising."""
    steps = 1 << mantissa_bits
    exponent, mantissa = np.divmod(np.arange(31 * steps), steps)
    denormal = mantissa / steps * 2.0**-14
    return np.where(exponent == 0, denormal, (1 + mantissa / steps) * 2.0 ** (exponent - 15.0))


def nearest_code(value, values):
    """The nearest value's code; of two that are as near, the even one."""
    value = min(max(0.0, 0.0 if np.isnan(value) else float(value)), values[-1])
    near = np.flatnonzero(np.abs(values - value) == np.abs(values - value).min())
    return next((c for c in near if c % 2 == 0), near[0])


@pytest.mark.parametrize(
    ("colour", "word"),
    [
        ((1, 1, 1), 0x3C0 | 0x3C0 << 11 | 0x1E0 << 22),
        ((65024, 65024, 64512), 0x7BF | 0x7BF << 11 | 0x3DF << 22),
        ((np.inf, 1e30, 65504), 0x7BF | 0x7BF << 11 | 0x3DF << 22),
        ((np.nan, -1, -np.inf), 0),
        ((2.0**-20, 2.0**-21, 2.0**-19), 1 | 1 << 22),  # smallest steps; a tie goes to the even 0
        ((1 + 2.0**-7, 1 + 3 * 2.0**-7, 1), 0x3C0 | 0x3C2 << 11 | 0x1E0 << 22),  # ties to even
    ],
)
def test_colours_have_these_words(colour, word):
    assert encode_r11g11b10f(np.float32([colour]))[0] == word


def test_every_code_is_the_nearest_to_its_value():
    rng = np.random.default_rng(2)
    colours = np.float32(10.0 ** rng.uniform(-8, 6, (1500, 3)))
    colours[:300] = rng.integers(0, 1 << 32, (300, 3), np.uint32).view(np.float32)
    values = [code_values(6), code_values(6), code_values(5)]
    # Exact ties between neighbours, and what a float32 step makes of them.
    for c in range(3):
        ties = rng.choice((values[c][1:] + values[c][:-1]) / 2, 300).astype(np.float32)
        colours[300:600, c] = ties
        colours[600:900, c] = np.nextafter(ties, np.float32(0))
        colours[900:1200, c] = np.nextafter(ties, np.float32(np.inf))
    words = encode_r11g11b10f(colours)
    for c, (shift, mask) in enumerate([(0, 0x7FF), (11, 0x7FF), (22, 0x3FF)]):
        expected = [nearest_code(v, values[c]) for v in colours[:, c]]
        np.testing.assert_array_equal(words >> shift & mask, expected)


def test_decoder_gives_every_codes_value():
    codes = np.arange(31 << 6)
    words = np.uint32(codes | codes << 11 | (codes >> 1) << 22)
    decoded = decode_r11g11b10f(words.tobytes(), (len(words),))
    np.testing.assert_array_equal(decoded[:, 0], code_values(6))
    np.testing.assert_array_equal(decoded[:, 1], code_values(6))
    np.testing.assert_array_equal(decoded[:, 2], code_values(5)[codes >> 1])


def test_decoder_knows_infinity_and_not_a_number():
    decoded = decode_r11g11b10f(np.uint32([0x7C0 | 0x7C1 << 11 | 0x3E0 << 22]).tobytes(), (1,))
    np.testing.assert_array_equal(decoded, [[np.inf, np.nan, np.inf]])


def test_rounding_does_not_darken():
    colours = np.random.default_rng(3).uniform(1, 2, (100000, 3)).astype(np.float32)
    decoded = decode_r11g11b10f(encode_r11g11b10f(colours).tobytes(), (100000,))
    assert decoded.mean(0) == pytest.approx(colours.mean(0), rel=2e-4)
