"""rgb9e5 against the formula of OpenGL 4.6, section 8.5.2, in float64, and words worked by hand."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from skykiln.formats.shared_exponent import decode_rgb9e5, encode_rgb9e5

SPECIAL = [0.0, -0.0, -1.0, np.nan, np.inf, -np.inf, 1e-45, 2.0**-24, 2.0**-25, 65408.0, 65407.9, 1e9, 1.0]


def formula(colour):
    """The specification's own steps, one texel, in float64 with frexp for floor(log2)."""
    clamped = [min(max(0.0, 0.0 if np.isnan(c) else float(c)), 65408.0) for c in colour]
    largest = max(clamped)
    exponent = max(-16, int(np.frexp(largest)[1]) - 1 if largest else -16) + 16
    if np.floor(largest / 2.0 ** (exponent - 24) + 0.5) == 512:
        exponent += 1
    r, g, b = (int(np.floor(c / 2.0 ** (exponent - 24) + 0.5)) for c in clamped)
    return r | g << 9 | b << 18 | exponent << 27


@pytest.mark.parametrize(
    ("colour", "word"),
    [
        ((0, 0, 0), 0),
        ((1, 1, 1), 256 | 256 << 9 | 256 << 18 | 16 << 27),  # 256 * 2^(16 - 24)
        ((65408, 0, 1e9), 511 | 511 << 18 | 31 << 27),
        ((511.5 / 512, 0, 0), 256 | 16 << 27),  # rounds up to 512: the exponent rises
        ((511.4 / 512, 0, 0), 511 | 15 << 27),
        ((2.0**-24, 0, 2.0**-25), 1 | 1 << 18),  # the smallest step; half of it rounds up
    ],
)
def test_colours_have_these_words(colour, word):
    assert encode_rgb9e5(np.float32([colour]))[0] == word


def test_formula_of_the_specification_gives_the_same_words():
    rng = np.random.default_rng(2)
    colours = np.float32(10.0 ** rng.uniform(-9, 6, (4000, 3)))
    colours[:500] = rng.choice(np.float32(SPECIAL), (500, 3))
    colours[500:1000] = rng.integers(0, 1 << 32, (500, 3), np.uint32).view(np.float32)
    np.testing.assert_array_equal(encode_rgb9e5(colours), [formula(colour) for colour in colours])


def test_values_halfway_to_512_raise_the_exponent():
    mantissas = np.array([511.25, 511.5]) / 512
    edges = np.zeros((62, 3), np.float32)
    edges[:, 0] = np.outer(2.0 ** np.arange(-15, 16), mantissas).ravel()
    np.testing.assert_array_equal(encode_rgb9e5(edges), [formula(edge) for edge in edges])


@given(st.integers(0, 0xFFFFFFFF))
def test_decoded_words_encode_to_the_same_colour(word):
    colour = decode_rgb9e5(np.uint32([word]).tobytes(), (1,))
    again = decode_rgb9e5(encode_rgb9e5(colour).tobytes(), (1,))
    np.testing.assert_array_equal(again, colour)


def test_error_is_at_most_half_a_step_of_the_largest_channel():
    colours = np.random.default_rng(3).random((6, 16, 16, 3), np.float32) * 1000
    decoded = decode_rgb9e5(encode_rgb9e5(colours).tobytes(), (6, 16, 16))
    assert (np.abs(decoded - colours) <= colours.max(-1, keepdims=True) / 512).all()
