"""Importance sampling of lobes, by inverse transforms, and the densities that go with it.

Cosine hemisphere: cos^2(theta) = 1 - u, density c/pi (Malley's method; Pharr, Jakob and Humphreys,
"Physically Based Rendering").

GGX: a half vector with tan^2(theta_h) = a^2 u/(1 - u) (Walter et al. 2007, eq. 35-36), which under n = v = r
turns into a light direction of cosine c = 2 cos^2(theta_h) - 1. Its density D (n.h)/(4 v.h) is D/4:

    a^2 / (pi ((1 + a^2) - c (1 - a^2))^2),  a = alpha

The azimuth is uniform. Directions are unit vectors of world space, densities per steradian.
"""

import math

import numpy as np


def ggx_cosine(u, alpha):
    """Cosine n.l of a GGX sample. u in 0..1; may be negative (below the horizon). Scalars or arrays."""
    return 2 * (1 - u) / (1 + (alpha * alpha - 1) * u) - 1


def ggx_density(c, alpha):
    """Density of GGX samples at cosine c, 1/sr over the whole sphere. Scalars or arrays."""
    a2 = alpha * alpha
    return a2 / (math.pi * ((1 - c) * (1 - a2) + 2 * a2) ** 2)


def cosine_cosine(u):
    """Cosine of a cosine-weighted sample. u in 0..1. Arrays."""
    return np.sqrt(1 - u)


def cosine_density(c):
    """Density of cosine-weighted samples, 1/sr. Scalars or arrays."""
    return (c + abs(c)) / (2 * math.pi)
