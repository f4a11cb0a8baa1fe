"""The node pyramid: a cube's flux, gathered over blocks of 2 x 2, 4 x 4, ... texels up to whole faces.

A node stands for all its texels in a sum over the sphere. It keeps their flux and the moments of their
directions about the mean direction, so that a smooth kernel can be summed over it to second order, and
the size of what is then left out. A mean direction is not normalised: n . m is the mean of n . l.

Colours apart inside a node (a red lamp beside a blue one) have different mean directions: each
channel's own mean and variance are kept beside the common ones.

Conventions: `directions`. Only inner levels are stored; a texel, or a part of one, is made when needed
by `cell_moments`, as a patch of constant radiance.
"""

import math
from typing import NamedTuple

import numba
import numpy as np

from skykiln.jit import formula, parallel
from skykiln.light.directions import FACE_AXES

# What a node's record holds, and where: first, in one cache line, what decides whether it is opened.
# Variances and moments are per unit of flux, of the directions' distances d from MEAN.
FLUX = 0  # 3: flux per channel, radiance sr
MEAN = 3  # 3: mean direction, all channels weighted alike
SPREAD = 6  # mean of |d|^2; equals 1 - |MEAN|^2
RADIUS = 7  # largest |d| of any part of the node
THIRD = 8  # what the third moments may amount to: skewness, uneven shape, colours apart
FOURTH = 9  # mean of |d|^4
SHIFT = 10  # largest of the colour shifts
SPREAD_GAP = 11  # largest difference of a channel's own spread from SPREAD
KINK = 12  # how far the mean of the positive part of n . l may be off across a horizon
LOPSIDED = 13  # 3: mean of |d|^2 d
COVARIANCE = 16  # 6: xx, yy, zz, xy, xz, yz of d
COLOUR_SHIFT = 22  # 9: each channel's mean direction minus MEAN
RECORD = 32


class Pyramid(NamedTuple):
    """faces (6, n, n, 3) float32 radiance; nodes (count, RECORD) float32, finest stored level first,
    each level face by face in Z order: the quarters of node p are 4 p .. 4 p + 3 one level down, in the
    order of rows; offsets (levels + 2,) int64, where level l >= 1 (blocks of 2^l texels) starts;
    mean (3,) float64, mean radiance over the sphere."""

    faces: np.ndarray
    nodes: np.ndarray
    offsets: np.ndarray
    mean: np.ndarray


def build_pyramid(faces):
    """Gathers the faces' flux upward.

    faces : (6, n, n, 3) float32, radiance, finite and not negative; n a power of two.
    """
    faces = np.ascontiguousarray(faces, dtype=np.float32)
    size = faces.shape[1]
    levels = size.bit_length() - 1
    counts = [6 * (size >> level) ** 2 for level in range(1, levels + 1)]
    offsets = np.concatenate([[0, 0], np.cumsum(counts, dtype=np.int64)]).astype(np.int64)
    nodes = np.zeros((int(offsets[-1]), RECORD), np.float32)
    mean = _row_fluxes(faces).sum(axis=0) / (4 * np.pi)
    weights = np.divide(1.0, mean, out=np.zeros(3), where=mean > 0)
    if levels:
        _gather_texels(faces, nodes, weights, FACE_AXES)
    for level in range(2, levels + 1):
        _gather_level(nodes, offsets[level - 1], offsets[level], offsets[level + 1], weights)
    return Pyramid(faces, nodes, offsets, mean)


@parallel
def _row_fluxes(faces):
    """Flux of every row of texels, (6 n, 3) float64, by the area element (1 + a^2 + b^2)^-3/2."""
    size = faces.shape[1]
    fluxes = np.zeros((6 * size, 3))
    for line in numba.prange(6 * size):
        face, j = np.int64(line) // size, np.int64(line) % size
        b = (2.0 * j + 1.0) / size - 1.0
        red, green, blue = 0.0, 0.0, 0.0
        for i in range(size):
            a = (2.0 * i + 1.0) / size - 1.0
            inverse = 1.0 / (1.0 + a * a + b * b)
            area = 4.0 / (size * size) * inverse * math.sqrt(inverse)
            red += area * faces[face, j, i, 0]
            green += area * faces[face, j, i, 1]
            blue += area * faces[face, j, i, 2]
        fluxes[line, 0], fluxes[line, 1], fluxes[line, 2] = red, green, blue
    return fluxes


@parallel
def _gather_texels(faces, nodes, weights, face_axes):
    """The first level, of 2 x 2 texels each: their geometry is the same on all six faces."""
    size = faces.shape[1]
    count = (size >> 1) ** 2
    block = 64
    for line in numba.prange((count + block - 1) // block):
        first = np.int64(line) * block
        children = np.zeros((4, RECORD), np.float32)
        solid_angles = np.empty(4)
        width = 2.0 / size
        for p in range(first, min(count, first + block)):
            j, i = 2 * every_other_bit(p >> 1), 2 * every_other_bit(p)
            for k in range(4):
                a, b = (i + (k & 1) + 0.5) * width - 1.0, (j + (k >> 1) + 0.5) * width - 1.0
                solid_angles[k] = _patch_moments(a, b, width, children[k])
            for face in range(6):
                for k in range(4):
                    for c in range(3):
                        radiance = faces[face, j + (k >> 1), i + (k & 1), c]
                        children[k, FLUX + c] = radiance * solid_angles[k]
                node = nodes[face * count + p]
                _join(children, weights, True, node)
                _turn(node, face_axes[face])


@parallel
def _gather_level(nodes, below, first, last, weights):
    block = 64
    for line in numba.prange((last - first + block - 1) // block):
        for p in range(np.int64(line) * block, min(last - first, np.int64(line) * block + block)):
            children = nodes[below + 4 * p : below + 4 * p + 4]
            _join(children, weights, False, nodes[first + p])


@formula
def _join(children, weights, plain, node):
    """Moments of four children about their common mean (parallel-axis theorem, to fourth order), into a
    record of zeros; `plain` children are of one colour and not lopsided."""
    total, mx, my, mz = 0.0, 0.0, 0.0, 0.0
    for k in range(4):
        share = _share(children, weights, k)
        total += share
        mx += share * children[k, MEAN]
        my += share * children[k, MEAN + 1]
        mz += share * children[k, MEAN + 2]
    if total <= 0.0:
        return
    mx, my, mz = mx / total, my / total, mz / total
    node[MEAN], node[MEAN + 1], node[MEAN + 2] = mx, my, mz
    for k in range(4):
        share = _share(children, weights, k) / total
        dx, dy, dz = children[k, MEAN] - mx, children[k, MEAN + 1] - my, children[k, MEAN + 2] - mz
        _add_moments(children[k], share, dx, dy, dz, plain, node)
    for c in range(3):
        _join_channel(children, mx, my, mz, c, plain, node)
    _sum_up(node)


@formula
def _share(children, weights, k):
    """A child's weight in the common mean: its flux, all channels alike."""
    red, green, blue = children[k, FLUX], children[k, FLUX + 1], children[k, FLUX + 2]
    return weights[0] * red + weights[1] * green + weights[2] * blue


@formula
def _add_moments(child, share, dx, dy, dz, plain, node):
    """Adds a child that stands off the common mean by (dx, dy, dz)."""
    square = dx * dx + dy * dy + dz * dz
    if share > 0.0:
        node[RADIUS] = max(node[RADIUS], np.float32(math.sqrt(square)) + child[RADIUS])
    spread = np.float64(child[SPREAD])
    along = 0.0
    if not plain:
        along = child[LOPSIDED] * dx + child[LOPSIDED + 1] * dy + child[LOPSIDED + 2] * dz
        node[LOPSIDED] += share * child[LOPSIDED]
        node[LOPSIDED + 1] += share * child[LOPSIDED + 1]
        node[LOPSIDED + 2] += share * child[LOPSIDED + 2]
    node[SPREAD] += share * (spread + square)
    # Inside the child directions are taken as spread alike across the tangent plane: hence the
    # factors 2 and 4, of (1 + 2/2) and of (2 + 4/2).
    node[FOURTH] += share * (child[FOURTH] + 4 * along + 4 * spread * square + square * square)
    pull = share * (2 * spread + square)
    node[LOPSIDED] += pull * dx
    node[LOPSIDED + 1] += pull * dy
    node[LOPSIDED + 2] += pull * dz
    node[COVARIANCE] += share * (child[COVARIANCE] + dx * dx)
    node[COVARIANCE + 1] += share * (child[COVARIANCE + 1] + dy * dy)
    node[COVARIANCE + 2] += share * (child[COVARIANCE + 2] + dz * dz)
    node[COVARIANCE + 3] += share * (child[COVARIANCE + 3] + dx * dy)
    node[COVARIANCE + 4] += share * (child[COVARIANCE + 4] + dx * dz)
    node[COVARIANCE + 5] += share * (child[COVARIANCE + 5] + dy * dz)


@formula
def _join_channel(children, mx, my, mz, c, plain, node):
    """One channel's own flux and mean direction; its spread follows from 1 - |mean|^2."""
    at = COLOUR_SHIFT + 3 * c
    flux, sx, sy, sz = 0.0, 0.0, 0.0, 0.0
    for k in range(4):
        f = np.float64(children[k, FLUX + c])
        flux += f
        sx += f * (children[k, MEAN] - mx)
        sy += f * (children[k, MEAN + 1] - my)
        sz += f * (children[k, MEAN + 2] - mz)
        if not plain:
            sx += f * children[k, at]
            sy += f * children[k, at + 1]
            sz += f * children[k, at + 2]
    node[FLUX + c] = flux
    if flux <= 0.0:
        return
    sx, sy, sz = sx / flux, sy / flux, sz / flux
    node[at], node[at + 1], node[at + 2] = sx, sy, sz
    square = sx * sx + sy * sy + sz * sz
    node[SHIFT] = max(node[SHIFT], np.float32(math.sqrt(square)))
    gap = abs(2.0 * (sx * mx + sy * my + sz * mz) + square)
    node[SPREAD_GAP] = max(node[SPREAD_GAP], np.float32(gap))


@formula
def _sum_up(node):
    """The bounds that follow from the moments."""
    spread = node[SPREAD]
    deviation = math.sqrt(spread)
    skew = math.sqrt(node[LOPSIDED] ** 2 + node[LOPSIDED + 1] ** 2 + node[LOPSIDED + 2] ** 2)
    node[THIRD] = 0.75 * skew + 0.05 * spread * deviation + 3.0 * spread * node[SHIFT]
    node[KINK] = 0.1 * deviation + 0.3 * min(deviation, skew / max(spread, 1e-30))


@formula
def every_other_bit(z):
    """The even bits of a Z-order index, packed together."""
    z &= 0x5555555555555555
    z = (z | (z >> 1)) & 0x3333333333333333
    z = (z | (z >> 2)) & 0x0F0F0F0F0F0F0F0F
    z = (z | (z >> 4)) & 0x00FF00FF00FF00FF
    z = (z | (z >> 8)) & 0x0000FFFF0000FFFF
    return (z | (z >> 16)) & 0x00000000FFFFFFFF


@formula
def cell_moments(faces, face_axes, level, p, node):
    """The record of a patch of constant radiance: texel p in Z order, or for level < 0 a part of one."""
    across = faces.shape[1] << -level
    face = p // (across * across)
    z = p - face * across * across
    i, j = every_other_bit(z), every_other_bit(z >> 1)
    width = 2.0 / across
    node[:] = 0.0
    solid_angle = _patch_moments((i + 0.5) * width - 1.0, (j + 0.5) * width - 1.0, width, node)
    for c in range(3):
        node[FLUX + c] = faces[face, j >> -level, i >> -level, c] * solid_angle
    _turn(node, face_axes[face])


@formula
def _patch_moments(a, b, width, node):
    """Moments of an evenly bright patch at face coordinates (a, b), on the axes of its face: major, s,
    t. Returns its solid angle.

    With p = (1, a, b) and h = |p|, a patch of width w has, to second order in w, solid angle
    w^2 h^-3 (1 + w^2/24 (15 (h^2 - 1)/h^4 - 6/h^2)) and mean direction
    p/h + w^2/24 (-8 (0, a, b)/h^3 - 2 p/h^3 + 9 (h^2 - 1) p/h^5): Taylor series of p/h weighted by the
    area element h^-3.
    """
    h2 = 1.0 + a * a + b * b
    h = math.sqrt(h2)
    h3 = h * h2
    bend = width * width / 24.0
    radial = 1.0 / h + bend * (-2.0 / h3 + 9.0 * (h2 - 1.0) / (h3 * h2))
    sideways = radial - 8.0 * bend / h3
    mx, my, mz = radial, sideways * a, sideways * b
    second = width * width / 12.0
    da = (-a / h3, 1.0 / h - a * a / h3, -a * b / h3)  # derivatives of p/h
    db = (-b / h3, -a * b / h3, 1.0 / h - b * b / h3)
    length_a, length_b = (1.0 + b * b) / (h2 * h2), (1.0 + a * a) / (h2 * h2)  # their squares
    spread = second * (length_a + length_b)
    bent = 0.1 * spread * spread  # along the radius: (mean |d|^4 - (mean |d|^2)^2)/4
    node[MEAN], node[MEAN + 1], node[MEAN + 2] = mx, my, mz
    node[COVARIANCE] = second * (da[0] * da[0] + db[0] * db[0]) + bent * mx * mx
    node[COVARIANCE + 1] = second * (da[1] * da[1] + db[1] * db[1]) + bent * my * my
    node[COVARIANCE + 2] = second * (da[2] * da[2] + db[2] * db[2]) + bent * mz * mz
    node[COVARIANCE + 3] = second * (da[0] * da[1] + db[0] * db[1]) + bent * mx * my
    node[COVARIANCE + 4] = second * (da[0] * da[2] + db[0] * db[2]) + bent * mx * mz
    node[COVARIANCE + 5] = second * (da[1] * da[2] + db[1] * db[2]) + bent * my * mz
    node[SPREAD] = spread
    node[RADIUS] = 0.5 * width * (math.sqrt(length_a) + math.sqrt(length_b))
    node[FOURTH] = 1.4 * spread * spread  # of a square
    _sum_up(node)
    return width * width / h3 * (1.0 + bend * (15.0 * (h2 - 1.0) / (h2 * h2) - 6.0 / h2))


@formula
def _turn(node, axes):
    """From a face's own axes to the world's. Each face axis is one world axis, up to its sign."""
    for first in (MEAN, LOPSIDED, COLOUR_SHIFT, COLOUR_SHIFT + 3, COLOUR_SHIFT + 6):
        u, v, w = node[first], node[first + 1], node[first + 2]
        for x in range(3):
            node[first + x] = axes[0, x] * u + axes[1, x] * v + axes[2, x] * w
    xx, yy, zz = node[COVARIANCE], node[COVARIANCE + 1], node[COVARIANCE + 2]
    xy, xz, yz = node[COVARIANCE + 3], node[COVARIANCE + 4], node[COVARIANCE + 5]
    for x in range(3):
        a, b, c = axes[0, x], axes[1, x], axes[2, x]
        node[COVARIANCE + x] = a * a * xx + b * b * yy + c * c * zz
        # The product of two world axes is plus or minus that of two of the face's.
        y, z = (x + 1) % 3, (x + 2) % 3
        node[COVARIANCE + 2 + y + z] = (
            (axes[0, y] * axes[1, z] + axes[1, y] * axes[0, z]) * xy
            + (axes[0, y] * axes[2, z] + axes[2, y] * axes[0, z]) * xz
            + (axes[1, y] * axes[2, z] + axes[2, y] * axes[1, z]) * yz
        )
