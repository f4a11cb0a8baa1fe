"""The BRDF table against published values, closed forms and an integrator in other variables."""

import itertools
import math
import time

import numpy as np
import pytest
from scipy import integrate

from skykiln.light import brdf
from skykiln.light.brdf import average_albedo, brdf_table, directional_albedo


def centres(size):
    return (np.arange(size) + 0.5) / size


def at(roughness, mu):
    """A and B at one point: a table's texel centre where there is one, else that point alone."""
    table = np.empty((1, 1, 2))
    brdf._fill(
        np.array([roughness**2]),
        np.array([mu]),
        *brdf.polar_rule(brdf.POLAR_NODES),
        *brdf.azimuth_rule(brdf.AZIMUTH_NODES),
        table,
    )
    return table[0, 0]


def slope_plane_integral(roughness, mu):
    """A and B by adaptive quadrature over the slopes (p, q) of the half vector, in units of alpha.

    D cos(theta) dh is dp dq / (pi (1 + p^2 + q^2)^2); cut where the mirrored ray leaves the surface.
    """
    alpha = roughness**2
    sine = math.sqrt(1 - mu * mu)

    def smith_lambda(cosine):
        return (math.sqrt(1 + alpha**2 * (1 / cosine**2 - 1)) - 1) / 2

    def integrand(q, p, power):
        h = np.array([-alpha * p, -alpha * q, 1.0])
        h /= np.linalg.norm(h)
        v_h = sine * h[0] + mu * h[2]
        cos_l = 2 * v_h * h[2] - mu
        if v_h <= 0 or cos_l <= 0:
            return 0.0
        g2 = 1 / (1 + smith_lambda(mu) + smith_lambda(cos_l))
        schlick = (1 - v_h) ** 5
        weight = schlick if power else 1 - schlick
        return weight * g2 * v_h / (h[2] * mu) / (math.pi * (1 + p * p + q * q) ** 2)

    def pieces(function, lower, upper, *args):
        """One adaptive integral per decade: the tail is long where alpha is small."""
        decades = [sign * 3.0 * 10.0**k for sign in (-1, 1) for k in range(8)]
        bounds = [lower, *sorted(c for c in [0.0, *decades] if lower < c < upper), upper]
        return sum(
            integrate.quad(function, a, b, args=args, epsabs=1e-8, epsrel=1e-7, limit=100)[0]
            for a, b in itertools.pairwise(bounds)
        )

    def over_q(p, power):
        # cos_l > 0 reads (alpha q)^2 < 1 - (alpha p)^2 - 2 alpha p tan(theta_v).
        reach = 1 - (alpha * p) ** 2 - 2 * alpha * p * sine / mu
        return 2 * pieces(integrand, 0.0, math.sqrt(max(reach, 0.0)) / alpha, p, power)

    lower, upper = -(1 + sine) / mu / alpha, (1 - sine) / mu / alpha
    return [pieces(over_q, lower, upper, power) for power in (False, True)]


@pytest.mark.parametrize(
    ("mu", "albedo"), [(0.1, 0.760210472720163), (0.5, 0.4506938556659451), (1.0, 0.3068528194400547)]
)
def test_roughest_lobe_has_its_closed_form(mu, albedo):
    # 1 - mu ln(1 + 1/mu): Walter et al. 2007 D and Heitz 2014 height-correlated G2 at alpha = 1.
    assert at(1.0, mu).sum() == pytest.approx(albedo, abs=1e-7)
    assert albedo == pytest.approx(1 - mu * math.log(1 + 1 / mu), abs=1e-12)


@pytest.mark.parametrize(
    ("mu", "roughness", "a", "b"),
    # Double precision quadrature confirmed by a second method; not published.
    [
        (0.1, 0.2, 0.45932859286461464, 0.4696647380506347),
        (0.5, 0.5, 0.8349161392933557, 0.02234729628821328),
        (0.75, 0.8, 0.5741296204751868, 0.0013789883612371557),
    ],
)
def test_middle_of_the_table_agrees_with_values_from_outside(mu, roughness, a, b):
    np.testing.assert_allclose(at(roughness, mu), [a, b], atol=1e-6)


def test_smooth_limit_is_the_fresnel_mirror():
    # Schlick 1994: A = 1 - (1 - mu)^5, B = (1 - mu)^5; holds where mu is far above alpha.
    for mu in (0.25, 0.5, 0.9):
        np.testing.assert_allclose(at(0.05, mu), [1 - (1 - mu) ** 5, (1 - mu) ** 5], atol=1e-3)
    for mu in (0.01, 0.1):
        np.testing.assert_allclose(at(0.001, mu), [1 - (1 - mu) ** 5, (1 - mu) ** 5], atol=1e-5)


@pytest.mark.parametrize(
    ("roughness", "mu"),
    [
        (0.5 / 128, 0.5 / 128),  # the grazing, near-mirror corner of the usual table
        (8.5 / 128, 0.5 / 128),  # alpha near mu, where shadowing and the horizon meet
        (50.5 / 128, 0.5 / 128),
        (127.5 / 128, 0.5 / 128),
        (0.3, 0.05),
        (0.6, 0.7),
    ],
)
def test_table_agrees_with_adaptive_quadrature_over_slopes(roughness, mu):
    np.testing.assert_allclose(at(roughness, mu), slope_plane_integral(roughness, mu), atol=2e-7)


@pytest.mark.parametrize("size", [4, 32, 128])
def test_finer_rules_change_nothing_beyond_the_stated_error(size, monkeypatch):
    table = brdf_table(size)
    monkeypatch.setattr(brdf, "POLAR_NODES", 120)
    monkeypatch.setattr(brdf, "AZIMUTH_NODES", 60)
    np.testing.assert_allclose(table, brdf_table(size), atol=1e-7)


def test_white_surface_reflects_all_with_multiple_scattering_compensation():
    # Kelemen and Szirmay-Kalos 2001; Kulla and Conty 2017: the lobe
    # (1 - E(v)) (1 - E(l)) / (pi (1 - E_avg)) returns what single scattering loses.
    table = brdf_table(128)
    single, average = directional_albedo(table), average_albedo(table)
    mu, weights = np.polynomial.legendre.leggauss(40)
    mu, weights = (mu + 1) / 2, weights / 2
    for row in (16, 64, 127):
        lost = 1 - np.interp(mu, centres(128), single[row])
        for column in (0, 60, 127):
            returned = (1 - single[row, column]) / (1 - average[row]) * (2 * lost @ (mu * weights))
            assert single[row, column] + returned == pytest.approx(1.0, abs=1e-3)


def test_average_albedo_has_its_closed_form_at_the_roughest():
    # (4/3)(1 - ln 2) at alpha = 1, by integration of 1 - mu ln(1 + 1/mu).
    mu = centres(128)
    row = 1 - mu * np.log(1 + 1 / mu)
    table = np.stack([row, np.zeros(128)], axis=-1)[None]
    assert average_albedo(table)[0] == pytest.approx(0.4091370925867396, abs=1e-5)


def test_rows_are_roughness_and_columns_are_mu():
    table = brdf_table(8)
    np.testing.assert_allclose(table[6, 1], at(6.5 / 8, 1.5 / 8), rtol=1e-12)
    assert table.shape == (8, 8, 2)


def test_no_lobe_makes_light():
    table = brdf_table(64)
    assert table.min() >= 0
    assert directional_albedo(table).max() <= 1


def test_usual_table_takes_less_than_a_second_once_compiled():
    brdf_table(2)
    start = time.perf_counter()
    brdf_table(128)
    assert time.perf_counter() - start < 1.0
