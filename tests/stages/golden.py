"""Small outputs of every numeric stage, as they were when its `version` was last bumped.

After a deliberate change of values: bump the stage's version, run `python tests/stages/golden.py`,
and commit golden.npz with it.
"""

import sys
import tempfile
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[1]))

from skykiln.engine.chains import chain_of
from skykiln.formats.ktx2 import read_ktx2
from tiny_pipeline import TinyPipeline, sky_pixels, write_sky

FILE = Path(__file__).with_name("golden.npz")


def golden_pipeline(folder):
    """A sky with all that stages have to deal with: a lamp, colours apart, spoiled pixels, a turn. And one
    whose sun is taken out."""
    pipeline = TinyPipeline(folder, probes=["ferry_noon", "low_sun"])
    pixels = sky_pixels(3)
    pixels[2, 5] = [4e5, 2e5, 1e5]
    pixels[5, 11] = [0, 0, 300]
    pixels[6, 2], pixels[0, 0, 1] = np.nan, -3
    write_sky(folder / "ferry_noon.exr", pixels=pixels)
    pipeline.recipe["sheen"] = {"levels": 2, "roughness": [0.4, 1], "face_size": 4}
    pipeline.settings["sources"]["ferry_noon"] |= {"yaw_deg": 30, "horizontal_lux": 5e4}
    pixels = sky_pixels(4)
    pixels[2, 6] = 3e4
    write_sky(folder / "low_sun.exr", pixels=pixels)
    pipeline.settings["recipes"]["apart"] = {**pipeline.recipe, "sun": {"action": "separate"}}
    pipeline.settings["sources"]["low_sun"]["recipe"] = "apart"
    return pipeline


def stage_outputs(pipeline):
    """(array, version) by name of stage and output, of a baked pipeline; of its first probe that has it."""
    snapshot = pipeline.snapshot()
    found = {}
    for target in snapshot.targets:
        for verdict in chain_of(target).verdicts:
            stage = verdict.stage
            for role, path in stage.files().items():
                array = _array(Path(path))
                if array is not None and stage.title != "published files":
                    found.setdefault(f"{stage.title}/{role}", (array, stage.version))
    return found


def _array(path):
    if path.suffix == ".npy":
        return np.load(path)
    if path.suffix == ".ktx2":
        levels = read_ktx2(path.read_bytes(), path.name).levels
        return np.concatenate([level.ravel() for level in levels])
    return None


def main():
    with tempfile.TemporaryDirectory() as folder:
        pipeline = golden_pipeline(Path(folder))
        pipeline.bake()
        arrays = {}
        for name, (array, version) in stage_outputs(pipeline).items():
            arrays[name], arrays[f"{name} version"] = array, version
        np.savez_compressed(FILE, **arrays)


if __name__ == "__main__":
    main()
