"""The filter by any lobe: sheen against brute force on hard skies, closed forms, and the GGX filter."""

import numba
import numpy as np
import pytest
from reference import panorama_points, relative_errors
from scipy.interpolate import CubicSpline
from test_specular import sky

from skykiln.light.directions import (
    alpha_from_roughness,
    cube_directions,
    cube_texel_solid_angles,
    panorama_row_solid_angles,
)
from skykiln.light.ggx import ggx_kernel
from skykiln.light.irradiance import irradiance_cube
from skykiln.light.pyramid import build_pyramid
from skykiln.light.sheen import sheen_kernel, sheen_lobe, sheen_norm
from skykiln.light.specular import filter_level
from skykiln.light.zonal_filter import filter_level_by
from skykiln.light.zonal_lobe import zonal_lobe

SIZE = 8
SKIES = ["linear", "sun on the horizon", "half space", "coloured lamps", "one lit pixel"]


def points_over(panorama, name, roughness):
    """Points of a sky, close beside the lobe's ring, and what is the same everywhere."""
    if name in ("sun on the horizon", "one lit pixel"):
        base = panorama.min()  # 1 or 0, everywhere but in one pixel
        return panorama_points(panorama - base, 32, 3), float(base)
    parts = 3 if roughness < 0.3 else 2
    return panorama_points(panorama, 4 * parts if name == "coloured lamps" else parts), 0.0


def filtered(points, normals, alpha):
    directions, fluxes = points
    kernel = sheen_kernel(np.clip(normals @ directions.T, -1, 1), alpha)
    return kernel @ fluxes / sheen_norm(alpha)


@pytest.mark.parametrize("name", SKIES)
@pytest.mark.parametrize("roughness", [0.1, 0.2, 0.5, 1.0])
def test_largest_error_of_sheen_stays_below_the_tolerance(name, roughness):
    panorama, alpha = sky(name), alpha_from_roughness(roughness)
    points, base = points_over(panorama, name, roughness)
    every = 1 + len(points[0]) * 6 * SIZE**2 // 1_500_000
    normals = cube_directions(SIZE).reshape(-1, 3)[::every]
    reference = base + filtered(points, normals, alpha)
    lobe, tree = sheen_lobe(alpha), build_pyramid(panorama)
    for tolerance in (0.05, 0.005, 0.001) if roughness > 0.1 else (0.05, 0.005):
        result = filter_level_by(lobe, tree, SIZE, tolerance).reshape(-1, 3)[::every]
        assert relative_errors(result, reference, panorama).max() < tolerance
        assert result.min() >= 0.0


@pytest.mark.parametrize("roughness", [0.1, 0.5, 1.0])
def test_constant_sky_stays_constant(roughness):
    tree = build_pyramid(np.full((64, 128, 3), 0.7, np.float32))
    result = filter_level_by(sheen_lobe(alpha_from_roughness(roughness)), tree, 16, 0.005)
    np.testing.assert_allclose(result, 0.7, rtol=0.005 / 10)


def test_black_sky_stays_black():
    tree = build_pyramid(np.zeros((16, 32, 3), np.float32))
    assert not filter_level_by(sheen_lobe(0.25), tree, 4, 0.01).any()


@pytest.mark.parametrize("roughness", [0.2, 0.5, 1.0])
def test_linear_sky_is_scaled_by_the_first_eigenvalue(roughness):
    # Funk-Hecke: B(3, p + 1)/B(2, p + 1) = 2/(p + 3), p = 1/(2 alpha).
    alpha = alpha_from_roughness(roughness)
    result = filter_level_by(sheen_lobe(alpha), build_pyramid(sky("linear", 256)), 8, 0.002)
    np.testing.assert_allclose(result, 1 + 0.8 * 2 / (0.5 / alpha + 3) * cube_directions(8), atol=1e-3)


def test_narrow_ring_sees_the_sky_beside_the_surface_and_nothing_ahead():
    # At alpha = 0.01 all but 1e-4 of the lobe lies within 14 degrees of the horizon (e^(-p c), p = 50).
    panorama = np.zeros((64, 128, 3), np.float32)
    panorama[:21] = 1  # down to 59 degrees from +y
    result = filter_level_by(sheen_lobe(0.01), build_pyramid(panorama), 8, 0.01)[..., 0]
    assert result[2, 3:5, 3:5].max() < 1e-3  # +y looks at it
    assert result[4, 4, 4] == pytest.approx(59 / 180, abs=0.02)  # +z's horizon runs through it


def test_mean_over_the_sphere_is_kept():
    panorama = sky("coloured lamps", 128)
    flux = np.einsum("jic,j->c", panorama.astype(float), panorama_row_solid_angles(128, 64))
    result = filter_level_by(sheen_lobe(0.36), build_pyramid(panorama), 32, 0.001)
    np.testing.assert_allclose(np.einsum("fjic,ji->c", result, cube_texel_solid_angles(32)), flux, rtol=3e-3)


def test_same_bits_for_every_number_of_threads():
    tree, lobe = build_pyramid(sky("coloured lamps")), sheen_lobe(0.1)
    before = numba.get_num_threads()
    results = []
    for threads in {1, before}:
        numba.set_num_threads(threads)
        results.append(filter_level_by(lobe, tree, 16, 0.005).tobytes())
    numba.set_num_threads(before)
    assert len(set(results)) == 1


@pytest.mark.parametrize("name", ["sun at a pole", "half space", "coloured lamps"])
@pytest.mark.parametrize("roughness", [0.2, 0.6])
def test_table_of_ggx_gives_the_ggx_filter(name, roughness):
    panorama, alpha, tolerance = sky(name), alpha_from_roughness(roughness), 0.005
    c = 1 - np.linspace(1, 0, 3000) ** 4
    lobe, tree = zonal_lobe(CubicSpline(c, ggx_kernel(c, alpha))), build_pyramid(panorama)
    result, known = filter_level_by(lobe, tree, 16, tolerance), filter_level(tree, 16, alpha, tolerance / 5)
    assert relative_errors(result, known, panorama).max() < tolerance


def test_table_of_the_clamped_cosine_gives_irradiance_over_pi():
    panorama = sky("sun on the horizon")
    tree = build_pyramid(panorama)
    result = filter_level_by(zonal_lobe(lambda c: c), tree, 16, 0.005)
    assert relative_errors(np.pi * result, irradiance_cube(tree, 16, 0.001), panorama).max() < 0.005


def test_half_space_seen_along_its_edge_is_a_half():
    tree = build_pyramid(sky("half space", 128))  # symmetry, of any lobe
    for roughness in (0.3, 1.0):
        result = filter_level_by(sheen_lobe(alpha_from_roughness(roughness)), tree, 8, 0.002)
        np.testing.assert_allclose((result[4, 3, 4] + result[4, 4, 4]) / 2, 0.5, rtol=2e-3)
