"""The filter against textbook importance sampling, in one run: time ratios and largest errors.

    python tests/benchmarks/bench_filter.py [face size] [repeats]

Prints, per tolerance, how many times faster the full chain of 8 levels (roughness k/7, node pyramid
included) is than 1,024 Hammersley samples per texel with mip-filtered lookups, medians of interleaved
pairs of runs, without and with a sun of 5e4 over a sky of 1; and both methods' largest error against float64
brute force over the panorama (2,048 wide for 512 faces) at 64 texels a level.
"""

import statistics
import sys
import time
from pathlib import Path

import numpy as np
from textbook_sampling import SAMPLES, mip_chain, sampled_level

from skykiln.light.directions import cube_directions, panorama_directions
from skykiln.light.faces import extract_faces
from skykiln.light.pyramid import build_pyramid
from skykiln.light.specular import filter_level

sys.path.insert(0, str(Path(__file__).parents[1] / "light"))
from reference import filtered, joined, panorama_points, relative_errors

LEVELS = range(1, 8)


def skies(width):
    """A sky of about 1 that falls off downwards and holds fine structure; the same with a sun."""
    rng = np.random.default_rng(1)
    up = panorama_directions(width, width // 2)[..., 1:2]
    grey = 1 + 0.5 * up + 0.5 * rng.random((width // 2, width, 1))
    sky = (grey * np.array([0.8, 0.9, 1.3])).astype(np.float32)
    sun = sky.copy()
    sun[width // 8, width // 3 : width // 3 + 3] = 5e4
    return {"sky": sky, "sky and sun": sun}


def filtered_chain(panorama, tolerance):
    """All levels by the product's filter."""
    tree, size = build_pyramid(panorama), panorama.shape[1] // 4
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


def largest_errors(panorama, chains):
    """Largest error of each chain over 64 texels of every level, against the panorama."""
    bright = np.where(panorama > 1e3, panorama, 0)
    points = joined(panorama_points(panorama - bright, 1, 1), panorama_points(bright, 4, 3))
    size, rng = panorama.shape[1] // 4, np.random.default_rng(0)
    worst = [0.0] * len(chains)
    for k in LEVELS:
        directions = cube_directions(size >> k).reshape(-1, 3)
        some = rng.choice(len(directions), min(64, len(directions)), replace=False)
        reference = filtered(points, directions[some], (k / 7) ** 2)
        for n, chain in enumerate(chains):
            result = chain[k - 1].reshape(-1, 3)[some]
            worst[n] = max(worst[n], relative_errors(result, reference, panorama).max())
    return worst


def main(size=512, repeats=5):
    samples = SAMPLES * sum(6 * (size >> k) ** 2 for k in LEVELS)
    for name, panorama in skies(4 * size).items():
        faces = extract_faces(panorama, size)
        ours = {tolerance: filtered_chain(panorama, tolerance) for tolerance in (0.02, 0.005)}
        theirs = sampled_chain(faces)
        ratios, times, base = {t: [] for t in ours}, {t: [] for t in ours}, []
        for _ in range(repeats):
            base.append(seconds(sampled_chain, faces))
            for tolerance in ours:
                times[tolerance].append(seconds(filtered_chain, panorama, tolerance))
                ratios[tolerance].append(base[-1] / times[tolerance][-1])
        error, *errors = largest_errors(panorama, [theirs, *ours.values()])
        median = statistics.median(base)
        each = median / samples * 1e9
        print(f"{name}: {SAMPLES} samples {median:.2f} s ({each:.1f} ns each), largest error {error:.2%}")
        for (tolerance, ratio), worst in zip(ratios.items(), errors, strict=True):
            faster, best = statistics.median(ratio), statistics.median(times[tolerance]) * 1e3
            print(f"  tolerance {tolerance}: {faster:.1f} times faster, {best:.0f} ms, error {worst:.3%}")


if __name__ == "__main__":
    main(*map(int, sys.argv[1:]))
