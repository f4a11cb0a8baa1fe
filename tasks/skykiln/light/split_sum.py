"""A surface lit by a probe as a renderer does it: the split sum of a filtered chain and the BRDF table.

    L(v) = albedo / pi E(n) + mirror(r, roughness) (F0 A(n.v, roughness) + B(n.v, roughness))

with r the mirrored v, A and B of `brdf`; the chain was filtered with n = v = r (Karis 2013, "Real Shading
in Unreal Engine 4", course notes, for the split).
"""

from typing import NamedTuple

import numpy as np

from skykiln.light.sample_cube import sample_cube, sample_level


class ProbeLight(NamedTuple):
    """What was packed of a probe, in the world and in true units, with the table.

    levels : per mip level (6, n, n, 3); roughness : one number per level, rising
    irradiance : (6, n, n, 3), E; table : (m, m, 2), rows roughness, columns n.v, scale and bias of F0
    """

    levels: tuple
    roughness: tuple
    irradiance: np.ndarray
    table: np.ndarray


def lit_by_probe(light, n, v, albedo, f0, roughness):
    """Radiance that leaves surfaces towards v.

    Parameters: light : ProbeLight
                n, v : (k, 3), unit, away from the surface; albedo, f0 : (k, 3); roughness : (k,)
    Returns:    (k, 3) float64
    """
    mu = (n * v).sum(1)
    level = np.interp(roughness, light.roughness, np.arange(len(light.roughness)))
    mirror = sample_cube(light.levels, 2 * mu[:, None] * n - v, level)
    scale, bias = table_values(light.table, mu, roughness).T
    diffuse = albedo / np.pi * sample_level(light.irradiance, n)
    return diffuse + mirror * (f0 * scale[:, None] + bias[:, None])


def table_values(table, mu, roughness):
    """Bilinear values of a table (m, m, c) at texture coordinates (k,), clamped to its edge: (k, c)."""
    size = len(table)
    x, y = (np.clip(c * size - 0.5, 0, size - 1) for c in (mu, roughness))
    i, j = x.astype(int), y.astype(int)
    right, below = np.minimum(i + 1, size - 1), np.minimum(j + 1, size - 1)
    u, w = (x - i)[:, None], (y - j)[:, None]
    upper = (1 - u) * table[j, i] + u * table[j, right]
    return (1 - w) * upper + w * ((1 - u) * table[below, i] + u * table[below, right])
