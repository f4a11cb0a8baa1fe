"""Sampled directions against their densities.

Chi-square tests of samples against densities: Subr and Arvo 2007, "Statistical hypothesis testing for
assessing Monte Carlo estimators: applications to image synthesis" (Pacific Graphics).
"""

import itertools
import math

import numpy as np
import pytest
from scipy import integrate, stats

from skykiln.light.sampling import cosine_cosine, cosine_density, ggx_cosine, ggx_density
from skykiln.light.tangent_frames import around, tangent_frame

COUNT = 200_000


def chi_square(directions, normal, density):
    """p-value of directions against a density of the cosine to a normal, even in azimuth."""
    tangent, bitangent = tangent_frame(normal)
    c = directions @ normal
    turn = np.arctan2(directions @ bitangent, directions @ tangent)
    edges = np.unique(np.concatenate([np.linspace(-1, 0.9, 20), 1 - np.geomspace(0.1, 1e-4, 15), [1]]))
    found, _, _ = np.histogram2d(c, turn, bins=[edges, np.linspace(-np.pi, np.pi, 9)])
    rings = [
        integrate.quad(density, a, b, epsabs=1e-12)[0]
        for a, b in itertools.pairwise(edges)
    ]
    expected = len(directions) * 2 * np.pi * np.repeat(np.array(rings)[:, None] / 8, 8, axis=1)
    full = expected > 10
    found, expected = found[full], expected[full]
    statistic = ((found - expected) ** 2 / expected).sum()
    return stats.chi2.sf(statistic, full.sum() - 1)


def numbers(seed=1):
    return np.random.default_rng(seed).random((2, COUNT))


@pytest.mark.parametrize("alpha", [0.05, 0.3, 1.0])
@pytest.mark.parametrize("normal", [(0, 0, 1), (0, 0, -1), (0.48, -0.6, 0.64)])
def test_ggx_samples_follow_their_density(alpha, normal):
    u, turns = numbers()
    normal = np.array(normal, dtype=float)
    samples = around(normal, ggx_cosine(u, alpha), turns)
    assert chi_square(samples, normal, lambda c: ggx_density(c, alpha)) > 1e-3


def test_cosine_samples_follow_their_density():
    u, turns = numbers()
    normal = np.array([0.6, 0.64, -0.48])
    assert chi_square(around(normal, cosine_cosine(u), turns), normal, cosine_density) > 1e-3


def test_the_chi_square_test_sees_a_wrong_lobe():
    u, turns = numbers()
    normal = np.array([0.0, 1.0, 0.0])
    samples = around(normal, ggx_cosine(u, 0.3), turns)
    assert chi_square(samples, normal, lambda c: ggx_density(c, 0.31)) < 1e-9
    lopsided = around(normal, ggx_cosine(u, 0.3), turns**1.05)
    assert chi_square(lopsided, normal, lambda c: ggx_density(c, 0.3)) < 1e-9


@pytest.mark.parametrize("alpha", [0.02, 0.25, 1.0])
def test_ggx_density_is_normalised_and_is_a_quarter_of_d(alpha):
    whole = 2 * math.pi * integrate.quad(lambda c: ggx_density(c, alpha), -1, 1, points=[0.99])[0]
    assert whole == pytest.approx(1, rel=1e-8)
    # Walter et al. 2007, eq. 33: D = a^2 / (pi cos^4 (a^2 + tan^2)^2) of the half vector.
    theta = 0.3
    d = alpha**2 / (math.pi * math.cos(theta) ** 4 * (alpha**2 + math.tan(theta) ** 2) ** 2)
    assert ggx_density(math.cos(2 * theta), alpha) == pytest.approx(d / 4, rel=1e-12)


def test_half_vectors_are_those_of_walters_inversion():
    # Walter et al. 2007, eq. 35: theta = atan(alpha sqrt(u) / sqrt(1 - u)).
    u, alpha = 0.7, 0.2
    theta = math.atan(alpha * math.sqrt(u) / math.sqrt(1 - u))
    assert ggx_cosine(u, alpha) == pytest.approx(math.cos(2 * theta), rel=1e-13)
    assert ggx_cosine(0.0, alpha) == 1.0


def test_cosine_samples_have_the_textbook_distribution():
    # Density 2 cos sin in theta, cumulative sin^2 (common practice).
    u = np.linspace(0, 1, 11)
    theta = np.arccos(cosine_cosine(u))
    np.testing.assert_allclose(np.sin(theta) ** 2, u, atol=1e-14)
    density = integrate.quad(lambda t: 2 * math.pi * math.sin(t) * cosine_density(math.cos(t)), 0, 1)
    assert density[0] == pytest.approx(math.sin(1) ** 2, rel=1e-10)


def test_an_even_density_gives_back_the_riemann_sum():
    # At alpha = 1 samples are even over the sphere, p = 1/(4 pi): equal steps of u are equal steps of c.
    u = (np.arange(50) + 0.5) / 50
    c = ggx_cosine(u, 1.0)
    estimate = np.mean(np.exp(c) / ggx_density(c, 1.0))
    riemann = 2 * math.pi * np.sum(np.exp(-1 + 2 * u) * (2 / 50))
    assert estimate == pytest.approx(riemann, rel=1e-12)


def test_a_density_in_proportion_to_the_function_leaves_no_variance():
    u, _ = numbers()
    c = cosine_cosine(u)
    np.testing.assert_allclose(c / cosine_density(c), math.pi, rtol=1e-12)


@pytest.mark.parametrize("z", [-1.0, 1.0])
def test_frames_are_right_handed_at_the_poles_too(z):
    normals = np.array([[0, 0, z], [1e-9, 0, z], [0.6, 0, 0.8 * z], [1, 0, 0 * z]])
    tangent, bitangent = tangent_frame(normals)
    np.testing.assert_allclose(np.cross(tangent, bitangent), normals, atol=1e-9)
    np.testing.assert_allclose(np.linalg.norm(tangent, axis=1), 1, rtol=1e-12)
