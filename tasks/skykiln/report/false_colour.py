"""Luminance in false colours: a ramp whose lightness rises evenly, from blue to yellow, so that it is read
without telling red from green, and in print; and its scale in stops about the middle grey of an exposure.
"""

import numpy as np

STOPS = 8  # that the scale reaches to either side of middle grey
MIDDLE_GREY = 0.18  # the luminance that an exposure of 1 shows as middle grey (common practice)
_COLOURS = 17

# Oklab to the cube roots of cone responses, and these to linear sRGB (Ottosson 2020, "A perceptual color
# space for image processing"; numbers from memory).
_LAB_TO_CONES = np.array(
    [
        [1.0, 0.3963377774, 0.2158037573],
        [1.0, -0.1055613458, -0.0638541728],
        [1.0, -0.0894841775, -1.2914855480],
    ]
)
_CONES_TO_RGB = np.array(
    [
        [4.0767416621, -3.3077115913, 0.2309699292],
        [-1.2684380046, 2.6097574011, -0.3413193965],
        [-0.0041960863, -0.7034186147, 1.7076147010],
    ]
)


def false_colour_ramp():
    """(17, 3) linear sRGB, from dark to light."""
    t = np.linspace(0, 1, _COLOURS)
    lightness = 0.2 + 0.77 * t
    a = np.interp(t, [0, 0.5, 1], [0.0, -0.07, -0.03])
    b = np.interp(t, [0, 0.25, 0.5, 0.8, 1], [-0.11, -0.10, -0.01, 0.12, 0.13])
    cones = np.stack([lightness, a, b], axis=1) @ _LAB_TO_CONES.T
    return np.clip(cones**3 @ _CONES_TO_RGB.T, 0, 1)


def false_colours(luminance, exposure):
    """(...,) luminance -> (..., 3) linear sRGB. Stops beyond the scale take its ends."""
    ramp = false_colour_ramp()
    stops = np.log2(np.maximum(luminance * exposure / MIDDLE_GREY, 2.0**-100))
    place = np.clip((stops + STOPS) / (2 * STOPS), 0, 1) * (len(ramp) - 1)
    low = np.minimum(place.astype(int), len(ramp) - 2)
    share = (place - low)[..., None]
    return (1 - share) * ramp[low] + share * ramp[low + 1]
