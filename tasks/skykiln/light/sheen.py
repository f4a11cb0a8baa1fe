"""The Charlie sheen lobe: as a kernel of c = n.l for the filter, and its directional albedo.

    f = D(h) V(l, v),  D = (2 + 1/a) sin(theta_h)^(1/a) / (2 pi),  V = 1/(4 (nl + nv - nl nv)),  a = alpha

(Estevez and Kulla 2017, "Production friendly microfacet sheen BRDF": their D, and the smooth V they
give as an alternative to shadowing.) Under n = v = r, as the specular filter has it, V is 1/4 exactly
and sin^2(theta_h) = (1 - c)/2, so that the lobe seen head-on is f n.l = D/4 max(c, 0), with

    K(c) = (1 - c)^p max(c, 0),  p = 1/(2 a),  ∫ K dl = 2 pi / ((p + 1)(p + 2))

after the constants that a normalised kernel loses. It is no longer a peak but a ring, at c = 1/(1 + p).

The albedo ∫ f n.l dl takes the quadrature of `half_vectors` in theta_h, cut where D has fallen to e^-36 of
its largest visible value; the largest error measured, against 240 x 120 nodes, is 1e-8. The model
exceeds 1 at grazing angles for small alpha (2.7 at mu = 0.02, alpha = 0.01): so does the table, which
does not clamp.
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
from skykiln.light.zonal_lobe import zonal_lobe

POLAR_NODES = 64
AZIMUTH_NODES = 32
FADE = 36.0  # exponent of e below its peak at which D is left out


def sheen_kernel(c, alpha):
    """K(c), without the constants that cancel in a normalised filter. Scalars or arrays; 0 < alpha <= 1."""
    positive = (c + abs(c)) / 2
    return positive * abs(1 - c) ** (1 / (2 * alpha))


def sheen_norm(alpha):
    """The integral of `sheen_kernel` over the sphere: 2 pi times a beta function, B(2, p + 1)."""
    p = 1 / (2 * alpha)
    return 2 * math.pi / ((p + 1) * (p + 2))


def sheen_lobe(alpha):
    """The lobe for `zonal_filter`. From alpha = 5e-4 on: below, its ring is thinner than its table knows."""
    return zonal_lobe(lambda c: sheen_kernel(c, alpha), sheen_norm(alpha))


def sheen_albedo(size):
    """Directional albedo at texel centres: mu and roughness are (i + 0.5)/size.

    Returns
    -------
    table : (size, size) float64; rows: roughness, smallest first; columns: mu = n.v.
    """
    centres = (np.arange(size) + 0.5) / size
    table = np.empty((size, size))
    polar, azimuth = polar_rule(POLAR_NODES), azimuth_rule(AZIMUTH_NODES)
    _fill(alpha_from_roughness(centres), centres, *polar, *azimuth, table)
    return table


@parallel
def _fill(alphas, mus, polar, polar_weights, cos2_psi, psi_weights, table):
    for row in prange(alphas.size):
        p = 0.5 / alphas[row]
        for column in range(mus.size):
            mu = mus[column]
            full, none = tangents_of_limits(mu)
            full, none = math.atan(full), math.atan(none)
            faint = math.asin(math.sin(none) * math.exp(-0.5 * FADE / (p + 0.5)))
            middle = max(full, faint)
            table[row, column] = _panel(
                p, mu, faint, middle, polar, polar_weights, cos2_psi, psi_weights
            ) + _panel(p, mu, middle, none, polar, polar_weights, cos2_psi, psi_weights)


@formula
def _panel(p, mu, start, end, polar, polar_weights, cos2_psi, psi_weights):
    """The albedo from half vectors with theta between two limits."""
    total = 0.0
    for i in range(polar.size):
        theta = start + (end - start) * polar[i]
        sine, cosine = math.sin(theta), math.cos(theta)
        largest, smallest, share = reflected_range(mu, (sine / cosine) ** 2)
        inner = 0.0
        for j in range(cos2_psi.size):
            cos_l = largest * cos2_psi[j] + smallest * (1.0 - cos2_psi[j])
            # V n.l 4 v.h, with v.h = (cos_l + mu)/(2 cos(theta)).
            visible = cos_l / (cos_l + mu - cos_l * mu) * (cos_l + mu)
            inner += psi_weights[j] * turn_share(share, cos2_psi[j]) * visible
        weight = (end - start) * polar_weights[i] * sine / (2.0 * cosine)
        total += weight * (2.0 + 2.0 * p) * math.exp(2.0 * p * math.log(sine)) * inner
    return total
