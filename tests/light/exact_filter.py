"""Brute force for many skies at once: the kernel's mean over every pixel, float64, then one matrix product.

The mean over a pixel is a product of Gauss-Legendre rules in both angles, of 1, 2 or 3 points each by the
pixel's width beside the distance over which the kernel varies, sqrt(theta^2 + 4 a^2/(1 - a^2)): at most
0.008, 0.1 and 0.35, for a relative error below 5e-5. Pixels across the horizon, where the kernel has a
kink, take 8 x 8 points. With the bound |K^(k)| / k! <= (k+1)(k+2)(k+3)/6 K/s^k the remainders of the rules
are 20/24 (h/s)^2, 0.19 (h/s)^4 and 0.03 (h/s)^6 (DLMF 3.5.20, Gauss-Legendre).
"""

import math

import numba
import numpy as np
from reference import filtered, kernel_integral
from tolerance_skies import bright_pixels

from skykiln.light.directions import panorama_row_solid_angles

_SEGMENT = 16  # columns that are judged together
_PIXELS, _NORMALS = 8192, 256  # of one block of the matrix
_WIDEST = 0.35


def filtered_skies(skies, normals, alpha):
    """The GGX-filtered radiance of several panoramas at some normals.

    skies : list of (H, W, 3) float32. normals : (T, 3) float64. Returns (S, T, 3) float64.
    """
    height, width, _ = skies[0].shape
    pole = 4 * alpha**2 / (1 - alpha**2) if alpha < 1 else np.inf
    if np.pi / height > _WIDEST * math.sqrt(pole):
        raise ValueError("the pixels are too wide for this lobe")
    bright = [bright_pixels(sky) for sky in skies]
    stack = np.concatenate(
        [np.where(lit[..., None], 0, sky) for sky, lit in zip(skies, bright, strict=True)], axis=-1
    )
    areas = panorama_row_solid_angles(width, height)
    result = np.zeros((len(normals), stack.shape[-1]))
    rows = max(1, _PIXELS // width)
    polar, weights, sine, cosine = _nodes(height, width)
    for first in range(0, height, rows):
        band = slice(first, min(height, first + rows))
        flux = stack[band].reshape(-1, stack.shape[-1]) * areas[band].repeat(width)[:, None]
        for start in range(0, len(normals), _NORMALS):
            some = slice(start, start + _NORMALS)
            means = _kernel_means(
                normals[some], polar[band], weights[band], sine, cosine, min(pole, 1.0), float(alpha)
            )
            result[some] += means @ flux
    result = result.reshape(len(normals), len(skies), 3).transpose(1, 0, 2) / kernel_integral(alpha)
    for sky, lit, total in zip(skies, bright, result, strict=True):
        if lit.any():
            total += filtered(_points_of_pixels(sky, *np.nonzero(lit)), normals, alpha)
    return result


def _points_of_pixels(sky, rows, columns, parts=48):
    """Directions (m, 3) and fluxes (m, 3): parts x parts pieces of some pixels, 2 x 2 points in each."""
    height, width, _ = sky.shape
    node, _ = np.polynomial.legendre.leggauss(2)
    place = ((np.arange(parts)[:, None] + 0.5 + 0.5 * node) / parts).ravel()
    polar = np.pi * (rows[:, None, None] + place[:, None]) / height
    longitude = np.pi - 2 * np.pi * (columns[:, None, None] + place) / width
    sine = np.sin(polar)
    d = np.broadcast_arrays(sine * np.sin(longitude), np.cos(polar), sine * np.cos(longitude))
    share = np.broadcast_to(sine, d[0].shape)
    share = share / share.sum((1, 2), keepdims=True)
    flux = sky[rows, columns] * panorama_row_solid_angles(width, height)[rows, None]
    return np.stack(d, -1).reshape(-1, 3), (share[..., None] * flux[:, None, None]).reshape(-1, 3)


def _nodes(height, width):
    """Angles and weights of the rules of 1, 2, 3 and 8 (four times two) points, side by side: polar
    angles (H, 14), their weights, sine and cosine of the longitudes (14, W)."""
    one, two, three = (np.polynomial.legendre.leggauss(n) for n in (1, 2, 3))
    eight = ((two[0] + np.array([-3, -1, 1, 3])[:, None]).ravel() / 4, np.tile(two[1], 4) / 4)
    place = np.concatenate([rule[0] for rule in (one, two, three, eight)]) / 2 + 0.5
    weight = np.concatenate([rule[1] for rule in (one, two, three, eight)]) / 2
    polar = np.pi * (np.arange(height)[:, None] + place) / height
    weights = np.sin(polar) * weight
    for first, last in ((0, 1), (1, 3), (3, 6), (6, 14)):
        weights[:, first:last] /= weights[:, first:last].sum(axis=1, keepdims=True)
    longitude = np.pi - 2 * np.pi * (np.arange(width) + place[:, None]) / width
    return polar, weights, np.sin(longitude), np.cos(longitude)


@numba.njit(parallel=True, fastmath=True)
def _kernel_means(normals, polar, weights, sine, cosine, pole, alpha):
    """(T, rows W) float64, mean of K over each pixel, weighted by solid angle."""
    count, rows, width = normals.shape[0], polar.shape[0], sine.shape[1]
    a, b = 1 + alpha * alpha, 1 - alpha * alpha
    across = np.array([1.0, 0.5, 0.5, 5 / 18, 8 / 18, 5 / 18] + [0.125] * 8)
    means = np.zeros((count, rows * width))
    height_of_pixel = 2 * math.pi / width
    for t in numba.prange(count):
        nx, ny, nz = normals[t, 0], normals[t, 1], normals[t, 2]
        along = nx * sine + nz * cosine
        for j in range(rows):
            line = means[t, j * width : (j + 1) * width]
            middle_sine, middle_cosine = math.sin(polar[j, 0]), math.cos(polar[j, 0])
            pixel = height_of_pixel * 0.75  # from a pixel's middle to its corner, and a little more
            reach = (_SEGMENT / 2) * height_of_pixel * middle_sine + pixel
            for i in range(0, width, _SEGMENT):
                at = 2 * math.pi * (i + _SEGMENT / 2) / width - math.pi
                c = ny * middle_cosine + middle_sine * (nz * math.cos(at) - nx * math.sin(at))
                if c < -reach:
                    continue
                near = max(0.0, math.sqrt(max(0.0, 2 - 2 * c)) - reach)
                ratio = height_of_pixel * height_of_pixel / (near * near + pole)
                first, last = (0, 1) if ratio < 0.008**2 else ((1, 3) if ratio < 0.1**2 else (3, 6))
                for p in range(first, last):
                    y, s = ny * math.cos(polar[j, p]), math.sin(polar[j, p])
                    for q in range(first, last):
                        w, row = weights[j, p] * across[q], along[q]
                        for k in range(i, i + _SEGMENT):
                            cos_l = y + s * row[k]
                            z = a - b * cos_l
                            line[k] += w * max(cos_l, 0.0) / (z * z)
                if c < reach:
                    for k in range(i, i + _SEGMENT):
                        cos_l = ny * middle_cosine + middle_sine * along[0, k]
                        if abs(cos_l) < pixel:
                            line[k] = _finely(ny, polar[j], weights[j], across, along, k, a, b)
    return means


@numba.njit(fastmath=True)
def _finely(ny, polar, weights, across, along, k, a, b):
    """The mean over a pixel across the horizon."""
    mean = 0.0
    for p in range(6, 14):
        y, s = ny * math.cos(polar[p]), math.sin(polar[p])
        for q in range(6, 14):
            c = y + s * along[q, k]
            if c > 0.0:
                z = a - b * c
                mean += weights[p] * across[q] * c / (z * z)
    return mean
