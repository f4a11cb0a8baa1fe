"""Luminance, mean radiance and the light that falls on a level surface.

The sky is constant over each pixel, so each row enters with the exact integral of 1 or of y = n.l over
it; the row that holds the horizon of a panorama with an odd number of rows counts down to y = 0.
"""

import numpy as np

from skykiln.light.panorama_rows import latitude_edges, longitude_integrals

# CIE xy of red, green, blue and of the white D65 (ITU-R BT.709-6, item 1.3 and 1.4; numbers from memory).
REC709_PRIMARIES = ((0.64, 0.33), (0.30, 0.60), (0.15, 0.06))
D65 = (0.3127, 0.3290)


def luminance_weights(primaries, white):
    """What each primary adds to the luminance of white: the Y row of the RGB to XYZ matrix.

    Returns (3,) float64, sum 1. Source: SMPTE RP 177-1993 (derivation of colour equations).
    """
    xyz = np.array([[x / y, 1.0, (1.0 - x - y) / y] for x, y in (*primaries, white)])
    return np.linalg.solve(xyz[:3].T, xyz[3])


LUMINANCE_WEIGHTS = luminance_weights(REC709_PRIMARIES, D65)


def luminance(rgb, weights=LUMINANCE_WEIGHTS):
    """Luminance of linear values, of Rec. 709 unless `weights` are another space's. (..., 3) -> (...)."""
    return rgb @ weights


def mean_radiance(panorama):
    """Mean of (H, W, 3) over the sphere. Returns (3,) float64."""
    sines, _, _ = latitude_edges(panorama.shape[0])
    rows = longitude_integrals(panorama)[:, :, 0]
    return -np.diff(sines) @ rows / (4.0 * np.pi)


def level_irradiance(panorama):
    """Irradiance of (H, W, 3) on the level surface that faces +y. Returns (3,) float64."""
    sines, _, _ = latitude_edges(panorama.shape[0])
    rows = longitude_integrals(panorama)[:, :, 0]
    return -np.diff(np.maximum(sines, 0.0) ** 2 / 2) @ rows


def horizontal_illuminance(panorama, weights=LUMINANCE_WEIGHTS):
    """Luminance-weighted irradiance on the level surface; lx where radiance is in cd/m2. float."""
    return float(luminance(level_irradiance(panorama), weights))
