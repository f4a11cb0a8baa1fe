"""No pixel brighter than a limit: an explicit choice, whose price is told."""

from typing import NamedTuple

import numpy as np

from skykiln.light.photometry import level_irradiance, mean_radiance


class Limited(NamedTuple):
    """A panorama under a limit, and what that took."""

    pixels: np.ndarray  # (H, W, 3) float32; the panorama itself where nothing was above the limit
    lost_share: float  # of the flux over the whole sphere, in luminance
    lost_illuminance: float  # on the level surface


def limited(panorama, largest, weights):
    """Pixels above a luminance are darkened to it; their colour stays.

    Parameters: panorama : (H, W, 3) float32, radiance; weights : (3,), luminance weights of its space
    """
    brightness = panorama @ weights.astype(np.float32)
    above = brightness > largest
    if not above.any():
        return Limited(panorama, 0.0, 0.0)
    pixels = panorama.copy()
    pixels[above] *= np.float32(largest) / brightness[above, None]
    share = 1 - float(mean_radiance(pixels) @ weights) / float(mean_radiance(panorama) @ weights)
    lost = float((level_irradiance(panorama) - level_irradiance(pixels)) @ weights)
    return Limited(pixels, max(0.0, share), max(0.0, lost))
