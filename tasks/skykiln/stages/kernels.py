"""Compiled kernels, made ready once for a machine instead of once for each worker."""

import fcntl
import importlib.util
import os
import sys

# 16 x 8 grey pixels without run lengths.
TINY_PICTURE = b"#?RADIANCE\n\n-Y 8 +X 16\n" + bytes((128, 128, 128, 129)) * 128
EXTRAS = {"bc6h": "ispc_texcomp"}  # pixel coding -> the package that its extra installs


def is_installed(pixels: str) -> bool:
    """Whether what a pixel coding needs beyond skykiln's own set-up is there."""
    return pixels not in EXTRAS or importlib.util.find_spec(EXTRAS[pixels]) is not None


def warm_kernels(again: bool):
    """Compile every kernel, if this machine has not yet, while other processes wait.

    Parameters: again : load them into this process even so, for the workers that it will fork
    """
    from ..jit import cache_directory

    folder = cache_directory()
    folder.mkdir(parents=True, exist_ok=True)
    done = folder / "compiled"
    with (folder / "lock").open("w") as lock:
        fcntl.flock(lock, fcntl.LOCK_EX)
        if not done.exists():
            print("compiling kernels, once for this machine", file=sys.stderr, flush=True)
        if again or not done.exists():
            _run_every_kernel()
            done.touch()


def _run_every_kernel():
    """A tiny sky through every stage's numerics."""
    import numpy as np

    from ..formats.radiance_hdr import read_radiance_hdr
    from ..light import (
        brdf,
        brute_lighting,
        faces,
        harmonics,
        irradiance,
        photometry,
        pyramid,
        repair,
        sheen,
        specular,
        zonal_filter,
    )
    from ..light.charts import PANORAMA
    from ..light.colour import converted
    from ..light.directions import alpha_from_roughness
    from ..light.resampling import footprint_means
    from ..light.separate_sun import separate_sun

    sky = read_radiance_hdr(TINY_PICTURE, "tiny.hdr", 128).pixels
    sky[0, 0] = np.nan  # so that there is something to repair
    sky = repair.repair_pixels(sky)[0]
    converted(sky, np.eye(3))
    footprint_means(sky[None], PANORAMA, 8, 4)
    faces.extract_faces(sky, 8)
    nodes = pyramid.build_pyramid(sky)
    level = specular.filter_level(nodes, 4, alpha_from_roughness(0.5), 0.1)
    _run_every_estimator(sky, level)
    specular.filter_level(nodes, 64, alpha_from_roughness(0.4), 0.9)  # on a sparse grid
    irradiance.irradiance_cube(nodes, 4, 0.1)
    harmonics.irradiance_coefficients(sky)
    photometry.horizontal_illuminance(sky)
    axes = np.eye(3)
    brute_lighting.lit_by_source(sky, 0.0, np.ones((4, 4, 2)), axes, axes, axes, axes, np.array([0, 0.3, 1]))
    sky[2, 5] = 60_000  # a sun
    separate_sun(sky)
    brdf.brdf_table(4)
    sheen.sheen_albedo(4)
    zonal_filter.filter_level_by(sheen.sheen_lobe(0.25), nodes, 4, 0.1)
    faces_with_a_sun = np.ones((6, 8, 8, 3), np.float32)
    faces_with_a_sun[0, 1, 2] = 60_000  # a block that BC6H has to fit anew
    _run_every_coding(faces_with_a_sun)


def _run_every_estimator(sky, level):
    """Audit a level of roughness 0.5, and estimate it by sampling."""
    from ..light import audit, noise
    from ..light.source_tree import source_tree

    audit.audit_charts(sky, [audit.Chart("level", level, 0.25, 0.1)], 1)
    tree = source_tree(sky)
    for technique in noise.TECHNIQUES:
        noise.noisy_level(tree, 1, 0.25, 4, technique, 1)
    noise.samples_needed(tree, 0.25, [0.5], 0.1, 1)


def _run_every_coding(level):
    """Encode and decode a level in every coding that is installed."""
    from ..formats.pixels import PIXELS

    for name in filter(is_installed, PIXELS):
        coding = PIXELS[name]
        blocks = coding.encode(level[..., : coding.channels]).tobytes()
        coding.decode(blocks, level.shape[:3])


def available_cores() -> int:
    """The cores that this process may use."""
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count()
