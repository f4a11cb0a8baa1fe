"""What a filtered chain stands for, summed directly: the source's own pixels under the GGX lobe at n = v = r.

Another way to the values of `specular` and `irradiance`, without their nodes, their bounds or a cube: for
a picture, the source is reduced to blocks of pixels that keep their flux and its mean direction.
"""

import math
from typing import NamedTuple

import numpy as np
from numba import prange

from skykiln.jit import parallel
from skykiln.light.directions import alpha_from_roughness, panorama_row_solid_angles
from skykiln.light.split_sum import table_values

# Columns of the reduced source, and the alpha from which its blocks are small beside the lobe.
COLUMNS = ((512, 0.0), (256, 0.04), (64, 0.25))
_SHARPEST = 0.004  # alpha of what is as good as a mirror to blocks of the finest source


class ReducedSource(NamedTuple):
    """Blocks of a panorama's pixels.

    directions : (3, m) float32, unit, by luminance; flux : (3, m) float32, radiance sr; solid_angles : (m,)
    """

    directions: np.ndarray
    flux: np.ndarray
    solid_angles: np.ndarray


def reduced_sources(panorama, yaw):
    """A panorama (H, W, 3) in blocks, turned by `yaw` radians: a ReducedSource for each of COLUMNS."""
    height, width, _ = panorama.shape
    latitude = np.pi / 2 - np.pi * (np.arange(height) + 0.5) / height
    longitude = np.pi - 2 * np.pi * (np.arange(width) + 0.5) / width + yaw
    rows = np.stack([panorama_row_solid_angles(width, height), np.sin(latitude), np.cos(latitude)], axis=1)
    columns = np.stack([np.sin(longitude), np.cos(longitude)], axis=1)
    step = max(1, math.ceil(width / COLUMNS[0][0]))
    layers = _pixels_in_blocks(
        np.ascontiguousarray(panorama, np.float32), rows.astype(np.float32), columns.astype(np.float32), step
    )
    sources = [_source_of(layers)]
    for columns, _ in COLUMNS[1:]:
        layers = _in_blocks(layers, columns)
        sources.append(_source_of(layers))
    return sources


@parallel
def _pixels_in_blocks(panorama, rows, columns, step):
    """Sums over blocks of step x step pixels: first moments of the brightness (3), flux (3), solid angle.

    rows : (H, 3), solid angle of a pixel, sine and cosine of latitude; columns : (W, 2), of longitude
    """
    height, width, _ = panorama.shape
    down, across = (height + step - 1) // step, (width + step - 1) // step
    layers = np.zeros((7, down, across), np.float32)
    for j in prange(down):
        for y in range(j * step, min(height, j * step + step)):
            angle, up, level = rows[y, 0], rows[y, 1], rows[y, 2]
            for x in range(width):
                i = x // step
                red, green, blue = panorama[y, x, 0], panorama[y, x, 1], panorama[y, x, 2]
                bright = (red + green + blue + np.float32(1e-12)) * angle  # black has a middle too
                layers[0, j, i] += bright * level * columns[x, 0]
                layers[1, j, i] += bright * up
                layers[2, j, i] += bright * level * columns[x, 1]
                layers[3, j, i] += red * angle
                layers[4, j, i] += green * angle
                layers[5, j, i] += blue * angle
                layers[6, j, i] += angle
    return layers


def lit_by_source(panorama, yaw, table, n, v, albedo, f0, roughness):
    """`split_sum.lit_by_probe` with the source itself in place of the packed files.

    Parameters: panorama : (H, W, 3) float32; the others as there. Returns (k, 3) float64
    """
    sources = reduced_sources(panorama, yaw)
    mu = (n * v).sum(1)
    r = 2 * mu[:, None] * n - v
    alpha = np.maximum(alpha_from_roughness(np.asarray(roughness)), _SHARPEST)
    mirror, chosen = np.empty((len(n), 3)), np.digitize(alpha, [least for _, least in COLUMNS[1:]])
    for number, source in enumerate(sources):
        these = chosen == number
        mirror[these] = lobe_means(source, r[these], alpha[these])
    diffuse, lit = np.zeros((len(n), 3)), albedo.any(1)
    diffuse[lit] = lobe_means(sources[-1], n[lit], np.ones(lit.sum())) * albedo[lit]  # E/pi: alpha = 1
    scale, bias = table_values(table, mu, roughness).T
    return diffuse + mirror * (f0 * scale[:, None] + bias[:, None])


def lobe_means(source, directions, alphas):
    """Means of a source under lobes about `directions` (k, 3) of `alphas` (k,): (k, 3) float64."""
    means = np.empty((len(directions), 3))
    if len(directions):
        axes = np.ascontiguousarray(directions, np.float32)
        _sum_lobes(axes, np.asarray(alphas, np.float32), *source, means)
    return means


def _in_blocks(layers, columns):
    """Sums of layers (h, w) over square blocks, about so many across."""
    height, width = layers[0].shape
    step = max(1, math.ceil(width / columns))
    if step == 1:
        return layers
    rows, columns = np.arange(0, height, step), np.arange(0, width, step)
    return [np.add.reduceat(np.add.reduceat(layer, rows, axis=0), columns, axis=1) for layer in layers]


def _source_of(layers):
    moments = np.stack(layers[:3]).reshape(3, -1)
    directions = moments / np.linalg.norm(moments, axis=0)
    return ReducedSource(directions, np.stack(layers[3:6]).reshape(3, -1), layers[6].ravel())


@parallel
def _sum_lobes(axes, alphas, directions, flux, solid_angles, means):
    """K(c) = max(c, 0)/(B (1 - c) + 2 a^2)^2, as in `ggx`; the sum over the sky divided by that over 1."""
    for i in prange(axes.shape[0]):
        x, y, z = axes[i, 0], axes[i, 1], axes[i, 2]
        twice = np.float32(2.0) * alphas[i] * alphas[i]
        b = np.float32(1.0) - alphas[i] * alphas[i]
        red = np.float32(0.0)
        green = np.float32(0.0)
        blue = np.float32(0.0)
        norm = np.float32(0.0)
        for j in range(directions.shape[1]):
            c = x * directions[0, j] + y * directions[1, j] + z * directions[2, j]
            wide = b * max(np.float32(1.0) - c, np.float32(0.0)) + twice
            weight = max(c, np.float32(0.0)) / (wide * wide)
            red += weight * flux[0, j]
            green += weight * flux[1, j]
            blue += weight * flux[2, j]
            norm += weight * solid_angles[j]
        means[i, 0] = red / norm
        means[i, 1] = green / norm
        means[i, 2] = blue / norm
