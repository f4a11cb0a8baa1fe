"""The slow, plain references of the filter tests: float64, every pixel, no shortcuts."""

import numba
import numpy as np
from scipy import integrate

from skykiln.light.directions import panorama_row_solid_angles


def panorama_points(panorama, parts=1, order=3):
    """Gauss-Legendre points over every lit pixel, each pixel cut into parts x parts.

    Returns directions (m, 3) and fluxes (m, 3), float64: radiance times sr. The weights over latitude
    are made to give the pixel's exact solid angle.
    """
    height, width, _ = panorama.shape
    node, weight = np.polynomial.legendre.leggauss(order)
    v = (np.arange(height * parts)[:, None] + 0.5 + 0.5 * node).ravel() / (height * parts)
    u = (np.arange(width * parts)[:, None] + 0.5 + 0.5 * node).ravel() / (width * parts)
    sine = np.sin(np.pi * v) * np.tile(weight, height * parts)
    per_row = sine.reshape(height, -1).sum(axis=1).repeat(parts * order)
    w = np.outer(sine / per_row, np.tile(weight / 2 / parts, width * parts))
    w *= panorama_row_solid_angles(width, height).repeat(parts * order)[:, None]
    lit = (panorama.max(-1) > 0).repeat(parts * order, 0).repeat(parts * order, 1)
    rows, columns = np.nonzero(lit)
    theta, longitude = np.pi * v[rows], np.pi - 2 * np.pi * u[columns]
    directions = np.stack(
        [np.sin(theta) * np.sin(longitude), np.cos(theta), np.sin(theta) * np.cos(longitude)], axis=-1
    )
    radiance = panorama[rows // (parts * order), columns // (parts * order)].astype(np.float64)
    return directions, radiance * w[rows, columns][:, None]


def joined(*points):
    """Several sets of points as one."""
    return tuple(np.concatenate(parts) for parts in zip(*points, strict=True))


def filtered(points, normals, alpha):
    """The GGX-filtered radiance at `normals` (m, 3) by summing over all points; (m, 3) float64.

    The normaliser is integrated here, not taken from the code under test.
    """
    directions, fluxes = points
    return _sums(np.ascontiguousarray(normals), directions, fluxes, alpha) / kernel_integral(alpha)


def kernel_integral(alpha):
    """The kernel's integral over the sphere, by adaptive quadrature."""
    integral, _ = integrate.quad(
        lambda u: 2 * np.pi * _kernel(1 - np.exp(u), alpha) * np.exp(u), -50, 0, limit=500
    )
    return integral


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


def relative_errors(result, reference, panorama):
    """|P - P_ref| / max(P_ref, 1e-3 x the mean radiance of the brightest channel)."""
    height, width, _ = panorama.shape
    rows = panorama_row_solid_angles(width, height)
    mean = np.einsum("jic,j->c", panorama.astype(np.float64), rows) / (4 * np.pi)
    return np.abs(result - reference) / np.maximum(reference, 1e-3 * mean.max())
