"""Nodes that the pyramid does not store, made when they are asked for: small blocks of pixels, pixels, parts.

Each pixel and each part of one is a patch of constant radiance. Fields of a record: `node_record`.
"""

import math

import numpy as np

from skykiln.jit import formula
from skykiln.light.node_record import (
    COVARIANCE,
    FLUX,
    FOURTH,
    LOPSIDED,
    MEAN,
    RADIUS,
    SPREAD,
    set_channel,
    sum_up,
)
from skykiln.light.pixel_geometry import (
    COS,
    COS_LONGITUDE,
    EXTENT,
    MEAN_COS,
    MEAN_SIN,
    RHO,
    SIN,
    SIN_LONGITUDE,
    SOLID_ANGLE,
    VAR_LATITUDE,
    VAR_LONGITUDE,
    Y,
    set_band,
)


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
    """The record of a cell: a block of pixels, a pixel, or a part of one.

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
        set_band((2 * j + 1) * half, half, half_width, band)
        turn = (2.0 * (i - column * parts) + 1.0 - parts) * half_width  # from the column's middle
        sin_t, cos_t = math.sin(turn), math.cos(turn)
        sine = columns[column, SIN_LONGITUDE] * cos_t - columns[column, COS_LONGITUDE] * sin_t
        cosine = columns[column, COS_LONGITUDE] * cos_t + columns[column, SIN_LONGITUDE] * sin_t
        _set_patch(panorama[row, column], base, band, sine, cosine, math.sin(half_width) / half_width, node)


@formula
def _set_patch(radiance, base, band, sine, cosine, mean, node):
    """The record of one patch of constant radiance at a longitude; `mean` is how much its width shortens
    the mean sine and cosine of longitude."""
    mx, my, mz = band[RHO] * mean * sine, band[Y], band[RHO] * mean * cosine
    node[MEAN], node[MEAN + 1], node[MEAN + 2] = mx, my, mz
    for c in range(3):
        node[FLUX + c] = (radiance[c] - base[c]) * band[SOLID_ANGLE]
    up, along = band[VAR_LATITUDE], band[VAR_LONGITUDE]
    ux, uy, uz = -band[COS] * sine, band[SIN], -band[COS] * cosine  # towards the upper pole
    spread = up + along
    bent = 0.1 * spread * spread  # along the radius: (mean |d|^4 - (mean |d|^2)^2)/4
    node[COVARIANCE] = up * ux * ux + along * cosine * cosine + bent * mx * mx
    node[COVARIANCE + 1] = up * uy * uy + bent * my * my
    node[COVARIANCE + 2] = up * uz * uz + along * sine * sine + bent * mz * mz
    node[COVARIANCE + 3] = up * ux * uy + bent * mx * my
    node[COVARIANCE + 4] = up * ux * uz - along * sine * cosine + bent * mx * mz
    node[COVARIANCE + 5] = up * uy * uz + bent * my * mz
    node[SPREAD] = spread
    node[RADIUS] = band[EXTENT]
    node[FOURTH] = 1.8 * (up * up + along * along) + 2.0 * up * along  # of an even rectangle
    sum_up(node)


@formula
def _add_pixels(tree, row0, row1, column0, column1, node):
    """Moments of a block of pixels: summed about the block's first pixel, then moved to their mean."""
    panorama, rows, columns, weights, base = tree[0], tree[1], tree[2], tree[3], tree[7]
    rho, ry = rows[row0, RHO], rows[row0, Y]
    rx, rz = rho * columns[column0, MEAN_SIN], rho * columns[column0, MEAN_COS]
    total, s2, s4 = 0.0, 0.0, 0.0
    x1, y1, z1, tx, ty, tz = 0.0, 0.0, 0.0, 0.0, 0.0, 0.0
    xx, yy, zz, xy, xz, yz = 0.0, 0.0, 0.0, 0.0, 0.0, 0.0
    red, red_x, red_y, red_z = 0.0, 0.0, 0.0, 0.0
    green, green_x, green_y, green_z = 0.0, 0.0, 0.0, 0.0
    blue, blue_x, blue_y, blue_z = 0.0, 0.0, 0.0, 0.0
    for j in range(row0, row1):
        area, rho, y = rows[j, SOLID_ANGLE], rows[j, RHO], rows[j, Y] - ry
        up, along = rows[j, VAR_LATITUDE], rows[j, VAR_LONGITUDE]
        own, cos_j, sin_j = up + along, rows[j, COS], rows[j, SIN]
        for i in range(column0, column1):
            x, z = rho * columns[i, MEAN_SIN] - rx, rho * columns[i, MEAN_COS] - rz
            sine, cosine = columns[i, SIN_LONGITUDE], columns[i, COS_LONGITUDE]
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
        set_channel(node, 0, red, red_x / red - x1, red_y / red - y1, red_z / red - z1)
    if green > 0.0:
        set_channel(node, 1, green, green_x / green - x1, green_y / green - y1, green_z / green - z1)
    if blue > 0.0:
        set_channel(node, 2, blue, blue_x / blue - x1, blue_y / blue - y1, blue_z / blue - z1)
    middle = (rx + x1, ry + y1, rz + z1)
    node[RADIUS] = _reach(panorama, base, rows, columns, row0, row1, column0, column1, middle)
    sum_up(node)


@formula
def _reach(panorama, base, rows, columns, row0, row1, column0, column1, middle):
    """The largest distance of any lit pixel's edge from a direction."""
    mx, my, mz = middle
    largest = 0.0
    for j in range(row0, row1):
        rho, y = rows[j, RHO], rows[j, Y] - my
        for i in range(column0, column1):
            red, green, blue = panorama[j, i, 0], panorama[j, i, 1], panorama[j, i, 2]
            if red > base[0] or green > base[1] or blue > base[2]:
                x, z = rho * columns[i, MEAN_SIN] - mx, rho * columns[i, MEAN_COS] - mz
                largest = max(largest, math.sqrt(x * x + y * y + z * z) + rows[j, EXTENT])
    return largest
