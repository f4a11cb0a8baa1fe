"""A cube map sampled as OpenGL, Vulkan and Direct3D sample it: `textureLod`, linear, seamless.

Within a level the four nearest texels are weighted bilinearly; taps beyond an edge are taken from the
face beyond it, and the tap beyond a corner, where no texel is, is the mean of the other three (OpenGL
4.6 core, section 8.14.3, the recommended choice). Between two levels the results are interpolated.

Directions are vectors of *cube space*, what a renderer passes after `cube_axes`; the table of faces is
that of `directions`.
"""

import numpy as np

from skykiln.light.directions import FACE_AXES

_BEYOND = 1e-7  # how far behind the edge a tap is looked for: less than half a texel of any face


def sample_cube(levels, directions, level):
    """Values of a cube map.

    Parameters
    ----------
    levels : sequence of (6, n, n, c), the largest first.
    directions : (k, 3), cube space, of any length but 0.
    level : (k,) or a number, level of detail; held within the levels there are.

    Returns
    -------
    (k, c) float64.
    """
    directions = np.asarray(directions, np.float64)
    level = np.clip(np.broadcast_to(level, len(directions)), 0, len(levels) - 1)
    low = np.floor(level).astype(np.int64)
    high = np.minimum(low + 1, len(levels) - 1)
    share = (level - low)[:, None]
    values = np.zeros((2, len(directions), levels[0].shape[-1]))
    for number, faces in enumerate(levels):
        for which, chosen in enumerate((low == number, high == number)):
            if chosen.any():
                values[which, chosen] = sample_level(faces, directions[chosen])
    return (1 - share) * values[0] + share * values[1]


def sample_level(faces, directions):
    """Bilinear, seamless values of one level (6, n, n, c) at (k, 3). Returns (k, c) float64."""
    size = faces.shape[1]
    face, s, t = face_coordinates(directions)
    x, y = s * size - 0.5, t * size - 0.5
    column, row = np.floor(x).astype(np.int64), np.floor(y).astype(np.int64)
    u, v = (x - column)[:, None], (y - row)[:, None]
    weights = ((1 - u) * (1 - v), u * (1 - v), (1 - u) * v, u * v)
    taps = [_tap(faces, face, row + j, column + i) for j in (0, 1) for i in (0, 1)]
    values = np.stack([value for value, _ in taps])
    missing = np.stack([corner for _, corner in taps])[..., None]
    values += missing * values.sum(0) / 3.0  # the missing tap's value is 0, so the sum is of three
    return sum(weight * value for weight, value in zip(weights, values, strict=True))


def face_coordinates(directions):
    """Face number and s, t in 0..1 of directions (k, 3): three (k,) arrays."""
    axis = np.argmax(np.abs(directions), axis=1)
    ahead = np.take_along_axis(directions, axis[:, None], 1)[:, 0]
    face = 2 * axis + (ahead < 0)
    across = np.einsum("kac,kc->ka", FACE_AXES[face, 1:], directions) / np.abs(ahead)[:, None]
    return face, (across[:, 0] + 1) / 2, (across[:, 1] + 1) / 2


def _tap(faces, face, row, column):
    """Texels by number, those beyond an edge from the neighbour. Returns the values (k, c), 0 beyond a
    corner, and which those are (k,)."""
    size = faces.shape[1]
    beyond_row, beyond_column = (row < 0) | (row >= size), (column < 0) | (column >= size)
    a, b = _centre_or_beyond(column, size), _centre_or_beyond(row, size)
    axes = FACE_AXES[face]
    directions = axes[:, 0] + axes[:, 1] * a[:, None] + axes[:, 2] * b[:, None]
    face, s, t = face_coordinates(directions)
    i, j = (np.clip((c * size).astype(np.int64), 0, size - 1) for c in (s, t))
    corner = beyond_row & beyond_column
    return np.where(corner[:, None], 0.0, faces[face, j, i]), corner


def _centre_or_beyond(number, size):
    """2 s - 1 of a texel's centre, or just beyond the edge for one that lies there."""
    centre = (2.0 * number + 1.0) / size - 1.0
    return np.clip(centre, -1.0 - _BEYOND, 1.0 + _BEYOND)
