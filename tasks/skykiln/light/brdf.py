"""The split-sum BRDF table: directional albedo of the GGX lobe as F0 A(mu, alpha) + B(mu, alpha).

    A + B = ∫ D(h) G2(v, l) / (4 cos_v) dl,   B takes the share (1 - v.h)^5 of it

with D of Walter et al. 2007 (eq. 33), the height-correlated Smith G2 of Heitz 2014 (eq. 99; both
numbers from memory) and Schlick's Fresnel term (Schlick 1994). Over half vectors (dl = 4 v.h dh) with
t = tan(theta_h)/alpha, the distribution D cos(theta_h) dh becomes d(t^2)/(1 + t^2)^2 dphi/(2 pi): in
s = ln(1 + t^2) it is exp(-s) ds, smooth from a mirror's peak to its tail, whatever alpha is. The range of s
is cut where the horizon begins to hide azimuths (`half_vectors`), which leaves a weak singularity, so
nodes crowd towards both ends of each range. The largest error measured (against 240 x 120 nodes,
tables of 2 to 1,024 texels) is 2e-8.
"""

import math

import numpy as np
from numba import prange

from skykiln.jit import formula, parallel
from skykiln.light.directions import alpha_from_roughness
from skykiln.light.half_vectors import (
    azimuth_rule,
    polar_rule,
    reflected_range,
    tangents_of_limits,
    turn_share,
)

POLAR_NODES = 48
AZIMUTH_NODES = 24


def brdf_table(size):
    """The table at texel centres: mu and roughness are (i + 0.5)/size.

    Returns
    -------
    table : (size, size, 2) float64; rows: roughness, smallest first; columns: mu = n.v; last: A, B.
    """
    centres = (np.arange(size) + 0.5) / size
    polar, azimuth = polar_rule(POLAR_NODES), azimuth_rule(AZIMUTH_NODES)
    table = np.empty((size, size, 2))
    _fill(alpha_from_roughness(centres), centres, *polar, *azimuth, table)
    return table


def directional_albedo(table):
    """E(mu) = A + B, what a lobe with F0 = 1 reflects of a white sky. (..., 2) -> (...)."""
    return table[..., 0] + table[..., 1]


def average_albedo(table):
    """E_avg = 2 ∫ E(mu) mu dmu of each row, as multiple-scattering compensation asks for it.

    Returns (size,) float64. The midpoint rule: off by less than 1e-5 for 64 columns and more.

    Source: Kulla and Conty 2017, "Revisiting physically based shading at Imageworks".
    """
    columns = table.shape[1]
    mu = (np.arange(columns) + 0.5) / columns
    return directional_albedo(table) @ mu * (2.0 / columns)


@parallel
def _fill(alphas, mus, polar, polar_weights, cos2_psi, psi_weights, table):
    for row in prange(alphas.size):
        for column in range(mus.size):
            full, partial = _visible_limits(mus[column], alphas[row])
            a, b = _panel(
                alphas[row], mus[column], 0.0, full, polar, polar_weights, cos2_psi, psi_weights
            )
            a2, b2 = _panel(
                alphas[row], mus[column], full, partial, polar, polar_weights, cos2_psi, psi_weights
            )
            table[row, column, 0] = a + a2
            table[row, column, 1] = b + b2


@formula
def _visible_limits(mu, alpha):
    """s up to which every azimuth is visible, and s from which none is."""
    full, none = tangents_of_limits(mu)
    return math.log1p((full / alpha) ** 2), math.log1p((none / alpha) ** 2)


@formula
def _panel(alpha, mu, start, end, polar, polar_weights, cos2_psi, psi_weights):
    """A and B from the half vectors with s between two limits."""
    a2 = alpha * alpha
    root_v = math.sqrt(a2 + (1.0 - a2) * mu * mu)
    a = 0.0
    b = 0.0
    for i in range(polar.size):
        s = start + (end - start) * polar[i]
        tan2 = a2 * math.expm1(s)
        secant = math.sqrt(1.0 + tan2)
        largest, smallest, share = reflected_range(mu, tan2)
        whole = 0.0
        fresnel = 0.0
        for j in range(cos2_psi.size):
            cos_l = largest * cos2_psi[j] + smallest * (1.0 - cos2_psi[j])
            cos_vh = (cos_l + mu) * 0.5 * secant
            value = psi_weights[j] * turn_share(share, cos2_psi[j])
            value *= _masked(cos_l, mu, root_v, a2) * cos_vh
            away = max(1.0 - cos_vh, 0.0)
            whole += value
            fresnel += value * away * away * away * away * away
        weight = (end - start) * polar_weights[i] * math.exp(-s) * secant
        a += weight * (whole - fresnel)
        b += weight * fresnel
    return a, b


@formula
def _masked(cos_l, cos_v, root_v, a2):
    """G2(v, l) / cos_v, height-correlated Smith (Heitz 2014, eq. 99, from memory)."""
    root_l = math.sqrt(a2 + (1.0 - a2) * cos_l * cos_l)
    return 2.0 * cos_l / (cos_l * root_v + cos_v * root_l)
