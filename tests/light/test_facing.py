"""Irradiance on tilted surfaces and means of patches, against closed forms."""

import numpy as np
import pytest
from panorama_reference import coloured_linear, pixel_points, spread_directions

from skykiln.light.facing import irradiance_facing, patch_radiance
from skykiln.light.photometry import level_irradiance


@pytest.mark.parametrize("tilt", [0, 30, 60, 90, 120])
def test_uniform_upper_sky_on_a_tilted_plane(tilt):
    # pi (1 + cos b)/2 for a sky of radiance 1 over black ground (illumination handbooks).
    sky = np.zeros((256, 512, 3), np.float32)
    sky[:128] = 1
    normal = [np.sin(np.radians(tilt)), np.cos(np.radians(tilt)), 0]
    expected = np.pi * (1 + np.cos(np.radians(tilt))) / 2
    np.testing.assert_allclose(irradiance_facing(sky, normal), expected, rtol=2e-4)


def test_level_surface_agrees_with_photometry():
    sky = np.random.default_rng(0).random((32, 64, 3)).astype(np.float32)
    np.testing.assert_allclose(irradiance_facing(sky, [0, 1, 0]), level_irradiance(sky), rtol=1e-12)


def test_each_channel_of_the_linear_sky_tells_its_axis():
    # 1 + 0.8 x on normal n gives pi + 0.8 (2 pi/3) n_x (Ramamoorthi and Hanrahan 2001).
    for normal in spread_directions(5):
        np.testing.assert_allclose(
            irradiance_facing(coloured_linear(64), normal), np.pi + 1.6 * np.pi / 3 * normal, rtol=1e-3
        )


def test_sums_over_points_agree():
    sky = np.random.default_rng(1).random((16, 32, 3)).astype(np.float32)
    d, weights = pixel_points(16, 32, 8)
    radiance = np.repeat(np.repeat(sky, 8, 0), 8, 1).reshape(-1, 3)
    for normal in spread_directions(4):
        expected = (np.maximum(d @ normal, 0) * weights) @ radiance
        np.testing.assert_allclose(irradiance_facing(sky, normal), expected, rtol=5e-3)


def test_a_patch_is_the_mean_over_its_own_disc():
    sky = coloured_linear(256)
    toward = np.array([0.6, 0.0, 0.8])
    # Mean cosine over a cap of radius r: (1 + cos r)/2.
    expected = 1 + 0.8 * toward * (1 + np.cos(0.3)) / 2
    np.testing.assert_allclose(patch_radiance(sky, toward, 0.3), expected, rtol=2e-3)


def test_a_patch_inside_one_pixel_is_that_pixel():
    sky = np.random.default_rng(2).random((8, 16, 3)).astype(np.float32)
    longitude, latitude = np.pi - 2 * np.pi * 5.5 / 16, np.pi / 2 - np.pi * 2.5 / 8
    toward = [np.cos(latitude) * np.sin(longitude), np.sin(latitude), np.cos(latitude) * np.cos(longitude)]
    np.testing.assert_allclose(patch_radiance(sky, toward, 0.01), sky[2, 5], rtol=1e-6)
