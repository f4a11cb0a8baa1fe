"""Directions at given angles around others."""

import numpy as np


def around(normals, cosines, turns):
    """Directions at given cosines from the normals and at given azimuths, in turns.

    Parameters: normals (..., 3); cosines, turns (...). Returns (..., 3) float64.
    """
    tangent, bitangent = tangent_frame(normals)
    sines = np.sqrt(np.maximum(1 - cosines * cosines, 0))
    x, y = sines * np.cos(2 * np.pi * turns), sines * np.sin(2 * np.pi * turns)
    return tangent * x[..., None] + bitangent * y[..., None] + normals * cosines[..., None]


def tangent_frame(normals):
    """Two unit vectors that complete each normal (..., 3) to a right-handed frame.

    Source: Duff et al. 2017, "Building an orthonormal basis, revisited".
    """
    x, y, z = np.moveaxis(normals, -1, 0)
    sign = np.copysign(1.0, z)
    a = -1.0 / (sign + z)
    b = x * y * a
    tangent = np.stack([1.0 + sign * x * x * a, sign * b, -sign * x], axis=-1)
    return tangent, np.stack([b, sign + y * y * a, -y], axis=-1)
