"""Draws the README's pictures from the packed files of the sample bake: run `skykiln bake` first."""

from pathlib import Path

import numpy as np
from PIL import Image

from skykiln.formats.ktx2 import read_ktx2
from skykiln.formats.source_files import read_source
from skykiln.report.pictures import chain_sheet, exposure_for, tone_mapped

ROOT = Path(__file__).parents[1]
SKIES = ("ferry_noon", "overcast_quay", "low_sun_evening", "night_quay")


def packed_levels(probe):
    """The levels of a probe's specular chain, as its file holds them."""
    path = ROOT / "build" / "probes" / probe / "specular.rgba16f.ktx2"
    return [level[..., :3].astype(np.float64) for level in read_ktx2(path.read_bytes(), str(path)).levels]


def panorama(path, width):
    """A source, tone mapped and box-filtered to a width."""
    pixels = read_source(path).pixels.astype(np.float64)
    step = max(1, pixels.shape[1] // width)
    small = pixels.reshape(pixels.shape[0] // step, step, pixels.shape[1] // step, step, 3).mean((1, 3))
    return tone_mapped(small, exposure_for(small))


def main():
    pictures = ROOT / "docs" / "pictures"
    samples = ROOT / "sample_assets"
    skies = [panorama(next(samples.glob(f"{name}.*")), 512) for name in SKIES]
    Image.fromarray(np.concatenate([np.concatenate(skies[:2], 1), np.concatenate(skies[2:], 1)])).save(
        pictures / "samples.png", optimize=True
    )
    rooms = [panorama(path, 256) for path in sorted((samples / "concourse").glob("*.exr"))[:8]]
    Image.fromarray(np.concatenate([np.concatenate(rooms[:4], 1), np.concatenate(rooms[4:], 1)])).save(
        pictures / "concourse.png", optimize=True
    )
    Image.fromarray(chain_sheet(packed_levels("ferry_noon"), 4, 768)[::3, ::3]).save(
        pictures / "ferry_noon_levels.png", optimize=True
    )


if __name__ == "__main__":
    main()
