"""A cube unrolled as a belt: all twelve edges between faces lie inside the picture, so seams show.

The four side faces make the belt, +z in its middle and +x left of it, as in a panorama; it is cut through
the middle of -z. Above each side face stands the quarter of +y that borders on it, a triangle, below it
that of -y: the two slopes of a triangle are cuts, its base and the upright lines are edges.
"""

import functools

import numpy as np

from skykiln.light.directions import panorama_directions
from skykiln.light.sample_cube import face_coordinates

# The side faces from left to right: where they look, and where their right edge lies.
_SIDES = np.array(
    [[[1, 0, 0], [0, 0, 1]], [[0, 0, 1], [-1, 0, 0]], [[-1, 0, 0], [0, 0, -1]], [[0, 0, -1], [1, 0, 0]]]
)


def belt(faces, edge):
    """World faces (6, n, n, c) as (2 edge, 4 edge, c): the nearest texel everywhere, none blended.

    Parameters: edge : pixels of a face's edge in the picture, even
    """
    return _nearest(faces, _belt_texels(faces.shape[1], edge))


def panorama_of(faces, columns):
    """World faces (6, n, n, c) as a panorama (columns / 2, columns, c), by the nearest texels."""
    return _nearest(faces, _panorama_texels(faces.shape[1], columns))


@functools.lru_cache(maxsize=8)
def off_belt(edge):
    """(2 edge, 4 edge) bool: pixels beside the triangles, which show nothing."""
    across, rows = _across(edge), _rows(edge)
    beside = np.abs(across)[None, :] > 1 - np.maximum(np.abs(rows) - 1, 0)[:, None]
    return np.roll(np.tile(beside, 4), edge // 2, axis=1)


def _nearest(faces, texels):
    return faces.reshape(-1, faces.shape[-1])[texels]


@functools.lru_cache(maxsize=64)
def _belt_texels(size, edge):
    return _texels(belt_directions(edge), size)


@functools.lru_cache(maxsize=16)
def _panorama_texels(size, columns):
    return _texels(panorama_directions(columns, columns // 2), size)


def _texels(directions, size):
    """Number of the texel that each direction (h, w, 3) meets in faces of an edge: (h, w)."""
    face, s, t = face_coordinates(directions.reshape(-1, 3))
    column, row = (np.clip((c * size).astype(np.intp), 0, size - 1) for c in (s, t))
    return ((face * size + row) * size + column).reshape(directions.shape[:2])


def belt_directions(edge):
    """World directions of the belt's pixels: (2 edge, 4 edge, 3), not of unit length."""
    across, rows = _across(edge), _rows(edge)
    height = -np.clip(rows, -1, 1)
    ahead = 1 - np.maximum(np.abs(rows) - 1, 0)
    sides = (
        ahead[:, None, None, None] * _SIDES[:, 0][None, :, None]
        + across[None, None, :, None] * _SIDES[:, 1][None, :, None]
        + height[:, None, None, None] * np.array([0, 1, 0])
    )
    whole = sides.reshape(2 * edge, 4 * edge, 3)
    return np.roll(whole, edge // 2, axis=1)


def _across(edge):
    return (2 * np.arange(edge) + 1) / edge - 1


def _rows(edge):
    """-2..2 from the top down: beyond 1 on a lid."""
    return (2 * np.arange(2 * edge) + 1) / edge - 2
