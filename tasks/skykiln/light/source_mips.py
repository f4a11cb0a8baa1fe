"""Filtered lookups of a panorama: the levels of its tree as mip levels.

The level is that whose pixels are as large as the solid angle asked for (Colbert and Krivanek 2007,
"GPU-based importance sampling", GPU Gems 3, chapter 20), measured where the lookup falls.
"""

import math

import numpy as np

from skykiln.jit import formula


@formula
def mip_radiance(tree, x, y, z, solid_angle, channel):
    """Radiance in a mip level whose pixels are as large as a solid angle: trilinear between two levels."""
    height, width = tree.pixels.shape[0], tree.pixels.shape[1]
    v = math.acos(max(-1.0, min(1.0, y))) / math.pi
    u = (math.pi - math.atan2(x, z)) / (2.0 * math.pi)
    row = min(int(v * height), height - 1)
    pixel = (tree.heights[row] - tree.heights[row + 1]) * 2.0 * math.pi / width
    level = max(0.0, 0.5 * math.log2(solid_angle / pixel))
    level = min(level, tree.shapes.shape[0] - 1.001)
    low = int(level)
    share = level - low
    near, far = _bilinear(tree, low, u, v, channel), _bilinear(tree, low + 1, u, v, channel)
    return (1.0 - share) * near + share * far


@formula
def _bilinear(tree, level, u, v, channel):
    """Radiance of a level between its nodes' middles; wraps in longitude, stops at the poles."""
    rows, columns = tree.shapes[level, 0], tree.shapes[level, 1]
    down = v * tree.pixels.shape[0] / 2.0**level - 0.5
    across = u * tree.pixels.shape[1] / 2.0**level - 0.5
    j, i = math.floor(down), math.floor(across)
    dj, di = down - j, across - i
    total = 0.0
    for k in range(4):
        row = min(max(int(j) + k // 2, 0), rows - 1)
        column = (int(i) + k % 2) % columns
        weight = (dj if k > 1 else 1.0 - dj) * (di if k % 2 else 1.0 - di)
        total += weight * _mean_radiance(tree, level, row, column, channel)
    return total


@formula
def _mean_radiance(tree, level, j, i, channel):
    if level == 0:
        return np.float64(tree.pixels[j, i, channel])
    height, width = tree.pixels.shape[0], tree.pixels.shape[1]
    top, bottom = j << level, min((j + 1) << level, height)
    wide = min((i + 1) << level, width) - (i << level)
    solid_angle = (tree.heights[top] - tree.heights[bottom]) * 2.0 * math.pi * wide / width
    return tree.flux[tree.offsets[level] + j * tree.shapes[level, 1] + i, channel] / solid_angle
