"""What a coding took: flux and stops of known changes."""

import numpy as np
import pytest

from skykiln.light.coding_error import flux_error, log2_rms
from skykiln.light.directions import cube_texel_solid_angles


def random_level(size=8):
    return np.random.default_rng(0).random((6, size, size, 3), np.float32) + np.float32(0.5)


def test_unchanged_level_lost_nothing():
    level = random_level()
    assert flux_error(level, level) == log2_rms(level, level) == 0


def test_all_values_a_hundredth_brighter_are_a_hundredth_of_the_flux():
    level = np.ones((6, 4, 4, 3), np.float32)
    assert flux_error(level, level * np.float32(1.01)) == pytest.approx(0.01, rel=1e-4)


def test_channel_is_measured_against_the_brightest():
    level = np.ones((6, 4, 4, 3), np.float32) * np.array([1, 1, 0.01], np.float32)
    assert flux_error(level, level * np.array([1, 1, 2], np.float32)) == pytest.approx(0.01, rel=1e-4)


def test_one_texel_weighs_its_solid_angle():
    level = np.ones((6, 4, 4, 3), np.float32)
    coded = level.copy()
    coded[3, 0, 0] += 1
    expected = cube_texel_solid_angles(4)[0, 0] / (4 * np.pi)
    assert flux_error(level, coded) == pytest.approx(expected, rel=1e-5)


def test_half_a_stop_everywhere_is_half_a_stop():
    level = random_level()
    assert log2_rms(level, level * np.float32(2**0.5)) == pytest.approx(0.5, rel=2e-3)


def test_black_level_has_no_error_and_black_texels_count_as_a_thousandth_of_the_mean():
    level = np.zeros((6, 4, 4, 3), np.float32)
    assert flux_error(level, level) == log2_rms(level, level) == 0
    level[:3] = 1
    dark = level.copy()
    dark[3:] = np.float32(0.0005)  # as bright as the floor: one stop on half of the texels
    assert log2_rms(level, dark) == pytest.approx(0.5**0.5, rel=1e-3)
