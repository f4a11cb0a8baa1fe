"""Cube faces from a panorama: the exact mean of the piecewise constant source over every texel.

With longitude t, the sine of latitude y, and G(t, y) the radiance L integrated from y up to the pole, a
solid angle is dt dy and Green's theorem turns the flux of a texel into an integral along its outline,

    flux = closed integral of G dt.

G is constant in t and linear in y inside a source pixel. A texel's edges are great circles,
T = tan(latitude) = a cos t + b sin t, along which with S = a sin t - b cos t

    integral of y dt = atan(S / sqrt(1 + T^2)),

so each edge is cut where it enters another pixel and summed piece by piece, in closed form. Neighbouring
texels share their edges: flux is conserved to rounding, no source pixel is missed however small, and a
constant sky stays constant. Meridians add nothing.

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

    Source: Green's theorem in the cylindrical equal-area chart (Lambert 1772).
    """
    factor = math.ceil(4 * face_size / panorama.shape[1])
    if factor > 1:
        panorama = interpolated_panorama(panorama, factor)
    panorama = np.ascontiguousarray(panorama, dtype=np.float32)
    height, width, _ = panorama.shape
    polar_angles = np.pi * np.arange(height + 1) / height
    columns = np.pi - 2 * np.pi * np.arange(width + 1) / width
    tangents = np.concatenate([[np.inf], 1 / np.tan(polar_angles[1:-1]), [-np.inf]])
    grid = (np.cos(polar_angles), tangents, np.cos(columns), np.sin(columns))
    from_pole = _integrals_from_pole(panorama, grid[0])
    across, along = _edge_integrals(panorama, from_pole, grid, FACE_AXES, face_size, yaw)
    del from_pole  # a source of 8192 x 4096 takes 0.8 GB of it
    radiance = np.empty((6, face_size, face_size, 3), np.float32)
    solid_angles = cube_texel_solid_angles(face_size)[:, :, None]
    for face in range(6):
        flux = across[face, :-1] - across[face, 1:]
        if face in (_UP, _DOWN):
            flux += along[face - _UP, :, 1:] - along[face - _UP, :, :-1]
        flux /= solid_angles
        np.maximum(flux, 0.0, out=flux)  # rounding may leave -1e-16 of a bright sun
        radiance[face] = flux
    return radiance


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
def _edge_integrals(panorama, from_pole, grid, face_axes, size, yaw):
    """Integrals of G dt along texel edges, in the direction of falling t.

    Returns those along s, (6, size + 1, size, 3), and, for the two faces around the poles, those along
    t, (2, size, size + 1, 3); on the other faces these are meridians and zero.
    """
    across = np.zeros((6, size + 1, size, 3))
    along = np.zeros((2, size + 1, size, 3))
    cos_yaw, sin_yaw = math.cos(yaw), math.sin(yaw)
    for line in numba.prange(6 * (size + 1)):
        face, k = np.int64(line) // (size + 1), np.int64(line) % (size + 1)
        polar = face in (_UP, _DOWN)
        if polar and 2 * k == size:
            continue  # through the pole: meridians
        axes = np.empty((3, 3))  # turned back by the yaw, into the source's own frame
        for x in range(3):
            axes[x, 0] = face_axes[face, x, 0] * cos_yaw - face_axes[face, x, 2] * sin_yaw
            axes[x, 1] = face_axes[face, x, 1]
            axes[x, 2] = face_axes[face, x, 2] * cos_yaw + face_axes[face, x, 0] * sin_yaw
        fixed = 2.0 * k / size - 1.0
        below = face == _DOWN
        _add_line(panorama, from_pole, grid, axes[0], axes[1], axes[2], fixed, below, across[face, k])
        if polar:
            out = along[face - _UP, k]
            _add_line(panorama, from_pole, grid, axes[0], axes[2], axes[1], fixed, below, out)
    return across, along.transpose(0, 2, 1, 3)


@formula
def _add_line(panorama, from_pole, grid, major, moving, other, fixed, below, out):
    """The edges of one line of texels into out (size, 3). No edge is cut by the middle of its face,
    where a great circle turns: one texel's edges are taken in halves."""
    size = out.shape[0]
    parts = 1 if size % 2 == 0 else 2
    px, py, pz = major[0] + other[0] * fixed, major[1] + other[1] * fixed, major[2] + other[2] * fixed
    # Normal of the great circle's plane, and with it a and b of T = a cos t + b sin t.
    nx, ny = py * moving[2] - pz * moving[1], pz * moving[0] - px * moving[2]
    nz = px * moving[1] - py * moving[0]
    a, b = -nz / ny, -nx / ny
    row = len(grid[1]) // 2
    for i in range(size * parts):
        u0, u1 = 2.0 * i / (size * parts) - 1.0, 2.0 * (i + 1) / (size * parts) - 1.0
        x0, z0 = px + moving[0] * u0, pz + moving[2] * u0
        x1, z1 = px + moving[0] * u1, pz + moving[2] * u1
        texel = out[i // parts]
        if x0 * z1 - z0 * x1 > 0.0:  # t falls from the first end to the second
            row = _add_edge(panorama, from_pole, grid, a, b, x0, z0, x1, z1, row, 1.0, below, texel)
        else:
            row = _add_edge(panorama, from_pole, grid, a, b, x1, z1, x0, z0, row, -1.0, below, texel)


@formula
def _add_edge(panorama, from_pole, grid, a, b, x0, z0, x1, z1, near, sign, below, out):
    """Adds the integral of G along a great circle, between two points given by the horizontal parts of
    their directions, t falling, the height rising or falling throughout. Returns the row of its last
    point; `near` is a row from which the first point's is looked for."""
    heights, tangents, cos_columns, sin_columns = grid
    width = panorama.shape[1]
    length0, length1 = math.sqrt(x0 * x0 + z0 * z0), math.sqrt(x1 * x1 + z1 * z1)
    cos_t, sin_t = z0 / length0, x0 / length0
    cos_end, sin_end = z1 / length1, x1 / length1
    tangent, tangent_end = a * cos_t + b * sin_t, a * cos_end + b * sin_end
    step = 1 if tangent_end < tangent else -1
    row = _row_of(tangent, tangents, step, near)
    start = (math.pi - math.atan2(sin_t, cos_t)) * (width / (2.0 * math.pi))
    span = _arc(sin_t * cos_end - cos_t * sin_end, cos_t * cos_end + sin_t * sin_end)
    last = start + span * (width / (2.0 * math.pi))
    column = math.floor(start)
    radius2 = a * a + b * b
    while True:
        at_end = column + 1 >= last
        if at_end:
            cos_next, sin_next = cos_end, sin_end
        else:
            edge = (column + 1) % width
            cos_next, sin_next = cos_columns[edge], sin_columns[edge]
        tangent_next = a * cos_next + b * sin_next
        i = column % width
        while (step > 0 and tangent_next < tangents[row + 1]) or (step < 0 and tangent_next > tangents[row]):
            crossed = tangents[row + 1] if step > 0 else tangents[row]
            side = math.sqrt(max(0.0, radius2 - crossed * crossed))
            if a * (sin_t + sin_next) - b * (cos_t + cos_next) < 0.0:
                side = -side
            cos_cut, sin_cut = (a * crossed - b * side) / radius2, (b * crossed + a * side) / radius2
            _add_piece(
                panorama, from_pole, heights, a, b, cos_t, sin_t, cos_cut, sin_cut, row, i, sign, below, out
            )
            cos_t, sin_t = cos_cut, sin_cut
            row += step
        _add_piece(
            panorama, from_pole, heights, a, b, cos_t, sin_t, cos_next, sin_next, row, i, sign, below, out
        )
        if at_end:
            return row
        cos_t, sin_t = cos_next, sin_next
        column += 1


@formula
def _row_of(tangent, tangents, step, row):
    """The row that holds a latitude, or that an edge which starts there enters (step 1: downwards); looked
    for from another row, which a line's neighbouring edges make a near one."""
    rows = tangents.shape[0] - 1
    while row > 0 and (tangent > tangents[row] or (step < 0 and tangent == tangents[row])):
        row -= 1
    while row < rows - 1 and (tangent < tangents[row + 1] or (step > 0 and tangent == tangents[row + 1])):
        row += 1
    return row


@formula
def _add_piece(panorama, from_pole, heights, a, b, cos0, sin0, cos1, sin1, row, i, sign, below, out):
    """Adds the part of an edge inside one source pixel. Around the lower pole G is measured from there,
    so that it vanishes at the pole that a texel touches."""
    angle = _arc(sin0 * cos1 - cos0 * sin1, cos0 * cos1 + sin0 * sin1)
    t0, s0 = a * cos0 + b * sin0, a * sin0 - b * cos0
    t1, s1 = a * cos1 + b * sin1, a * sin1 - b * cos1
    r0, r1 = math.sqrt(1.0 + t0 * t0), math.sqrt(1.0 + t1 * t1)
    # Integral of y over falling t. The length is the same all along the edge: T^2 + S^2 = a^2 + b^2.
    length = 1.0 + a * a + b * b
    height = _arc((s0 * r1 - s1 * r0) / length, (r0 * r1 + s0 * s1) / length)
    for c in range(3):
        g = from_pole[row, i, c]
        if below:
            g -= from_pole[heights.shape[0] - 1, i, c]
        out[c] += sign * (g * angle + panorama[row, i, c] * (heights[row] * angle - height))


@formula
def _arc(sine, cosine):
    """The angle of a sine and a cosine: atan2, by the arc sine's series where that is exact to rounding.

    Inside one pixel angles are so small that it nearly always is, and it takes a tenth of the time.
    """
    square = sine * sine
    if cosine < 0.0 or square > 1e-4:
        return math.atan2(sine, cosine)
    # Coefficients 1/6, 3/40, 15/336, 105/3456; the next term is below 3e-18 of the sum.
    tail = 15.0 / 336.0 + square * (105.0 / 3456.0)
    return sine * (1.0 + square * (1.0 / 6.0 + square * (3.0 / 40.0 + square * tail)))
