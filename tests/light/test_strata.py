"""The stratified estimator against closed forms, plain summation and its own promise."""

import math

import numba
import numpy as np
import pytest
from panorama_reference import SKIES, coloured_linear, filtered_exactly, pixel_points, spread_directions

from skykiln.light.directions import alpha_from_roughness, panorama_directions
from skykiln.light.sheen import sheen_kernel
from skykiln.light.source_tree import source_tree
from skykiln.light.strata import stratified_estimate
from skykiln.light.stratum_kernels import FOOTPRINT, GGX, SHEEN
from skykiln.light.texel_draw import Texels, texel_edges, texel_solid_angles


def estimate(panorama, normals, alpha, precision=0.005, seed=1, floor=1e-4, most=10**6, kind=GGX):
    count = len(normals)
    return stratified_estimate(
        source_tree(panorama),
        np.full(count, kind),
        np.asarray(normals, dtype=float),
        np.full(count, float(alpha)),
        np.zeros((count, 4, 3)),
        np.ones(count),
        floor,
        np.full(count, precision),
        most,
        seed,
    )


def footprints(panorama, size, precision=0.002, seed=1):
    face, row, column = (index.ravel() for index in np.indices((6, size, size)))
    texels = Texels(np.zeros_like(face), face, row, column)
    count = face.size
    means, errors, _ = stratified_estimate(
        source_tree(panorama),
        np.full(count, FOOTPRINT),
        np.zeros((count, 3)),
        np.zeros(count),
        texel_edges([size], texels, 0.0),
        texel_solid_angles([size], texels),
        1e-4,
        np.full(count, precision),
        10**6,
        seed,
    )
    return means.reshape(6, size, size, 3), errors.reshape(6, size, size, 3)


@pytest.mark.parametrize("alpha", [0.02, 0.3, 1.0])
def test_constant_skies_stay_constant_within_the_error(alpha):
    panorama = np.full((16, 32, 3), [1, 2, 0.5], dtype=np.float32)
    means, errors, _ = estimate(panorama, spread_directions(20), alpha)
    assert (np.abs(means - [1, 2, 0.5]) < 3 * errors).all()
    assert (errors / means).max() < 0.01


@pytest.mark.parametrize(("roughness", "eigenvalue"), [(0.2, 0.9876473765687528),
                                                       (0.5, 0.8673956628118448),
                                                       (0.8, 0.7254941009925487)])  # fmt: skip
def test_linear_skies_keep_their_eigenvalue(roughness, eigenvalue):
    # Funk-Hecke: 1 + k d.n filters to 1 + k lambda_1 d.n, with lambda_1 in closed form for this kernel.
    normals = spread_directions(12)
    means, errors, _ = estimate(
        coloured_linear(128), normals, alpha_from_roughness(roughness), precision=0.001
    )
    assert (np.abs(means - 1 - 0.8 * eigenvalue * normals) < 3 * errors + 1e-4).all()
    assert errors.max() < 0.005


def test_half_space_skies_have_their_closed_form():
    # Symmetry: 1/2 along the edge at any roughness; (1 + cos psi)/2 at roughness 1.
    panorama = np.zeros((64, 128, 3), dtype=np.float32)
    panorama[:32] = 1
    for alpha in (0.05, 0.4, 1.0):
        means, errors, _ = estimate(panorama, [[1, 0, 0], [0.6, 0, -0.8]], alpha, precision=0.001)
        assert (np.abs(means - 0.5) < 3 * errors).all()
    tilted = [[math.sqrt(0.5), math.sqrt(0.5), 0], [math.sqrt(0.5), -math.sqrt(0.5), 0]]
    means, errors, _ = estimate(panorama, tilted, 1.0, precision=0.001)
    expected = [0.8535533905932815, 0.14644660940672755]
    assert (np.abs(means[:, 0] - expected) < 3 * errors[:, 0]).all()


@pytest.mark.parametrize("sky", SKIES)
@pytest.mark.parametrize("alpha", [0.08, 0.33, 1.0])
def test_estimates_agree_with_plain_summation(sky, alpha):
    panorama = SKIES[sky](32)
    normals = spread_directions(24)
    exact = filtered_exactly(panorama, normals, alpha, order=8)
    means, errors, _ = estimate(panorama, normals, alpha, precision=0.002)
    # The points of the plain sum miss the kernel's kink at the horizon by a little.
    assert (np.abs(means - exact) < 3 * errors + 1e-3 * exact).all()


@pytest.mark.parametrize("alpha", [0.05, 0.3, 1.0])
def test_sheen_agrees_with_a_plain_sum_of_its_own_kernel(alpha):
    panorama, normals = SKIES["lamps"](32), spread_directions(16)
    points, weights = pixel_points(32, 64, 8)
    radiance = np.repeat(np.repeat(panorama, 8, 0), 8, 1).reshape(-1, 3)
    kernel = sheen_kernel(normals @ points.T, alpha) * weights
    exact = kernel @ radiance / kernel.sum(axis=1, keepdims=True)
    means, errors, _ = estimate(panorama, normals, alpha, precision=0.002, kind=SHEEN)
    assert (np.abs(means - exact) < 3 * errors + 1e-3 * exact).all()
    assert (errors / means).max() < 0.01


@pytest.mark.parametrize("sky", SKIES)
@pytest.mark.parametrize("alpha", [0.04, 0.5])
def test_errors_bound_the_spread_of_repeats_and_repeats_agree_in_the_mean(sky, alpha):
    panorama = SKIES[sky](32)
    normals = spread_directions(10)
    runs = np.array([estimate(panorama, normals, alpha, seed=seed)[0] for seed in range(200)])
    errors = estimate(panorama, normals, alpha)[1]
    spread = runs.std(axis=0, ddof=1)
    assert (spread < errors).all()
    assert np.median(spread / errors) > 0.1  # not a bound by far
    exact, fine, _ = estimate(panorama, normals, alpha, precision=1e-4, seed=77)
    t = (runs.mean(axis=0) - exact) / np.hypot(spread / math.sqrt(200), fine)
    assert np.abs(t).max() < 4.5


def test_a_coarse_estimate_is_unbiased_where_one_pixel_outshines_the_rest():
    # Where an estimate from few samples fails: the rare one counts for as much as all others.
    panorama = SKIES["sun"](64)
    normals = spread_directions(6)
    runs = [estimate(panorama, normals, 0.05, precision=0.2, seed=s) for s in range(400)]
    means = np.array([run[0] for run in runs])
    exact, fine, _ = estimate(panorama, normals, 0.05, precision=2e-4)
    error = np.hypot(means.std(axis=0, ddof=1) / 20, fine)
    assert np.abs((means.mean(axis=0) - exact) / error).max() < 4.5
    assert np.abs((means - exact) / runs[0][1]).max() < 4


def test_errors_fall_to_what_was_asked_for_unless_the_count_is_limited():
    normals = spread_directions(10)
    panorama = SKIES["linear"](64)
    for precision in (0.02, 0.005, 0.001):
        means, errors, strata = estimate(panorama, normals, 0.2, precision)
        worst = (errors / means).max(axis=1)
        assert (worst < 1.6 * precision).all()
        assert (worst > 0.3 * precision).all()
    _, _, limited = estimate(panorama, normals, 0.2, 1e-5, most=3000)
    assert limited.max() < 6000 < strata.max()


def test_footprints_of_constant_skies_are_exact_up_to_their_outline():
    panorama = np.full((16, 32, 3), [1, 2, 0.5], dtype=np.float32)
    means, errors = footprints(panorama, 8)
    assert (np.abs(means - [1, 2, 0.5]) < 3 * errors).all()
    assert (errors / means).max() < 0.004


def test_footprints_see_the_texel_they_should():
    # A pixel above the +x face's middle and left of it, seen from inside: table of OpenGL 4.6, 8.13.
    panorama = np.zeros((32, 64, 3), dtype=np.float32)
    toward = np.array([0.9, 0.35, 0.25])
    nearest = np.argmax((panorama_directions(64, 32) @ toward).ravel())
    panorama.reshape(-1, 3)[nearest] = 1
    means, _ = footprints(panorama, 4)
    lit = np.argwhere(means[..., 0] > 0.1 * means.max())
    # +x: s runs along -z, t along -y: above the middle is row 0 or 1, +z is column 0 or 1.
    assert {tuple(place) for place in lit} <= {(0, 0, 1), (0, 1, 1), (0, 0, 0), (0, 1, 0)}


def test_footprints_keep_the_flux_of_a_tiny_sun():
    panorama = np.zeros((64, 128, 3), dtype=np.float32)
    panorama[20, 33] = 1e6
    size = 8
    means, errors = footprints(panorama, size)
    face, row, column = (index.ravel() for index in np.indices((6, size, size)))
    angles = texel_solid_angles([size], Texels(np.zeros_like(face), face, row, column))
    flux = (means.reshape(-1, 3) * angles[:, None]).sum(axis=0)
    edges = np.cos(np.pi * np.arange(65) / 64)
    expected = 1e6 * (edges[20] - edges[21]) * 2 * np.pi / 128
    np.testing.assert_allclose(flux, expected, rtol=0.01)
    assert (means >= 0).all()
    assert errors[means == 0].max() == 0


def test_black_skies_are_black_without_error():
    means, errors, _ = estimate(np.zeros((8, 16, 3), np.float32), spread_directions(4), 0.3)
    assert not means.any() and not errors.any()


def test_bits_do_not_depend_on_the_number_of_threads():
    panorama, normals = SKIES["lamps"](32), spread_directions(40)
    threads = numba.get_num_threads()
    try:
        numba.set_num_threads(1)
        alone = estimate(panorama, normals, 0.1)
    finally:
        numba.set_num_threads(threads)
    together = estimate(panorama, normals, 0.1)
    for a, b in zip(alone, together, strict=True):
        np.testing.assert_array_equal(a, b)
