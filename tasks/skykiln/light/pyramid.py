"""The node pyramid: a panorama's flux, gathered over blocks of pixels that double up to half the sphere.

A node stands for all its pixels in a sum over the sphere. It keeps their flux and the moments of their
directions about the mean direction, so that a smooth kernel can be summed over it (`lobe_sums`), and
the size of what is then left out. A mean direction is not normalised: n . m is the mean of n . l.
A pixel is a patch of constant radiance, with its own exact mean direction and its spread. What all pixels
have in common, the smallest radiance of each channel, stays out: a filter leaves a constant as it is.

Colours apart inside a node (a red lamp beside a blue one) have different mean directions: each
channel's own mean is kept beside the common one.

Blocks of `block` pixels and larger ones are stored; smaller ones, pixels and parts of pixels are made
when they are needed, by `cell_moments`. Conventions: `directions`.
"""

import math
from typing import NamedTuple

import numba
import numpy as np

from skykiln.jit import formula, parallel, serial

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
SLIM = 13  # how much more a node's error counts beside a pole, where cells are slivers side by side
COVARIANCE = 14  # 6: xx, yy, zz, xy, xz, yz of d
COLOUR_SHIFT = 20  # 9: each channel's mean direction minus MEAN
LOPSIDED = 29  # 3: mean of |d|^2 d
RECORD = 32

# What is the same for all pixels of a row, or of a column.
_SOLID_ANGLE, _RHO, _Y, _VAR_LATITUDE, _VAR_LONGITUDE, _EXTENT, _COS, _SIN = range(8)
_MEAN_SIN, _MEAN_COS, _SIN_LONGITUDE, _COS_LONGITUDE = range(4)

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
    panorama = np.ascontiguousarray(panorama, dtype=np.float32)
    height, width, _ = panorama.shape
    block = max(2, 1 << (max(1, width // _BLOCKS_ACROSS) - 1).bit_length())
    across = 1 << (-(-max(height, -(-width // 2)) // block) - 1).bit_length()
    levels = across.bit_length()
    counts = [2 * (across >> level) ** 2 for level in range(levels)]
    offsets = np.concatenate([[0, 0], np.cumsum(counts, dtype=np.int64)]).astype(np.int64)
    rows, columns = _row_geometry(height, width), _column_geometry(width, yaw)
    base = _smallest_radiance(panorama).min(axis=0)
    flux = _row_fluxes(panorama, base, rows).sum(axis=0)
    weights = np.divide(4 * np.pi, flux, out=np.zeros(3), where=flux > 0)
    nodes = np.zeros((int(offsets[-1]), RECORD), np.float32)
    tree = (panorama, rows, columns, weights, nodes, offsets, block, base)
    _gather_pixels(tree)
    for level in range(2, levels + 1):
        _gather_level(nodes, offsets[level - 1], offsets[level], offsets[level + 1], weights)
    return Pyramid(tree, base, base + flux / (4 * np.pi))


def _column_geometry(width, yaw):
    """(W, 4): mean sine and cosine of the longitudes in each column, and those of its middle."""
    longitude = np.pi - 2 * np.pi * (np.arange(width) + 0.5) / width + yaw
    mean = np.sinc(1 / width)
    middle = np.stack([np.sin(longitude), np.cos(longitude)], axis=1)
    return np.concatenate([mean * middle, middle], axis=1)


@serial
def _row_geometry(height, width):
    rows = np.empty((height, 8))
    for j in range(height):
        angle = math.pi * (j + 0.5) / height
        _set_band(angle, math.pi / (2 * height), math.pi / width, rows[j])
    return rows


@formula
def _set_band(angle, half, half_width, row):
    """Geometry of patches around a polar angle, `half` high to either side and `half_width` wide.

    Solid angle, mean of the sine of the polar angle (its mean over longitudes is apart) and of its
    cosine, each weighted by the sine: 4 w sin sin(h), (2 h sin^2 + cos(2 t) (2 h - sin 2 h)/2) /
    (2 sin sin h), cos cos(h); variances along latitude and longitude; largest distance from the mean.
    """
    sine, cosine = math.sin(angle), math.cos(angle)
    # 2 h - sin 2 h loses its digits where h is small.
    h2 = half * half
    bend = 2 * half - math.sin(2 * half)
    if half < 0.05:
        bend = h2 * half * (4 / 3 - h2 * (4 / 15 - h2 * 8 / 315))
    row[_SOLID_ANGLE] = 4.0 * half_width * sine * math.sin(half)
    row[_RHO] = (2 * half * sine * sine + math.cos(2 * angle) * bend / 2) / (2 * sine * math.sin(half))
    row[_Y] = cosine * math.cos(half)
    row[_VAR_LONGITUDE] = row[_RHO] * row[_RHO] * half_width * half_width / 3
    shortened = row[_RHO] * math.sin(half_width) / half_width
    spread = 1.0 - shortened * shortened - row[_Y] * row[_Y]  # no digits are left in small parts
    row[_VAR_LATITUDE] = h2 / 3 if half < 1e-4 else max(0.0, spread - row[_VAR_LONGITUDE])
    widest = max(math.sin(angle - half), math.sin(angle + half), sine)
    row[_EXTENT] = 4 / 3 * half + widest * half_width  # beside a pole the mean is 4/3 half from it
    row[_COS], row[_SIN] = cosine, sine


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
        fluxes[j, 0] = red * rows[j, _SOLID_ANGLE]
        fluxes[j, 1] = green * rows[j, _SOLID_ANGLE]
        fluxes[j, 2] = blue * rows[j, _SOLID_ANGLE]
    return fluxes


@parallel
def _gather_pixels(tree):
    """Level 1: blocks of block x block pixels."""
    nodes, offsets = tree[4], tree[5]
    count, batch = offsets[2], 32
    for line in numba.prange((count + batch - 1) // batch):
        for p in range(np.int64(line) * batch, min(count, np.int64(line) * batch + batch)):
            cell_moments(tree, 1, p, nodes[p])


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
    _sum_up(node)


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
        _set_channel(node, c, flux, sx / flux, sy / flux, sz / flux)


@formula
def _set_channel(node, c, flux, sx, sy, sz):
    """A channel's flux and the shift of its mean direction; its spread follows from 1 - |mean|^2."""
    at = COLOUR_SHIFT + 3 * c
    node[FLUX + c] = flux
    node[at], node[at + 1], node[at + 2] = sx, sy, sz
    square = sx * sx + sy * sy + sz * sz
    node[SHIFT] = max(node[SHIFT], np.float32(math.sqrt(square)))
    gap = abs(2.0 * (sx * node[MEAN] + sy * node[MEAN + 1] + sz * node[MEAN + 2]) + square)
    node[SPREAD_GAP] = max(node[SPREAD_GAP], np.float32(gap))


@formula
def _sum_up(node):
    """What the moments leave open, in factors calibrated by the error tests; and how much more often a
    sliver's error counts: cells of a latitude-longitude grid stand the closer the nearer to a pole."""
    spread = node[SPREAD]
    deviation = math.sqrt(spread)
    skew = math.sqrt(node[LOPSIDED] ** 2 + node[LOPSIDED + 1] ** 2 + node[LOPSIDED + 2] ** 2)
    from_axis = math.sqrt(node[MEAN] ** 2 + node[MEAN + 2] ** 2)
    node[SLIM] = 1.0 / max(from_axis * from_axis, 1e-12)
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
def cell_moments(tree, level, p, node):
    """The record of a cell that is not stored, or not yet: a block of pixels, a pixel, or a part of one.

    Level 1 is a block of `block` pixels, each level below halves it; p counts cells in Z order.
    """
    panorama, _, columns, _, _, offsets, block, base = tree
    height, width, _ = panorama.shape
    node[:] = 0.0
    squared = (offsets[2] // 2) << (2 - 2 * level)
    square = p // squared
    z = p - square * squared
    j, i = every_other_bit(z >> 1), every_other_bit(z)
    i += square * every_other_bit(squared - 1) + square
    side = block >> (1 - level)
    if side >= 1:
        last_row, last_column = min(height, (j + 1) * side), min(width, (i + 1) * side)
        if j * side < last_row and i * side < last_column:
            _add_pixels(tree, j * side, last_row, i * side, last_column, node)
        return
    parts = (1 << (1 - level)) // block
    row, column = j // parts, i // parts
    if row < height and column < width:
        band = np.empty(8)
        half = math.pi / (2 * height * parts)
        half_width = math.pi / (width * parts)
        _set_band((2 * j + 1) * half, half, half_width, band)
        turn = (2.0 * (i - column * parts) + 1.0 - parts) * half_width  # from the column's middle
        sin_t, cos_t = math.sin(turn), math.cos(turn)
        sine = columns[column, _SIN_LONGITUDE] * cos_t - columns[column, _COS_LONGITUDE] * sin_t
        cosine = columns[column, _COS_LONGITUDE] * cos_t + columns[column, _SIN_LONGITUDE] * sin_t
        _set_patch(panorama[row, column], base, band, sine, cosine, math.sin(half_width) / half_width, node)


@formula
def _set_patch(radiance, base, band, sine, cosine, mean, node):
    """The record of one patch of constant radiance at a longitude; `mean` is how much its width shortens
    the mean sine and cosine of longitude."""
    mx, my, mz = band[_RHO] * mean * sine, band[_Y], band[_RHO] * mean * cosine
    node[MEAN], node[MEAN + 1], node[MEAN + 2] = mx, my, mz
    for c in range(3):
        node[FLUX + c] = (radiance[c] - base[c]) * band[_SOLID_ANGLE]
    up, along = band[_VAR_LATITUDE], band[_VAR_LONGITUDE]
    ux, uy, uz = -band[_COS] * sine, band[_SIN], -band[_COS] * cosine  # towards the upper pole
    spread = up + along
    bent = 0.1 * spread * spread  # along the radius: (mean |d|^4 - (mean |d|^2)^2)/4
    node[COVARIANCE] = up * ux * ux + along * cosine * cosine + bent * mx * mx
    node[COVARIANCE + 1] = up * uy * uy + bent * my * my
    node[COVARIANCE + 2] = up * uz * uz + along * sine * sine + bent * mz * mz
    node[COVARIANCE + 3] = up * ux * uy + bent * mx * my
    node[COVARIANCE + 4] = up * ux * uz - along * sine * cosine + bent * mx * mz
    node[COVARIANCE + 5] = up * uy * uz + bent * my * mz
    node[SPREAD] = spread
    node[RADIUS] = band[_EXTENT]
    node[FOURTH] = 1.8 * (up * up + along * along) + 2.0 * up * along  # of an even rectangle
    _sum_up(node)


@formula
def _add_pixels(tree, row0, row1, column0, column1, node):
    """Moments of a block of pixels: summed about the block's first pixel, then moved to their mean."""
    panorama, rows, columns, weights, base = tree[0], tree[1], tree[2], tree[3], tree[7]
    rho, ry = rows[row0, _RHO], rows[row0, _Y]
    rx, rz = rho * columns[column0, _MEAN_SIN], rho * columns[column0, _MEAN_COS]
    total, s2, s4 = 0.0, 0.0, 0.0
    x1, y1, z1, tx, ty, tz = 0.0, 0.0, 0.0, 0.0, 0.0, 0.0
    xx, yy, zz, xy, xz, yz = 0.0, 0.0, 0.0, 0.0, 0.0, 0.0
    red, red_x, red_y, red_z = 0.0, 0.0, 0.0, 0.0
    green, green_x, green_y, green_z = 0.0, 0.0, 0.0, 0.0
    blue, blue_x, blue_y, blue_z = 0.0, 0.0, 0.0, 0.0
    for j in range(row0, row1):
        area, rho, y = rows[j, _SOLID_ANGLE], rows[j, _RHO], rows[j, _Y] - ry
        up, along = rows[j, _VAR_LATITUDE], rows[j, _VAR_LONGITUDE]
        own, cos_j, sin_j = up + along, rows[j, _COS], rows[j, _SIN]
        for i in range(column0, column1):
            x, z = rho * columns[i, _MEAN_SIN] - rx, rho * columns[i, _MEAN_COS] - rz
            sine, cosine = columns[i, _SIN_LONGITUDE], columns[i, _COS_LONGITUDE]
            f, g, h = panorama[j, i, 0] - base[0], panorama[j, i, 1] - base[1], panorama[j, i, 2] - base[2]
            f, g, h = f * area, g * area, h * area
            w = weights[0] * f + weights[1] * g + weights[2] * h
            square = x * x + y * y + z * z
            ux, uz = -cos_j * sine, -cos_j * cosine
            du, de = ux * x + sin_j * y + uz * z, cosine * x - sine * z
            ax, ay = up * du * ux + along * de * cosine, up * du * sin_j
            az = up * du * uz - along * de * sine
            total += w
            x1, y1, z1 = x1 + w * x, y1 + w * y, z1 + w * z
            s2 += w * (square + own)
            s4 += w * (
                square * (square + 2.0 * own) + 4.0 * (up * du * du + along * de * de)
                + 1.8 * own * own - 1.6 * up * along
            )  # fmt: skip
            tx += w * ((square + own) * x + 2.0 * ax)
            ty += w * ((square + own) * y + 2.0 * ay)
            tz += w * ((square + own) * z + 2.0 * az)
            xx += w * (x * x + up * ux * ux + along * cosine * cosine)
            yy += w * (y * y + up * sin_j * sin_j)
            zz += w * (z * z + up * uz * uz + along * sine * sine)
            xy += w * (x * y + up * ux * sin_j)
            xz += w * (x * z + up * ux * uz - along * sine * cosine)
            yz += w * (y * z + up * sin_j * uz)
            red, red_x, red_y, red_z = red + f, red_x + f * x, red_y + f * y, red_z + f * z
            green, green_x, green_y, green_z = green + g, green_x + g * x, green_y + g * y, green_z + g * z
            blue, blue_x, blue_y, blue_z = blue + h, blue_x + h * x, blue_y + h * y, blue_z + h * z
    if total <= 0.0:
        return
    x1, y1, z1, s2, s4 = x1 / total, y1 / total, z1 / total, s2 / total, s4 / total
    tx, ty, tz = tx / total, ty / total, tz / total
    xx, yy, zz, xy, xz, yz = xx / total, yy / total, zz / total, xy / total, xz / total, yz / total
    mx, my, mz = xx * x1 + xy * y1 + xz * z1, xy * x1 + yy * y1 + yz * z1, xz * x1 + yz * y1 + zz * z1
    m2 = x1 * x1 + y1 * y1 + z1 * z1
    node[MEAN], node[MEAN + 1], node[MEAN + 2] = rx + x1, ry + y1, rz + z1
    node[SPREAD] = s2 - m2
    node[LOPSIDED] = tx - s2 * x1 - 2.0 * mx + 2.0 * m2 * x1
    node[LOPSIDED + 1] = ty - s2 * y1 - 2.0 * my + 2.0 * m2 * y1
    node[LOPSIDED + 2] = tz - s2 * z1 - 2.0 * mz + 2.0 * m2 * z1
    node[FOURTH] = max(
        (s2 - m2) * (s2 - m2),
        s4 - 4.0 * (tx * x1 + ty * y1 + tz * z1) + 4.0 * (x1 * mx + y1 * my + z1 * mz)
        + 2.0 * s2 * m2 - 3.0 * m2 * m2,
    )  # fmt: skip
    node[COVARIANCE], node[COVARIANCE + 1], node[COVARIANCE + 2] = xx - x1 * x1, yy - y1 * y1, zz - z1 * z1
    node[COVARIANCE + 3], node[COVARIANCE + 4] = xy - x1 * y1, xz - x1 * z1
    node[COVARIANCE + 5] = yz - y1 * z1
    if red > 0.0:
        _set_channel(node, 0, red, red_x / red - x1, red_y / red - y1, red_z / red - z1)
    if green > 0.0:
        _set_channel(node, 1, green, green_x / green - x1, green_y / green - y1, green_z / green - z1)
    if blue > 0.0:
        _set_channel(node, 2, blue, blue_x / blue - x1, blue_y / blue - y1, blue_z / blue - z1)
    middle = (rx + x1, ry + y1, rz + z1)
    node[RADIUS] = _reach(panorama, base, rows, columns, row0, row1, column0, column1, middle)
    _sum_up(node)


@formula
def _reach(panorama, base, rows, columns, row0, row1, column0, column1, middle):
    """The largest distance of any lit pixel's edge from a direction."""
    mx, my, mz = middle
    largest = 0.0
    for j in range(row0, row1):
        rho, y = rows[j, _RHO], rows[j, _Y] - my
        for i in range(column0, column1):
            red, green, blue = panorama[j, i, 0], panorama[j, i, 1], panorama[j, i, 2]
            if red > base[0] or green > base[1] or blue > base[2]:
                x, z = rho * columns[i, _MEAN_SIN] - mx, rho * columns[i, _MEAN_COS] - mz
                largest = max(largest, math.sqrt(x * x + y * y + z * z) + rows[j, _EXTENT])
    return largest
