"""Colour matrices against published values, colour-science and their own invariants."""

import warnings

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from skykiln.light.colour import (
    SPACES,
    Chromaticities,
    bradford_adaptation,
    converted,
    rgb_to_rgb,
    rgb_to_xyz,
    weights_of,
)
from skykiln.light.photometry import LUMINANCE_WEIGHTS

with warnings.catch_warnings():
    warnings.simplefilter("ignore")  # it reports which of its optional parts are not there
    import colour as colour_science

REC709, REC2020, ACESCG = (SPACES[name] for name in ("rec709", "rec2020", "acescg"))
THEIR_NAMES = {
    "rec709": "ITU-R BT.709",
    "rec2020": "ITU-R BT.2020",
    "acescg": "ACEScg",
    "aces2065_1": "ACES2065-1",
    "display_p3": "Display P3",
}
EQUAL_ENERGY = Chromaticities((0.64, 0.33), (0.29, 0.60), (0.15, 0.06), (1 / 3, 1 / 3))


def picture(*rgb):
    return np.array(rgb, dtype=np.float32).reshape(1, -1, 3)


def test_rec709_to_rec2020_is_the_published_matrix():
    # ITU-R BT.2087-0 prints four digits; the rest recomputed from the primaries.
    expected = [
        [0.6274038959346991, 0.3292830383778838, 0.04331306568741722],
        [0.06909728935823199, 0.9195403950754585, 0.011362315566309185],
        [0.016391438875150228, 0.08801330787722576, 0.895595253247624],
    ]
    np.testing.assert_allclose(rgb_to_rgb(REC709, REC2020), expected, atol=1e-9)


def test_rec709_to_acescg_is_the_matrix_of_bradford():
    # Primaries of ITU-R BT.709 and Academy S-2014-004, Bradford; computed apart from this code.
    expected = [
        [0.6130974024011878, 0.33952314618410606, 0.04737945141470665],
        [0.07019372246958168, 0.9163538790573436, 0.013452398473074122],
        [0.020615592882226925, 0.10956977293813544, 0.8698146341796377],
    ]
    np.testing.assert_allclose(rgb_to_rgb(REC709, ACESCG), expected, atol=1e-6)


@pytest.mark.parametrize("target", SPACES)
@pytest.mark.parametrize("source", SPACES)
def test_matrices_are_those_of_colour_science(source, target):
    theirs = colour_science.matrix_RGB_to_RGB(
        *(colour_science.RGB_COLOURSPACES[THEIR_NAMES[name]] for name in (source, target)),
        chromatic_adaptation_transform="Bradford",
    )
    ours = rgb_to_rgb(SPACES[source], SPACES[target])
    # Their BT.709 uses the standard's own matrix of four digits.
    np.testing.assert_allclose(ours, theirs, atol=2e-4)


def test_adaptation_is_that_of_colour_science():
    whites = (REC709.white, ACESCG.white)
    theirs = colour_science.adaptation.matrix_chromatic_adaptation_VonKries(
        *(colour_science.xy_to_XYZ(white) for white in whites), transform="Bradford"
    )
    np.testing.assert_allclose(bradford_adaptation(*whites), theirs, atol=1e-12)


def test_luminance_weights_are_the_published_ones():
    np.testing.assert_allclose(weights_of(REC709), [0.2126, 0.7152, 0.0722], atol=1e-4)
    np.testing.assert_allclose(weights_of(REC709), LUMINANCE_WEIGHTS, atol=1e-15)
    # ITU-R BT.2020-2, table 4: 0.2627, 0.6780, 0.0593.
    np.testing.assert_allclose(weights_of(REC2020), [0.2627, 0.6780, 0.0593], atol=5e-5)
    for space in (*SPACES.values(), EQUAL_ENERGY):
        np.testing.assert_allclose(weights_of(space), rgb_to_xyz(space)[1], atol=1e-14)


@pytest.mark.parametrize("target", SPACES)
def test_white_stays_white_whatever_its_colour_was(target):
    matrix = rgb_to_rgb(EQUAL_ENERGY, SPACES[target])
    np.testing.assert_allclose(matrix @ np.ones(3), 1.0, atol=1e-13)


def test_tristimulus_values_are_a_space_themselves():
    xyz = Chromaticities((1, 0), (0, 1), (0, 0), (1 / 3, 1 / 3))
    np.testing.assert_allclose(rgb_to_xyz(xyz), np.eye(3), atol=1e-15)


def test_primaries_below_the_diagram_are_those_of_colour_science():
    theirs = colour_science.RGB_COLOURSPACES["ACES2065-1"]
    space = Chromaticities(*theirs.primaries, theirs.whitepoint)
    derived = colour_science.normalised_primary_matrix(theirs.primaries, theirs.whitepoint)
    np.testing.assert_allclose(rgb_to_xyz(space), derived, atol=1e-12)


chromaticity = st.tuples(st.floats(-0.03, 0.03), st.floats(-0.03, 0.03))  # the white stays inside


@settings(max_examples=50, deadline=None)
@given(st.tuples(chromaticity, chromaticity, chromaticity, chromaticity))
def test_there_and_back_is_the_identity(shifts):
    space = Chromaticities(*(np.array(xy) + s for xy, s in zip(REC709, shifts, strict=True)))
    there, back = rgb_to_rgb(space, ACESCG), rgb_to_rgb(ACESCG, space)
    np.testing.assert_allclose(back @ there, np.eye(3), atol=1e-9)


@pytest.mark.parametrize(
    ("space", "words"),
    [
        (REC709._replace(white=(0.3, 0.0)), "white's y above 0"),
        (REC709._replace(white=(np.nan, 0.3)), "finite"),
        (REC709._replace(blue=(0.47, 0.465)), "one line"),
        (REC709._replace(white=(0.7, 0.25)), "outside"),
    ],
)
def test_impossible_chromaticities_are_refused(space, words):
    with pytest.raises(ValueError, match=words):
        rgb_to_xyz(space)


def test_colours_outside_the_target_are_counted_and_clipped():
    pixels = picture((0, 1, 0), (1, 1, 1), (0, 0, 2), (0.2, 0.3, 0.25))
    result = converted(pixels, rgb_to_rgb(REC2020, REC709))
    assert result.out_of_gamut == 2
    assert result.pixels.min() == 0
    exact = rgb_to_rgb(REC2020, REC709) @ [0, 1, 0]
    assert result.deepest == pytest.approx(exact.min() / exact.max(), rel=1e-6)
    np.testing.assert_allclose(result.pixels[0, 1], 1.0, rtol=1e-6)


def test_a_wider_space_clips_nothing_not_even_rounded_primaries():
    primaries = picture((1, 0, 0), (0, 1, 0), (0, 0, 1), (1e6, 0, 1e6))
    wide = converted(primaries, rgb_to_rgb(REC709, ACESCG))
    back = converted(wide.pixels, rgb_to_rgb(ACESCG, REC709))
    assert (wide.out_of_gamut, back.out_of_gamut, back.deepest) == (0, 0, 0.0)
    np.testing.assert_allclose(back.pixels, primaries, atol=1, rtol=1e-6)


def test_luminance_survives_a_change_of_space_under_one_white():
    pixels = np.random.default_rng(2).random((4, 5, 3)).astype(np.float32)
    other = converted(pixels, rgb_to_rgb(REC709, REC2020)).pixels
    np.testing.assert_allclose(other @ weights_of(REC2020), pixels @ weights_of(REC709), rtol=1e-6)
