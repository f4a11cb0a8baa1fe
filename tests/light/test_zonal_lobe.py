"""A lobe's tables against closed forms of the kernels they were made from."""

import math

import numpy as np
import pytest
from scipy.interpolate import CubicSpline

from skykiln.light.ggx import ggx_kernel, ggx_norm
from skykiln.light.sheen import sheen_kernel, sheen_lobe, sheen_norm
from skykiln.light.zonal_lobe import zonal_lobe


def middles(lobe):
    """q = 1 - c at the middles of the bins."""
    bins = len(lobe.values)
    return ((np.arange(bins) + 0.5) / bins) ** 4


@pytest.mark.parametrize("alpha", [0.01, 0.09, 0.4, 1.0])
def test_norm_that_is_integrated_equals_the_closed_form(alpha):
    for kernel, norm in ((ggx_kernel, ggx_norm(alpha)), (sheen_kernel, sheen_norm(alpha))):
        lobe = zonal_lobe(lambda c, kernel=kernel: kernel(c, alpha))
        given = zonal_lobe(lambda c, kernel=kernel: kernel(c, alpha), norm)
        np.testing.assert_allclose(lobe.values, given.values, rtol=1e-6)


@pytest.mark.parametrize("alpha", [0.04, 0.25, 1.0])
def test_derivatives_of_sheen_are_those_of_a_power(alpha):
    # c (1 - c)^p = q^p - q^(p + 1): q^k d^k/dc^k of q^p is (-1)^k p (p - 1) .. (p - k + 1) q^p.
    lobe, p = sheen_lobe(alpha), 1 / (2 * alpha)
    q = middles(lobe)
    for order in range(5):
        factors = [math.prod(e - k for k in range(order)) for e in (p, p + 1)]
        scale = (-1) ** order / math.factorial(order) / sheen_norm(alpha)
        expected = scale * (factors[0] * q**p - factors[1] * q ** (p + 1))
        np.testing.assert_allclose(lobe.values[:, order], expected, rtol=5e-4, atol=1e-6)
    np.testing.assert_allclose(lobe.values[:, 5], 1 / q, rtol=1e-6)


def test_cosine_has_no_second_derivative_and_the_slope_of_lambert():
    lobe = zonal_lobe(lambda c: c)
    q = middles(lobe)
    np.testing.assert_allclose(lobe.values[:, 0], (1 - q) / np.pi, atol=1e-7)
    np.testing.assert_allclose(lobe.values[:, 1], q / np.pi, atol=1e-7)
    assert abs(lobe.values[:, 2:5]).max() < 1e-7
    assert lobe.steepest == pytest.approx(1 / np.pi, rel=1e-6)
    assert lobe.width == pytest.approx(np.pi / 3, abs=0.02)  # cos 60 degrees


def test_bounds_are_the_largest_of_the_bins_they_run_over():
    lobe = sheen_lobe(0.2)
    single = lobe.bounds[0]
    for level in range(1, len(lobe.bounds)):
        for start in range(0, len(single) - (1 << level) + 1, 5):
            np.testing.assert_array_equal(
                lobe.bounds[level, start], single[start : start + (1 << level)].max(axis=0)
            )


def test_bounds_hold_what_the_derivatives_are():
    # Of GGX at alpha = 0.3 by hand: K = c/(A - B c)^2, K'' = (4 A B + 2 B^2 c)/(A - B c)^4.
    alpha, a, b = 0.3, 1.09, 0.91
    lobe = zonal_lobe(lambda c: ggx_kernel(c, alpha), ggx_norm(alpha))
    q = middles(lobe)
    c = 1 - q
    second = (1 - c * c) * (4 * a * b + 2 * b * b * c) / (a - b * c) ** 4 / 2 / ggx_norm(alpha)
    per_bin = second.reshape(len(lobe.bounds[0]), -1).max(axis=1)
    np.testing.assert_allclose(lobe.bounds[0, 8:, 1], per_bin[8:], rtol=1e-4)


def test_lookup_makes_the_tables_of_the_closed_form():
    alpha = 0.25
    c = 1 - np.linspace(1, 0, 1500) ** 4
    looked_up = CubicSpline(c, ggx_kernel(c, alpha))
    lobe, closed = zonal_lobe(looked_up), zonal_lobe(lambda c: ggx_kernel(c, alpha))
    np.testing.assert_allclose(lobe.values[:, :3], closed.values[:, :3], atol=2e-4)


def test_narrow_lobes_get_longer_tables_until_they_are_refused():
    assert len(sheen_lobe(1.0).values) < len(sheen_lobe(0.01).values) < len(sheen_lobe(0.0025).values)
    with pytest.raises(ValueError, match="mirror"):
        sheen_lobe(1e-5)
