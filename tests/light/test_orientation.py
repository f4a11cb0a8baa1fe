"""Turns: signs, flux, exactness of quarter turns."""

import numpy as np
import pytest
from panorama_reference import coloured_linear, spread_directions

from skykiln.light.directions import panorama_directions
from skykiln.light.faces import extract_faces
from skykiln.light.facing import irradiance_facing
from skykiln.light.orientation import UP_Z, mirrored, reoriented, source_to_world, turn_of, turned
from skykiln.light.photometry import mean_radiance

X, Y, Z = np.eye(3)
QUARTER = np.pi / 2


def flux_vector(sky):
    """Integral of radiance x direction, of the first channel."""
    return np.array([irradiance_facing(sky, n)[0] - irradiance_facing(sky, -n)[0] for n in np.eye(3)])


def test_signs_of_the_three_angles():
    np.testing.assert_allclose(turn_of(yaw=QUARTER) @ Z, X, atol=1e-15)
    np.testing.assert_allclose(turn_of(pitch=QUARTER) @ Z, Y, atol=1e-15)
    np.testing.assert_allclose(turn_of(roll=QUARTER) @ Y, X, atol=1e-15)
    np.testing.assert_allclose(UP_Z @ Z, Y)


def test_roll_comes_first_and_yaw_last():
    turn = turn_of(0.3, 0.2, 0.1)
    np.testing.assert_allclose(turn, turn_of(0.3) @ turn_of(pitch=0.2) @ turn_of(roll=0.1))
    for matrix in (turn, UP_Z):
        np.testing.assert_allclose(matrix @ matrix.T, np.eye(3), atol=1e-15)
        assert np.linalg.det(matrix) == pytest.approx(1)


@pytest.mark.parametrize("turn", [turn_of(0.7, 0.2, -0.4), turn_of(pitch=QUARTER), UP_Z])
def test_a_turned_sky_is_the_sky_of_turned_directions(turn):
    sky = turned(coloured_linear(64), turn)
    d = panorama_directions(128, 64) @ turn  # each pixel's direction in the source: R^T d
    np.testing.assert_allclose(sky, 1 + 0.8 * d, atol=0.03)
    np.testing.assert_allclose(mean_radiance(sky), 1, atol=1e-3)


def test_yaw_agrees_with_the_faces_own():
    sky = coloured_linear(64)
    np.testing.assert_allclose(
        extract_faces(turned(sky, turn_of(yaw=0.4)), 8), extract_faces(sky, 8, 0.4), atol=5e-3
    )


@pytest.mark.parametrize("height", [0.0, 0.2, 0.5])
def test_a_sun_keeps_flux_and_direction(height):
    sky = np.zeros((128, 256, 3), np.float32)
    row = int(height * 128)
    if row:
        sky[row : row + 2, 40:42] = 1e4
    else:
        sky[0] = 1e4  # at the pole all pixels of the row are the sun
    turn = turn_of(0.3, 0.25, -0.1)
    after = turned(sky, turn)
    np.testing.assert_allclose(mean_radiance(after), mean_radiance(sky), rtol=5e-3)
    wanted = turn @ flux_vector(sky)
    np.testing.assert_allclose(flux_vector(after), wanted, atol=5e-3 * np.linalg.norm(wanted))


def test_a_single_slice_beside_the_pole_is_not_lost():
    sky = np.zeros((64, 128, 3), np.float32)
    sky[0, 5] = 1e6
    np.testing.assert_allclose(
        mean_radiance(turned(sky, turn_of(pitch=1.0))), mean_radiance(sky), rtol=5e-2
    )


def test_there_and_back_keeps_irradiance():
    sky = coloured_linear(64)
    turn = turn_of(1.0, 0.5, 0.2)
    back = turned(turned(sky, turn), turn.T)
    for normal in spread_directions(5):
        np.testing.assert_allclose(
            irradiance_facing(back, normal), irradiance_facing(sky, normal), rtol=2e-3
        )


def test_mirroring_exchanges_left_and_right():
    sky = coloured_linear(16)
    np.testing.assert_allclose(mirrored(sky)[..., 0], 2 - sky[..., 0], atol=1e-6)
    np.testing.assert_allclose(mirrored(sky)[..., 1:], sky[..., 1:], atol=1e-6)


def test_a_source_is_mirrored_first_then_stood_up_then_levelled():
    turn = source_to_world(pitch=0.2, roll=0.1, flip=True, up="z")
    np.testing.assert_allclose(turn, turn_of(0, 0.2, 0.1) @ UP_Z @ np.diag([-1, 1, 1]))
    assert source_to_world() is None


def test_mirroring_alone_moves_pixels_and_nothing_keeps_them():
    sky = np.random.default_rng(0).random((8, 16, 3)).astype(np.float32)
    np.testing.assert_array_equal(reoriented(sky, source_to_world(flip=True)), mirrored(sky))
    assert reoriented(sky, None) is sky


def test_a_mirrored_and_turned_sky_is_that_of_mirrored_and_turned_directions():
    turn = source_to_world(pitch=0.4, roll=-0.3, flip=True)
    d = panorama_directions(128, 64) @ turn
    np.testing.assert_allclose(reoriented(coloured_linear(64), turn), 1 + 0.8 * d, atol=0.03)
