"""The sparse grid of a lobe: what it promises of single lights, and when texels are taken instead."""

import numpy as np
import pytest
from reference import filtered, joined, panorama_points, relative_errors

from skykiln.light.directions import FACE_AXES, cube_directions, panorama_directions
from skykiln.light.ggx import ggx_kernel
from skykiln.light.lobe_grid import interpolated, lobe_grid, texel_grid
from skykiln.light.pyramid import build_pyramid
from skykiln.light.specular import filter_level


def grid_directions(grid):
    """Directions of a grid's points, (6, n, n, 3)."""
    b, a = np.meshgrid(grid.at, grid.at, indexing="ij")
    d = FACE_AXES[:, None, None, 0] + a[..., None] * FACE_AXES[:, None, None, 1]
    d = d + b[..., None] * FACE_AXES[:, None, None, 2]
    return d / np.linalg.norm(d, axis=-1, keepdims=True)


@pytest.mark.parametrize("tolerance", [0.02, 0.005, 0.001])
@pytest.mark.parametrize("alpha", [0.03, 0.08])
def test_every_light_is_interpolated_to_a_fifth_of_the_tolerance(alpha, tolerance):
    size = 256
    grid = lobe_grid(size, alpha, tolerance, 8)
    assert grid.sparse
    lights = np.array([[0.01, 0.02, 1.0], [1, 0.3, 0.99], [0.7, 0.71, 0.72], [0.1, -1, 0.3]])
    lights /= np.linalg.norm(lights, axis=-1, keepdims=True)
    for light in lights:
        values = ggx_kernel(grid_directions(grid) @ light, alpha)[..., None].repeat(3, -1)
        exact = ggx_kernel(cube_directions(size).astype(float) @ light, alpha)
        clear = cube_directions(size) @ light > 0.3  # of the kink at its horizon
        result = interpolated(values.astype(np.float32), grid, size)[..., 1]
        assert np.abs(result[clear] / exact[clear] - 1).max() < tolerance / 5


def test_grid_is_sparser_for_wider_lobes_and_looser_tolerances():
    count = [len(lobe_grid(512, alpha, 0.01, 8).at) for alpha in (0.03, 0.06, 0.12)]
    assert count[0] > 1.6 * count[1] > 2 * count[2]
    assert len(lobe_grid(512, 0.03, 0.05, 8).at) < len(lobe_grid(512, 0.03, 0.001, 8).at)


def test_texels_are_taken_where_the_grid_would_be_no_sparser():
    grid = lobe_grid(256, 0.005, 0.005, 8)
    assert not grid.sparse
    np.testing.assert_array_equal(grid.at, texel_grid(256).at)


def test_texel_grid_gives_the_texels_centres():
    np.testing.assert_allclose(grid_directions(texel_grid(8)), cube_directions(8), atol=1e-6)


def test_a_constant_stays_one():
    grid = lobe_grid(256, 0.05, 0.01, 8)
    ones = np.ones((6, len(grid.at), len(grid.at), 3), np.float32)
    np.testing.assert_allclose(interpolated(ones, grid, 256), 1, rtol=2e-6)


@pytest.mark.parametrize("background", [1.0, 0.0])
def test_a_filtered_sun_keeps_the_tolerance_across_its_horizon(background):
    """Over black the kink at the sun's horizon is all there is: there the texels themselves are taken."""
    panorama = np.full((128, 256, 3), background, np.float32)
    panorama[40, 80] = 1e5
    alpha, tolerance, size = 0.12, 0.005, 128
    assert lobe_grid(size, alpha, tolerance, 8).sparse
    sun = panorama_directions(256, 128)[40, 80]
    heights = cube_directions(size).reshape(-1, 3) @ sun
    near, across = np.argsort(-heights)[:200], np.argsort(np.abs(heights))[:400]
    texels = np.concatenate([near, across])
    lit = np.where(panorama > 1e3, panorama, 0)
    points = joined(panorama_points(panorama - lit, 1, 2), panorama_points(lit, 16, 2))
    reference = filtered(points, cube_directions(size).reshape(-1, 3)[texels], alpha)
    result = filter_level(build_pyramid(panorama), size, alpha, tolerance).reshape(-1, 3)[texels]
    assert relative_errors(result, reference, panorama).max() < tolerance
