"""The inner loops of the filter: a list of nodes summed for each texel of a tile, without branches.

With x = B/(B q + 2 a^2), q = 1 - c, the kernel is K = c/(B q + 2 a^2)^2. Over a node whose directions
have the covariance C about their mean m, c has the variance v = (n - m)^T C (n - m) + r c^2 (r, of the
sphere's bending, is the variance along m; n^T C n would lose its digits beside m), and with u = v x,
w = u x and s = mean |d|^2, to sixth order,

    mean of K = (c + u [2 + 3 c x + h (w (4 + 5 c x) - k s x c (3 + 4 c x))
                        + g w (w (6 + 7 c x) - k' s x c (5 + 6 c x))]) / (B q + 2 a^2)^2,

the Taylor series of K in c. The fourth moment of c is taken as h v^2 with one h for all directions, h = 3
mean |d|^4 / ((tr C)^2 + 2 tr C^2) (3 for a normal distribution of any shape, 2.1 for an evenly filled
square, 1.8 for a line), the sixth as g v^3, g in proportion to h^3 and right for a square, to h^2 above it,
where a bright core in a dim field would make it far too large; the third and fifth as those that come of
the sphere's bending, k and k' those of a square. The skewness of a node's own content is left out and
bounded (`walk`). Where colours are apart, each channel's own mean direction, m + o, adds K'(c) n.o, K' = (1
+ 2 c x)/(B q + 2 a^2)^2.
"""

import math

import numpy as np

from skykiln.jit import formula
from skykiln.light.node_record import COLOUR_SHIFT, COVARIANCE, FLUX, FOURTH, MEAN, SPREAD

# An entry: mean 3, spread, covariance 6, h, flux 3, flux times colour shift 9, g, r.
_MEAN, _SPREAD, _COVARIANCE, _H, _FLUX, _SHIFT, _G, _R, ENTRY = 0, 3, 4, 10, 11, 14, 23, 24, 25
# Of an even square with unit variance along each edge, averaged over directions: mean |d|^2 is 2,
# mean |d|^4 5.6, mean |d|^6 18.51; so h = 2.1, g = 5/16 18.51.
_BEND_3 = np.float32(2.0 / 7.0)  # k: 3/2 (5.6/2 - 2)/(2 h)
_BEND_5 = np.float32(0.592)  # k': 5/2 (3/8 18.51 - 2 h)/(2 g)
_SIXTH = np.float32(0.6247)  # g/h^3
_SQUARE = np.float32(2.1)  # its h
_HALF, _ONE, _TWO, _THREE, _FOUR, _FIVE, _SIX, _SEVEN = (np.float32(n) for n in (0.5, 1, 2, 3, 4, 5, 6, 7))
_ZERO = np.float32(0.0)


@formula
def append(entries, filled, node, coloured):
    """Adds a node's entry to a list (ENTRY, capacity); returns the new length."""
    for x in range(3):
        entries[_MEAN + x, filled] = node[MEAN + x]
        entries[_COVARIANCE + x, filled] = node[COVARIANCE + x]
        entries[_COVARIANCE + 3 + x, filled] = _TWO * node[COVARIANCE + 3 + x]
        entries[_FLUX + x, filled] = node[FLUX + x]
    spread = node[SPREAD]
    entries[_SPREAD, filled] = spread
    squares, crossed = _ZERO, _ZERO
    for x in range(3):
        squares += node[COVARIANCE + x] * node[COVARIANCE + x]
        crossed += node[COVARIANCE + 3 + x] * node[COVARIANCE + 3 + x]
    even = spread * spread + _TWO * squares + _FOUR * crossed
    h = _THREE * node[FOURTH] / max(even, np.float32(1e-36))
    entries[_H, filled] = h
    entries[_G, filled] = _SIXTH * h * h * min(h, _SQUARE)
    entries[_R, filled] = np.float32(0.25) * max(node[FOURTH] - spread * spread, _ZERO)
    if coloured:
        for c in range(3):
            for x in range(3):
                entries[_SHIFT + 3 * c + x, filled] = node[FLUX + c] * node[COLOUR_SHIFT + 3 * c + x]
    return filled + 1


@formula
def sum_above(entries, filled, texels, b, a2, sums):
    """Adds the first `filled` entries, wholly above the horizon of every texel, to sums (texels, 3);
    b = 1 - alpha^2, a2 = 2 alpha^2."""
    b, a2 = np.float32(b), np.float32(a2)
    for k in range(texels.shape[0]):
        nx, ny, nz = texels[k, 0], texels[k, 1], texels[k, 2]
        red, green, blue = _ZERO, _ZERO, _ZERO
        for e in range(filled):
            c, inverse, v = _cosine_and_variance(entries, e, nx, ny, nz, b, a2)
            value = _mean_kernel(entries, e, c, inverse, b * inverse, v)
            red += value * entries[_FLUX, e]
            green += value * entries[_FLUX + 1, e]
            blue += value * entries[_FLUX + 2, e]
        sums[k, 0] += red
        sums[k, 1] += green
        sums[k, 2] += blue


@formula
def sum_coloured(entries, filled, texels, b, a2, sums):
    """As `sum_above`, with each channel's own mean direction."""
    b, a2 = np.float32(b), np.float32(a2)
    for k in range(texels.shape[0]):
        nx, ny, nz = texels[k, 0], texels[k, 1], texels[k, 2]
        red, green, blue = _ZERO, _ZERO, _ZERO
        for e in range(filled):
            c, inverse, v = _cosine_and_variance(entries, e, nx, ny, nz, b, a2)
            x = b * inverse
            value = _mean_kernel(entries, e, c, inverse, x, v)
            slope = inverse * inverse * (_ONE + _TWO * c * x)
            red += _of_channel(entries, e, 0, value, slope, nx, ny, nz)
            green += _of_channel(entries, e, 1, value, slope, nx, ny, nz)
            blue += _of_channel(entries, e, 2, value, slope, nx, ny, nz)
        sums[k, 0] += red
        sums[k, 1] += green
        sums[k, 2] += blue


@formula
def sum_across(entries, filled, texels, b, a2, sums):
    """As `sum_coloured`, for entries that may stand across a texel's horizon: their cosines are taken as
    spread evenly over c - w .. c + w, w = sqrt(3 v)."""
    b, a2 = np.float32(b), np.float32(a2)
    for k in range(texels.shape[0]):
        nx, ny, nz = texels[k, 0], texels[k, 1], texels[k, 2]
        red, green, blue = _ZERO, _ZERO, _ZERO
        for e in range(filled):
            c, inverse, v = _cosine_and_variance(entries, e, nx, ny, nz, b, a2)
            x = b * inverse
            w = math.sqrt(_THREE * max(v, np.float32(1e-20)))
            share = min(max(_HALF + _HALF * c / w, _ZERO), _ONE)  # the part above the horizon
            positive = w * share * share + max(c - w, _ZERO)
            value = inverse * inverse * (positive + x * v * (_TWO * share + _THREE * positive * x))
            slope = inverse * inverse * (share + _TWO * positive * x)
            red += _of_channel(entries, e, 0, value, slope, nx, ny, nz)
            green += _of_channel(entries, e, 1, value, slope, nx, ny, nz)
            blue += _of_channel(entries, e, 2, value, slope, nx, ny, nz)
        sums[k, 0] += red
        sums[k, 1] += green
        sums[k, 2] += blue


@formula
def _cosine_and_variance(entries, e, nx, ny, nz, b, a2):
    """c, 1/(B q + 2 a^2) and v."""
    dx, dy, dz = nx - entries[0, e], ny - entries[1, e], nz - entries[2, e]
    xx, yy, zz = dx * dx, dy * dy, dz * dz
    q = _HALF * (xx + yy + zz + entries[_SPREAD, e])
    c = _ONE - q
    v = (
        entries[4, e] * xx + entries[5, e] * yy + entries[6, e] * zz
        + entries[7, e] * dx * dy + entries[8, e] * dx * dz + entries[9, e] * dy * dz
        + entries[_R, e] * c * c
    )  # fmt: skip
    return c, _ONE / (b * q + a2), v


@formula
def _mean_kernel(entries, e, c, inverse, x, v):
    """The mean of K, wholly above the horizon."""
    cx, u = c * x, v * x
    w = u * x
    bend = entries[_SPREAD, e] * cx
    fourth = entries[_H, e] * (w * (_FOUR + _FIVE * cx) - _BEND_3 * bend * (_THREE + _FOUR * cx))
    sixth = entries[_G, e] * w * (w * (_SIX + _SEVEN * cx) - _BEND_5 * bend * (_FIVE + _SIX * cx))
    return inverse * inverse * (c + u * (_TWO + _THREE * cx + fourth + sixth))


@formula
def _of_channel(entries, e, c, value, slope, nx, ny, nz):
    """A channel's sum over an entry, its own mean direction being off the common one."""
    at = _SHIFT + 3 * c
    shift = nx * entries[at, e] + ny * entries[at + 1, e] + nz * entries[at + 2, e]
    return value * entries[_FLUX + c, e] + slope * shift
