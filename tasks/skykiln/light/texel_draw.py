"""Which texels an audit looks at: half of them anywhere, half where the light is.

Even draws see every face alike; but a lost sun, a half-texel shift or a lobe of the wrong width shows
only near bright features, which even draws miss. So as many texels again are drawn in proportion to
what they should hold: a direction from the source's brightness, moved by a sample of the lobe.
"""

from typing import NamedTuple

import numpy as np

from skykiln.light.directions import FACE_AXES, cube_texel_solid_angles
from skykiln.light.sampling import ggx_cosine
from skykiln.light.source_tree import source_samples
from skykiln.light.tangent_frames import around


class Texels(NamedTuple):
    """Texels of several cube maps; arrays (T,) int64."""

    chart: np.ndarray  # index of the cube map
    face: np.ndarray
    row: np.ndarray
    column: np.ndarray


def draw_texels(tree, sizes, alphas, per_face, yaw, random):
    """Draws texels of cube maps without repeats.

    Parameters
    ----------
    tree : SourceTree.
    sizes, alphas : of each cube map, texels along an edge and the lobe's alpha (0: footprint means).
    per_face : even draws on each face; as many go where the light is.
    yaw : rad, from the panorama to the cube maps.
    random : numpy Generator.

    Returns
    -------
    Texels, in the order of cube maps.
    """
    face = np.repeat(np.arange(6), per_face)
    alphas = np.asarray(alphas, dtype=np.float64)
    lit = _towards_light(tree, alphas, face.size, yaw, random)
    drawn = []
    for chart, size in enumerate(sizes):
        row, column = random.integers(0, size, (2, face.size))
        texels = np.stack([face, row, column])
        texels = np.unique(np.concatenate([texels, texel_at(lit[chart], size)], axis=1), axis=1)
        drawn.append(np.concatenate([np.full((1, texels.shape[1]), chart), texels]))
    return Texels(*np.concatenate(drawn, axis=1))


def _towards_light(tree, alphas, count, yaw, random):
    """Directions (charts, count, 3) in proportion to the light they should hold; none of a black source."""
    seed = random.integers(0, 2**64, dtype=np.uint64)
    u, turns = random.random((2, alphas.size, count))
    if not tree.pixels.any():
        return np.empty((alphas.size, 0, 3))
    lights = source_samples(tree, alphas.size * count, seed)[0] @ yaw_rotation(yaw).T
    lights = lights.reshape(alphas.size, count, 3)
    moved = around(lights, np.abs(ggx_cosine(u, alphas[:, None])), turns)
    return np.where(alphas[:, None, None] > 0, moved, lights)


def texel_at(directions, size):
    """Face, row and column (3, N) int64 of the texel that each direction (N, 3) falls on."""
    face = np.argmax(directions @ FACE_AXES[:, 0].T, axis=1)
    major, right, down = (
        np.einsum("ni,ni->n", directions, FACE_AXES[face, axis]) for axis in range(3)
    )
    row, column = ((side / major + 1.0) / 2.0 * size for side in (down, right))
    return np.stack([face, *np.clip(np.stack([row, column]).astype(np.int64), 0, size - 1)])


def yaw_rotation(yaw):
    """Matrix from the panorama's axes to the world's: positive turns what lay at +z towards +x."""
    c, s = np.cos(yaw), np.sin(yaw)
    return np.array([[c, 0.0, s], [0.0, 1.0, 0.0], [-s, 0.0, c]])


def texel_normals(sizes, texels, yaw):
    """Directions (T, 3) of texel centres in the panorama's axes."""
    size = np.asarray(sizes)[texels.chart][:, None]
    major, right, down = np.moveaxis(FACE_AXES[texels.face], 1, 0)
    across = (2.0 * texels.column[:, None] + 1.0) / size - 1.0
    along = (2.0 * texels.row[:, None] + 1.0) / size - 1.0
    normals = (major + across * right + along * down) @ yaw_rotation(yaw)
    return normals / np.linalg.norm(normals, axis=1, keepdims=True)


def texel_edges(sizes, texels, yaw):
    """Planes (T, 4, 3) through the sides of texels, as unit normals pointing inwards, in the panorama's
    axes: with face coordinates a = p.right / p.major, a >= a0 reads p.(right - a0 major) >= 0."""
    size = np.asarray(sizes)[texels.chart][:, None]
    major, right, down = np.moveaxis(FACE_AXES[texels.face], 1, 0)
    sides = []
    for axis, index in ((right, texels.column), (down, texels.row)):
        first = 2.0 * index[:, None] / size - 1.0
        sides += [axis - first * major, (first + 2.0 / size) * major - axis]
    edges = np.stack(sides, axis=1) @ yaw_rotation(yaw)
    return edges / np.linalg.norm(edges, axis=-1, keepdims=True)


def texel_solid_angles(sizes, texels):
    """Exact solid angles (T,) of texels, sr."""
    angles = np.empty(texels.face.size)
    for chart, size in enumerate(sizes):
        chosen = texels.chart == chart
        angles[chosen] = cube_texel_solid_angles(size)[texels.row[chosen], texels.column[chosen]]
    return angles
