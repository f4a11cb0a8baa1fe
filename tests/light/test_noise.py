"""The estimators of the trade: unbiased, honest about their noise, and as costly as they say."""

import numpy as np
import pytest
from panorama_reference import SKIES, coloured_linear, filtered_exactly, small_sun

from skykiln.light.directions import cube_directions
from skykiln.light.noise import TECHNIQUES, noisy_level, samples_needed
from skykiln.light.photometry import mean_radiance
from skykiln.light.source_tree import source_tree

NORMALS = cube_directions(2).reshape(-1, 3)


@pytest.mark.parametrize("technique", ["ggx", "mis"])
@pytest.mark.parametrize("alpha", [0.1, 0.5, 1.0])
def test_means_agree_with_plain_summation_within_their_standard_errors(technique, alpha):
    panorama = coloured_linear(32)
    exact = filtered_exactly(panorama, NORMALS, alpha)
    noise = noisy_level(source_tree(panorama), 2, alpha, 20_000, technique, 3)
    z = (noise.radiance.reshape(-1, 3) - exact) / noise.standard_error.reshape(-1, 3)
    assert np.abs(z).max() < 4.5
    assert 0.6 < np.sqrt(np.mean(z**2)) < 1.4


def test_sampling_the_source_too_finds_a_small_sun():
    panorama = small_sun(64)
    exact = filtered_exactly(panorama, NORMALS, 0.2, order=8)
    tree = source_tree(panorama)
    errors = {
        technique: np.abs(noisy_level(tree, 2, 0.2, 1024, technique, 3).radiance.reshape(-1, 3) / exact - 1)
        for technique in ("ggx", "mis")
    }
    assert np.median(errors["mis"]) < 0.05
    assert errors["ggx"].max() > 0.5


@pytest.mark.parametrize("technique", TECHNIQUES)
def test_standard_errors_tell_the_spread_of_repeats(technique):
    tree = source_tree(coloured_linear(32))
    runs = [noisy_level(tree, 2, 0.3, 256, technique, seed) for seed in range(200)]
    spread = np.std([run.radiance for run in runs], axis=0)
    told = np.mean([run.standard_error for run in runs], axis=0)
    np.testing.assert_allclose(spread, told, rtol=0.3)
    assert np.median(spread / told) == pytest.approx(1.0, abs=0.05)


def test_filtered_lookups_trade_noise_for_bias():
    panorama = SKIES["lamps"](64)
    tree = source_tree(panorama)
    plain = noisy_level(tree, 4, 0.1, 64, "ggx", 3)
    filtered = noisy_level(tree, 4, 0.1, 64, "filtered", 3)
    assert filtered.standard_error.mean() < 0.5 * plain.standard_error.mean()


def test_filtered_lookups_keep_constant_and_smooth_skies():
    constant = source_tree(np.full((16, 32, 3), 2.0, dtype=np.float32))
    noise = noisy_level(constant, 2, 1.0, 4096, "filtered", 1)
    np.testing.assert_allclose(noise.radiance, 2.0, rtol=0.1)
    z = (noise.radiance - 2.0) / noise.standard_error
    assert np.abs(z).max() < 4
    panorama = coloured_linear(64)
    exact = filtered_exactly(panorama, NORMALS, 0.2).reshape(6, 2, 2, 3)
    smooth = noisy_level(source_tree(panorama), 2, 0.2, 4096, "filtered", 1)
    np.testing.assert_allclose(smooth.radiance, exact, atol=0.05)


def test_needs_fall_with_the_square_of_the_error_and_are_met():
    panorama = coloured_linear(32)
    tree = source_tree(panorama)
    floor = 1e-3 * mean_radiance(panorama).max()
    needs = samples_needed(tree, 0.3, [0.05, 0.01, 0.005], floor, 1)
    assert set(needs) == set(TECHNIQUES)
    for technique in ("ggx", "mis"):
        five, one, half = needs[technique]
        assert one == pytest.approx(25 * five, rel=0.05)
        assert half == pytest.approx(4 * one, rel=0.01)
        count = 2 * (five // 2 + 1)
        noise = noisy_level(tree, 8, 0.3, count, technique, 2)
        exact = filtered_exactly(panorama, cube_directions(8).reshape(-1, 3), 0.3, order=3)
        relative = noise.standard_error.reshape(-1, 3) / exact
        assert np.quantile(relative.max(axis=1), 0.95) == pytest.approx(0.05, rel=0.25)


def test_filtered_lookups_of_a_small_sun_never_reach_half_a_percent():
    panorama = small_sun(64)
    tree = source_tree(panorama)
    needs = samples_needed(tree, 0.1, [0.05, 0.005], 1e-3 * mean_radiance(panorama).max(), 1)
    assert needs["filtered"][1] is None
    assert needs["mis"][1] < needs["ggx"][1] / 100


def test_yaw_turns_the_level():
    panorama = coloured_linear(32)
    tree = source_tree(panorama)
    turned = noisy_level(tree, 1, 0.05, 1000, "ggx", 1, yaw=np.pi / 2).radiance[:, 0, 0]
    straight = noisy_level(tree, 1, 0.05, 1000, "ggx", 1).radiance[:, 0, 0]
    # World +x shows what the panorama has at +z.
    np.testing.assert_allclose(turned[0], straight[4], atol=0.05)


def test_the_same_seed_gives_the_same_level():
    tree = source_tree(coloured_linear(16))
    first, second = (noisy_level(tree, 4, 0.3, 16, "mis", 5).radiance for _ in range(2))
    np.testing.assert_array_equal(first, second)
