"""The filter against textbook importance sampling, in one run: time ratios and largest errors.

    python tests/benchmarks/bench_filter.py [face size] [repeats]

Prints, per tolerance, how many times faster the full chain of 8 levels (roughness k/7, node pyramid
included) is than 1,024 Hammersley samples per texel with mip-filtered lookups, medians of interleaved
pairs of runs, without and with a sun of 5e4 over a sky of 1; and both methods' largest error against float64
brute force at 64 texels a level.
"""

import statistics
import sys
import time
from pathlib import Path

import numpy as np
from textbook_sampling import SAMPLES, mip_chain, sampled_level

from skykiln.light.directions import cube_directions, cube_texel_solid_angles
from skykiln.light.pyramid import build_pyramid
from skykiln.light.specular import filter_level

sys.path.insert(0, str(Path(__file__).parents[1] / "light"))
from reference import cube_points, filtered, relative_errors

LEVELS = range(1, 8)


def skies(size):
    """A sky of about 1 that falls off downwards and holds fine structure; the same with a sun."""
    rng = np.random.default_rng(1)
    grey = 1 + 0.5 * cube_directions(size)[..., 1:2] + 0.5 * rng.random((6, size, size, 1))
    sky = (grey * np.array([0.8, 0.9, 1.3])).astype(np.float32)
    sun = sky.copy()
    sun[4, size // 5, size // 3 : size // 3 + 2] = 5e4
    return {"sky": sky, "sky and sun": sun}


def filtered_chain(faces, tolerance):
    """All levels by the product's filter."""
    tree, size = build_pyramid(faces), faces.shape[1]
    return [filter_level(tree, size >> k, (k / 7) ** 2, tolerance) for k in LEVELS]


def sampled_chain(faces):
    """All levels by textbook sampling."""
    mips, size = mip_chain(faces), faces.shape[1]
    return [sampled_level(faces, mips, size >> k, (k / 7) ** 2) for k in LEVELS]


def seconds(function, *arguments):
    """The better of two runs in a row: the first one pays for the memory that the other method left."""
    times = []
    for _ in range(2):
        start = time.perf_counter()
        function(*arguments)
        times.append(time.perf_counter() - start)
    return min(times)


def largest_errors(faces, chains):
    """Largest error of each chain over 64 texels of every level."""
    points = cube_points(faces, 1, 2)
    areas, rng = cube_texel_solid_angles(faces.shape[1]), np.random.default_rng(0)
    worst = [0.0] * len(chains)
    for k in LEVELS:
        size = faces.shape[1] >> k
        some = rng.choice(6 * size * size, min(64, 6 * size * size), replace=False)
        reference = filtered(points, cube_directions(size).reshape(-1, 3)[some], (k / 7) ** 2)
        for n, chain in enumerate(chains):
            result = chain[k - 1].reshape(-1, 3)[some]
            worst[n] = max(worst[n], relative_errors(result, reference, faces, areas).max())
    return worst


def main(size=512, repeats=5):
    samples = SAMPLES * sum(6 * (size >> k) ** 2 for k in LEVELS)
    for name, faces in skies(size).items():
        ours = {tolerance: filtered_chain(faces, tolerance) for tolerance in (0.02, 0.005)}
        theirs = sampled_chain(faces)
        ratios, times, base = {t: [] for t in ours}, {t: [] for t in ours}, []
        for _ in range(repeats):
            base.append(seconds(sampled_chain, faces))
            for tolerance in ours:
                times[tolerance].append(seconds(filtered_chain, faces, tolerance))
                ratios[tolerance].append(base[-1] / times[tolerance][-1])
        error, *errors = largest_errors(faces, [theirs, *ours.values()])
        median = statistics.median(base)
        each = median / samples * 1e9
        print(f"{name}: {SAMPLES} samples {median:.2f} s ({each:.1f} ns each), largest error {error:.2%}")
        for (tolerance, ratio), worst in zip(ratios.items(), errors, strict=True):
            faster, best = statistics.median(ratio), statistics.median(times[tolerance]) * 1e3
            print(f"  tolerance {tolerance}: {faster:.1f} times faster, {best:.0f} ms, error {worst:.3%}")


if __name__ == "__main__":
    main(*map(int, sys.argv[1:]))
