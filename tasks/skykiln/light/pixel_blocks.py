"""The moments of all blocks of block x block pixels, the pyramid's first stored level, many at a time.

Blocks of one row of blocks are alike but for a turn about the vertical and for their pixels' radiance. Their
moments are summed in the frame of their first pixel's longitude, where a pixel's share of each moment is a
number that all blocks of the row have in common, and turned to the world at the end. The loops run over a
strip of blocks without branches, so that they vectorise (measured: a third of the time of one block after
another). Fields of a record, and what they mean: `pyramid`, `node_record`.
"""

import math

import numba
import numpy as np

from skykiln.jit import formula, parallel
from skykiln.light.node_record import (
    COLOUR_SHIFT,
    COVARIANCE,
    FLUX,
    FOURTH,
    KINK,
    LOPSIDED,
    MEAN,
    RADIUS,
    RECORD,
    SHIFT,
    SLIM,
    SPREAD,
    SPREAD_GAP,
    THIRD,
    kink_of,
    third_of,
)
from skykiln.light.pixel_geometry import (
    COS,
    COS_LONGITUDE,
    EXTENT,
    RHO,
    SIN,
    SIN_LONGITUDE,
    SOLID_ANGLE,
    VAR_LATITUDE,
    VAR_LONGITUDE,
    Y,
)

_STRIP = 64  # blocks at a time
# A pixel's share of the moments per unit of flux: offset 3, spread, fourth, lopsided 3, covariance 6.
_SPREAD, _FOURTH, _LOPSIDED, _COVARIANCE, _SHAPE = 3, 4, 5, 8, 14
# The sums of a strip: flux and first moments of red (0 - 3), of green (4 - 7), of blue (8 - 11); then, all
# channels weighted alike, spread (12), fourth (13), lopsided (14 - 16), covariance (17 - 22).
_SUMS = 23


@parallel
def gather_blocks(tree):
    """Fills the records of level 1 of a tree (`pyramid`), whose nodes hold zeros."""
    panorama, block, offsets = tree[0], tree[6], tree[5]
    height, width, _ = panorama.shape
    across = math.sqrt(offsets[2] / 2)
    across = np.int64(across + 0.5)
    strip = min(_STRIP, across)
    strips = 2 * across // strip
    for line in numba.prange(across * strips):
        j, i = np.int64(line) // strips, np.int64(line) % strips * strip
        if j * block < height and i * block < width:
            _gather_strip(tree, j, i, strip, across)


@formula
def _gather_strip(tree, j, i, strip, across):
    """Blocks (j, i) .. (j, i + strip - 1)."""
    panorama, rows, columns, weights, nodes, _, block, base = tree
    count = block * block
    shapes, extents = np.empty((count, _SHAPE)), np.empty(count, np.float32)
    ry, rz = _pixel_shapes(rows, panorama.shape[1], j * block, block, shapes, extents)
    fluxes = np.zeros((count, 3, _STRIP), np.float32)
    _pixel_fluxes(panorama, rows, base, j * block, i * block, block, strip, fluxes)
    sums = np.zeros((_SUMS, _STRIP), np.float32)
    for p in range(count):
        _add_pixel(fluxes[p], shapes[p], weights, sums)
    records = np.zeros((RECORD, _STRIP), np.float32)
    turns = np.zeros((2, _STRIP), np.float32)
    for e in range(strip):
        column = min((i + e) * block, panorama.shape[1] - 1)
        turns[0, e], turns[1, e] = columns[column, SIN_LONGITUDE], columns[column, COS_LONGITUDE]
    _centre(sums, weights, records)
    _set_radius(fluxes, shapes, extents, records)
    _set_channels(sums, ry, rz, records)
    _turn(turns, ry, rz, records)
    square = i // across
    first, row = square * across * across, 2 * spread_bits(j)
    for e in range(strip):
        if records[FLUX, e] + records[FLUX + 1, e] + records[FLUX + 2, e] > 0.0:
            node = nodes[first + row + spread_bits(i + e - square * across)]
            for k in range(RECORD):
                node[k] = records[k, e]


@formula
def spread_bits(i):
    """The bits of a number moved to the even places of a Z-order index."""
    i = (i | (i << 16)) & 0x0000FFFF0000FFFF
    i = (i | (i << 8)) & 0x00FF00FF00FF00FF
    i = (i | (i << 4)) & 0x0F0F0F0F0F0F0F0F
    i = (i | (i << 2)) & 0x3333333333333333
    return (i | (i << 1)) & 0x5555555555555555


@formula
def _pixel_shapes(rows, width, row0, block, shapes, extents):
    """Shares of each pixel of a block, at its first pixel's longitude, of moments about the mean direction of
    that pixel, (0, y, z). Returns y and z."""
    mean = math.sin(math.pi / width) / (math.pi / width)
    ry, rz = rows[row0, Y], rows[row0, RHO] * mean
    for p in range(block * block):
        row = rows[min(row0 + p // block, rows.shape[0] - 1)]
        angle = -2.0 * math.pi * (p % block) / width
        sine, cosine = math.sin(angle), math.cos(angle)
        x, y, z = row[RHO] * mean * sine, row[Y] - ry, row[RHO] * mean * cosine - rz
        up, along = row[VAR_LATITUDE], row[VAR_LONGITUDE]
        own, square = up + along, x * x + y * y + z * z
        ux, uy, uz = -row[COS] * sine, row[SIN], -row[COS] * cosine  # towards the upper pole
        du, de = ux * x + uy * y + uz * z, cosine * x - sine * z
        shape = shapes[p]
        shape[0], shape[1], shape[2] = x, y, z
        shape[_SPREAD] = square + own
        shape[_FOURTH] = square * (square + 2.0 * own) + 4.0 * (up * du * du + along * de * de)
        shape[_FOURTH] += 1.8 * own * own - 1.6 * up * along
        shape[_LOPSIDED] = (square + own) * x + 2.0 * (up * du * ux + along * de * cosine)
        shape[_LOPSIDED + 1] = (square + own) * y + 2.0 * up * du * uy
        shape[_LOPSIDED + 2] = (square + own) * z + 2.0 * (up * du * uz - along * de * sine)
        shape[_COVARIANCE] = x * x + up * ux * ux + along * cosine * cosine
        shape[_COVARIANCE + 1] = y * y + up * uy * uy
        shape[_COVARIANCE + 2] = z * z + up * uz * uz + along * sine * sine
        shape[_COVARIANCE + 3] = x * y + up * ux * uy
        shape[_COVARIANCE + 4] = x * z + up * ux * uz - along * sine * cosine
        shape[_COVARIANCE + 5] = y * z + up * uy * uz
        extents[p] = row[EXTENT]
    return ry, rz


@formula
def _pixel_fluxes(panorama, rows, base, row0, column0, block, strip, fluxes):
    """Flux above the base of each pixel of a strip's blocks; pixels beyond the panorama have none."""
    height, width, _ = panorama.shape
    for p in range(block * block):
        row, column = row0 + p // block, column0 + p % block
        if row < height and column < width:
            area = np.float32(rows[row, SOLID_ANGLE])
            for e in range(min(strip, (width - column + block - 1) // block)):
                for c in range(3):
                    fluxes[p, c, e] = (panorama[row, column + e * block, c] - base[c]) * area


@formula
def _add_pixel(flux, shape, weights, sums):
    """One pixel of every block of a strip."""
    x, y, z = np.float32(shape[0]), np.float32(shape[1]), np.float32(shape[2])
    red, green, blue = np.float32(weights[0]), np.float32(weights[1]), np.float32(weights[2])
    s2, s4, tx = np.float32(shape[3]), np.float32(shape[4]), np.float32(shape[5])
    ty, tz, xx = np.float32(shape[6]), np.float32(shape[7]), np.float32(shape[8])
    yy, zz, xy = np.float32(shape[9]), np.float32(shape[10]), np.float32(shape[11])
    xz, yz = np.float32(shape[12]), np.float32(shape[13])
    for e in range(_STRIP):
        f, g, h = flux[0, e], flux[1, e], flux[2, e]
        w = red * f + green * g + blue * h
        sums[0, e] += f
        sums[1, e] += f * x
        sums[2, e] += f * y
        sums[3, e] += f * z
        sums[4, e] += g
        sums[5, e] += g * x
        sums[6, e] += g * y
        sums[7, e] += g * z
        sums[8, e] += h
        sums[9, e] += h * x
        sums[10, e] += h * y
        sums[11, e] += h * z
        sums[12, e] += w * s2
        sums[13, e] += w * s4
        sums[14, e] += w * tx
        sums[15, e] += w * ty
        sums[16, e] += w * tz
        sums[17, e] += w * xx
        sums[18, e] += w * yy
        sums[19, e] += w * zz
        sums[20, e] += w * xy
        sums[21, e] += w * xz
        sums[22, e] += w * yz


@formula
def _centre(sums, weights, records):
    """From sums about the first pixel to moments about the blocks' means, which are put into MEAN as offsets
    from there (parallel-axis theorem, to fourth order)."""
    red, green, blue = np.float32(weights[0]), np.float32(weights[1]), np.float32(weights[2])
    one, two, three, four = np.float32(1.0), np.float32(2.0), np.float32(3.0), np.float32(4.0)
    for e in range(_STRIP):
        total = red * sums[0, e] + green * sums[4, e] + blue * sums[8, e]
        share = one / max(total, np.float32(1e-30))
        x = (red * sums[1, e] + green * sums[5, e] + blue * sums[9, e]) * share
        y = (red * sums[2, e] + green * sums[6, e] + blue * sums[10, e]) * share
        z = (red * sums[3, e] + green * sums[7, e] + blue * sums[11, e]) * share
        s2, s4 = sums[12, e] * share, sums[13, e] * share
        tx, ty, tz = sums[14, e] * share, sums[15, e] * share, sums[16, e] * share
        xx, yy, zz = sums[17, e] * share, sums[18, e] * share, sums[19, e] * share
        xy, xz, yz = sums[20, e] * share, sums[21, e] * share, sums[22, e] * share
        mx, my, mz = xx * x + xy * y + xz * z, xy * x + yy * y + yz * z, xz * x + yz * y + zz * z
        m2 = x * x + y * y + z * z
        spread = s2 - m2
        fourth = s4 - four * (tx * x + ty * y + tz * z) + four * (x * mx + y * my + z * mz)
        fourth += two * s2 * m2 - three * m2 * m2
        records[MEAN, e], records[MEAN + 1, e], records[MEAN + 2, e] = x, y, z
        records[SPREAD, e] = spread
        records[FOURTH, e] = max(spread * spread, fourth)
        records[LOPSIDED, e] = tx - s2 * x - two * mx + two * m2 * x
        records[LOPSIDED + 1, e] = ty - s2 * y - two * my + two * m2 * y
        records[LOPSIDED + 2, e] = tz - s2 * z - two * mz + two * m2 * z
        records[COVARIANCE, e] = xx - x * x
        records[COVARIANCE + 1, e] = yy - y * y
        records[COVARIANCE + 2, e] = zz - z * z
        records[COVARIANCE + 3, e] = xy - x * y
        records[COVARIANCE + 4, e] = xz - x * z
        records[COVARIANCE + 5, e] = yz - y * z


@formula
def _set_radius(fluxes, shapes, extents, records):
    """The largest distance of any lit pixel's edge from the mean."""
    for p in range(extents.shape[0]):
        x, y, z = np.float32(shapes[p, 0]), np.float32(shapes[p, 1]), np.float32(shapes[p, 2])
        for e in range(_STRIP):
            dx, dy, dz = x - records[MEAN, e], y - records[MEAN + 1, e], z - records[MEAN + 2, e]
            reach = math.sqrt(dx * dx + dy * dy + dz * dz) + extents[p]
            lit = fluxes[p, 0, e] + fluxes[p, 1, e] + fluxes[p, 2, e] > np.float32(0.0)
            records[RADIUS, e] = max(records[RADIUS, e], reach if lit else np.float32(0.0))


@formula
def _set_channels(sums, ry, rz, records):
    """Each channel's flux and the shift of its mean direction, and what follows of moments and shifts."""
    ry, rz, zero, tiny = np.float32(ry), np.float32(rz), np.float32(0.0), np.float32(1e-30)
    for c in range(3):
        k, at = 4 * c, COLOUR_SHIFT + 3 * c
        for e in range(_STRIP):
            flux = sums[k, e]
            share = np.float32(1.0) / max(flux, tiny)
            lit = flux > zero
            x = sums[k + 1, e] * share - records[MEAN, e] if lit else zero
            y = sums[k + 2, e] * share - records[MEAN + 1, e] if lit else zero
            z = sums[k + 3, e] * share - records[MEAN + 2, e] if lit else zero
            square = x * x + y * y + z * z
            toward = x * records[MEAN, e] + y * (ry + records[MEAN + 1, e]) + z * (rz + records[MEAN + 2, e])
            records[FLUX + c, e] = flux
            records[at, e], records[at + 1, e], records[at + 2, e] = x, y, z
            records[SHIFT, e] = max(records[SHIFT, e], math.sqrt(square))
            records[SPREAD_GAP, e] = max(records[SPREAD_GAP, e], abs(np.float32(2.0) * toward + square))
    for e in range(_STRIP):
        x, y, z = records[LOPSIDED, e], records[LOPSIDED + 1, e], records[LOPSIDED + 2, e]
        skew = math.sqrt(x * x + y * y + z * z)
        records[THIRD, e] = third_of(records[SPREAD, e], skew, records[SHIFT, e])
        records[KINK, e] = kink_of(records[SPREAD, e], skew)


@formula
def _turn(turns, ry, rz, records):
    """From the first pixel's longitude to the world: x' = x cos + z sin, z' = z cos - x sin."""
    ry, rz, two = np.float32(ry), np.float32(rz), np.float32(2.0)
    for e in range(_STRIP):
        s, c = turns[0, e], turns[1, e]
        x, z = records[MEAN, e], rz + records[MEAN + 2, e]
        records[SLIM, e] = np.float32(1.0) / max(x * x + z * z, np.float32(1e-12))
        records[MEAN, e], records[MEAN + 2, e] = x * c + z * s, z * c - x * s
        records[MEAN + 1, e] += ry
        xx, zz = records[COVARIANCE, e], records[COVARIANCE + 2, e]
        xy, xz, yz = records[COVARIANCE + 3, e], records[COVARIANCE + 4, e], records[COVARIANCE + 5, e]
        records[COVARIANCE, e] = xx * c * c + two * xz * c * s + zz * s * s
        records[COVARIANCE + 2, e] = xx * s * s - two * xz * c * s + zz * c * c
        records[COVARIANCE + 3, e] = xy * c + yz * s
        records[COVARIANCE + 4, e] = (zz - xx) * c * s + xz * (c * c - s * s)
        records[COVARIANCE + 5, e] = yz * c - xy * s
    for k in (COLOUR_SHIFT, COLOUR_SHIFT + 3, COLOUR_SHIFT + 6, LOPSIDED):
        for e in range(_STRIP):
            s, c = turns[0, e], turns[1, e]
            x, z = records[k, e], records[k + 2, e]
            records[k, e], records[k + 2, e] = x * c + z * s, z * c - x * s
