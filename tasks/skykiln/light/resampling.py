"""A panorama from pictures in any chart: each pixel is the mean of the source over its own footprint.

The source is constant over each of its pixels. A panorama's pixel is a rectangle in longitude and the
sine of latitude, the cylindrical equal-area chart (Lambert 1772), in which evenly spread points stand
for equal solid angles. The points are Fibonacci lattices, N points (i/N, frac(i F/N)) with N and F
neighbours in the Fibonacci sequence (Niederreiter 1992, "Random number generation and quasi-Monte
Carlo methods", chapter 5): no two share a row or a column, so that edges along the grid are counted
to 1/N, others to about N^-3/4. A constant sky stays constant to rounding.

Points are spent where flux is at stake. Every pixel takes 21, or as many as find every source pixel. The
spread of what they and those of the eight pixels around it saw x solid angle x N^-3/4 is the flux that
N points may get wrong; where that is more than `AT_STAKE` of all flux, 233 to 28,657 are taken. The
neighbours count because of a sun that reaches into a pixel by less than its first points can see.
"""

import math

import numpy as np
from numba import prange

from skykiln.jit import formula, parallel
from skykiln.light.charts import pixel_solid_angle, place_in

AT_STAKE = 1e-5
LATTICES = np.array([[21, 13], [233, 144], [2584, 1597], [28657, 17711]])
# Points for each source pixel, where those are smaller than the panorama's: beside poles and rims.
_POINTS_EACH = 6


def footprint_means(images, chart, width, height, rows=None, turn=None):
    """The upper `rows` (all, when None) of a panorama of width x height pixels.

    Parameters
    ----------
    images : (k, h, w, 3) float32, radiance: the pictures of a chart of `charts`.
    turn : (3, 3), source directions to world directions; None: the same.

    Returns
    -------
    (rows, width, 3) float32, radiance.
    """
    images = np.ascontiguousarray(images, dtype=np.float32)
    rows = height if rows is None else rows
    turn = np.ascontiguousarray(np.eye(3) if turn is None else turn, dtype=np.float64)
    sines = np.cos(np.pi * np.arange(rows + 1) / height)
    # A rough total serves: it only says where points are worth their time.
    total = 4 * np.pi * float(images.sum(dtype=np.float64)) / (images.size // 3)
    out = np.empty((rows, width, 3), dtype=np.float32)
    spans = np.empty((rows, width, 2), dtype=np.float32)
    _look_once(images, chart, turn, LATTICES, sines, out, spans)
    _look_closer(images, chart, turn, LATTICES, sines, AT_STAKE * total, spans, out)
    return out


@parallel
def _look_once(images, chart, turn, lattices, sines, out, spans):
    """Means over as few points as leave no source pixel out; the least and the largest sum of channels
    that these saw."""
    width = out.shape[1]
    for row in prange(out.shape[0]):
        for column in range(width):
            lattice = _first_lattice(images, chart, turn, lattices, sines, row, column, width)
            r, g, b, least, largest = _mean(
                images, chart, turn, lattices[lattice], sines[row], sines[row + 1], column, width
            )
            out[row, column, 0], out[row, column, 1], out[row, column, 2] = r, g, b
            spans[row, column, 0], spans[row, column, 1] = least, largest


@parallel
def _look_closer(images, chart, turn, lattices, sines, at_stake, spans, out):
    """Means over more points, where those are worth it."""
    rows, width = out.shape[0], out.shape[1]
    for row in prange(rows):
        solid_angle = 2.0 * math.pi / width * (sines[row] - sines[row + 1])
        for column in range(width):
            flux = _spread_about(spans, row, column) * solid_angle
            first = _first_lattice(images, chart, turn, lattices, sines, row, column, width)
            lattice = first
            while lattice < len(lattices) - 1 and flux * lattices[lattice, 0] ** -0.75 > at_stake:
                lattice += 1
            if lattice == first:
                continue
            r, g, b, _, _ = _mean(
                images, chart, turn, lattices[lattice], sines[row], sines[row + 1], column, width
            )
            out[row, column, 0], out[row, column, 1], out[row, column, 2] = r, g, b


@formula
def _spread_about(spans, row, column):
    """Largest less least of what a pixel and its eight neighbours saw."""
    least, largest = np.inf, 0.0
    for j in range(max(0, row - 1), min(spans.shape[0], row + 2)):
        for k in range(-1, 2):
            i = (column + k) % spans.shape[1]
            least, largest = min(least, spans[j, i, 0]), max(largest, spans[j, i, 1])
    return largest - least


@formula
def _first_lattice(images, chart, turn, lattices, sines, row, column, width):
    """The lattice that leaves out no source pixel, where those are smaller than the panorama's."""
    y = (sines[row] + sines[row + 1]) / 2.0
    longitude = math.pi - 2.0 * math.pi * (column + 0.5) / width
    across = math.sqrt(1.0 - y * y)
    x, z = across * math.sin(longitude), across * math.cos(longitude)
    smallest = pixel_solid_angle(
        chart,
        images.shape[1],
        images.shape[2],
        turn[0, 0] * x + turn[1, 0] * y + turn[2, 0] * z,
        turn[0, 1] * x + turn[1, 1] * y + turn[2, 1] * z,
        turn[0, 2] * x + turn[1, 2] * y + turn[2, 2] * z,
    )
    needed = _POINTS_EACH * 2.0 * math.pi / width * (sines[row] - sines[row + 1]) / smallest
    lattice = 0
    while lattice < len(lattices) - 1 and lattices[lattice, 0] < needed:
        lattice += 1
    return lattice


@formula
def _mean(images, chart, turn, lattice, top, bottom, column, width):
    """Means of the channels over a pixel; the least and the largest of their sums."""
    points, step = lattice[0], lattice[1]
    h, w = images.shape[1], images.shape[2]
    r, g, b = 0.0, 0.0, 0.0
    least, largest = np.inf, 0.0
    for i in range(points):
        longitude = math.pi - 2.0 * math.pi * (column + (i + 0.5) / points) / width
        y = top + (bottom - top) * ((i * step) % points + 0.5) / points
        across = math.sqrt(max(0.0, 1.0 - y * y))
        x, z = across * math.sin(longitude), across * math.cos(longitude)
        # Back into the source's own frame: the inverse of a turn is its transpose.
        image, u, v = place_in(
            chart,
            w,
            turn[0, 0] * x + turn[1, 0] * y + turn[2, 0] * z,
            turn[0, 1] * x + turn[1, 1] * y + turn[2, 1] * z,
            turn[0, 2] * x + turn[1, 2] * y + turn[2, 2] * z,
        )
        j, k = min(h - 1, max(0, int(v * h))), min(w - 1, max(0, int(u * w)))
        red = np.float64(images[image, j, k, 0])
        green = np.float64(images[image, j, k, 1])
        blue = np.float64(images[image, j, k, 2])
        r, g, b = r + red, g + green, b + blue
        least, largest = min(least, red + green + blue), max(largest, red + green + blue)
    return r / points, g / points, b / points, least, largest
