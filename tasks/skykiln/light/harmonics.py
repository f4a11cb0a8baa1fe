"""Irradiance as nine spherical-harmonic coefficients, exact for the sky as it is sampled.

E(n) = sum A_l L_lm Y_lm(n) with L_lm = ∫ L Y_lm dl and A = pi, 2 pi/3, pi/4 for l = 0, 1, 2 (Ramamoorthi and
Hanrahan 2001, eq. 8, number from memory). Basis, in this order, of the world direction (x, y, z):

    1/2 sqrt(1/pi);  sqrt(3/(4 pi)) {y, z, x};
    1/2 sqrt(15/pi) {x y, y z},  1/4 sqrt(5/pi) (3 z^2 - 1),
    1/2 sqrt(15/pi) x z,  1/4 sqrt(15/pi) (x^2 - y^2)

With c = cos(latitude): x = c sin(longitude), z = c cos(longitude), dl = dy dlongitude, so every product
is a longitude integral of `panorama_rows` times a latitude integral between the row's edges.
"""

import math

import numpy as np

from skykiln.light.panorama_rows import latitude_edges, longitude_integrals

BAND_FACTORS = np.pi * np.array([1, *[2 / 3] * 3, *[1 / 4] * 5])
BASIS = np.array(
    [
        math.sqrt(1 / math.pi) / 2,
        *[math.sqrt(3 / math.pi) / 2] * 3,
        math.sqrt(15 / math.pi) / 2,
        math.sqrt(15 / math.pi) / 2,
        math.sqrt(5 / math.pi) / 4,
        math.sqrt(15 / math.pi) / 2,
        math.sqrt(15 / math.pi) / 4,
    ]
)


def irradiance_coefficients(panorama, yaw=0.0):
    """Coefficients of E(n) of a panorama (H, W, 3) float32, turned by `yaw` rad (+z towards +x).

    Returns (9, 3) float64: order of the module's basis, then colour channel.
    """
    one, cos1, sin1, cos2, sin2 = np.moveaxis(longitude_integrals(panorama, yaw), 2, 0)
    d1, dy, dc, dyc, dcc, dyy = _latitude_integrals(panorama.shape[0])
    moments = [
        d1 @ one,
        dy @ one,
        dc @ cos1,
        dc @ sin1,
        dyc @ sin1,
        dyc @ cos1,
        1.5 * dcc @ (one + cos2) - d1 @ one,
        0.5 * dcc @ sin2,
        0.5 * dcc @ (one - cos2) - dyy @ one,
    ]
    return (BAND_FACTORS * BASIS)[:, None] * np.stack(moments)


def _latitude_integrals(height):
    """Integrals over y of 1, y, c, y c, c^2 and y^2 across each row; six arrays (H,)."""
    y, c, latitude = latitude_edges(height)
    antiderivatives = (y, y**2 / 2, (latitude + y * c) / 2, -(c**3) / 3, y - y**3 / 3, y**3 / 3)
    return [-np.diff(values) for values in antiderivatives]


def irradiance_from_coefficients(coefficients, directions):
    """E at unit directions. (9, 3) and (..., 3) -> (..., 3); may be negative, see `weakest_window`."""
    x, y, z = np.moveaxis(np.asarray(directions, dtype=np.float64), -1, 0)
    products = [np.ones_like(x), y, z, x, x * y, y * z, 3 * z * z - 1, x * z, x * x - y * y]
    return np.stack(products, axis=-1) @ (BASIS[:, None] * coefficients)


def smallest_irradiance(coefficients):
    """The least E over all directions and channels of coefficients (9, 3). float, exact."""
    return float(min(_smallest_of_channel(channel) for channel in np.asarray(coefficients).T))


def _smallest_of_channel(coefficients):
    """Minimum over the sphere of k + b.n + n.Q n.

    A quadratic on a sphere has no duality gap: the minimum is the maximum over m <= min(q) of
    m - sum (b_i/2)^2 / (q_i - m), q and b in Q's own axes (the trust-region subproblem; Moré and
    Sorensen 1983, "Computing a trust region step").
    """
    constant, linear, quadratic = _polynomial(coefficients)
    q, axes = np.linalg.eigh(quadratic)
    half = axes.T @ linear / 2
    low, high = q[0] - np.linalg.norm(half), q[0]
    for _ in range(100):
        middle = (low + high) / 2
        if middle in (low, high):
            break
        if np.sum((half / (q - middle)) ** 2) > 1:
            high = middle
        else:
            low = middle
    gaps = q - low
    return constant + low - np.sum(half[gaps > 0] ** 2 / gaps[gaps > 0])


def _polynomial(coefficients):
    """Constant, linear (3,) and quadratic (3, 3) part of E in x, y, z."""
    k, y, z, x, xy, yz, zz, xz, xx_yy = coefficients * BASIS
    quadratic = np.array(
        [[xx_yy, xy / 2, xz / 2], [xy / 2, -xx_yy, yz / 2], [xz / 2, yz / 2, 3 * zz]]
    )
    return k - zz, np.array([x, y, z]), quadratic


def weakest_window(coefficients):
    """The weakest window after which no direction's irradiance is negative.

    Bands 1 and 2 are scaled by the same factor, 1 - strength, and band 0 is kept, so that the total
    stays what it was (windowing: Sloan 2008, "Stupid spherical harmonics tricks"). Being E's mean
    plus a factor times the rest, the factor follows in closed form from the smallest value; one for
    all channels, so that no hue turns. Windows that fall with the band (Hann, Lanczos, Laplacian)
    must go further here: for a single lamp, the worst case, band 1 to 0.5, where 0.863 does.

    Returns
    -------
    windowed : (9, 3) float64.
    strength : float, 0 (untouched) to 1 (nothing but the mean is left).
    """
    mean = coefficients[0] * BASIS[0]
    smallest = np.array([_smallest_of_channel(channel) for channel in coefficients.T])
    negative = smallest < 0
    if not negative.any():
        return coefficients.copy(), 0.0
    kept = np.maximum(mean[negative], 0.0) / (np.maximum(mean[negative], 0.0) - smallest[negative])
    # A last bit more, so that rounding can't leave a value just below 0.
    strength = min(1.0, 1.0 - float(kept.min()) * (1.0 - 1e-12))
    windowed = coefficients.copy()
    windowed[1:] *= 1.0 - strength
    return windowed, strength
