"""The filter against a spherical-harmonic transform that gives the same levels, in one run: CPU time ratios.

    python tests/benchmarks/bench_harmonics.py [face size] [repeats]

ducc0, a general-purpose library, analyses the panorama once per channel (its rows are the Fejer 1 grid)
and evaluates each level at its texels' directions (`synthesis_general`, to a tenth of the tolerance), the
coefficients scaled by the lobe's eigenvalues (Funk-Hecke) and cut off where these fall below a tenth of the
tolerance, or at what the panorama resolves. One thread each; medians of interleaved runs; process CPU time.
Prints per tolerance both times, their ratio, the band limits, and both results' largest error against
brute force at 64 texels a level, without and with a sun: what a cut-off band rings by shows there.
"""

import statistics
import sys
import time

import ducc0
import numpy as np
from bench_filter import LEVELS, filtered_chain, largest_errors, skies

from skykiln.jit import use_threads
from skykiln.light.directions import alpha_from_roughness, cube_directions


def eigenvalues(alpha, most):
    """Of the clamped kernel, degrees 0 .. most, by Gauss-Legendre quadrature in a logarithm of 1 - c."""
    node, weight = np.polynomial.legendre.leggauss(8 * 256)
    low = 2 * alpha**2 / (1 - alpha**2) if alpha < 1 else 1e6
    span = np.log1p(1 / low)
    shifted = low * np.exp(span * (node + 1) / 2)
    c = 1 - (shifted - low)
    kernel = weight * shifted * c / ((1 - alpha**2) * (1 - c) + 2 * alpha**2) ** 2
    before, now = np.ones_like(c), c
    values = [kernel.sum(), kernel @ c]
    for degree in range(1, most):
        before, now = now, ((2 * degree + 1) * c * now - degree * before) / (degree + 1)
        values.append(kernel @ now)
    return np.array(values) / values[0]


def band_limit(values, tolerance):
    """The last degree whose eigenvalue is still a tenth of the tolerance."""
    return max(2, int(np.nonzero(np.abs(values) >= tolerance / 10)[0][-1]))


def transformed_chain(panorama, tolerance, scales, places):
    """All levels by harmonics; `scales` and `places` (the directions' angles) are not timed."""
    limits = [band_limit(s, tolerance) for s in scales]
    most = max(limits)
    rows = np.ascontiguousarray(panorama.transpose(2, 0, 1), dtype=np.float64)
    # Columns run from longitude pi downwards; the library's run upwards from phi0.
    flipped = np.ascontiguousarray(rows[:, :, ::-1])
    width = panorama.shape[1]
    coefficients = [
        ducc0.sht.analysis_2d(
            map=flipped[c : c + 1], spin=0, lmax=most, geometry="F1", phi0=np.pi / width - np.pi, nthreads=1
        )
        for c in range(3)
    ]
    chain = []
    for scale, limit, place in zip(scales, limits, places, strict=True):
        kept = kept_entries(most, limit)
        factor = scale[np.concatenate([np.arange(m, limit + 1) for m in range(limit + 1)])]
        level = [
            ducc0.sht.synthesis_general(
                alm=a[:, kept] * factor, spin=0, lmax=limit, mmax=limit, loc=place, epsilon=tolerance / 10,
                nthreads=1,
            )[0]
            for a in coefficients
        ]  # fmt: skip
        edge = round((len(place) / 6) ** 0.5)
        chain.append(np.stack(level, -1).reshape(6, edge, edge, 3))
    return chain


def kept_entries(most, limit):
    """Where the coefficients up to degree `limit` stand among those up to `most`."""
    starts = np.array([m * (2 * most + 1 - m) // 2 for m in range(limit + 1)])
    return np.concatenate([starts[m] + np.arange(m, limit + 1) for m in range(limit + 1)])


def angles(size):
    """(texels, 2): polar angle and longitude from +z towards +x."""
    d = cube_directions(size).reshape(-1, 3)
    return np.stack([np.arccos(d[:, 1]), np.arctan2(d[:, 0], d[:, 2]) % (2 * np.pi)], axis=1)


def cpu_seconds(function, *arguments):
    """Process CPU time of one call, and its result."""
    start = time.process_time()
    result = function(*arguments)
    return time.process_time() - start, result


def main(size=512, repeats=5):
    use_threads(1)
    places = [angles(size >> k) for k in LEVELS]
    scales = [eigenvalues(alpha_from_roughness(k / 7), 2 * size - 1) for k in LEVELS]
    for name, panorama in skies(4 * size).items():
        for tolerance in (0.005, 0.02):
            filtered_chain(panorama, tolerance)
            ours, theirs = [], []
            for _ in range(repeats):
                seconds, chain = cpu_seconds(filtered_chain, panorama, tolerance)
                ours.append(seconds)
                seconds, other = cpu_seconds(transformed_chain, panorama, tolerance, scales, places)
                theirs.append(seconds)
            errors = largest_errors(panorama, [chain, other])
            limits = [band_limit(s, tolerance) for s in scales]
            ratio = statistics.median(t / o for t, o in zip(theirs, ours, strict=True))
            print(
                f"{name}, tolerance {tolerance}: filter {statistics.median(ours):.2f} s CPU, harmonics "
                f"{statistics.median(theirs):.2f} s, ratio {ratio:.2f}; errors {errors[0]:.3%} and "
                f"{errors[1]:.3%}; degrees {limits}",
                flush=True,
            )


if __name__ == "__main__":
    main(*map(int, sys.argv[1:]))
