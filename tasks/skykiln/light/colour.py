"""Colour spaces of linear light: matrices from chromaticities, adapted between whites by Bradford.

A space is the CIE 1931 xy of its three primaries and of its white, RGB (1, 1, 1). With the white's
luminance 1 these fix the matrix to XYZ (SMPTE RP 177-1993, derivation of colour equations). Between
spaces of different whites XYZ is scaled in the sharpened cone space of Bradford (Lam 1985; ICC.1:2010,
annex E), so that white stays white. Light is linear and nothing is clipped but what the target can't
hold: negative channels, which are counted.

Nothing here is pasted but the primaries and Bradford's nine numbers.
"""

from typing import NamedTuple

import numpy as np
from numba import prange

from skykiln.jit import parallel
from skykiln.light.photometry import D65, REC709_PRIMARIES, luminance_weights

# ACES white, about D60 (SMPTE ST 2065-1; number from memory).
ACES_WHITE = (0.32168, 0.33767)

# Cone responses of XYZ (Lam 1985; ICC.1:2010, annex E; numbers from memory).
BRADFORD = np.array([[0.8951, 0.2664, -0.1614], [-0.7502, 1.7135, 0.0367], [0.0389, -0.0685, 1.0296]])

# Of the largest channel: a smaller negative is what rounding leaves of a colour on the gamut's edge.
_ROUNDING = 1e-6


class Chromaticities(NamedTuple):
    """CIE 1931 xy of the primaries and of the white; the order of OpenEXR's attribute."""

    red: tuple
    green: tuple
    blue: tuple
    white: tuple


# ITU-R BT.709-6 item 1.3; ITU-R BT.2020-2 table 3; Academy S-2014-004 (ACEScg, primaries AP1); SMPTE
# ST 2065-1 (AP0); SMPTE EG 432-1 with D65; numbers from memory.
SPACES = {
    "rec709": Chromaticities(*REC709_PRIMARIES, D65),
    "rec2020": Chromaticities((0.708, 0.292), (0.170, 0.797), (0.131, 0.046), D65),
    "acescg": Chromaticities((0.713, 0.293), (0.165, 0.830), (0.128, 0.044), ACES_WHITE),
    "aces2065_1": Chromaticities((0.7347, 0.2653), (0.0, 1.0), (0.0001, -0.077), ACES_WHITE),
    "display_p3": Chromaticities((0.680, 0.320), (0.265, 0.690), (0.150, 0.060), D65),
}


class Converted(NamedTuple):
    """Pixels in the new space, and what had to be clipped."""

    pixels: np.ndarray  # (H, W, 3) float32, none negative
    out_of_gamut: int  # pixels that had a negative channel
    deepest: float  # the most negative channel of any pixel over its own largest, 0 or less


def weights_of(space):
    """Luminance weights of a space of `Chromaticities`. Returns (3,) float64, sum 1."""
    return luminance_weights((space.red, space.green, space.blue), space.white)


def rgb_to_xyz(space):
    """(3, 3) float64: linear RGB of `space` to XYZ, white at Y = 1.

    A primary may lie on the line y = 0 or below it, as those of CIE XYZ and of ACES 2065-1 do.

    Raises: ValueError when the primaries don't span a triangle that holds the white.
    """
    xy = np.array(space, dtype=np.float64)
    if xy.shape != (4, 2) or not np.isfinite(xy).all() or not xy[3, 1] > 0:
        raise ValueError("chromaticities must be four finite pairs x, y, the white's y above 0")
    columns = np.vstack([xy.T, 1 - xy.sum(1)])
    if abs(np.linalg.det(columns[:, :3])) < 1e-6:
        raise ValueError("the three primaries lie on one line")
    amounts = np.linalg.solve(columns[:, :3], columns[:, 3] / xy[3, 1])
    if not (amounts > 0).all():
        raise ValueError("the white lies outside the triangle of the primaries")
    return columns[:, :3] * amounts


def bradford_adaptation(white, target_white):
    """(3, 3) float64: XYZ seen under `white` to XYZ seen under `target_white`, both CIE xy."""
    cones = [BRADFORD @ [x / y, 1.0, (1 - x - y) / y] for x, y in (white, target_white)]
    return np.linalg.solve(BRADFORD, np.diag(cones[1] / cones[0]) @ BRADFORD)


def rgb_to_rgb(source, target):
    """(3, 3) float64: linear RGB of one space of `Chromaticities` to that of another."""
    adapted = bradford_adaptation(source.white, target.white) @ rgb_to_xyz(source)
    return np.linalg.solve(rgb_to_xyz(target), adapted)


def converted(pixels, matrix):
    """A picture in another space, negative channels clipped to 0 and counted.

    Parameters: pixels : (H, W, 3) float32, linear; matrix : (3, 3) from `rgb_to_rgb`
    Returns:    Converted
    """
    out = np.empty_like(pixels)
    counts = np.zeros(pixels.shape[0], dtype=np.int64)
    depths = np.zeros(pixels.shape[0])
    _convert(pixels, np.ascontiguousarray(matrix, dtype=np.float64), _ROUNDING, out, counts, depths)
    return Converted(out, int(counts.sum()), float(depths.min(initial=0.0)))


@parallel
def _convert(pixels, matrix, rounding, out, counts, depths):
    for row in prange(pixels.shape[0]):
        count, deepest = 0, 0.0
        for column in range(pixels.shape[1]):
            r = np.float64(pixels[row, column, 0])
            g = np.float64(pixels[row, column, 1])
            b = np.float64(pixels[row, column, 2])
            least, largest = np.inf, 0.0
            for c in range(3):
                value = matrix[c, 0] * r + matrix[c, 1] * g + matrix[c, 2] * b
                least, largest = min(least, value), max(largest, value)
                out[row, column, c] = max(value, 0.0)
            if least < -rounding * largest:
                count += 1
                deepest = min(deepest, least / max(largest, -least))
        counts[row], depths[row] = count, deepest
