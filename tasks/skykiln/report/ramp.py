"""One ramp of colours for all false-colour pictures: dark blue over grey to light yellow.

Lightness rises evenly, so that it also reads in grey and to colour-blind eyes: blue and yellow are what
the common kinds of colour blindness still tell apart. Straight in OKLab (Ottosson 2020, "A perceptual color
space for image processing"; matrices from memory) between two ends of our own choice.
"""

import functools

import numpy as np

from skykiln.report.pictures import srgb_bytes

DARK, LIGHT = (0.22, 0.0, -0.10), (0.94, -0.02, 0.15)  # OKLab: lightness, green to red, blue to yellow
STEPS = 256

_LMS_FROM_LAB = np.array(
    [[1, 0.3963377774, 0.2158037573], [1, -0.1055613458, -0.0638541728], [1, -0.0894841775, -1.2914855480]]
)
_RGB_FROM_LMS = np.array(
    [
        [4.0767416621, -3.3077115913, 0.2309699292],
        [-1.2684380046, 2.6097574011, -0.3413193965],
        [-0.0041960863, -0.7034186147, 1.7076147010],
    ]
)


def linear_ramp(steps):
    """(steps, 3) linear sRGB, dark to light."""
    share = np.linspace(0, 1, steps)[:, None]
    lab = (1 - share) * np.array(DARK) + share * np.array(LIGHT)
    return np.clip((lab @ _LMS_FROM_LAB.T) ** 3 @ _RGB_FROM_LMS.T, 0, 1)


@functools.cache
def ramp():
    """(256, 3) uint8 sRGB, dark to light."""
    return srgb_bytes(linear_ramp(STEPS))


def coloured(share):
    """Shares of 0..1, of any shape, as colours: one axis of 3 more, uint8. What is beyond is held."""
    return ramp()[np.rint(np.clip(share, 0, 1) * (STEPS - 1)).astype(np.intp)]


def css_gradient(stops=9):
    """The ramp as a CSS background, left to right."""
    colours = ramp()[np.linspace(0, STEPS - 1, stops).astype(int)]
    return f"linear-gradient(to right, {', '.join(f'#{bytes(colour).hex()}' for colour in colours)})"
