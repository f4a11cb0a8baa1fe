"""Waves of a calm sea: the slopes of the large ones, the glitter of all."""

import numpy as np


def glitter(slope_variance, d, towards):
    """Radiance over illuminance of a source mirrored by waves of Gaussian slope.

    Source: Cox and Munk 1954, Measurement of the roughness of the sea surface from photographs of the
    sun's glitter: F p / (4 cos v cos^4 tilt) (form from memory), without shadowing.
    """
    half = towards - d
    half /= np.linalg.norm(half, axis=1, keepdims=True)
    upright = np.maximum(half[:, 1], 1e-3)
    slope_square = (1 - upright**2) / upright**2
    density = np.exp(-slope_square / slope_variance) / (np.pi * slope_variance)
    facing = np.clip(-np.einsum("ij,ij->i", d, half), 0, 1)
    fresnel = 0.02 + 0.98 * (1 - facing) ** 5
    return fresnel * density / (4 * np.maximum(-d[:, 1], 0.06) * upright**4)


def wave_normals(points, distance, slope_variance):
    """Normals of a few crossing waves; those narrower than a far pixel are left to the glitter."""
    x, z = points[:, 0], points[:, 2]
    slope_x, slope_z = np.zeros(len(points)), np.zeros(len(points))
    waves = ((7.0, 0.4), (4.3, 1.3), (2.6, -0.7), (1.7, 2.2), (1.1, 0.9), (0.7, -1.6))
    share = np.sqrt(2 * slope_variance / len(waves))
    for length, heading in waves:
        k = 2 * np.pi / length
        phase = k * (x * np.sin(heading) + z * np.cos(heading)) + 9.0 * heading
        steep = share * np.cos(phase) * np.exp(-((distance / (60 * length)) ** 2))
        slope_x += steep * np.sin(heading)
        slope_z += steep * np.cos(heading)
    normals = np.stack([-slope_x, np.ones(len(points)), -slope_z], axis=1)
    return normals / np.linalg.norm(normals, axis=1, keepdims=True)
