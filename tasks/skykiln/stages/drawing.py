"""Arrays and packed files of a probe -> its pictures, and numbers about them."""

import functools
import math

import numpy as np

from ..formats.texture_files import read_texture
from ..light.brdf import brdf_table
from ..light.brute_lighting import lit_by_source
from ..light.chain_change import brightest_spot
from ..light.colour import SPACES, weights_of
from ..light.cube_axes import from_cube_space
from ..light.quay_scene import first_hits, scene_eye, view_rays
from ..light.split_sum import ProbeLight, lit_by_probe
from ..light.thumbnails import stored, thumbnails
from ..report.probe_pictures import (
    levels_picture,
    luminance_picture,
    luminance_range,
    panorama_picture,
    reduced_panorama,
    scene_picture,
    small_picture,
)

SCENE_SIZE = 63, 112  # rows, columns
SCENE_YAW, SCENE_PITCH, SCENE_VIEW = (math.radians(degrees) for degrees in (25.0, -14.0, 23.0))
TABLE_SIZE = 64  # of the BRDF table: plenty for so small a picture


def small_files(levels) -> dict:
    """What every probe has: role -> array or bytes."""
    copies = thumbnails(levels)
    return {"thumbnails": stored(copies), "small": small_picture(copies[0])}


def looks_of(levels, working) -> dict:
    """Where the probe is brightest."""
    direction, luminance = brightest_spot(levels[0], weights_of(SPACES[working]))
    return {"brightest": {"direction": direction.tolist(), "luminance": luminance}}


def light_of(specular, irradiance, axes, roughness, stops) -> ProbeLight:
    """The light in two packed files, in the world and in true units."""
    scale = np.float32(2.0**stops)
    chain, cube = (
        [from_cube_space(level, axes) * scale for level in read_texture(data, "packed file").levels]
        for data in (specular, irradiance)
    )
    return ProbeLight(tuple(chain), roughness, cube[0], _table())


def sky_files(panorama, yaw, levels, cube, light, working) -> tuple[dict, dict]:
    """The further pictures of a sky, and numbers about them."""
    weights = weights_of(SPACES[working])
    small = reduced_panorama(panorama)
    small = np.roll(small, -round(yaw / (2 * np.pi) * small.shape[1]), axis=1)  # as the world has it
    limits = luminance_range(small, weights)
    scene, difference = _scene(panorama, yaw, light)
    pictures = {
        "panorama": panorama_picture(small),
        "luminance": luminance_picture(small, weights, limits),
        "levels": levels_picture(levels, cube),
        "scene": scene,
    }
    told = {
        "panorama_size": [small.shape[1], small.shape[0]],
        "luminance_range": list(limits),
        "scene_difference": {
            "median": float(np.median(difference)),
            "percentile_99": float(np.percentile(difference, 99)),
        },
    }
    return pictures, told


def _scene(panorama, yaw, light):
    rays, hits = _view()
    v, hit = -rays[hits.hit], hits.hit
    surface = hits.n[hit], v, hits.albedo[hit], hits.f0[hit], hits.roughness[hit]
    packed = lit_by_probe(light, *surface)
    return scene_picture(hit, packed, lit_by_source(panorama, yaw, light.table, *surface), SCENE_SIZE)


@functools.cache
def _view():
    height, width = SCENE_SIZE
    rays = view_rays(width, height, SCENE_YAW, SCENE_PITCH, SCENE_VIEW).reshape(-1, 3)
    return rays, first_hits(scene_eye(SCENE_YAW, SCENE_PITCH), rays)


@functools.cache
def _table():
    return brdf_table(TABLE_SIZE)
