"""The source summed under the lobe: the way to the packed files' values that shares nothing with them."""

import numpy as np
import pytest

from skykiln.light.brute_lighting import lit_by_source, lobe_means, reduced_sources
from skykiln.light.directions import panorama_directions
from skykiln.light.photometry import level_irradiance, mean_radiance

UP = np.array([[0.0, 1, 0]])


def _sky():
    sky = np.random.default_rng(2).random((24, 48, 3)).astype(np.float32)
    sky[4, 40] = 500
    return sky


def test_blocks_keep_the_flux():
    sky = np.repeat(np.repeat(_sky(), 3, 0), 30, 1)  # 1440 across: blocks of three
    for source in reduced_sources(sky, 0.0):
        assert source.flux.shape[1] == source.solid_angles.size < sky.shape[0] * sky.shape[1]
        np.testing.assert_allclose(source.flux.sum(1) / (4 * np.pi), mean_radiance(sky), rtol=1e-4)
        assert source.solid_angles.sum() == pytest.approx(4 * np.pi, rel=1e-5)


def test_a_block_with_a_sun_looks_where_the_sun_is():
    sky = np.full((256, 512, 3), 1e-3, np.float32)
    sky[60, 101] = 1e6
    source = reduced_sources(sky, 0.0)[2]
    found = source.directions[:, source.flux.sum(0).argmax()]
    np.testing.assert_allclose(found, panorama_directions(512, 256)[60, 101], atol=1e-3)


def test_the_widest_lobe_is_irradiance_over_pi():
    sky = _sky()
    found = lobe_means(reduced_sources(sky, 0.0)[0], UP, [1.0])[0]
    np.testing.assert_allclose(found, level_irradiance(sky) / np.pi, rtol=2e-3)


def _patch():
    """A bright patch about +z, and the direction of one of its pixels."""
    sky = np.full((16, 32, 3), 1, np.float32)
    sky[7:9, 15:17] = 7
    return sky, panorama_directions(32, 16)[7, 15]


def test_a_narrow_lobe_sees_the_pixel_it_looks_at():
    sky, axis = _patch()
    found = lobe_means(reduced_sources(sky, 0.0)[0], np.stack([axis, -axis]), [0.01, 0.01])
    np.testing.assert_allclose(found[:, 1], [7, 1], rtol=1e-2)


def test_yaw_turns_what_lay_at_z_towards_x():
    sky, (x, y, z) = _patch()
    source = reduced_sources(sky, np.pi / 2)[0]
    assert lobe_means(source, np.array([[z, y, -x]]), [0.01])[0, 0] == pytest.approx(7, rel=1e-2)


def test_white_plaster_and_a_white_mirror_under_a_white_sky_are_as_bright_as_it():
    sky, table = np.ones((16, 32, 3), np.float32), np.dstack([np.ones((4, 4)), np.zeros((4, 4))])
    n = np.repeat(UP, 2, 0)
    albedo, f0 = np.array([[1.0] * 3, [0.0] * 3]), np.array([[0.0] * 3, [1.0] * 3])
    lit = lit_by_source(sky, 0.0, table, n, n, albedo, f0, np.array([1.0, 0.0]))
    np.testing.assert_allclose(lit, np.ones((2, 3)), rtol=1e-3)
