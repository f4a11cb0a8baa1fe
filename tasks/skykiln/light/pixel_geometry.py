"""The exact geometry of a panorama's pixels: solid angles, mean directions, variances.

A pixel is a patch between two latitudes and two longitudes; what is the same for all pixels of a row, or of a
column, stands in tables. Conventions: `directions`.
"""

import math

import numpy as np

from skykiln.jit import formula, serial

# What is the same for all pixels of a row, or of a column.
SOLID_ANGLE, RHO, Y, VAR_LATITUDE, VAR_LONGITUDE, EXTENT, COS, SIN = range(8)
MEAN_SIN, MEAN_COS, SIN_LONGITUDE, COS_LONGITUDE = range(4)


def column_geometry(width, yaw):
    """(W, 4): mean sine and cosine of the longitudes in each column, and those of its middle."""
    longitude = np.pi - 2 * np.pi * (np.arange(width) + 0.5) / width + yaw
    mean = np.sinc(1 / width)
    middle = np.stack([np.sin(longitude), np.cos(longitude)], axis=1)
    return np.concatenate([mean * middle, middle], axis=1)


@serial
def row_geometry(height, width):
    rows = np.empty((height, 8))
    for j in range(height):
        angle = math.pi * (j + 0.5) / height
        set_band(angle, math.pi / (2 * height), math.pi / width, rows[j])
    return rows


@formula
def set_band(angle, half, half_width, row):
    """Geometry of patches around a polar angle, `half` high to either side and `half_width` wide.

    Solid angle, mean of the sine of the polar angle (its mean over longitudes is apart) and of its
    cosine, each weighted by the sine: 4 w sin sin(h), (2 h sin^2 + cos(2 t) (2 h - sin 2 h)/2) /
    (2 sin sin h), cos cos(h); variances along latitude and longitude; largest distance from the mean.
    """
    sine, cosine = math.sin(angle), math.cos(angle)
    # 2 h - sin 2 h loses its digits where h is small.
    h2 = half * half
    bend = 2 * half - math.sin(2 * half)
    if half < 0.05:
        bend = h2 * half * (4 / 3 - h2 * (4 / 15 - h2 * 8 / 315))
    row[SOLID_ANGLE] = 4.0 * half_width * sine * math.sin(half)
    row[RHO] = (2 * half * sine * sine + math.cos(2 * angle) * bend / 2) / (2 * sine * math.sin(half))
    row[Y] = cosine * math.cos(half)
    row[VAR_LONGITUDE] = row[RHO] * row[RHO] * half_width * half_width / 3
    shortened = row[RHO] * math.sin(half_width) / half_width
    spread = 1.0 - shortened * shortened - row[Y] * row[Y]  # no digits are left in small parts
    row[VAR_LATITUDE] = h2 / 3 if half < 1e-4 else max(0.0, spread - row[VAR_LONGITUDE])
    widest = max(math.sin(angle - half), math.sin(angle + half), sine)
    row[EXTENT] = 4 / 3 * half + widest * half_width  # beside a pole the mean is 4/3 half from it
    row[COS], row[SIN] = cosine, sine
