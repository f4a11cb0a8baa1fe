"""The grid of a panorama: exact integrals along its rows, and which pixels stand side by side.

Over one pixel of width d centred at longitude l:  ∫ 1 = d,  ∫ cos k l = cos(k l) (2/k) sin(k d/2), and
the sine likewise. What remains across rows are polynomials in y = sin(latitude), integrated by
whoever needs them between the edges that `latitude_edges` gives.
"""

import numpy as np
from numba import prange

from skykiln.jit import formula, parallel


def longitude_integrals(panorama, yaw=0.0):
    """Integrals of the radiance along each row against 1, cos, sin, cos 2, sin 2 of longitude.

    Parameters
    ----------
    panorama : (H, W, 3) float32, radiance.
    yaw : rad; positive turns what lay at +z towards +x, which adds to every longitude.

    Returns
    -------
    integrals : (H, 3, 5) float64, radiance x rad.
    """
    height, width, _ = panorama.shape
    step = 2.0 * np.pi / width
    longitude = np.pi - step * (np.arange(width) + 0.5) + yaw
    once, twice = 2.0 * np.sin(step / 2), np.sin(step)
    weights = np.stack(
        [
            np.full(width, step),
            once * np.cos(longitude),
            once * np.sin(longitude),
            twice * np.cos(2 * longitude),
            twice * np.sin(2 * longitude),
        ]
    )
    integrals = np.empty((height, 3, 5))
    _weigh_rows(panorama, weights, integrals)
    return integrals


def latitude_edges(height):
    """Sine and cosine of latitude, and latitude itself, at the H + 1 edges between rows, top first."""
    latitude = np.pi / 2 - np.pi * np.arange(height + 1) / height
    return np.sin(latitude), np.cos(latitude), latitude


@formula
def neighbour(row, column, k, height, width):
    """Row and column of the k-th of the nine pixels around and at one, across seam and poles."""
    r, c = row + k // 3 - 1, column + k % 3 - 1
    if r < 0 or r >= height:
        r, c = min(max(r, 0), height - 1), c + width // 2
    return r, c % width


@parallel
def _weigh_rows(panorama, weights, integrals):
    for row in prange(panorama.shape[0]):
        for channel in range(3):
            a = 0.0
            b = 0.0
            c = 0.0
            d = 0.0
            e = 0.0
            for column in range(panorama.shape[1]):
                radiance = np.float64(panorama[row, column, channel])
                a += radiance * weights[0, column]
                b += radiance * weights[1, column]
                c += radiance * weights[2, column]
                d += radiance * weights[3, column]
                e += radiance * weights[4, column]
            integrals[row, channel, 0] = a
            integrals[row, channel, 1] = b
            integrals[row, channel, 2] = c
            integrals[row, channel, 3] = d
            integrals[row, channel, 4] = e
