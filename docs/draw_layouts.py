"""Draws one sample sky in every source layout, small, for the README: with tests/light in PYTHONPATH."""

from pathlib import Path

import numpy as np
from layout_pictures import PROJECTIONS, photographed
from PIL import Image

from skykiln.formats.source_files import read_source
from skykiln.report.pictures import exposure_for, tone_mapped

ROOT = Path(__file__).parents[1]
EDGE = 32  # texels of a face; a disc is twice as wide


def main():
    sky = read_source(ROOT / "sample_assets" / "ferry_noon.exr").pixels
    height, width, _ = sky.shape
    exposure = exposure_for(sky[::8, ::8].astype(np.float64))

    def seen(d):
        outside, d = np.isnan(d[..., :1]), np.nan_to_num(d)
        u = 0.5 - np.arctan2(d[..., 0], d[..., 2]) / (2 * np.pi)
        v = np.arccos(np.clip(d[..., 1], -1, 1)) / np.pi
        rows, columns = (v * height).astype(int), (u * width).astype(int)
        return np.where(outside, 0, sky[np.minimum(rows, height - 1), columns % width])

    for name, (projection, (across, down)) in PROJECTIONS.items():
        edge = EDGE // 2 if across == down else EDGE
        picture = photographed(seen, projection, across * edge, down * edge)
        shown = tone_mapped(picture.astype(np.float64), exposure)
        Image.fromarray(shown).save(ROOT / "docs" / "pictures" / f"layout_{name}.png", optimize=True)


if __name__ == "__main__":
    main()
