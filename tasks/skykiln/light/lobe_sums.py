"""The inner loops of the filter: a list of nodes summed for each texel of a tile, without branches.

With x = B/(B q + 2 a^2), q = 1 - c, the kernel is K = c/(B q + 2 a^2)^2. Over a node whose directions
have the covariance C about their mean m, c has the variance v = (n - m)^T C (n - m) + r c^2 (r, of the
sphere's bending, is the variance along m; n^T C n would lose its digits beside m), and with u = v x,
w = u x and s = mean |d|^2, to sixth order,

    mean of K = (c + u [2 + 3 c x + h (w (4 + 5 c x) - k s x c (3 + 4 c x))
                        + g w (w (6 + 7 c x) - k' s x c (5 + 6 c x))]) / (B q + 2 a^2)^2,

the Taylor series of K in c. The fourth moment of c is taken as h v^2 with one h for all directions,
h = 3 mean |d|^4 / ((tr C)^2 + 2 tr C^2) (3 for a normal distribution of any shape, 2.1 for an evenly
filled square, 1.8 for a line), the sixth as g v^3, g in proportion to h^3 and right for a square; the
third and fifth as those that come of the sphere's bending, k and k' those of a square. The skewness of a
node's own content is left out and bounded (`walk`). Where colours are apart, each channel's own mean
direction, m + o, adds K'(c) n.o, K' = (1 + 2 c x)/(B q + 2 a^2)^2.
"""

import math

import numpy as np

from skykiln.jit import formula
from skykiln.light.node_record import COLOUR_SHIFT, COVARIANCE, FLUX, FOURTH, MEAN, SPREAD

ENTRY = 25  # mean 3, spread, covariance 6, h, flux 3, flux times colour shift 9, g, r
_H, _FLUX, _SHIFT, _G, _R = 10, 11, 14, 23, 24
# Of an even square with unit variance along each edge, averaged over directions: mean |d|^2 is 2,
# mean |d|^4 5.6, mean |d|^6 18.51; so h = 2.1, g = 5/16 18.51.
_BEND_3 = 2.0 / 7.0  # k: 3/2 (5.6/2 - 2)/(2 h)
_BEND_5 = 0.592  # k': 5/2 (3/8 18.51 - 2 h)/(2 g)
_SIXTH = 0.6247  # g/h^3


@formula
def append(entries, filled, node, coloured):
    """Adds a node's entry to a list (ENTRY, capacity); returns the new length."""
    for x in range(3):
        entries[x, filled] = node[MEAN + x]
        entries[4 + x, filled] = node[COVARIANCE + x]
        entries[7 + x, filled] = np.float32(2.0) * node[COVARIANCE + 3 + x]
        entries[_FLUX + x, filled] = node[FLUX + x]
    spread = node[SPREAD]
    entries[3, filled] = spread
    squares, crossed = np.float32(0.0), np.float32(0.0)
    for x in range(3):
        squares += node[COVARIANCE + x] * node[COVARIANCE + x]
        crossed += node[COVARIANCE + 3 + x] * node[COVARIANCE + 3 + x]
    even = spread * spread + np.float32(2.0) * squares + np.float32(4.0) * crossed
    h = np.float32(3.0) * node[FOURTH] / max(even, np.float32(1e-36))
    entries[_H, filled] = h
    entries[_G, filled] = np.float32(_SIXTH) * h * h * h
    entries[_R, filled] = np.float32(0.25) * max(node[FOURTH] - spread * spread, np.float32(0.0))
    if coloured:
        for c in range(3):
            for x in range(3):
                entries[_SHIFT + 3 * c + x, filled] = node[FLUX + c] * node[COLOUR_SHIFT + 3 * c + x]
    return filled + 1


@formula
def sum_above(entries, filled, texels, b, a2, sums):
    """Adds the first `filled` entries, wholly above the horizon of every texel, to sums (texels, 3);
    b = 1 - alpha^2, a2 = 2 alpha^2."""
    b, a2, k3, k5 = np.float32(b), np.float32(a2), np.float32(_BEND_3), np.float32(_BEND_5)
    half, one, two, three = np.float32(0.5), np.float32(1.0), np.float32(2.0), np.float32(3.0)
    four, five, zero = np.float32(4.0), np.float32(5.0), np.float32(0.0)
    six, seven = np.float32(6.0), np.float32(7.0)
    for k in range(texels.shape[0]):
        nx, ny, nz = texels[k, 0], texels[k, 1], texels[k, 2]
        red, green, blue = zero, zero, zero
        for e in range(filled):
            dx, dy, dz = nx - entries[0, e], ny - entries[1, e], nz - entries[2, e]
            xx, yy, zz = dx * dx, dy * dy, dz * dz
            q = half * (xx + yy + zz + entries[3, e])
            c = one - q
            inverse = one / (b * q + a2)
            x = b * inverse
            cx = c * x
            v = (
                entries[4, e] * xx + entries[5, e] * yy + entries[6, e] * zz
                + entries[7, e] * dx * dy + entries[8, e] * dx * dz + entries[9, e] * dy * dz
                + entries[24, e] * c * c
            )  # fmt: skip
            u = v * x
            w = u * x
            bend = entries[3, e] * cx
            fourth = entries[10, e] * (w * (four + five * cx) - k3 * bend * (three + four * cx))
            sixth = entries[23, e] * w * (w * (six + seven * cx) - k5 * bend * (five + six * cx))
            value = inverse * inverse * (c + u * (two + three * cx + fourth + sixth))
            red += value * entries[11, e]
            green += value * entries[12, e]
            blue += value * entries[13, e]
        sums[k, 0] += red
        sums[k, 1] += green
        sums[k, 2] += blue


@formula
def sum_coloured(entries, filled, texels, b, a2, sums):
    """As `sum_above`, with each channel's own mean direction."""
    b, a2, k3, k5 = np.float32(b), np.float32(a2), np.float32(_BEND_3), np.float32(_BEND_5)
    half, one, two, three = np.float32(0.5), np.float32(1.0), np.float32(2.0), np.float32(3.0)
    four, five, zero = np.float32(4.0), np.float32(5.0), np.float32(0.0)
    six, seven = np.float32(6.0), np.float32(7.0)
    for k in range(texels.shape[0]):
        nx, ny, nz = texels[k, 0], texels[k, 1], texels[k, 2]
        red, green, blue = zero, zero, zero
        for e in range(filled):
            dx, dy, dz = nx - entries[0, e], ny - entries[1, e], nz - entries[2, e]
            xx, yy, zz = dx * dx, dy * dy, dz * dz
            q = half * (xx + yy + zz + entries[3, e])
            c = one - q
            inverse = one / (b * q + a2)
            x = b * inverse
            cx = c * x
            v = (
                entries[4, e] * xx + entries[5, e] * yy + entries[6, e] * zz
                + entries[7, e] * dx * dy + entries[8, e] * dx * dz + entries[9, e] * dy * dz
                + entries[24, e] * c * c
            )  # fmt: skip
            u = v * x
            w = u * x
            bend = entries[3, e] * cx
            fourth = entries[10, e] * (w * (four + five * cx) - k3 * bend * (three + four * cx))
            sixth = entries[23, e] * w * (w * (six + seven * cx) - k5 * bend * (five + six * cx))
            value = inverse * inverse * (c + u * (two + three * cx + fourth + sixth))
            slope = inverse * inverse * (one + two * cx)
            red += value * entries[11, e] + slope * (
                nx * entries[14, e] + ny * entries[15, e] + nz * entries[16, e]
            )  # fmt: skip
            green += value * entries[12, e] + slope * (
                nx * entries[17, e] + ny * entries[18, e] + nz * entries[19, e]
            )  # fmt: skip
            blue += value * entries[13, e] + slope * (
                nx * entries[20, e] + ny * entries[21, e] + nz * entries[22, e]
            )  # fmt: skip
        sums[k, 0] += red
        sums[k, 1] += green
        sums[k, 2] += blue


@formula
def sum_across(entries, filled, texels, b, a2, sums):
    """As `sum_coloured`, for entries that may stand across a texel's horizon: their cosines are taken as
    spread evenly over c - w .. c + w, w = sqrt(3 v)."""
    b, a2, tiny = np.float32(b), np.float32(a2), np.float32(1e-20)
    half, one, two, three = np.float32(0.5), np.float32(1.0), np.float32(2.0), np.float32(3.0)
    zero = np.float32(0.0)
    for k in range(texels.shape[0]):
        nx, ny, nz = texels[k, 0], texels[k, 1], texels[k, 2]
        red, green, blue = zero, zero, zero
        for e in range(filled):
            dx, dy, dz = nx - entries[0, e], ny - entries[1, e], nz - entries[2, e]
            xx, yy, zz = dx * dx, dy * dy, dz * dz
            q = half * (xx + yy + zz + entries[3, e])
            c = one - q
            inverse = one / (b * q + a2)
            x = b * inverse
            v = (
                entries[4, e] * xx + entries[5, e] * yy + entries[6, e] * zz
                + entries[7, e] * dx * dy + entries[8, e] * dx * dz + entries[9, e] * dy * dz
                + entries[24, e] * c * c
            )  # fmt: skip
            w = math.sqrt(three * max(v, tiny))
            share = min(max(half + half * c / w, zero), one)  # the part above the horizon
            positive = w * share * share + max(c - w, zero)
            value = inverse * inverse * (positive + x * v * (two * share + three * positive * x))
            slope = inverse * inverse * (share + two * positive * x)
            red += value * entries[11, e] + slope * (
                nx * entries[14, e] + ny * entries[15, e] + nz * entries[16, e]
            )  # fmt: skip
            green += value * entries[12, e] + slope * (
                nx * entries[17, e] + ny * entries[18, e] + nz * entries[19, e]
            )  # fmt: skip
            blue += value * entries[13, e] + slope * (
                nx * entries[20, e] + ny * entries[21, e] + nz * entries[22, e]
            )  # fmt: skip
        sums[k, 0] += red
        sums[k, 1] += green
        sums[k, 2] += blue
