"""Skies without the harbour: luminance by CIE laws, colour by eye.

Each sky is a function of (n, 3) unit vectors that returns (n, 3) Rec. 709 radiance; luminance in cd/m2.
"""

import numpy as np

from .panorama import LUMINANCE

SUN_RADIUS = np.radians(0.2665)  # IAU 2015 nominal solar radius over one astronomical unit

# a, b, c, d, e of the CIE standard general sky, type 12: clear, low luminance turbidity
# (CIE S 011/E:2003 = ISO 15469:2004, table 1; from memory).
CLEAR = (-1.0, -0.32, 10.0, -3.0, 0.45)


def cie_general_sky(d, sun, coefficients):
    """Luminance over that of the zenith, CIE S 011/E:2003 eqs. 1-5 (numbers from memory). (n, 3) -> (n,)."""
    a, b, c, dd, e = coefficients

    def gradation(cos_zenith):
        return 1 + a * np.exp(b / np.maximum(cos_zenith, 1e-3))

    def indicatrix(angle):
        return 1 + c * (np.exp(dd * angle) - np.exp(dd * np.pi / 2)) + e * np.cos(angle) ** 2

    to_sun = np.arccos(np.clip(d @ sun, -1, 1))
    at_zenith = gradation(1.0) * indicatrix(np.arccos(sun[1]))
    return gradation(d[:, 1]) * indicatrix(to_sun) / at_zenith


def overcast_sky(d, zenith_luminance, colour=(0.97, 1.0, 1.05)):
    """The traditional CIE overcast sky, Lz (1 + 2 sin elevation)/3 (Moon and Spencer 1942)."""
    luminance = zenith_luminance * (1 + 2 * np.maximum(d[:, 1], 0)) / 3
    return luminance[:, None] * _of_unit_luminance(np.array(colour))


def clear_sky(d, sun, zenith_luminance, palette):
    """CIE clear sky, coloured from horizon to zenith and about the sun.

    Parameters: palette : zenith, horizon, beside the sun, opposite the sun: four Rec. 709 colours
    """
    zenith, horizon, beside_sun, opposite = (np.array(colour) for colour in palette)
    low = (1 - np.clip(d[:, 1], 0, 1))[:, None] ** 4
    to_sun = np.arccos(np.clip(d @ sun, -1, 1))[:, None]
    colour = zenith + (horizon - zenith) * low
    colour = colour + (opposite - colour) * low**2 * np.clip((to_sun - 1.2) / 1.6, 0, 1)
    colour = colour + (beside_sun - colour) * np.exp(-((to_sun / 0.5) ** 1.2))
    luminance = zenith_luminance * cie_general_sky(d, sun, CLEAR)
    return luminance[:, None] * _of_unit_luminance(colour)


def night_sky(d, towards_town, zenith_luminance):
    """A dark clear sky over a small town: brighter low down and above the town's lights."""
    low = (1 - np.clip(d[:, 1], 0, 1))[:, None]
    town = np.clip(d @ towards_town, 0, 1)[:, None]
    blue, glow = np.array([0.55, 0.95, 2.0]), np.array([1.7, 1.0, 0.5])
    return zenith_luminance * (blue * (1 + 2 * low**3) + glow * (3 * low**8 + 14 * low**6 * town**3))


def _of_unit_luminance(colour):
    return colour / (colour @ LUMINANCE)[..., None]
