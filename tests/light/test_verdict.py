"""Limits of an audit's tests."""

import math

import numpy as np
import pytest
from scipy import stats

from skykiln.light.verdict import (
    allowance_used,
    mean_used,
    score_limit,
    square_limit,
    squares_used,
)


def test_score_limit_is_hoeffdings_for_all_tests_together():
    # 2 exp(-z^2/2) per test (Hoeffding 1963), times the number of tests.
    z = score_limit(1e-5, 600)
    assert 600 * 2 * math.exp(-z * z / 2) == pytest.approx(1e-5, rel=1e-12)
    # At least what a normal distribution would ask for.
    assert z > stats.norm.isf(1e-5 / 1200)
    assert z == pytest.approx(6.1, abs=0.1)


def test_square_limit_bounds_the_chi_square():
    for terms in (1, 6, 24, 200):
        x = square_limit(1e-5, 600, terms)
        assert x > 1
        chernoff = math.exp(-terms / 2 * (x - 1 - math.log(x)))
        assert chernoff == pytest.approx(1e-5 / 600, rel=1e-6)
        assert stats.chi2.sf(terms * x, terms) <= chernoff


def test_allowance_is_tolerance_and_noise_together():
    used = allowance_used(np.array([1.6, -0.8, 0.0]), 0.1, np.array([0.25, 0.25, 0.0]), 6.0)
    np.testing.assert_allclose(used, [1.0, 0.5, 0.0])


def test_means_see_what_no_single_texel_shows():
    errors = np.full((100, 3), 0.01)
    deviations = np.full((100, 3), 0.02)
    allowed = np.full((100, 3), 0.005)
    assert allowance_used(deviations, allowed, errors, 6.0).max() < 1
    mean, error, used = mean_used(deviations, allowed, errors, 6.0)
    np.testing.assert_allclose(mean, 0.02)
    np.testing.assert_allclose(error, 0.001)
    np.testing.assert_allclose(used, 0.02 / 0.011)


def test_squares_see_deviations_of_either_sign():
    signs = np.where(np.arange(100) % 2, 1, -1)[:, None]
    errors, allowed = np.full((100, 1), 0.01), np.full((100, 1), 0.005)
    assert mean_used(0.03 * signs, allowed, errors, 6.0)[2] < 1
    assert squares_used(0.03 * signs, allowed, errors, 1e-5, 600)[0] > 1
    assert squares_used(0.004 * signs, allowed, errors, 1e-5, 600)[0] == 0


def test_normal_errors_raise_no_alarm():
    random = np.random.default_rng(4)
    worst = 0.0
    for _ in range(300):
        noise = random.normal(size=(24, 3)) * 0.01
        errors, allowed = np.full((24, 3), 0.01), np.zeros((24, 3))
        worst = max(
            worst,
            allowance_used(noise, allowed, errors, score_limit(1e-5, 600)).max(),
            mean_used(noise, allowed, errors, score_limit(1e-5, 600))[2].max(),
            squares_used(noise, allowed, errors, 1e-5, 600).max(),
        )
    assert worst < 1
