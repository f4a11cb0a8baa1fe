"""The Charlie sheen lobe against closed forms and an integrator in other variables."""

import itertools
import math

import numpy as np
import pytest
from scipy import integrate

from skykiln.light import sheen
from skykiln.light.sheen import sheen_albedo, sheen_kernel, sheen_norm


def at(alpha, mu):
    """The albedo at one point, by the table's own rule."""
    table = np.empty((1, 1))
    sheen._fill(
        np.array([alpha]),
        np.array([mu]),
        *sheen.polar_rule(sheen.POLAR_NODES),
        *sheen.azimuth_rule(sheen.AZIMUTH_NODES),
        table,
    )
    return table[0, 0]


def charlie(cos_h, alpha):
    """D of Estevez and Kulla 2017."""
    return (2 + 1 / alpha) * (1 - cos_h**2) ** (0.5 / alpha) / (2 * math.pi)


def over_light_directions(alpha, mu):
    """The albedo by adaptive quadrature over the light's own angles."""
    sine = math.sqrt(1 - mu * mu)

    def integrand(phi, cos_l):
        v_l = cos_l * mu + sine * math.sqrt(1 - cos_l**2) * math.cos(phi)
        cos_h = min((cos_l + mu) / math.sqrt(2 + 2 * v_l), 1.0)
        return charlie(cos_h, alpha) * cos_l / (4 * (cos_l + mu - cos_l * mu))

    def over_phi(cos_l):
        return 2 * integrate.quad(integrand, 0, math.pi, args=(cos_l,), epsabs=1e-10, limit=200)[0]

    return sum(
        integrate.quad(over_phi, a, b, epsabs=1e-9, limit=200)[0]
        for a, b in itertools.pairwise([0, 0.01, 0.1, 0.4, 1])
    )


@pytest.mark.parametrize(("alpha", "albedo"), [(0.25, 0.03125), (1.0, 0.1414213562373095)])
def test_head_on_albedo_is_the_closed_form(alpha, albedo):
    # 2^(-1/(2 alpha)) / (4 + 1/alpha): D of Estevez and Kulla 2017 with V = 1/(4 (nl + nv - nl nv)).
    assert albedo == pytest.approx(2 ** (-1 / (2 * alpha)) / (4 + 1 / alpha), rel=1e-14)
    assert at(alpha, 1.0) == pytest.approx(albedo, rel=1e-10)


@pytest.mark.parametrize(
    ("alpha", "mu"), [(0.01, 0.02), (0.05, 0.3), (0.3, 0.01), (0.3, 0.6), (1.0, 0.05), (1.0, 0.9)]
)
def test_albedo_agrees_with_adaptive_quadrature_over_light_directions(alpha, mu):
    assert at(alpha, mu) == pytest.approx(over_light_directions(alpha, mu), abs=2e-8)


def test_model_exceeds_one_at_grazing_angles_and_is_not_clamped():
    assert at(0.01, 0.02) == pytest.approx(2.7, abs=0.05)


def test_rows_are_roughness_and_columns_are_mu():
    table = sheen_albedo(8)
    assert table.shape == (8, 8)
    assert table[5, 2] == pytest.approx(at((5.5 / 8) ** 2, 2.5 / 8), rel=1e-12)
    assert np.isfinite(table).all() and (table >= 0).all()


@pytest.mark.parametrize("size", [4, 64])
def test_finer_rules_change_nothing(size, monkeypatch):
    table = sheen_albedo(size)
    monkeypatch.setattr(sheen, "POLAR_NODES", 160)
    monkeypatch.setattr(sheen, "AZIMUTH_NODES", 80)
    np.testing.assert_allclose(table, sheen_albedo(size), atol=1e-8)


@pytest.mark.parametrize("alpha", [0.005, 0.04, 0.25, 0.64, 1.0])
def test_norm_is_the_kernels_integral(alpha):
    integral = integrate.quad(lambda c: sheen_kernel(c, alpha), 0, 1, epsabs=1e-13, limit=200)[0]
    assert sheen_norm(alpha) == pytest.approx(2 * math.pi * integral, rel=1e-8)


@pytest.mark.parametrize("alpha", [0.1, 0.5, 1.0])
def test_kernel_is_the_lobe_seen_head_on(alpha):
    # f n.l = D/4 n.l over the albedo at mu = 1, in every direction.
    c = np.linspace(0, 1, 33)
    lobe = charlie(np.sqrt((1 + c) / 2), alpha) / 4 * c
    np.testing.assert_allclose(
        sheen_kernel(c, alpha) / sheen_norm(alpha),
        lobe / (2 ** (-1 / (2 * alpha)) / (4 + 1 / alpha)),
        atol=1e-12,
    )


def test_kernel_is_a_ring_that_ends_at_the_horizon_and_at_the_pole():
    alpha = 0.25
    c = np.linspace(-1, 1, 2001)
    values = sheen_kernel(c, alpha)
    assert c[values.argmax()] == pytest.approx(1 / (1 + 1 / (2 * alpha)), abs=1e-3)
    assert (values[c <= 0] == 0).all()
    assert sheen_kernel(1.0, alpha) == 0
