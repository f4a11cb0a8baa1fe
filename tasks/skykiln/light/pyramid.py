"""The node pyramid: a panorama's flux, gathered over blocks of pixels that double up to half the sphere.

A node stands for all its pixels in a sum over the sphere. It keeps their flux and the moments of their
directions about the mean direction, so that a smooth kernel can be summed over it (`lobe_sums`), and
the size of what is then left out. A mean direction is not normalised: n . m is the mean of n . l.
A pixel is a patch of constant radiance, with its own exact mean direction and its spread. What all pixels
have in common, the smallest radiance of each channel, stays out: a filter leaves a constant as it is.

Colours apart inside a node (a red lamp beside a blue one) have different mean directions: each
channel's own mean is kept beside the common one.

Blocks of `block` pixels and larger ones are stored; smaller ones, pixels and parts of pixels are made
when they are needed (`cells`). Fields of a record: `node_record`. Conventions: `directions`.
"""

import math
from typing import NamedTuple

import numba
import numpy as np

from skykiln.jit import formula, parallel
from skykiln.light.node_record import (
    COLOUR_SHIFT,
    COVARIANCE,
    FLUX,
    FOURTH,
    LOPSIDED,
    MEAN,
    RADIUS,
    RECORD,
    SPREAD,
    set_channel,
    sum_up,
)
from skykiln.light.pixel_blocks import gather_blocks
from skykiln.light.pixel_geometry import SOLID_ANGLE, column_geometry, row_geometry

_SMALL = 1024  # pixels across, below which pixels are cut in four
_BLOCKS_ACROSS = 1024  # a wide panorama's stored blocks are this many, and the memory with them


class Pyramid(NamedTuple):
    """A source for the filter.

    tree : what kernels are handed: panorama (H, W, 3) float32 radiance; rows (H, 8) and columns (W, 4)
        float64, geometry of its pixels; weights (3,) float64, by which channels count alike; nodes
        (count, RECORD) float32, level 1 first, each level as two squares side by side in Z order: the
        quarters of node p are 4 p .. 4 p + 3 one level down; offsets (levels + 2,) int64, where level
        l >= 1 starts; block, the pixels along an edge of a level-1 node; base.
    base : (3,) float32, the smallest radiance of each channel: the nodes hold what is above it.
    mean : (3,) float64, mean radiance over the sphere, with the base.
    """

    tree: tuple
    base: np.ndarray
    mean: np.ndarray


def build_pyramid(panorama, yaw=0.0):
    """Gathers the panorama's flux upward.

    panorama : (H, 2 H, 3) float32, radiance, finite and not negative.
    yaw : rad; positive turns what lay at +z towards +x.
    """
    panorama = _cut_finely(np.asarray(panorama, dtype=np.float32))
    height, width, _ = panorama.shape
    block = max(2, 1 << (max(1, width // _BLOCKS_ACROSS) - 1).bit_length())
    across = 1 << (-(-max(height, -(-width // 2)) // block) - 1).bit_length()
    levels = across.bit_length()
    counts = [2 * (across >> level) ** 2 for level in range(levels)]
    offsets = np.concatenate([[0, 0], np.cumsum(counts, dtype=np.int64)]).astype(np.int64)
    rows, columns = row_geometry(height, width), column_geometry(width, yaw)
    base = _smallest_radiance(panorama).min(axis=0)
    flux = _row_fluxes(panorama, base, rows).sum(axis=0)
    weights = np.divide(4 * np.pi, flux, out=np.zeros(3), where=flux > 0)
    nodes = np.zeros((int(offsets[-1]), RECORD), np.float32)
    tree = (panorama, rows, columns, weights, nodes, offsets, block, base)
    gather_blocks(tree)
    for level in range(2, levels + 1):
        _gather_level(nodes, offsets[level - 1], offsets[level], offsets[level + 1], weights)
    return Pyramid(tree, base, base + flux / (4 * np.pi))


def _cut_finely(panorama):
    """The same sky in smaller pixels, where it is small: stored nodes cost less than parts of pixels, which
    are made anew for each texel that comes as near."""
    if panorama.shape[1] < _SMALL:
        panorama = panorama.repeat(2, axis=0).repeat(2, axis=1)
    return np.ascontiguousarray(panorama)


@parallel
def _smallest_radiance(panorama):
    """Of every row of pixels, (H, 3) float32."""
    height, width, _ = panorama.shape
    smallest = np.empty((height, 3), np.float32)
    for j in numba.prange(height):
        red, green, blue = panorama[j, 0, 0], panorama[j, 0, 1], panorama[j, 0, 2]
        for i in range(width):
            red = min(red, panorama[j, i, 0])
            green = min(green, panorama[j, i, 1])
            blue = min(blue, panorama[j, i, 2])
        smallest[j, 0], smallest[j, 1], smallest[j, 2] = red, green, blue
    return smallest


@parallel
def _row_fluxes(panorama, base, rows):
    """Flux above the base of every row of pixels, (H, 3) float64."""
    height, width, _ = panorama.shape
    fluxes = np.zeros((height, 3))
    for j in numba.prange(height):
        red, green, blue = 0.0, 0.0, 0.0
        for i in range(width):
            red += panorama[j, i, 0] - base[0]
            green += panorama[j, i, 1] - base[1]
            blue += panorama[j, i, 2] - base[2]
        fluxes[j, 0] = red * rows[j, SOLID_ANGLE]
        fluxes[j, 1] = green * rows[j, SOLID_ANGLE]
        fluxes[j, 2] = blue * rows[j, SOLID_ANGLE]
    return fluxes


@parallel
def _gather_level(nodes, below, first, last, weights):
    batch = 64
    for line in numba.prange((last - first + batch - 1) // batch):
        for p in range(np.int64(line) * batch, min(last - first, np.int64(line) * batch + batch)):
            children = nodes[below + 4 * p : below + 4 * p + 4]
            _join(children, weights, nodes[first + p])


@formula
def _join(children, weights, node):
    """Moments of four children about their common mean (parallel-axis theorem, to fourth order), into a
    record of zeros."""
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
        _add_moments(children[k], share, dx, dy, dz, node)
    for c in range(3):
        _join_channel(children, mx, my, mz, c, node)
    sum_up(node)


@formula
def _share(children, weights, k):
    """A child's weight in the common mean: its flux, all channels alike."""
    red, green, blue = children[k, FLUX], children[k, FLUX + 1], children[k, FLUX + 2]
    return weights[0] * red + weights[1] * green + weights[2] * blue


@formula
def _add_moments(child, share, dx, dy, dz, node):
    """Adds a child that stands off the common mean by (dx, dy, dz)."""
    square = dx * dx + dy * dy + dz * dz
    if share > 0.0:
        node[RADIUS] = max(node[RADIUS], np.float32(math.sqrt(square)) + child[RADIUS])
    spread = np.float64(child[SPREAD])
    xx, yy, zz = child[COVARIANCE], child[COVARIANCE + 1], child[COVARIANCE + 2]
    xy, xz, yz = child[COVARIANCE + 3], child[COVARIANCE + 4], child[COVARIANCE + 5]
    cx, cy, cz = xx * dx + xy * dy + xz * dz, xy * dx + yy * dy + yz * dz, xz * dx + yz * dy + zz * dz
    along = child[LOPSIDED] * dx + child[LOPSIDED + 1] * dy + child[LOPSIDED + 2] * dz
    across = cx * dx + cy * dy + cz * dz
    pull = spread + square
    node[SPREAD] += share * pull
    node[FOURTH] += share * (child[FOURTH] + 4 * (along + across) + (2 * spread + square) * square)
    node[LOPSIDED] += share * (child[LOPSIDED] + pull * dx + 2 * cx)
    node[LOPSIDED + 1] += share * (child[LOPSIDED + 1] + pull * dy + 2 * cy)
    node[LOPSIDED + 2] += share * (child[LOPSIDED + 2] + pull * dz + 2 * cz)
    node[COVARIANCE] += share * (xx + dx * dx)
    node[COVARIANCE + 1] += share * (yy + dy * dy)
    node[COVARIANCE + 2] += share * (zz + dz * dz)
    node[COVARIANCE + 3] += share * (xy + dx * dy)
    node[COVARIANCE + 4] += share * (xz + dx * dz)
    node[COVARIANCE + 5] += share * (yz + dy * dz)


@formula
def _join_channel(children, mx, my, mz, c, node):
    """One channel's own flux and mean direction."""
    at = COLOUR_SHIFT + 3 * c
    flux, sx, sy, sz = 0.0, 0.0, 0.0, 0.0
    for k in range(4):
        f = np.float64(children[k, FLUX + c])
        flux += f
        sx += f * (children[k, MEAN] - mx + children[k, at])
        sy += f * (children[k, MEAN + 1] - my + children[k, at + 1])
        sz += f * (children[k, MEAN + 2] - mz + children[k, at + 2])
    if flux > 0.0:
        set_channel(node, c, flux, sx / flux, sy / flux, sz / flux)
