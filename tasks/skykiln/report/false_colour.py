"""Luminance in false colours by the viewer: the ramp on a scale of stops about an exposure's middle grey."""

import numpy as np

from skykiln.report.ramp import linear_ramp

STOPS = 8  # that the scale reaches to either side of middle grey
MIDDLE_GREY = 0.18  # the luminance that an exposure of 1 shows as middle grey (common practice)
COLOURS = 17  # of the ramp, mixed linearly in between


def false_colours(luminance, exposure):
    """(...,) luminance -> (..., 3) linear sRGB. Stops beyond the scale take its ends."""
    ramp = linear_ramp(COLOURS)
    stops = np.log2(np.maximum(luminance * exposure / MIDDLE_GREY, 2.0**-100))
    place = np.clip((stops + STOPS) / (2 * STOPS), 0, 1) * (COLOURS - 1)
    low = np.minimum(place.astype(int), COLOURS - 2)
    share = (place - low)[..., None]
    return (1 - share) * ramp[low] + share * ramp[low + 1]
