"""Skies and a slow, plain reference over a panorama's own pixels: float64, every pixel, no shortcuts."""

import numpy as np
from scipy import integrate

from skykiln.light.directions import panorama_directions


def filtered_exactly(panorama, normals, alpha, order=6):
    """The GGX-filtered radiance (T, 3) by Gauss-Legendre points over every pixel.

    The kernel is written out and its normaliser integrated here, not taken from the code under test.
    """

    def kernel(c):
        return np.maximum(c, 0) / ((1 + alpha**2) - c * (1 - alpha**2)) ** 2

    directions, weights = pixel_points(panorama.shape[0], panorama.shape[1], order)
    radiance = np.repeat(np.repeat(panorama, order, 0), order, 1).reshape(-1, 3).astype(np.float64)
    lit = radiance.any(axis=1)
    directions, flux = directions[lit], weights[lit, None] * radiance[lit]
    norm = 2 * np.pi * integrate.quad(kernel, 0, 1, points=[1 - 4 * alpha**2], limit=400)[0]
    return np.stack([kernel(directions @ n) @ flux for n in normals]) / norm


def pixel_points(height, width, order):
    """Directions (H W order^2, 3) of Gauss-Legendre points over every pixel, and their solid angles."""
    node, weight = np.polynomial.legendre.leggauss(order)
    node, weight = (node + 1) / 2, weight / 2
    longitude = np.pi - 2 * np.pi * (np.arange(width)[:, None] + node).ravel() / width
    edges = np.cos(np.pi * np.arange(height + 1) / height)
    step = edges[:-1] - edges[1:]
    y = (edges[:-1, None] - step[:, None] * node).ravel()
    across = np.sqrt(1 - y * y)
    x, z = np.outer(across, np.sin(longitude)), np.outer(across, np.cos(longitude))
    solid_angle = np.outer(
        (step[:, None] * weight).ravel(), np.tile(weight * 2 * np.pi / width, width)
    )
    directions = np.stack([x, np.broadcast_to(y[:, None], x.shape), z], axis=-1)
    return directions.reshape(-1, 3), solid_angle.ravel()


def coloured_linear(height):
    """1 + 0.8 x, 1 + 0.8 y, 1 + 0.8 z in the three channels."""
    return (1 + 0.8 * panorama_directions(2 * height, height)).astype(np.float32)


def small_sun(height):
    """A graded, coloured sky with one pixel that outshines all others."""
    d = panorama_directions(2 * height, height)
    sky = 1 + 0.3 * d[..., 1:2] + np.array([0, 0.1, 0.25]) * d[..., :1]
    sky = (0.25 * sky).astype(np.float32)
    toward = np.array([0.5, 0.5, 0.7071])
    sky[np.unravel_index(np.argmax(d @ toward), d.shape[:2])] = 5e4
    return sky


def many_lamps(height, seed=3):
    """A dim sky with coloured lamps of one pixel each."""
    random = np.random.default_rng(seed)
    sky = np.full((height, 2 * height, 3), 0.02, dtype=np.float32)
    count = height * height // 40
    places = random.integers(0, 2 * height * height, count)
    sky.reshape(-1, 3)[places] = random.random((count, 3)) ** 2 * 20
    return sky


SKIES = {"linear": coloured_linear, "sun": small_sun, "lamps": many_lamps}


def spread_directions(count, seed=5):
    """Unit vectors (count, 3) drawn evenly from the sphere."""
    normals = np.random.default_rng(seed).normal(size=(count, 3))
    return normals / np.linalg.norm(normals, axis=1, keepdims=True)
