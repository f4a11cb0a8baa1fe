"""Cube faces from a panorama: the exact mean of the piecewise constant source over every texel.

In the equal-area coordinates x (column, 0..W) and y (the sine of latitude) a solid angle is
(2 pi / W) dx dy. With G(x, y), the integral of the radiance L from y up to the pole, Green's theorem
turns the flux of a texel into an integral along its outline,

    flux = (2 pi / W) closed integral of G dx.

G is constant in x and linear in y inside a source pixel, and a texel's edges are great circles,
tan(latitude) = A cos(longitude) + B sin(longitude), so each edge is cut where it enters another pixel
and summed piece by piece. Neighbouring texels share their edges: flux is conserved to rounding, no
source pixel is missed however small, and a constant sky stays constant. Meridians add nothing.

Conventions: `directions`.
"""

import math

import numba
import numpy as np

from skykiln.jit import formula, parallel
from skykiln.light.directions import FACE_AXES, cube_texel_solid_angles

_UP, _DOWN = 2, 3  # the faces around the poles


def extract_faces(panorama, face_size, yaw=0.0):
    """Mean radiance over the footprint of every texel.

    Parameters
    ----------
    panorama : (H, W, 3) float32, radiance; constant over each pixel. Where its pixels are wider than
        the texels it is interpolated between pixel centres first.
    face_size : texels along a face's edge.
    yaw : rad; positive turns what lay at +z towards +x.

    Returns
    -------
    (6, face_size, face_size, 3) float32, radiance.

    Source: Green's theorem in the cylindrical equal-area chart (Archimedes; Lambert 1772).
    """
    factor = math.ceil(4 * face_size / panorama.shape[1])
    if factor > 1:
        panorama = interpolated_panorama(panorama, factor)
    panorama = np.ascontiguousarray(panorama, dtype=np.float32)
    height, width, _ = panorama.shape
    heights = np.cos(np.pi * np.arange(height + 1) / height)
    from_pole = _integrals_from_pole(panorama, heights)
    across, along = _edge_integrals(panorama, from_pole, heights, FACE_AXES, face_size, yaw)
    flux = across[:, :-1] - across[:, 1:]
    flux[_UP : _DOWN + 1] += along[:, :, 1:] - along[:, :, :-1]
    radiance = flux * (2 * np.pi / width / cube_texel_solid_angles(face_size)[:, :, None])
    return np.maximum(radiance, 0.0).astype(np.float32)  # rounding may leave -1e-16 of a bright sun


def interpolated_panorama(panorama, factor):
    """Bilinear refinement between pixel centres, across the seam and over the poles.

    (H, W, 3) float32 -> (H factor, W factor, 3) float32.
    """
    height, width, _ = panorama.shape
    half_turn = np.roll(panorama, width // 2, axis=1)
    tall = np.concatenate([half_turn[:1], panorama, half_turn[-1:]])
    position = 1 + (np.arange(height * factor) + 0.5) / factor - 0.5
    low = np.floor(position).astype(int)
    weight = (position - low).astype(np.float32)[:, None, None]
    rows = tall[low] * (1 - weight) + tall[low + 1] * weight
    position = (np.arange(width * factor) + 0.5) / factor - 0.5
    low = np.floor(position).astype(int)
    weight = (position - low).astype(np.float32)[None, :, None]
    return rows[:, low % width] * (1 - weight) + rows[:, (low + 1) % width] * weight


@parallel
def _integrals_from_pole(panorama, heights):
    """G at the upper border of every row. (H + 1, W, 3) float64."""
    height, width, _ = panorama.shape
    total = np.empty((height + 1, width, 3))
    block = 64
    for b in numba.prange((width + block - 1) // block):
        first, last = b * block, min(width, b * block + block)
        total[0, first:last] = 0.0
        for j in range(height):
            thickness = heights[j] - heights[j + 1]
            for i in range(first, last):
                for c in range(3):
                    total[j + 1, i, c] = total[j, i, c] + thickness * panorama[j, i, c]
    return total


@parallel
def _edge_integrals(panorama, from_pole, heights, face_axes, size, yaw):
    """Integrals of G dx along texel edges.

    Returns those along s, (6, size + 1, size, 3), and, for the two faces around the poles, those along
    t, (2, size, size + 1, 3); on the other faces these are meridians and zero.
    """
    across = np.zeros((6, size + 1, size, 3))
    along = np.zeros((2, size, size + 1, 3))
    cos_yaw, sin_yaw = math.cos(yaw), math.sin(yaw)
    for line in numba.prange(6 * (size + 1)):
        face = np.int64(line) // (size + 1)
        k = np.int64(line) % (size + 1)
        polar = face == _UP or face == _DOWN
        fixed = 2.0 * k / size - 1.0
        if polar and 2 * k == size:
            continue  # through the pole: meridians
        axes = face_axes[face]
        ends = np.empty((2, 3))
        for i in range(size):
            for e in range(2):
                _point(axes, 2.0 * (i + e) / size - 1.0, fixed, cos_yaw, sin_yaw, ends[e])
            _add_edge(panorama, from_pole, heights, ends, face == _DOWN, across[face, k, i])
            if polar:
                for e in range(2):
                    _point(axes, fixed, 2.0 * (i + e) / size - 1.0, cos_yaw, sin_yaw, ends[e])
                _add_edge(panorama, from_pole, heights, ends, face == _DOWN, along[face - _UP, i, k])
    return across, along


@formula
def _point(axes, a, b, cos_yaw, sin_yaw, out):
    """Direction (not unit) of face coordinates, turned back by the yaw into the source's own axes."""
    x = axes[0, 0] + axes[1, 0] * a + axes[2, 0] * b
    z = axes[0, 2] + axes[1, 2] * a + axes[2, 2] * b
    out[0] = x * cos_yaw - z * sin_yaw
    out[1] = axes[0, 1] + axes[1, 1] * a + axes[2, 1] * b
    out[2] = z * cos_yaw + x * sin_yaw


@formula
def _add_edge(panorama, from_pole, heights, ends, below, out):
    """Adds the integral of G dx along the great-circle arc between two directions.

    Around the lower pole G is measured from there, so that it vanishes at the pole that a texel touches.
    """
    width = panorama.shape[1]
    per_radian = width / (2 * math.pi)
    normal_x = ends[0, 1] * ends[1, 2] - ends[0, 2] * ends[1, 1]
    normal_y = ends[0, 2] * ends[1, 0] - ends[0, 0] * ends[1, 2]
    normal_z = ends[0, 0] * ends[1, 1] - ends[0, 1] * ends[1, 0]
    a, b = -normal_z / normal_y, -normal_x / normal_y
    start = (math.pi - math.atan2(ends[0, 0], ends[0, 2])) * per_radian
    end = (math.pi - math.atan2(ends[1, 0], ends[1, 2])) * per_radian
    if end - start > width / 2:
        end -= width
    elif start - end > width / 2:
        end += width
    sign = 1.0
    if end < start:
        start, end, sign = end, start, -1.0
    # Where the arc is highest or lowest it would enter a row twice: cut there.
    top = (math.pi - math.atan2(b, a)) * per_radian
    top += math.ceil((start - top) * 2 / width) * width / 2
    x = start
    while x < end:
        column = math.floor(x)
        stop = min(end, column + 1.0)
        if x < top < stop:
            stop = top
        _add_column_piece(panorama, from_pole, heights, a, b, x, stop, column, below, sign, out)
        x = stop


@formula
def _height_at(a, b, x, width):
    """Sine of latitude of the great circle at column coordinate x."""
    longitude = math.pi - x * (2 * math.pi / width)
    tangent = a * math.cos(longitude) + b * math.sin(longitude)
    return tangent / math.sqrt(1.0 + tangent * tangent)


@formula
def _row_of(y, heights):
    """The row that holds a height, heights falling from 1 to -1."""
    rows = heights.shape[0] - 1
    row = min(rows - 1, max(0, int(math.acos(max(-1.0, min(1.0, y))) * rows / math.pi)))
    while row > 0 and y > heights[row]:
        row -= 1
    while row < rows - 1 and y < heights[row + 1]:
        row += 1
    return row


@formula
def _add_column_piece(panorama, from_pole, heights, a, b, x0, x1, column, below, sign, out):
    """Adds the part of an arc within one source column, along which its height is monotone."""
    rows, width, _ = panorama.shape
    i = column % width
    y0, y1 = _height_at(a, b, x0, width), _height_at(a, b, x1, width)
    row, last = _row_of(y0, heights), _row_of(y1, heights)
    step = 1 if last > row else -1
    while True:
        if row == last:
            x, y = x1, y1
        else:
            y = heights[row + 1] if step > 0 else heights[row]
            x = min(x1, max(x0, _crossing(a, b, y, x0, width)))
        middle = _height_at(a, b, 0.5 * (x0 + x), width)
        mean = (y0 + 4.0 * middle + y) / 6.0  # Simpson: pieces are at most one pixel wide
        for c in range(3):
            g = from_pole[row, i, c] + panorama[row, i, c] * (heights[row] - mean)
            if below:
                g -= from_pole[rows, i, c]
            out[c] += sign * g * (x - x0)
        if row == last:
            break
        x0, y0 = x, y
        row += step


@formula
def _crossing(a, b, y, near, width):
    """Column coordinate at which the great circle has height y: the one of the two closest to `near`
    and beyond it."""
    per_radian = width / (2 * math.pi)
    tangent = y / math.sqrt(1.0 - y * y)
    spread = math.acos(max(-1.0, min(1.0, tangent / math.sqrt(a * a + b * b)))) * per_radian
    middle = (math.pi - math.atan2(b, a)) * per_radian
    first = middle - spread
    first += math.ceil((near - first) / width - 1e-12) * width
    second = middle + spread
    second += math.ceil((near - second) / width - 1e-12) * width
    return min(first, second)
