"""False colours: read by lightness alone, on a scale of stops."""

import numpy as np

from skykiln.light.photometry import luminance
from skykiln.report.false_colour import COLOURS, MIDDLE_GREY, STOPS, false_colours
from skykiln.report.ramp import coloured, linear_ramp, ramp


def cie_lightness(rgb):
    """CIE 1976 L* of linear sRGB (CIE 15)."""
    y = luminance(rgb)
    return np.where(y > (6 / 29) ** 3, 116 * np.cbrt(y) - 16, y * (29 / 3) ** 3)


def test_lightness_rises_in_even_steps_from_dark_to_light():
    lightness = cie_lightness(linear_ramp(COLOURS))
    steps = np.diff(lightness)
    assert lightness[0] < 12 and lightness[-1] > 90
    assert steps.min() > 0.85 * steps.mean() and steps.max() < 1.15 * steps.mean()


def test_ramp_runs_from_blue_to_yellow():
    dark, light = linear_ramp(COLOURS)[[0, -1]]
    assert dark[2] > 5 * dark[0] and light[2] < 0.5 * light[0]


def test_middle_grey_of_the_exposure_has_the_middle_colour_and_the_scale_its_ends():
    colours = linear_ramp(COLOURS)
    exposure = 0.37
    grey = MIDDLE_GREY / exposure
    shown = false_colours(grey * 2.0 ** np.array([0, -STOPS, STOPS, STOPS + 9, 0.5 * STOPS]), exposure)
    np.testing.assert_allclose(shown, colours[[8, 0, 16, 16, 12]], atol=1e-12)
    np.testing.assert_allclose(false_colours(np.zeros(1), 1.0), colours[:1])
    one_stop = false_colours(np.array([2 * grey]), exposure)
    np.testing.assert_allclose(one_stop, colours[9:10], atol=1e-12)


def test_ramp_for_a_screen_is_the_linear_one_encoded():
    shown = coloured(np.array([-0.5, 0, 0.5, 1, 7])).astype(float) / 255
    linear = np.where(shown <= 0.04045, shown / 12.92, ((shown + 0.055) / 1.055) ** 2.4)  # IEC 61966-2-1
    np.testing.assert_allclose(linear, linear_ramp(3)[[0, 0, 1, 2, 2]], atol=0.006)
    assert ramp().shape == (256, 3)
