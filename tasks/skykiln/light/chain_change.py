"""How two chains of the same probe differ."""

from typing import NamedTuple

import numpy as np

from skykiln.light.directions import FACE_AXES, cube_texel_solid_angles
from skykiln.light.thumbnails import block_means

FLOOR = 1e-3  # of the mean: what counts as dark
_ABOUT_THE_PEAK = np.cos(np.radians(10.0))


class LevelChange(NamedTuple):
    """largest : of any texel and channel, relative to its value before, held at `FLOOR` of the level's mean
    mean : over the sphere, relative to the level's mean before
    """

    largest: float
    mean: float


def level_change(before, after):
    """Change between two levels (6, n, n, 3), of equal or of different sizes: LevelChange."""
    before, after = _of_one_size(before, after)
    weights = cube_texel_solid_angles(before.shape[1])[None, :, :, None]
    mean = float((before * weights).sum() / (3 * 4 * np.pi))
    difference = np.abs(after - before)
    if mean == 0:  # there is nothing to relate a change to: all of it, or none
        lit = float(difference.any())
        return LevelChange(lit, lit)
    largest = (difference / np.maximum(np.abs(before), FLOOR * mean)).max()
    return LevelChange(float(largest), float((difference * weights).sum() / (3 * 4 * np.pi) / mean))


def brightest_spot(faces, weights):
    """Where a sky is brightest: the mean direction, by flux, of texels within 10 degrees of the brightest
    that have at least half of its luminance.

    Parameters: faces : (6, n, n, 3); weights : (3,), of luminance
    Returns:    direction (3,) float64, unit; luminance of the brightest texel
    """
    size = faces.shape[1]
    luminance = faces @ np.asarray(weights, faces.dtype)
    peak = float(luminance.max())
    bright = np.argwhere(luminance >= peak / 2)
    directions = _texel_directions(bright, size)
    top = _texel_directions(np.argwhere(luminance == peak)[:1], size)[0]
    near = directions @ top > _ABOUT_THE_PEAK
    chosen = tuple(bright[near].T)
    flux = luminance[chosen] * cube_texel_solid_angles(size)[chosen[1:]]
    total = flux @ directions[near] if peak > 0 else top
    return total / np.linalg.norm(total), peak


def _texel_directions(texels, size):
    """Unit directions of texels (k, 3): face, row, column."""
    axes = FACE_AXES[texels[:, 0]]
    down, across = ((2.0 * texels[:, i] + 1) / size - 1 for i in (1, 2))
    rays = axes[:, 0] + axes[:, 1] * across[:, None] + axes[:, 2] * down[:, None]
    return rays / np.linalg.norm(rays, axis=1, keepdims=True)


def _of_one_size(before, after):
    """Both by the smaller edge; where that isn't a whole part of the larger one, by what fits."""
    size = min(before.shape[1], after.shape[1])
    return tuple(
        block_means(np.asarray(level, np.float64), level.shape[1] // size)[:, :size, :size]
        for level in (before, after)
    )
