"""What importance sampling would cost: the estimators of the trade, and the samples that they need.

Three techniques estimate the filtered radiance P (`ggx`) from N independent samples a texel:

    ggx       light directions from GGX half vectors (Walter et al. 2007, eq. 35-36; `sampling`)
    filtered  the same, each looked up in a mip level of the panorama whose pixels are as large as the
              sample's share of directions, 1/(N p) (Colbert and Krivanek 2007, "GPU-based importance
              sampling", GPU Gems 3, chapter 20); what it blurs is a bias that no number of samples removes
    mis       half of them so, half in proportion to the source's brightness, joined by the balance
              heuristic (Veach 1997, "Robust Monte Carlo methods for light transport simulation", 9.2)

A sample of density p adds L K / (norm p); mean and variance over the samples, for 'mis' over pairs with one
sample of each kind, give a texel's value and its standard error.
"""

import math
from typing import NamedTuple

import numpy as np
from numba import prange

from skykiln.jit import formula, parallel
from skykiln.light.directions import cube_directions
from skykiln.light.ggx import ggx_norm
from skykiln.light.random_numbers import next_uniform, stream
from skykiln.light.sampling import ggx_cosine, ggx_density
from skykiln.light.source_mips import mip_radiance
from skykiln.light.source_tree import (
    brightness_density,
    pixel_at,
    sample_brightness,
)
from skykiln.light.strata import stratified_estimate
from skykiln.light.stratum_kernels import GGX
from skykiln.light.texel_draw import yaw_rotation

TECHNIQUES = {"ggx": 0, "filtered": 1, "mis": 2}
_FILTERED, _MIS = TECHNIQUES["filtered"], TECHNIQUES["mis"]

PROBED = 256  # directions at which needs are measured
PILOT = 4096  # samples at each, for the variances
MOST = 4096  # filtered lookups are tried up to so many samples
REPEATS = 4  # of each try
SHARE = 0.95  # of texels that must reach the error asked for

_cosine_of_sample = formula(ggx_cosine)
_lobe_density = formula(ggx_density)


class Noise(NamedTuple):
    """One filtered level by sampling."""

    radiance: np.ndarray  # (6, n, n, 3) float32
    standard_error: np.ndarray  # (6, n, n, 3) float32, of the radiance


def noisy_level(tree, face_size, alpha, samples, technique, seed, yaw=0.0):
    """A filtered level as so many samples a texel give it.

    Parameters
    ----------
    tree : SourceTree.
    face_size : texels along a face's edge.
    alpha : GGX alpha, 0 < alpha <= 1.
    samples : of each texel, 4 or more, even for 'mis'.
    technique : one of TECHNIQUES.
    seed : int of 64 bits.
    yaw : rad, from the panorama to the cube map.
    """
    normals = cube_directions(face_size).reshape(-1, 3) @ yaw_rotation(yaw)
    means, squares = _run(tree, normals, alpha, samples, technique, seed)
    draws = samples // 2 if technique == "mis" else samples
    variances = np.maximum(squares - means**2, 0.0) / (draws - 1)
    shape = (6, face_size, face_size, 3)
    return Noise(
        means.reshape(shape).astype(np.float32),
        np.sqrt(variances).reshape(shape).astype(np.float32),
    )


def samples_needed(tree, alpha, errors, floor, seed):
    """Samples after which the error of 95 % of all texels is below each of some relative errors.

    Parameters
    ----------
    errors : the relative errors asked for, falling.
    floor : radiance below which errors need not be smaller.

    Returns
    -------
    needs : dict of technique -> list of int or None (not reached with MOST samples).
    """
    random = np.random.Generator(np.random.Philox(key=seed))
    normals = random.normal(size=(PROBED, 3))
    normals /= np.linalg.norm(normals, axis=1, keepdims=True)
    none, ones = np.zeros((PROBED, 4, 3)), np.ones(PROBED)
    truth, _, _ = stratified_estimate(
        tree, np.full(PROBED, GGX), normals, alpha * ones, none, ones, floor, 0.01 * ones, 10**5, seed
    )
    scale = np.maximum(truth, floor)
    variances = _sample_variances(tree, normals, alpha, seed, truth)
    needs = {
        name: [_count(variance / scale**2, error) for error in errors]
        for name, variance in variances.items()
    }
    needs["filtered"] = _filtered_needs(tree, normals, alpha, truth, scale, errors, seed)
    return needs


def _count(variances, error):
    """Samples that bring the relative variance of 95 % of texels, in their worst channel, to error^2."""
    return math.ceil(np.quantile(variances.max(axis=1), SHARE) / error**2)


def _filtered_needs(tree, normals, alpha, truth, scale, errors, seed):
    """As bias does not fall with the count, counts are tried: powers of two."""
    reached = {}
    count = 2
    while count <= MOST and (not reached or min(reached.values()) > min(errors)):
        squares = 0.0
        for repeat in range(REPEATS):
            means, _ = _run(tree, normals, alpha, count, "filtered", seed + repeat)
            squares = squares + ((means - truth) / scale) ** 2 / REPEATS
        reached[count] = float(np.quantile(np.sqrt(squares.max(axis=1)), SHARE))
        count *= 2
    return [next((n for n, e in reached.items() if e <= error), None) for error in errors]


def _run(tree, normals, alpha, samples, technique, seed):
    """Mean and mean square (T, 3) of what the samples of each texel add; pairs of them for 'mis'."""
    means, squares = np.empty((2, len(normals), 3))
    _sample(
        tree, normals, alpha, ggx_norm(alpha), samples, TECHNIQUES[technique], np.uint64(seed),
        means, squares,
    )  # fmt: skip
    return means, squares


def _sample_variances(tree, normals, alpha, seed, truth):
    """Variance (T, 3) that a single sample of 'ggx' and of 'mis' stands for.

    Both from pairs of 'mis': lobe samples alone would seldom meet the lamps that make their noise.
    """
    moments = np.empty((len(normals), 3))
    _second_moments(tree, normals, alpha, ggx_norm(alpha), PILOT, np.uint64(seed), moments)
    means, squares = _run(tree, normals, alpha, PILOT, "mis", seed)
    return {
        "ggx": np.maximum(moments - truth**2, 0.0),
        "mis": 2.0 * np.maximum(squares - means**2, 0.0),
    }


@parallel
def _sample(tree, normals, alpha, norm, samples, technique, seed, means, squares):
    for t in prange(means.shape[0]):
        state = stream(seed, np.uint64(t))
        n = normals[t]
        means[t] = 0.0
        squares[t] = 0.0
        added = np.zeros(3)
        parts = 2 if technique == _MIS else 1
        for _ in range(samples // parts):
            added[:] = 0.0
            for part in range(parts):
                x, y, z, lobe, both = _direction(tree, n, alpha, part == 1, state)
                c = n[0] * x + n[1] * y + n[2] * z
                if c <= 0.0:
                    continue
                factor = _kernel(c, alpha) / (norm * parts * (both if technique == _MIS else lobe))
                row, column = pixel_at(tree, x, y, z)
                for channel in range(3):
                    if technique == _FILTERED:
                        radiance = mip_radiance(tree, x, y, z, 1.0 / (samples * lobe), channel)
                    else:
                        radiance = np.float64(tree.pixels[row, column, channel])
                    added[channel] += factor * radiance
            for channel in range(3):
                means[t, channel] += added[channel] / (samples // parts)
                squares[t, channel] += added[channel] ** 2 / (samples // parts)


@parallel
def _second_moments(tree, normals, alpha, norm, samples, seed, moments):
    """The mean square of a lobe sample, from directions of both techniques."""
    for t in prange(normals.shape[0]):
        state = stream(seed, np.uint64(t))
        n = normals[t]
        moments[t] = 0.0
        for i in range(samples):
            x, y, z, lobe, both = _direction(tree, n, alpha, i % 2 == 1, state)
            c = n[0] * x + n[1] * y + n[2] * z
            if c <= 0.0:
                continue
            row, column = pixel_at(tree, x, y, z)
            factor = (_kernel(c, alpha) / norm) ** 2 / (lobe * both * samples)
            for channel in range(3):
                moments[t, channel] += factor * np.float64(tree.pixels[row, column, channel]) ** 2


@formula
def _direction(tree, n, alpha, of_source, state):
    """A direction of either technique, its density as a lobe sample and the mean of both densities."""
    if of_source:
        x, y, z, source = sample_brightness(tree, state)
        lobe = _lobe_density(n[0] * x + n[1] * y + n[2] * z, alpha)
    else:
        c = _cosine_of_sample(next_uniform(state), alpha)
        x, y, z = _around(n, c, 2.0 * math.pi * next_uniform(state))
        row, column = pixel_at(tree, x, y, z)
        source = brightness_density(tree, row, column)
        lobe = _lobe_density(c, alpha)
    return x, y, z, lobe, 0.5 * (lobe + source)


@formula
def _around(n, c, azimuth):
    """The direction at cosine c from n (Duff et al. 2017, "Building an orthonormal basis, revisited")."""
    sign = 1.0 if n[2] >= 0.0 else -1.0
    f = -1.0 / (sign + n[2])
    g = n[0] * n[1] * f
    s = math.sqrt(max(0.0, 1.0 - c * c))
    a, b = s * math.cos(azimuth), s * math.sin(azimuth)
    x = a * (1.0 + sign * n[0] * n[0] * f) + b * g + c * n[0]
    y = a * sign * g + b * (sign + n[1] * n[1] * f) + c * n[1]
    return x, y, -a * sign * n[0] - b * n[1] + c * n[2]


@formula
def _kernel(c, alpha):
    """GGX D n.l without its constant (`ggx`), for c > 0."""
    a2 = alpha * alpha
    x = (1.0 - c) * (1.0 - a2) + 2.0 * a2
    return c / (x * x)
