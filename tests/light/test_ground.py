"""Grounds against closed forms."""

import numpy as np
import pytest

from skykiln.light.ground import filled, with_ground
from skykiln.light.photometry import level_irradiance


def test_a_plain_under_a_uniform_sky_has_reflectance_times_its_radiance():
    panorama = with_ground(np.full((16, 64, 3), 5, np.float32), 32, "reflectance", 0.3)
    np.testing.assert_allclose(panorama[16:], 1.5, rtol=1e-6)


def test_a_plain_under_an_overcast_sky_follows_moon_and_spencer():
    # E = 7 pi/9 Lz for Lz (1 + 2 sin)/3 (Moon and Spencer 1942).
    sine = np.sin(np.pi / 2 * (1 - (np.arange(512) + 0.5) / 512))
    upper = np.repeat(np.repeat(((1 + 2 * sine) / 3)[:, None, None], 8, 1), 3, 2).astype(np.float32)
    panorama = with_ground(upper, 1024, "reflectance", (0.1, 0.2, 0.4))
    np.testing.assert_allclose(panorama[-1, 0], np.array([0.1, 0.2, 0.4]) * 7 / 9, rtol=1e-5)


def test_a_mirror_shows_the_sky_upside_down():
    upper = np.random.default_rng(0).random((8, 32, 3)).astype(np.float32)
    panorama = with_ground(upper, 16, "mirror")
    np.testing.assert_array_equal(panorama[::-1], panorama)


def test_a_colour_may_be_one_number_or_three():
    upper = np.ones((8, 32, 3), np.float32)
    np.testing.assert_array_equal(with_ground(upper, 16, "colour", 0.5)[8:], 0.5)
    np.testing.assert_array_equal(with_ground(upper, 16, "colour", (1, 2, 3))[15, 0], [1, 2, 3])


@pytest.mark.parametrize("kind", ["mirror", "reflectance"])
def test_what_was_captured_below_the_horizon_stays_and_lights_no_plain(kind):
    upper = np.ones((10, 32, 3), np.float32)
    upper[8:] = 100
    panorama = with_ground(upper, 16, kind, 0.5)
    np.testing.assert_array_equal(panorama[:10], upper)
    np.testing.assert_allclose(panorama[10:], 1 if kind == "mirror" else 0.5, rtol=1e-6)
    np.testing.assert_allclose(level_irradiance(panorama), np.pi, rtol=1e-6)


def test_less_than_the_upper_half_is_refused():
    with pytest.raises(ValueError, match="7 rows"):
        with_ground(np.ones((7, 32, 3), np.float32), 16, "mirror")


def test_uncovered_pixels_take_the_ground_and_the_others_stay():
    sky = np.random.default_rng(1).random((8, 16, 3)).astype(np.float32)
    uncovered = np.zeros((8, 16), bool)
    uncovered[6:, 3:5] = True
    mirrored = filled(sky, uncovered, "mirror")
    np.testing.assert_array_equal(mirrored[6:, 3:5], sky[1::-1, 3:5])
    np.testing.assert_array_equal(mirrored[~uncovered], sky[~uncovered])
    np.testing.assert_array_equal(filled(sky, uncovered, "colour", (1, 2, 3))[7, 4], [1, 2, 3])
    lit = filled(np.ones((8, 16, 3), np.float32), uncovered, "reflectance", 0.25)
    np.testing.assert_allclose(lit[uncovered], 0.25, rtol=1e-6)


def test_a_mirror_without_anything_to_mirror_is_refused():
    with pytest.raises(ValueError, match="isn't covered either"):
        filled(np.ones((8, 16, 3), np.float32), np.ones((8, 16), bool), "mirror")
