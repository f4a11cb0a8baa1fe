"""Skies scaled to what was measured of them; what clipping took comes back where that is known."""

import numpy as np
import pytest
from sun_skies import NOON, clear_noon, clipped_noon, overcast

from skykiln.light.calibrated_sky import Measured, MeasuredPatch, calibrated_sky
from skykiln.light.calibration import Contradiction
from skykiln.light.colour import SPACES, weights_of
from skykiln.light.facing import irradiance_facing, patch_radiance
from skykiln.light.photometry import LUMINANCE_WEIGHTS, horizontal_illuminance, luminance
from skykiln.light.separate_sun import restored_sun, separate_sun, with_restored_sun

AWAY = np.array([0.0, 0.0, -1.0])


@pytest.fixture(scope="module")
def noon():
    """The true sky, the clipped picture of it, and what meters showed of the true one in cd/m2 and lux."""
    true = clear_noon()
    level = 3000 * horizontal_illuminance(true)
    return true, clipped_noon(), level, 3000 * luminance(irradiance_facing(true, NOON))


def calibrated(picture, **measured):
    return calibrated_sky(picture, Measured(**measured), LUMINANCE_WEIGHTS)


def patch(picture, luminance_found, balance=False):
    return MeasuredPatch(AWAY, 0.1, luminance_found, balance)


def test_the_level_surface_alone_scales_the_whole():
    sky = calibrated(clear_noon(128), horizontal_lux=98000.0)
    assert horizontal_illuminance(sky.pixels) == pytest.approx(98000, rel=1e-5)
    assert (sky.lost_lux, *sky.gains) == (0, 1, 1, 1)


def test_luminance_is_that_of_the_working_space():
    weights = weights_of(SPACES["acescg"])
    sky = calibrated_sky(clear_noon(128), Measured(horizontal_lux=98000.0), weights)
    assert horizontal_illuminance(sky.pixels, weights) == pytest.approx(98000, rel=1e-5)


def restored(sky):
    return with_restored_sun(sky.pixels, sky.sun, sky.lost_lux)


def test_a_clipped_sun_is_restored_to_both_measurements(noon):
    _, picture, level, facing = noon
    sky = calibrated(picture, horizontal_lux=level, sun_lux=facing)
    assert sky.scale == pytest.approx(3000, rel=0.05)  # veiling glare adds a little to the sky
    assert horizontal_illuminance(restored(sky)) == pytest.approx(level, rel=1e-3)
    assert luminance(irradiance_facing(restored(sky), sky.sun.direction)) == pytest.approx(facing, rel=1e-3)
    assert 0.5 * facing < sky.lost_lux < facing


@pytest.mark.parametrize("measured", ["horizontal_lux", "sun_lux"])
def test_one_measurement_restores_a_clipped_sun_where_the_scale_is_known(noon, measured):
    true, picture, level, facing = noon
    known = 3000 * luminance(patch_radiance(true, AWAY, 0.1))
    lux = {measured: {"horizontal_lux": level, "sun_lux": facing}[measured]}
    sky = calibrated(picture, patch=patch(picture, known), **lux)
    assert horizontal_illuminance(restored(sky)) == pytest.approx(level, rel=0.03)
    assert calibrated(picture, white_luminance=3000.0, **lux).scale == pytest.approx(3000)


def test_a_clipped_sun_taken_apart_is_whole_with_what_it_had_lost(noon):
    _, picture, level, facing = noon
    whole = calibrated(picture, horizontal_lux=level, sun_lux=facing)
    sky, sun = separate_sun(whole.pixels)
    sun = restored_sun(sun, whole.lost_lux)
    up = horizontal_illuminance(sky) + luminance(sun.irradiance) * sun.direction[1]
    assert up == pytest.approx(level, rel=1e-3)
    towards = luminance(irradiance_facing(sky, sun.direction) + sun.irradiance)
    assert towards == pytest.approx(facing, rel=1e-3)


def test_two_measurements_of_an_unclipped_sun_must_agree():
    sky = clear_noon(256)
    level, facing = horizontal_illuminance(sky), luminance(irradiance_facing(sky, NOON))
    result = calibrated(sky, horizontal_lux=2000 * level, sun_lux=2100 * facing)
    assert result.scale == pytest.approx(2049, 1e-2)
    with pytest.raises(Contradiction, match=r"sun_lux .* and horizontal_lux"):
        calibrated(sky, horizontal_lux=3000 * level, sun_lux=2000 * facing)


def test_without_a_sun_nothing_faces_it():
    with pytest.raises(ValueError, match="sun_lux: no sun is found"):
        calibrated(overcast(), sun_lux=1000.0)


def test_a_patch_and_a_level_surface_agree_without_any_sun():
    sky = overcast()
    level, away = horizontal_illuminance(sky), luminance(patch_radiance(sky, AWAY, 0.1))
    result = calibrated(sky, horizontal_lux=500 * level, patch=patch(sky, 500 * away))
    assert result.scale == pytest.approx(500)
    with pytest.raises(Contradiction, match=r"horizontal_lux .* and patch|patch .* and horizontal_lux"):
        calibrated(sky, horizontal_lux=500 * level, patch=patch(sky, 1000 * away))


def test_a_grey_patch_balances_white_and_keeps_its_luminance():
    sky = clear_noon(128) * np.array([1.2, 1.0, 0.6], np.float32)
    result = calibrated(sky, patch=patch(sky, 5000.0, balance=True))
    grey = patch_radiance(result.pixels, AWAY, 0.1)
    np.testing.assert_allclose(grey, 5000, rtol=1e-4)


def test_radiance_that_overflows_is_refused():
    with pytest.raises(ValueError, match="overflows"):
        calibrated(np.full((8, 16, 3), 1e30, np.float32), white_luminance=1e12)
