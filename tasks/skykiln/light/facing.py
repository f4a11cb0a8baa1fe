"""The light that falls on a surface of any direction, and the mean radiance of a patch of the sky.

Over a pixel the integral of the direction has a closed form, longitude and latitude apart:
∫ cos^2(latitude) dlatitude times ∫ sin or cos of longitude, and ∫ y dy times the pixel's width. Its
product with the normal is the pixel's exact share of ∫ max(n.l, 0) dl wherever it lies on one side of the
surface's horizon. The sky is constant over each pixel.
"""

import math

import numpy as np
from numba import prange

from skykiln.jit import parallel
from skykiln.light.panorama_rows import latitude_edges
from skykiln.light.tangent_frames import around

_PATCH_POINTS = 4096
_GOLDEN_TURN = (math.sqrt(5) - 1) / 2


def irradiance_facing(panorama, normal):
    """Irradiance of (H, W, 3) float32 on a surface whose unit normal (3,) is given. (3,) float64."""
    height, width, _ = panorama.shape
    across, upwards, turns = pixel_vectors(width, height)
    rows = np.zeros((height, 3))
    _add_rows(panorama, across, upwards, turns, np.asarray(normal, dtype=np.float64), rows)
    return rows.sum(0)


def pixel_vectors(width, height):
    """Integrals of the direction over pixels: (across_j turns_i0, upwards_j, across_j turns_i1) is x, y, z.

    Returns: across (H,), upwards (H,), turns (W, 2), float64; sr.
    """
    y, c, latitude = latitude_edges(height)
    across = -np.diff((latitude + y * c) / 2)
    upwards = -np.diff(y * y / 2) * 2 * np.pi / width
    longitude = np.pi - 2 * np.pi * (np.arange(width) + 0.5) / width
    turns = 2 * np.sin(np.pi / width) * np.stack([np.sin(longitude), np.cos(longitude)], axis=1)
    return across, upwards, turns


def patch_radiance(panorama, direction, angular_radius):
    """Mean radiance (3,) float64 over the disc of an angular radius (rad) around a unit direction."""
    rows, columns = disc_pixels(*panorama.shape[1::-1], direction, angular_radius)
    return panorama[rows, columns].mean(0, dtype=np.float64)


def disc_pixels(width, height, direction, angular_radius):
    """Row and column of the pixel under each of many points, evenly dense over the disc's solid angle.

    A Fibonacci spiral (Vogel 1979, "A better way to construct the sunflower head").
    """
    share = (np.arange(_PATCH_POINTS) + 0.5) / _PATCH_POINTS
    cosines = 1 - 2 * math.sin(angular_radius / 2) ** 2 * share
    normals = np.broadcast_to(np.asarray(direction, dtype=np.float64), (_PATCH_POINTS, 3))
    d = around(normals, cosines, _GOLDEN_TURN * np.arange(_PATCH_POINTS) % 1.0)
    u = 0.5 - np.arctan2(d[:, 0], d[:, 2]) / (2 * np.pi)
    v = np.arctan2(np.hypot(d[:, 0], d[:, 2]), d[:, 1]) / np.pi
    return np.minimum((v * height).astype(int), height - 1), (u * width).astype(int) % width


@parallel
def _add_rows(panorama, across, upwards, turns, normal, rows):
    for j in prange(panorama.shape[0]):
        r, g, b = 0.0, 0.0, 0.0
        for i in range(panorama.shape[1]):
            level = normal[0] * turns[i, 0] + normal[2] * turns[i, 1]
            share = max(0.0, across[j] * level + upwards[j] * normal[1])
            r += share * panorama[j, i, 0]
            g += share * panorama[j, i, 1]
            b += share * panorama[j, i, 2]
        rows[j, 0], rows[j, 1], rows[j, 2] = r, g, b
