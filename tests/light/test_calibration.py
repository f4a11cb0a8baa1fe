"""Scale factors, lost sunlight and contradictions."""

import numpy as np
import pytest
from sun_skies import clear_noon

from skykiln.light.calibration import (
    Contradiction,
    Measurement,
    agreed_scale,
    card_luminance,
    clipped_calibration,
    neutral_gains,
)
from skykiln.light.facing import patch_radiance
from skykiln.light.photometry import LUMINANCE_WEIGHTS, luminance


def level(measured, found):
    return Measurement("horizontal_lux", measured, found)


def facing(measured, found):
    return Measurement("sun_lux", measured, found)


def patch(measured, found):
    return Measurement("patch", measured, found)


def test_one_measurement_is_met_exactly():
    assert agreed_scale([level(98000, 19.6)]) == pytest.approx(5000)


def test_measurements_as_close_as_meters_are_averaged():
    assert agreed_scale([level(1100, 1), facing(1000, 1)]) == pytest.approx(np.sqrt(1.1e6))


def test_contradictions_name_both_numbers_and_both_factors():
    with pytest.raises(Contradiction, match=r"sun_lux 30000 and horizontal_lux 98000 .* 3000 and by 4900"):
        agreed_scale([level(98000, 20), facing(30000, 10)])


def test_where_there_is_no_light_nothing_can_be_scaled():
    with pytest.raises(ValueError, match="sun_lux: the picture has no light"):
        agreed_scale([facing(1000, 0.0)])


def test_a_grey_card_reflects_like_lambert():
    # 18 % under 10,000 lx: 573 cd/m2.
    assert card_luminance(0.18, 10000) == pytest.approx(572.958, abs=1e-3)
    assert card_luminance(1, np.pi) == pytest.approx(1)


def test_balanced_grey_is_neutral_and_as_bright_as_before():
    grey = np.array([0.5, 0.4, 0.2])
    balanced = grey * neutral_gains(grey, LUMINANCE_WEIGHTS)
    np.testing.assert_allclose(balanced, luminance(grey), rtol=1e-12)
    with pytest.raises(ValueError, match="grey card"):
        neutral_gains(np.array([0.5, 0.0, 0.2]), LUMINANCE_WEIGHTS)


def test_two_measurements_give_factor_and_lost_light():
    # Sky found: 10 level, 4 facing, at 30 degrees; true factor 1000, lost 80,000 lx.
    result = clipped_calibration(level(50000, 10), facing(84000, 4), 0.5)
    assert result.scale == pytest.approx(1000)
    assert result.lost_lux == pytest.approx(80000)


def test_leverage_is_how_much_a_meter_s_error_moves_the_factor():
    result = clipped_calibration(level(50000, 10), facing(84000, 4), 0.5)
    assert result.leverage == pytest.approx(50000 / 8000)
    step = 1e-7
    higher = clipped_calibration(level(50000 * (1 + step), 10), facing(84000, 4), 0.5)
    assert (higher.scale / result.scale - 1) / step == pytest.approx(result.leverage, rel=1e-4)
    brighter = clipped_calibration(level(50000, 10), facing(84000 * (1 + step), 4), 0.5)
    assert (1 - brighter.scale / result.scale) / step == pytest.approx(result.leverage - 1, rel=1e-4)


def test_a_sun_under_the_horizon_gives_no_leverage():
    assert clipped_calibration(level(1000, 10), facing(1200, 4), -0.01).leverage < 1


def test_one_meter_or_a_patch_hangs_on_no_difference():
    known = (level(50000, 10), facing(84000, 4), 0.5, patch(3000, 3))
    assert clipped_calibration(*known).leverage is None
    assert clipped_calibration(known[0], None, 0.5).leverage is None


@pytest.mark.parametrize(("known", "seen"), [
    ({"level": level(50000, 10)}, 80000), ({"facing": facing(84000, 4)}, 80000),
    ({"level": level(50000, 10), "facing": facing(84000, 4)}, 80000), ({}, 0),
])  # fmt: skip
def test_where_the_factor_is_known_either_measurement_gives_the_lost_light(known, seen):
    result = clipped_calibration(known.get("level"), known.get("facing"), 0.5, patch(3000, 3))
    assert result.scale == pytest.approx(1000)
    assert result.lost_lux == pytest.approx(seen)


def test_one_measurement_alone_scales_and_restores_nothing():
    assert clipped_calibration(level(50000, 10), None, 0.5) == (pytest.approx(5000), 0.0, None)


def test_measurements_that_leave_the_sky_no_light_contradict():
    with pytest.raises(Contradiction, match=r"horizontal_lux 40000 and sun_lux 84000 .* 4\.2e"):
        clipped_calibration(level(40000, 10), facing(84000, 4), 0.5)


def test_a_picture_that_is_too_bright_already_contradicts_its_patch():
    with pytest.raises(Contradiction, match="horizontal_lux 5000 and patch 3000"):
        clipped_calibration(level(5000, 10), None, 0.5, patch(3000, 3))


def test_lost_light_of_one_measurement_must_fit_the_other():
    with pytest.raises(Contradiction, match="horizontal_lux 90000"):
        clipped_calibration(level(90000, 10), facing(84000, 4), 0.5, patch(3000, 3))


def test_a_patch_of_the_sky_gives_the_factor():
    sky = clear_noon(128)
    away = patch_radiance(sky, [0, 0, -1.0], 0.1)
    assert agreed_scale([patch(2 * luminance(away), luminance(away))]) == pytest.approx(2)
