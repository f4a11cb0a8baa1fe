"""Luminance and irradiance against published values and closed forms."""

import numpy as np
import pytest

from skykiln.light.directions import panorama_directions, panorama_row_solid_angles
from skykiln.light.photometry import (
    LUMINANCE_WEIGHTS,
    horizontal_illuminance,
    level_irradiance,
    luminance,
    mean_radiance,
)


def constant(height, width, rgb=(1.0, 2.0, 3.0)):
    return np.broadcast_to(np.float32(rgb), (height, width, 3)).copy()


def overcast(height, width):
    """CIE traditional overcast sky of zenith luminance 1 as exact pixel means (Moon and Spencer 1942)."""
    edges = np.maximum(np.sin(np.pi / 2 - np.pi * np.arange(height + 1) / height), 0)
    whole = -np.diff(np.sin(np.pi / 2 - np.pi * np.arange(height + 1) / height))
    rows = -np.diff((edges + edges**2) / 3) / whole
    return np.broadcast_to(rows[:, None, None], (height, width, 3)).astype(np.float32)


def test_luminance_weights_are_those_of_rec709():
    # ITU-R BT.709; all digits by derivation from its primaries and D65.
    expected = [0.2126390058715103, 0.7151686787677559, 0.07219231536073371]
    np.testing.assert_allclose(LUMINANCE_WEIGHTS, expected, rtol=1e-12)
    np.testing.assert_allclose(LUMINANCE_WEIGHTS, [0.2126, 0.7152, 0.0722], atol=1e-4)
    assert luminance(np.ones(3)) == pytest.approx(1.0, rel=1e-14)


@pytest.mark.parametrize("height", [2, 3, 64, 101])
def test_constant_skies_give_their_radiance_and_pi_times_it(height):
    sky = constant(height, 2 * height)
    np.testing.assert_allclose(mean_radiance(sky), [1, 2, 3], rtol=1e-12)
    np.testing.assert_allclose(level_irradiance(sky), np.pi * np.array([1, 2, 3]), rtol=1e-12)


@pytest.mark.parametrize("height", [64, 101])
def test_overcast_sky_gives_the_published_horizontal_illuminance(height):
    # Moon and Spencer 1942: 7 pi/9 of the zenith luminance. What is left is within one row of it.
    assert horizontal_illuminance(overcast(height, 8)) == pytest.approx(7 * np.pi / 9, rel=1e-3)
    assert horizontal_illuminance(overcast(1024, 8)) == pytest.approx(7 * np.pi / 9, rel=2e-6)


def test_a_disc_light_gives_its_closed_form():
    # pi sin^2 r for a disc of radius r at the zenith (Lambert; Nusselt's analogue). 5 degrees are
    # 5 of 180 rows.
    sky = np.zeros((180, 360, 3), dtype=np.float32)
    sky[:5] = 1
    np.testing.assert_allclose(level_irradiance(sky), 0.023863925764184408, rtol=1e-12)


def test_light_from_below_does_not_fall_on_the_level_surface():
    sky = constant(64, 128)
    sky[:32] = 0
    np.testing.assert_array_equal(level_irradiance(sky), 0)
    np.testing.assert_allclose(mean_radiance(sky), [0.5, 1.0, 1.5])


def test_sums_agree_with_plain_ones_over_directions():
    rng = np.random.default_rng(1)
    sky = rng.random((256, 512, 3)).astype(np.float32)
    weights = panorama_row_solid_angles(512, 256)[:, None] * np.ones(512)
    np.testing.assert_allclose(
        mean_radiance(sky), np.einsum("hw,hwc->c", weights, sky) / (4 * np.pi), rtol=1e-9
    )
    cosines = np.maximum(panorama_directions(512, 256)[..., 1], 0)
    np.testing.assert_allclose(
        level_irradiance(sky), np.einsum("hw,hw,hwc->c", weights, cosines, sky), rtol=1e-4
    )


def test_illuminance_is_the_luminance_of_the_irradiance():
    green = constant(32, 64, (0, 1, 0))
    assert horizontal_illuminance(green) == pytest.approx(np.pi * 0.7151686787677559)
