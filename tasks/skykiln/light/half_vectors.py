"""Quadrature over the half vectors that send light above the surface, shared by the BRDF tables.

A view at mu = cos(theta_v) and a half vector at theta reflect to

    cos_l = mu cos(2 theta) + sin(theta_v) sin(2 theta) cos(phi)

which is above the surface for every azimuth up to 2 theta = pi/2 - theta_v and for none from
2 theta = pi/2 + theta_v on. Between them, up to phi_max, sin(phi/2) = sin(phi_max/2) sin(psi) makes cos_l a
mixture of its two ends, cos^2(psi) largest + sin^2(psi) smallest: never negative, nothing cancels at
grazing angles, and nodes crowd where shadowing sets in.
"""

import math

import numpy as np

from skykiln.jit import formula


def polar_rule(count):
    """Gauss-Legendre nodes and weights on 0..1, crowded at both ends by x -> 3 x^2 - 2 x^3."""
    x, weights = _unit_rule(count)
    return x * x * (3.0 - 2.0 * x), weights * 6.0 * x * (1.0 - x)


def azimuth_rule(count):
    """cos^2(psi) of Gauss-Legendre nodes on 0..pi/2, and weights under which a whole turn counts 1."""
    nodes, weights = _unit_rule(count)
    return np.cos(np.pi / 2 * nodes) ** 2, weights


def _unit_rule(count):
    nodes, weights = np.polynomial.legendre.leggauss(count)
    return (nodes + 1.0) / 2.0, weights / 2.0


@formula
def tangents_of_limits(mu):
    """tan(theta) up to which every azimuth is visible, and from which none is (half-angle formulas)."""
    sine = math.sqrt(1.0 - mu * mu)
    return mu / (1.0 + sine), (1.0 + sine) / mu


@formula
def reflected_range(mu, tan2):
    """Largest and smallest cos_l over the visible azimuths of one theta, and sin^2(phi_max/2)."""
    cos2 = 1.0 / (1.0 + tan2)
    along = mu * (1.0 - tan2) * cos2
    across = 2.0 * math.sqrt((1.0 - mu * mu) * tan2) * cos2
    largest = max(along + across, 0.0)
    if along >= across:
        return largest, along - across, 1.0
    return largest, 0.0, largest / (2.0 * across)


@formula
def turn_share(share, cos2_psi):
    """dphi of one psi node as a share of a turn, before its weight."""
    return math.sqrt(share * cos2_psi / (1.0 - share * (1.0 - cos2_psi)))
