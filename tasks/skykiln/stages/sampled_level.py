"""A level as importance sampling at run time would give it, as files, and what it would cost."""

import math
from pathlib import Path
from typing import NamedTuple

from ..engine.atomic import write_atomically
from ..engine.chains import chain_of
from ..engine.content import Input
from ..engine.digests import digest_chunks
from ..engine.running import inputs_of
from ..engine.staleness import staleness
from ..errors import SkykilnError
from .extract_faces import face_size_of
from .filter_level import FilterLevel
from .on_demand import check_baked

WANTED = (0.05, 0.01, 0.005)  # relative errors that `needs` are told for
SHARE = 0.95  # of a level's values that keep to `error` and `deviation`


class SampledLevel(NamedTuple):
    """What was written, and what it says.

    files : the level, and its standard error per texel
    error : relative standard error that 95 % of its values keep to, as the samples themselves show it
    deviation : relative deviation from the baked level that 95 % keep to: what they missed counts too
    needs : technique -> samples a texel for each of WANTED, None where `most` don't reach it
    """

    files: tuple
    face_size: int
    error: float
    deviation: float
    needs: dict
    most: int


def sampled_level(target, level, samples, technique, folder: Path) -> SampledLevel:
    """Estimate a level of a baked target by sampling, and write it and its error as OpenEXR.

    Raises: SkykilnError where the target isn't baked, or has no such filtered level
    """
    from ..light.directions import alpha_from_roughness
    from ..light.noise import MOST, noisy_level, samples_needed
    from ..light.source_tree import source_tree

    pixels, baked = _inputs(target, level)
    probe, panorama = target.probe, pixels.array()
    alpha = alpha_from_roughness(probe.roughness[level])
    tree, size = source_tree(panorama), face_size_of(probe, panorama) >> level
    seed = int(digest_chunks([pixels.digest.encode()])[:15], 16)
    noise = noisy_level(tree, size, alpha, samples, technique, seed, math.radians(probe.yaw_deg))
    floor = _floor(panorama)
    return SampledLevel(
        _written(target, level, samples, noise, folder),
        size,
        _largest(noise.standard_error, noise.radiance, floor),
        _largest(noise.radiance - baked.array(), baked.array(), floor),
        samples_needed(tree, alpha, WANTED, floor, seed),
        MOST,
    )


def _inputs(target, level):
    """The Inputs of what a level of a target is filtered from, and of the level."""
    check_baked(chain_of(target))
    last = len(target.probe.roughness) - 1
    if not 0 < level <= last:
        there = f"its filtered levels are 1 to {last}" if last else "it has no filtered levels"
        raise SkykilnError(f"{target.owner}: --level {level}: {there}")
    stage = target.of_same(FilterLevel, level=level)
    verdict = staleness(stage, {})
    made = verdict.stamp.outputs["level"]
    return inputs_of(stage, verdict)["pixels"], Input(stage.files()["level"], made.digest)


def _floor(panorama):
    """Radiance below which errors need not be smaller, as an audit has it."""
    from ..light.audit import BLACK, DARK
    from ..light.photometry import mean_radiance

    return max(DARK * float(mean_radiance(panorama).max()), BLACK)


def _largest(errors, radiance, floor):
    """What all errors but 5 %, relative, keep to."""
    import numpy as np

    return float(np.quantile(np.abs(errors) / np.maximum(radiance, floor), SHARE))


def _written(target, level, samples, noise, folder):
    """Write the two files. Returns: their paths."""
    from ..formats.exr_levels import ExrLevels, write_exr_levels
    from ..light.cube_axes import to_cube_space

    stem = f"{target.owner.replace('/', '_')}.level_{level}.{samples}"
    cubes = {folder / f"{stem}.exr": noise.radiance, folder / f"{stem}.error.exr": noise.standard_error}
    for path, cube in cubes.items():
        image = to_cube_space(cube, target.pinned.cube_axes)
        write_atomically(path, [write_exr_levels(ExrLevels("float", (image,)))])
    return tuple(cubes)
