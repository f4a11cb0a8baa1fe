"""Filtered radiance, irradiance and footprint means by stratified Monte Carlo over the panorama itself.

    P(n) = ∫ L(l) K(l) dl / ∫ K(l) dl,   K(l) = D(h) max(n.l, 0), or 1 on a texel's footprint

The source is cut into strata, nodes of its tree or parts of its pixels, each of known flux F per channel
and B of all channels together. In each, one direction l is drawn in proportion to brightness b, and

    F k + B (L(l) / b(l)) (K(l) - k),   k the middle of K's range,

added to each channel: unbiased, since the mean of B L/b is F. A stratum is cut until what this can vary
by, B x the largest L/b x the range of K, is small beside the result; where nothing varies nothing is
random, and a sun or a lamp of any size is hit for certain.

A sum of independent terms within known ranges r stays within z sqrt(sum r^2)/2 of its mean, but with
probability 2 exp(-z^2/2) (Hoeffding 1963, "Probability inequalities for sums of bounded random
variables", theorem 2). That standard error is a bound, not an estimate: nothing rare can be missing from
it. (Lobe and brightness samples joined by the balance heuristic, the estimator of `noise`, were
tried first. Where one pixel outshines the rest, a rare sample that the weights of the other technique
make worthless moves the result by more than the standard error seen without it: z-scores of -13.)

Strata follow from the panorama, the kernel and the precision asked for, not from random numbers, so
that going on until the error is small enough biases nothing.

The kernels and their ranges: `stratum_kernels`.
"""

import math

import numpy as np
from numba import prange

from skykiln.jit import formula, parallel
from skykiln.light.random_numbers import next_uniform, stream
from skykiln.light.source_tree import brightness, descend, direction_in_pixel
from skykiln.light.stratum_kernels import kernel_at, kernel_norm, kernel_range

RANGES = np.array([0.1, 0.1, 0.01])  # of strata, in the passes before the one that counts
DEEPEST = -12  # cuts of a pixel per side, as a power of two
_STACK = 512


def stratified_estimate(
    tree, kinds, normals, alphas, edges, solid_angles, floor, precision, most, seed
):
    """Estimates of P with standard errors that are bounds.

    Parameters
    ----------
    tree : SourceTree.
    kinds : (T,) int64, FOOTPRINT, GGX or SHEEN of `stratum_kernels`.
    normals : (T, 3) float64, unit vectors in the panorama's own axes.
    alphas : (T,) float64, of lobes (GGX at 1: irradiance / pi).
    edges : (T, 4, 3) float64, unit normals of the planes through a footprint's sides, pointing inwards.
    solid_angles : (T,) float64, of the footprints, sr.
    floor : radiance below which errors need not be smaller.
    precision : (T,) float64, standard error wanted, relative to the result or to the floor.
    most : largest number of strata of a texel, roughly.
    seed : int of 64 bits.

    Returns
    -------
    means, errors : (T, 3) float64, radiance.
    strata : (T,) int64.
    """
    means, errors = np.empty((2, alphas.size, 3))
    strata = np.empty(alphas.size, dtype=np.int64)
    shapes = zip(kinds, alphas, solid_angles, strict=True)
    norms = np.array([kernel_norm(kind, alpha, angle) for kind, alpha, angle in shapes])
    _estimate(
        tree, kinds, normals, alphas, edges, norms, floor, precision, most, np.uint64(seed),
        means, errors, strata,
    )  # fmt: skip
    return means, errors, strata


@parallel
def _estimate(
    tree, kinds, normals, alphas, edges, norms, floor, precision, most, seed, means, errors, strata
):
    for t in prange(alphas.size):
        strata[t] = _estimate_texel(
            tree, kinds[t], normals[t], alphas[t], edges[t], norms[t], floor, precision[t], most,
            stream(seed, np.uint64(t)), means[t], errors[t],
        )  # fmt: skip


@formula
def _estimate_texel(
    tree, kind, n, alpha, edges, norm, floor, precision, most, state, means, errors
):
    """One texel's means and errors; returns the number of strata.

    The first passes draw nothing: they find the scale, and how the error falls with the strata.
    """
    sums, squares, scale = np.zeros(3), np.zeros(3), np.zeros(3)
    for c in range(3):  # at first as if the whole source had its mean radiance
        scale[c] = max(tree.flux[-1, c] / (4.0 * math.pi), floor) * norm
    count = 0
    for k in range(RANGES.size + 1):
        last = k == RANGES.size
        limit = RANGES[min(k, RANGES.size - 1)]
        if last:
            error = 0.0
            for c in range(3):
                error = max(error, 0.5 * math.sqrt(squares[c]) / scale[c])
            # Four times the strata have an eighth of the range each: the error falls with their number.
            wanted = max(precision, error * count / most)
            if error > wanted:
                limit *= (wanted / error) ** 1.5
        count = _walk(tree, kind, n, alpha, edges, scale, limit, last, state, sums, squares)
        if not last:
            for c in range(3):
                scale[c] = max(sums[c], floor * norm)
    for c in range(3):
        means[c] = sums[c] / norm
        errors[c] = 0.5 * math.sqrt(squares[c]) / norm
    return count


@formula
def _walk(tree, kind, n, alpha, edges, scale, limit, drawn, state, sums, squares):
    """Sums strata whose range is at most `limit` of the scale, and the squares of the ranges.

    K is taken at drawn directions or else in the middle of its range. Returns the number of strata.
    """
    stack = np.empty((_STACK, 3), dtype=np.int64)
    flux, reach = np.empty(3), np.empty(3)
    inverse = 1.0 / scale
    sums[:] = 0.0
    squares[:] = 0.0
    stack[0, 0], stack[0, 1], stack[0, 2] = tree.shapes.shape[0] - 1, 0, 0
    top = 1
    count = 0
    while top > 0:
        top -= 1
        level, j, i = stack[top, 0], stack[top, 1], stack[top, 2]
        whole = _load_flux(tree, level, j, i, flux, reach)
        if whole <= 0.0:
            continue
        lowest, highest = kernel_range(_cap(tree, level, j, i), kind, n, alpha, edges)
        if highest <= 0.0:
            continue
        span = highest - lowest
        part = max(reach[0] * inverse[0], reach[1] * inverse[1], reach[2] * inverse[2])
        if part * span > limit and level > DEEPEST:
            top = _push_children(tree, level, j, i, stack, top)
            continue
        count += 1
        middle = 0.5 * (lowest + highest)
        for c in range(3):
            sums[c] += flux[c] * middle
            squares[c] += (reach[c] * span) ** 2
        if drawn and span > 0.0:
            x, y, z, row, column = _draw(tree, level, j, i, state)
            off = (kernel_at(x, y, z, kind, n, alpha, edges) - middle) * whole
            off /= max(brightness(tree, row, column), 1e-300)  # 0 only where rounding chose a black pixel
            for c in range(3):
                sums[c] += off * tree.pixels[row, column, c]
    return count


@formula
def _push_children(tree, level, j, i, stack, top):
    for k in range(4):
        row, column = 2 * j + k // 2, 2 * i + k % 2
        if level <= 0 or (row < tree.shapes[level - 1, 0] and column < tree.shapes[level - 1, 1]):
            stack[top, 0], stack[top, 1], stack[top, 2] = level - 1, row, column
            top += 1
    return top


@formula
def _load_flux(tree, level, j, i, flux, reach):
    """Flux of a node or of a part of a pixel, what each channel of one draw can reach; returns the sum."""
    if level > 0:
        node = tree.offsets[level] + j * tree.shapes[level, 1] + i
        for c in range(3):
            flux[c] = tree.flux[node, c]
        whole = np.float64(tree.flux[node, 3])
        for c in range(3):
            reach[c] = whole * tree.shares[node, c]
        return whole
    solid_angle = _latitude_step(tree, level, j) * 2.0 * math.pi / (tree.pixels.shape[1] << -level)
    for c in range(3):
        flux[c] = tree.pixels[j >> -level, i >> -level, c] * solid_angle
        reach[c] = flux[c]
    return flux[0] + flux[1] + flux[2]


@formula
def _latitude_step(tree, level, j):
    """Difference of the sines of latitude across a row of a level 0 or below."""
    if level == 0:
        return tree.heights[j] - tree.heights[j + 1]
    step = math.pi / (tree.pixels.shape[0] << -level)
    return 2.0 * math.sin(0.5 * step) * math.sin((j + 0.5) * step)


@formula
def _cap(tree, level, j, i):
    """Middle of a node, and cosine and sine of the angular radius of a cap there that holds it."""
    if level >= 0:
        across = tree.lines[level, j, 1]
        return (
            across * tree.turns[level, i, 0],
            tree.lines[level, j, 0],
            across * tree.turns[level, i, 1],
            tree.lines[level, j, 2],
            tree.lines[level, j, 3],
        )
    down = math.pi / (tree.pixels.shape[0] << -level)
    turn = 2.0 * math.pi / (tree.pixels.shape[1] << -level)
    latitude, longitude = 0.5 * math.pi - (j + 0.5) * down, math.pi - (i + 0.5) * turn
    across = math.cos(latitude)
    square = min(4.0, 0.25 * (down * down + across * (across + 0.5 * down) * turn * turn))
    return (
        across * math.sin(longitude),
        math.sin(latitude),
        across * math.cos(longitude),
        1.0 - 0.5 * square,
        math.sqrt(square * (1.0 - 0.25 * square)),
    )


@formula
def _draw(tree, level, j, i, state):
    """A direction drawn from a node in proportion to brightness, and its pixel."""
    if level >= 0:
        row, column = descend(tree, level, j, i, next_uniform(state))
        x, y, z = direction_in_pixel(tree, row, column, next_uniform(state), next_uniform(state))
        return x, y, z, row, column
    x, y, z = _direction_in_part(tree, level, j, i, next_uniform(state), next_uniform(state))
    return x, y, z, j >> -level, i >> -level


@formula
def _direction_in_part(tree, level, j, i, u, v):
    """A direction even in the solid angle of a part of a pixel, for u and v in 0..1."""
    step = math.pi / (tree.pixels.shape[0] << -level)
    y = math.cos(j * step) - v * _latitude_step(tree, level, j)
    longitude = math.pi - 2.0 * math.pi * (i + u) / (tree.pixels.shape[1] << -level)
    across = math.sqrt(max(0.0, 1.0 - y * y))
    return across * math.sin(longitude), y, across * math.cos(longitude)
