"""A limit of luminance, and what it takes."""

import numpy as np
import pytest

from skykiln.light.luminance_limit import limited
from skykiln.light.photometry import LUMINANCE_WEIGHTS, horizontal_illuminance, luminance, mean_radiance


def sky():
    panorama = np.random.default_rng(2).random((16, 32, 3)).astype(np.float32)
    panorama[3, 7] = [600, 400, 100]
    panorama[12, 9] = [0, 0, 90]
    return panorama


def test_pixels_above_keep_their_colour_and_others_stay():
    source = sky()
    pixels = limited(source, 5.0, LUMINANCE_WEIGHTS).pixels
    assert luminance(pixels[3, 7]) == pytest.approx(5, rel=1e-6)
    np.testing.assert_allclose(pixels[3, 7] / pixels[3, 7, 0], [1, 2 / 3, 1 / 6], rtol=1e-6)
    same = luminance(source) <= 5
    np.testing.assert_array_equal(pixels[same], source[same])
    assert np.count_nonzero(~same) == 2


def test_the_lost_light_is_what_the_totals_lack():
    source = sky()
    result = limited(source, 5.0, LUMINANCE_WEIGHTS)
    lost = horizontal_illuminance(source) - horizontal_illuminance(result.pixels)
    assert result.lost_illuminance == pytest.approx(lost)
    kept = luminance(mean_radiance(result.pixels)) / luminance(mean_radiance(source))
    assert result.lost_share == pytest.approx(1 - kept)


def test_the_limit_is_of_the_space_s_own_luminance():
    weights = np.array([0.0, 0.0, 1.0])
    assert limited(sky(), 100.0, weights).lost_share == 0
    assert limited(sky(), 95.0, weights).pixels[3, 7, 2] == pytest.approx(95)


def test_nothing_above_gives_the_panorama_itself():
    source = sky()
    assert limited(source, 1e4, LUMINANCE_WEIGHTS) == (source, 0.0, 0.0)
