"""Difference images: the filter at tolerance 0.01 minus brute force, to be looked at for steps and patterns.

    python tests/benchmarks/draw_differences.py FOLDER

writes `unfolded.png`: levels 1, 2 and 4 (rows) of 128^2 faces, unfolded, of a sky with a sun on an edge
between faces, of 10,000 lamps and of the night quay (columns); and `windows.png`: a corner of one face of
levels 1, 2 and 3 of 512^2 faces, where wide lobes are evaluated on a sparser grid. Red is too bright, blue
too dark, white exact; full colour is a fifth of the tolerance. Prints the largest errors. Some minutes.
"""

import sys
from pathlib import Path

import numpy as np
from PIL import Image

sys.path.insert(0, str(Path(__file__).parents[1] / "light"))
from exact_filter import filtered_skies
from tolerance_skies import SKIES

from skykiln.light.directions import alpha_from_roughness, cube_directions
from skykiln.light.pyramid import build_pyramid
from skykiln.light.specular import filter_level

NAMES = ("sun on an edge", "lamps", "night_quay")
TOLERANCE = 0.01
FULL_COLOUR = 0.2  # of the tolerance
SIDE = 64  # of a face's picture, and texels along the edge of a window
# Where each face stands in the cross: +z in the middle, its neighbours beside it as seen from inside.
PLACES = {0: (1, 2), 1: (1, 0), 2: (0, 1), 3: (2, 1), 4: (1, 1), 5: (1, 3)}


def differences(width, size, level, texels):
    """Signed errors of the green channel, in parts of the tolerance, (skies, len(texels))."""
    skies = [SKIES[name](width) for name in NAMES]
    alpha = alpha_from_roughness(level / 7)
    exact = filtered_skies(skies, cube_directions(size >> level).reshape(-1, 3)[texels], alpha)[..., 1]
    ours = [filter_level(build_pyramid(s), size >> level, alpha, TOLERANCE).reshape(-1, 3) for s in skies]
    return (np.array([result[texels, 1] for result in ours]) - exact) / exact / TOLERANCE


def coloured(parts):
    """Red above, blue below, white at nothing."""
    share = (parts / FULL_COLOUR).clip(-1, 1)[..., None]
    red, blue = np.array([0.7, 0.05, 0.1]), np.array([0.05, 0.2, 0.7])
    colour = 1 + np.where(share > 0, share * (red - 1), -share * (blue - 1))
    return np.rint(255 * colour).astype(np.uint8)


def enlarged(pixels, side):
    """Whole multiples, to `side` pixels."""
    times = side // pixels.shape[0]
    return pixels.repeat(times, 0).repeat(times, 1)


def unfolded(parts, size):
    """The six faces as a cross, (3 SIDE, 4 SIDE, 3)."""
    cross = np.full((3 * SIDE, 4 * SIDE, 3), 200, np.uint8)
    for face, (row, column) in PLACES.items():
        picture = enlarged(coloured(parts.reshape(6, size, size)[face]), SIDE)
        cross[row * SIDE : (row + 1) * SIDE, column * SIDE : (column + 1) * SIDE] = picture
    return cross


def sheet(rows):
    """Rows of pictures of one size, with a narrow gap."""
    padded = [[np.pad(p, ((0, 6), (0, 6), (0, 0)), constant_values=90) for p in row] for row in rows]
    return np.concatenate([np.concatenate(row, 1) for row in padded], 0)


def window(size):
    """Indices of a corner of the +x face that touches the sun's edge."""
    j, i = np.meshgrid(np.arange(SIDE) + size // 2 - SIDE // 2, np.arange(SIDE), indexing="ij")
    return (j * size + i).ravel()


def tell(what, level, parts):
    for name, values in zip(NAMES, parts, strict=True):
        print(f"{what} level {level}, {name}: {np.abs(values).max():.2f} of the tolerance", flush=True)


def main(folder):
    folder.mkdir(parents=True, exist_ok=True)
    rows = []
    for level in (1, 2, 4):
        size = 128 >> level
        parts = differences(512, 128, level, np.arange(6 * size * size))
        tell("128^2", level, parts)
        rows.append([unfolded(values, size) for values in parts])
    Image.fromarray(sheet(rows)).save(folder / "unfolded.png", optimize=True)
    rows = []
    for level in (1, 2, 3):
        parts = differences(1024, 512, level, window(512 >> level))
        tell("512^2", level, parts)
        rows.append([enlarged(coloured(values.reshape(SIDE, SIDE)), 4 * SIDE) for values in parts])
    Image.fromarray(sheet(rows)).save(folder / "windows.png", optimize=True)


if __name__ == "__main__":
    main(Path(sys.argv[1]))
