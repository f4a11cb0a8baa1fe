"""The slow, plain references of the filter tests: float64, every texel or pixel, no shortcuts."""

import numba
import numpy as np
from scipy import integrate

from skykiln.light.directions import FACE_AXES


def cube_points(faces, parts=1, order=3):
    """Gauss-Legendre points over every lit texel, each texel cut into parts x parts.

    Returns directions (m, 3) and fluxes (m, 3), float64: radiance times sr, with the area element
    (1 + a^2 + b^2)^-3/2 of the cube's face.
    """
    size = faces.shape[1]
    node, weight = np.polynomial.legendre.leggauss(order)
    cells = size * parts
    a = ((np.arange(cells)[:, None] + 0.5 + 0.5 * node) / cells * 2 - 1).ravel()
    w = np.tile(weight / cells, cells)
    texel = np.repeat(np.arange(size), parts * order)
    directions, fluxes = [], []
    for face, axes in enumerate(FACE_AXES):
        lit = faces[face].max(-1) > 0
        rows, columns = np.nonzero(lit[texel][:, texel])
        p = axes[0] + a[columns, None] * axes[1] + a[rows, None] * axes[2]
        h = np.linalg.norm(p, axis=1, keepdims=True)
        radiance = faces[face][texel[rows], texel[columns]].astype(np.float64)
        directions.append(p / h)
        fluxes.append(radiance * (w[rows] * w[columns])[:, None] / h**3)
    return np.concatenate(directions), np.concatenate(fluxes)


def filtered(points, normals, alpha):
    """The GGX-filtered radiance at `normals` (m, 3) by summing over all points; (m, 3) float64.

    The normaliser is integrated here, not taken from the code under test.
    """
    directions, fluxes = points
    norm, _ = integrate.quad(
        lambda u: 2 * np.pi * _kernel(1 - np.exp(u), alpha) * np.exp(u), -50, 0, limit=500
    )
    return _sums(np.ascontiguousarray(normals), directions, fluxes, alpha) / norm


def _kernel(c, alpha):
    return c / ((1 - alpha**2) * (1 - c) + 2 * alpha**2) ** 2


@numba.njit(parallel=True, fastmath=True)
def _sums(normals, directions, fluxes, alpha):
    result = np.zeros((normals.shape[0], 3))
    for t in numba.prange(normals.shape[0]):
        for k in range(directions.shape[0]):
            c = (
                normals[t, 0] * directions[k, 0]
                + normals[t, 1] * directions[k, 1]
                + normals[t, 2] * directions[k, 2]
            )
            if c > 0.0:
                kernel = c / ((1 + alpha * alpha) - c * (1 - alpha * alpha)) ** 2
                for x in range(3):
                    result[t, x] += kernel * fluxes[k, x]
    return result


def relative_errors(result, reference, faces, solid_angles):
    """|P - P_ref| / max(P_ref, 1e-3 x the mean radiance of the brightest channel)."""
    mean = np.einsum("fjic,ji->c", faces.astype(np.float64), solid_angles) / (4 * np.pi)
    return np.abs(result - reference) / np.maximum(reference, 1e-3 * mean.max())
