"""Measures the filter's errors against brute force; by itself, the exhaustive table.

    python tests/light/tolerance_errors.py

prints the largest error over all texels of the levels 1..7 of 128^2 faces, in parts of the tolerance, for
every sky, and stores the worst texels of every level in `worst_texels.json` for the short form of the
test. Single-threaded it takes some minutes.
"""

import json
import sys
from pathlib import Path
from typing import NamedTuple

import numpy as np
from exact_filter import filtered_skies
from reference import relative_errors
from tolerance_skies import SKIES

from skykiln.light.directions import alpha_from_roughness, cube_directions
from skykiln.light.pyramid import build_pyramid
from skykiln.light.specular import filter_level

SIZE, WIDTH = 128, 512
LEVELS = range(1, 8)
TOLERANCES = (0.05, 0.02, 0.01, 0.005, 0.002, 0.001)
WORST = Path(__file__).parent / "worst_texels.json"


class Largest(NamedTuple):
    """The largest error of one level: in parts of the tolerance, the texel's index, the smallest result."""

    sky: str
    level: int
    tolerance: float
    parts: float
    texel: int
    smallest: float


def largest_errors(names, size=SIZE, width=WIDTH, levels=LEVELS, tolerances=TOLERANCES, texels=None):
    """Yields a `Largest` for each level, sky and tolerance.

    texels : indices of texels by level, at which errors are looked for; all if there are none.
    """
    skies = [SKIES[name](width) for name in names]
    pyramids = [build_pyramid(sky) for sky in skies]
    for level in levels:
        alpha, normals = alpha_from_roughness(level / 7), cube_directions(size >> level).reshape(-1, 3)
        some = np.arange(len(normals)) if texels is None else np.asarray(texels[level])
        references = filtered_skies(skies, normals[some], alpha)
        for name, sky, pyramid, reference in zip(names, skies, pyramids, references, strict=True):
            for tolerance in tolerances:
                result = filter_level(pyramid, size >> level, alpha, tolerance).reshape(-1, 3)
                errors = relative_errors(result[some], reference, sky).max(axis=1)
                worst = int(errors.argmax())
                yield Largest(
                    name, level, tolerance, float(errors[worst] / tolerance), int(some[worst]),
                    float(result.min()),
                )  # fmt: skip


def table(found):
    """Lines: each sky's largest error over the levels, in parts of the tolerance, and at which level."""
    lines = [f"{'':34}" + "".join(f"{t:>10}" for t in TOLERANCES)]
    for name in dict.fromkeys(f.sky for f in found):
        line = f"{name:34}"
        for tolerance in TOLERANCES:
            its = [f for f in found if (f.sky, f.tolerance) == (name, tolerance)]
            worst = max(its, key=lambda f: f.parts)
            line += f"{worst.parts:7.2f} @{worst.level}"
        lines.append(line)
    return lines


def worst_texels(found, per_level=40):
    """Texel indices by level, those of the largest parts of the tolerance."""
    by_level = {}
    for level in LEVELS:
        ranked = sorted((f for f in found if f.level == level), key=lambda f: -f.parts)
        by_level[level] = list(dict.fromkeys(f.texel for f in ranked))[:per_level]
    return by_level


def main():
    found = []
    for one in largest_errors(list(SKIES)):
        found.append(one)
        if one.parts > 1 or one.smallest < 0:
            print(f"BROKEN {one}", file=sys.stderr, flush=True)
    print("\n".join(table(found)))
    WORST.write_text(json.dumps(worst_texels(found)) + "\n")


if __name__ == "__main__":
    main()
