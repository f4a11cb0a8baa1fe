"""Faces from panoramas: flux, direction, conventions and hard places."""

import numpy as np
import pytest

from skykiln.light.directions import (
    cube_directions,
    cube_texel_solid_angles,
    panorama_directions,
    panorama_row_solid_angles,
)
from skykiln.light.faces import extract_faces, interpolated_panorama


def panorama_flux(panorama):
    height, width, _ = panorama.shape
    rows = panorama_row_solid_angles(width, height)
    return np.einsum("jic,j->c", panorama.astype(np.float64), rows)


def cube_flux(faces):
    return np.einsum("fjic,ji->c", faces.astype(np.float64), cube_texel_solid_angles(faces.shape[1]))


@pytest.mark.parametrize(("size", "width"), [(1, 64), (2, 64), (16, 128), (64, 256), (64, 100)])
def test_constant_sky_stays_constant(size, width):
    faces = extract_faces(np.full((width // 2, width, 3), 3.0, np.float32), size)
    np.testing.assert_allclose(faces, 3.0, rtol=2e-5)


@pytest.mark.parametrize("size", [1, 8, 64])
@pytest.mark.parametrize("yaw", [0.0, 0.3])
def test_flux_is_conserved_whatever_the_sky(size, yaw):
    rng = np.random.default_rng(3)
    panorama = rng.random((128, 256, 3)).astype(np.float32) ** 4
    panorama[20, 77] = 1e7
    faces = extract_faces(panorama, size, yaw)
    np.testing.assert_allclose(cube_flux(faces), panorama_flux(panorama), rtol=1e-6)


@pytest.mark.parametrize(("row", "column"), [(30, 40), (12, 3), (113, 200), (70, 0), (62, 255), (40, 96)])
def test_sun_of_two_pixels_keeps_flux_and_direction(row, column):
    panorama = np.zeros((128, 256, 3), np.float32)
    columns = [column, (column + 1) % 256]
    panorama[row : row + 2, columns] = 5e4
    size = 64
    faces = extract_faces(panorama, size).astype(np.float64)
    flux = faces[..., 0] * cube_texel_solid_angles(size)
    assert flux.sum() == pytest.approx(panorama_flux(panorama)[0], rel=5e-3)
    found = np.einsum("fji,fjix->x", flux, cube_directions(size))
    source = panorama_directions(256, 128)[row : row + 2, columns].sum((0, 1))
    cosine = found @ source / np.linalg.norm(found) / np.linalg.norm(source)
    assert np.arccos(min(1.0, cosine)) < 0.1 * 2 / size


@pytest.mark.parametrize(("row", "face"), [(0, 2), (127, 3)])
def test_sun_at_a_pole_is_shared_by_the_texels_around_it(row, face):
    panorama = np.zeros((128, 256, 3), np.float32)
    panorama[row] = 5e4
    faces = extract_faces(panorama, 64)
    assert cube_flux(faces)[0] == pytest.approx(panorama_flux(panorama)[0], rel=1e-6)
    np.testing.assert_allclose(faces[face, 31:33, 31:33, 0], faces[face, 31, 31, 0], rtol=1e-5)


def test_texels_are_means_of_the_panorama_over_their_own_footprints():
    # Independent method: 64 x 64 point samples per texel of the piecewise constant source.
    rng = np.random.default_rng(0)
    panorama = rng.random((32, 64, 3)).astype(np.float32)
    size, parts = 8, 64
    d, w = cube_directions(size * parts), cube_texel_solid_angles(size * parts)
    longitude = np.arctan2(d[..., 0], d[..., 2])
    column = ((np.pi - longitude) / (2 * np.pi) * 64).astype(int) % 64
    row = np.minimum(31, (np.arccos(d[..., 1]) / np.pi * 32).astype(int))
    cells = (panorama[row, column] * w[None, :, :, None]).reshape(6, size, parts, size, parts, 3)
    areas = w.reshape(size, parts, size, parts).sum((1, 3))
    np.testing.assert_allclose(
        extract_faces(panorama, size), cells.sum((2, 4)) / areas[:, :, None], atol=0.01
    )


def test_each_axis_lands_on_its_face():
    panorama = (1 + 0.8 * panorama_directions(256, 128)).astype(np.float32)
    np.testing.assert_allclose(extract_faces(panorama, 64), 1 + 0.8 * cube_directions(64), atol=1e-2)


def test_positive_yaw_turns_what_lay_at_plus_z_towards_plus_x():
    panorama = (1 + 0.8 * panorama_directions(256, 128)).astype(np.float32)
    faces = extract_faces(panorama, 16, np.pi / 2)
    assert faces[0, 8, 8, 2] > 1.78
    assert faces[5, 8, 8, 0] > 1.78  # and what lay at +x goes to -z


def test_yaw_equals_rolling_the_panorama():
    rng = np.random.default_rng(1)
    panorama = rng.random((32, 64, 3)).astype(np.float32)
    rolled = np.roll(panorama, -16, axis=1)
    np.testing.assert_allclose(extract_faces(panorama, 8, np.pi / 2), extract_faces(rolled, 8), rtol=1e-5)


def test_coarse_source_is_interpolated_between_pixel_centres():
    panorama = (1 + 0.8 * panorama_directions(64, 32)).astype(np.float32)
    faces = extract_faces(panorama, 64)
    np.testing.assert_allclose(faces, 1 + 0.8 * cube_directions(64), atol=5e-3)
    assert np.abs(np.diff(faces[4, 32, :, 0], 2)).max() < 0.02  # stair-stepped: 0.08
    np.testing.assert_allclose(cube_flux(faces), panorama_flux(panorama), rtol=5e-3)


def test_interpolation_crosses_seam_and_poles():
    panorama = np.zeros((4, 8, 3), np.float32)
    panorama[0, 0], panorama[2, 0] = 1.0, 1.0
    fine = interpolated_panorama(panorama, 2)
    assert fine[4, -1].min() > 0.1  # across the seam
    assert fine[0, 8].min() > 0.1  # over the pole


def test_radiance_is_never_negative():
    panorama = np.zeros((64, 128, 3), np.float32)
    panorama[10, 10] = 1e9
    assert extract_faces(panorama, 32).min() >= 0.0
