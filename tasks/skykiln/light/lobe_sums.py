"""The inner loops of the filter: a list of nodes summed for each texel of a tile, without branches.

With x = B/(B q + 2 a^2), q = 1 - c, the kernel is K = c/(B q + 2 a^2)^2. Over a node whose directions
have the covariance C about their mean, v = n^T C n is the variance of c, and to fourth order

    mean of K = (c + x [v (2 + 3 c x) + h v x (v x (4 + 5 c x) - k s c (3 + 4 c x))]) / (B q + 2 a^2)^2,

the Taylor series of K in c. The fourth moment of c is taken as h v^2, h = 3/2 mean |d|^4 / (mean |d|^2)^2
(2.1 for an evenly filled square), its third moment as the one that comes of the sphere's bending,
-k h v s c, with s = mean |d|^2 and k that of a square. The skewness of a node's own content is left out
and bounded (`walk`). Where colours are apart, each channel's own mean direction, m + o, adds
K'(c) n.o, K' = (1 + 2 c x)/(B q + 2 a^2)^2.
"""

import math

import numpy as np

from skykiln.jit import formula
from skykiln.light.pyramid import COLOUR_SHIFT, COVARIANCE, FLUX, FOURTH, MEAN, SPREAD

ENTRY = 23  # numbers per entry: mean 3, spread, covariance 6, h, flux 3, flux times colour shift 9
_H, _FLUX, _SHIFT = 10, 11, 14
_KAPPA = 2.0 / 7.0  # (1.4 - 1)/1.4: in an even square mean |d|^4 is 1.4 (mean |d|^2)^2


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
    entries[_H, filled] = np.float32(1.5) * node[FOURTH] / max(spread * spread, np.float32(1e-30))
    if coloured:
        for c in range(3):
            for x in range(3):
                entries[_SHIFT + 3 * c + x, filled] = node[FLUX + c] * node[COLOUR_SHIFT + 3 * c + x]
    return filled + 1


@formula
def sum_above(entries, filled, texels, b, a2, sums):
    """Adds the first `filled` entries, wholly above the horizon of every texel, to sums (texels, 3);
    b = 1 - alpha^2, a2 = 2 alpha^2."""
    b, a2, kappa = np.float32(b), np.float32(a2), np.float32(_KAPPA)
    half, one, two, three = np.float32(0.5), np.float32(1.0), np.float32(2.0), np.float32(3.0)
    four, five, zero = np.float32(4.0), np.float32(5.0), np.float32(0.0)
    for k in range(texels.shape[0]):
        nx, ny, nz = texels[k, 0], texels[k, 1], texels[k, 2]
        xx, yy, zz, xy, xz, yz = nx * nx, ny * ny, nz * nz, nx * ny, nx * nz, ny * nz
        red, green, blue = zero, zero, zero
        for e in range(filled):
            dx, dy, dz = nx - entries[0, e], ny - entries[1, e], nz - entries[2, e]
            q = half * (dx * dx + dy * dy + dz * dz + entries[3, e])
            c = one - q
            inverse = one / (b * q + a2)
            x = b * inverse
            cx = c * x
            v = (
                entries[4, e] * xx + entries[5, e] * yy + entries[6, e] * zz
                + entries[7, e] * xy + entries[8, e] * xz + entries[9, e] * yz
            )  # fmt: skip
            curved = v * x * (four + five * cx) - kappa * entries[3, e] * c * (three + four * cx)
            value = inverse * inverse * (c + x * v * (two + three * cx + entries[10, e] * x * curved))
            red += value * entries[11, e]
            green += value * entries[12, e]
            blue += value * entries[13, e]
        sums[k, 0] += red
        sums[k, 1] += green
        sums[k, 2] += blue


@formula
def sum_coloured(entries, filled, texels, b, a2, sums):
    """As `sum_above`, with each channel's own mean direction."""
    b, a2, kappa = np.float32(b), np.float32(a2), np.float32(_KAPPA)
    half, one, two, three = np.float32(0.5), np.float32(1.0), np.float32(2.0), np.float32(3.0)
    four, five, zero = np.float32(4.0), np.float32(5.0), np.float32(0.0)
    for k in range(texels.shape[0]):
        nx, ny, nz = texels[k, 0], texels[k, 1], texels[k, 2]
        xx, yy, zz, xy, xz, yz = nx * nx, ny * ny, nz * nz, nx * ny, nx * nz, ny * nz
        red, green, blue = zero, zero, zero
        for e in range(filled):
            dx, dy, dz = nx - entries[0, e], ny - entries[1, e], nz - entries[2, e]
            q = half * (dx * dx + dy * dy + dz * dz + entries[3, e])
            c = one - q
            inverse = one / (b * q + a2)
            x = b * inverse
            cx = c * x
            v = (
                entries[4, e] * xx + entries[5, e] * yy + entries[6, e] * zz
                + entries[7, e] * xy + entries[8, e] * xz + entries[9, e] * yz
            )  # fmt: skip
            curved = v * x * (four + five * cx) - kappa * entries[3, e] * c * (three + four * cx)
            value = inverse * inverse * (c + x * v * (two + three * cx + entries[10, e] * x * curved))
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
        xx, yy, zz, xy, xz, yz = nx * nx, ny * ny, nz * nz, nx * ny, nx * nz, ny * nz
        red, green, blue = zero, zero, zero
        for e in range(filled):
            dx, dy, dz = nx - entries[0, e], ny - entries[1, e], nz - entries[2, e]
            q = half * (dx * dx + dy * dy + dz * dz + entries[3, e])
            c = one - q
            inverse = one / (b * q + a2)
            x = b * inverse
            v = (
                entries[4, e] * xx + entries[5, e] * yy + entries[6, e] * zz
                + entries[7, e] * xy + entries[8, e] * xz + entries[9, e] * yz
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
