"""Correct chains of cube maps, and the same with a fault planted in them, for the audit's tests.

Correct maps come from the estimator itself at an error far below an audit's, and unfiltered ones from
the exact footprint means; faults change what they are made from or how they lie.
"""

import functools

import numpy as np
from panorama_reference import SKIES

from skykiln.light.audit import Chart
from skykiln.light.directions import (
    FACE_AXES,
    alpha_from_roughness,
    cube_directions,
    panorama_directions,
    panorama_row_solid_angles,
)
from skykiln.light.faces import extract_faces
from skykiln.light.photometry import mean_radiance
from skykiln.light.source_tree import source_tree
from skykiln.light.strata import stratified_estimate
from skykiln.light.stratum_kernels import GGX
from skykiln.light.texel_draw import yaw_rotation

HEIGHT = 64
LEVELS = 8
SIZES = (32, 16, 16, 8, 8, 4, 4, 2)
ROUGHNESS = tuple(level / (LEVELS - 1) for level in range(LEVELS))
TOLERANCE = 0.005
HALF_FLOAT = 2.0**-11
CLAMPED_AT = 16000.0

_OTHER = {"linear": "sun", "sun": "lamps", "lamps": "linear"}


@functools.cache
def correct_charts(sky):
    return _charts(SKIES[sky](HEIGHT))


def in_half_floats(charts):
    """As rgba16f packs them, with what its rounding may have moved."""
    coded = [c.faces.astype(np.float16).astype(np.float32) for c in charts]
    return [
        c._replace(faces=faces, rounding=np.maximum(faces * HALF_FLOAT, 2.0**-25))
        for c, faces in zip(charts, coded, strict=True)
    ]


def faulty_charts(sky, fault):
    """The charts of a sky with one of FAULTS."""
    return FAULTS[fault](SKIES[sky](HEIGHT), sky)


def _charts(panorama, normals=cube_directions, alpha=alpha_from_roughness, yaw=0.0):
    specular = [
        Chart(f"level {level}", _level(panorama, level, normals, alpha, yaw), _alpha(level), TOLERANCE)
        for level in range(LEVELS)
    ]
    return [*specular, Chart("irradiance", _filtered(panorama, normals(8), 1.0, yaw), 1.0, TOLERANCE)]


def _alpha(level):
    return alpha_from_roughness(ROUGHNESS[level])


def _level(panorama, level, normals=cube_directions, alpha=alpha_from_roughness, yaw=0.0):
    if level == 0:
        return extract_faces(panorama, SIZES[0], yaw)
    return _filtered(panorama, normals(SIZES[level]), alpha(ROUGHNESS[level]), yaw)


def _filtered(panorama, directions, alpha, yaw):
    normals = directions.reshape(-1, 3) @ yaw_rotation(yaw)
    count = len(normals)
    means, _, _ = stratified_estimate(
        source_tree(panorama),
        np.full(count, GGX),
        normals,
        np.full(count, alpha),
        np.zeros((count, 4, 3)),
        np.ones(count),
        1e-3 * mean_radiance(panorama).max(),
        np.full(count, 0.002),
        10**6,
        11,
    )
    return means.reshape(directions.shape).astype(np.float32)


def _next_roughness(level):
    def planted(panorama, sky):
        charts = list(correct_charts(sky))
        faces = _filtered(panorama, cube_directions(SIZES[level]), _alpha(level + 1), 0.0)
        charts[level] = charts[level]._replace(faces=faces)
        return charts

    return planted


def _alpha_for_roughness(panorama, sky):
    return _charts(panorama, alpha=lambda roughness: roughness)


def _no_cosine(panorama, sky):
    def kernel(c, a):
        return (c > 0) / ((1 - a * a) * (1 - c) + 2 * a * a) ** 2

    return _summed(panorama, sky, kernel, panorama_row_solid_angles(2 * HEIGHT, HEIGHT))


def _no_solid_angles(panorama, sky):
    def kernel(c, a):
        return np.maximum(c, 0) / ((1 - a * a) * (1 - c) + 2 * a * a) ** 2

    return _summed(panorama, sky, kernel, np.ones(HEIGHT))


def _summed(panorama, sky, kernel, row_weights):
    """Charts whose levels from 2 on are plain sums over pixels with some kernel and weights."""
    charts = list(correct_charts(sky))
    directions = panorama_directions(2 * HEIGHT, HEIGHT).reshape(-1, 3)
    weights = np.repeat(row_weights, 2 * HEIGHT)
    radiance = panorama.reshape(-1, 3).astype(np.float64)
    for level in range(2, LEVELS):
        normals = cube_directions(SIZES[level])
        values = kernel(normals.reshape(-1, 3) @ directions.T, _alpha(level)) * weights
        faces = values @ radiance / values.sum(axis=1, keepdims=True)
        charts[level] = charts[level]._replace(faces=faces.reshape(normals.shape).astype(np.float32))
    return charts


def _rearranged(order, mirrored=None):
    def planted(panorama, sky):
        charts = []
        for chart in correct_charts(sky):
            faces = chart.faces[list(order)].copy()
            if mirrored is not None:
                faces[mirrored] = faces[mirrored, :, ::-1].copy()
            charts.append(chart._replace(faces=faces))
        return charts

    return planted


def _half_texel_off(panorama, sky):
    charts = _charts(panorama, normals=_corner_directions)
    twice = extract_faces(panorama, 2 * SIZES[0])
    moved = np.roll(twice, (-1, -1), axis=(1, 2))
    faces = moved.reshape(6, SIZES[0], 2, SIZES[0], 2, 3).mean(axis=(2, 4))
    charts[0] = charts[0]._replace(faces=faces)
    return charts


def _corner_directions(size):
    """World directions of texels' lower right corners, half a texel from their centres."""
    a = (2.0 * np.arange(size) + 2.0) / size - 1.0
    major, right, down = (FACE_AXES[:, axis, None, None] for axis in range(3))
    d = major + right * a[None, None, :, None] + down * a[None, :, None, None]
    return d / np.linalg.norm(d, axis=-1, keepdims=True)


def _clamped(panorama, sky):
    return _charts(np.minimum(panorama, np.float32(CLAMPED_AT)))


def _yawed(panorama, sky):
    return _charts(panorama, yaw=np.radians(1.0))


def _stale(level):
    def planted(panorama, sky):
        charts = list(correct_charts(sky))
        other = _level(SKIES[_OTHER[sky]](HEIGHT), level)
        charts[level] = charts[level]._replace(faces=other)
        return charts

    return planted


def _scaled(factor):
    def planted(panorama, sky):
        return [c._replace(faces=c.faces * np.float32(factor)) for c in correct_charts(sky)]

    return planted


FAULTS = {
    **{f"level {k} with the roughness of {k + 1}": _next_roughness(k) for k in range(1, LEVELS - 1)},
    "alpha for roughness": _alpha_for_roughness,
    "missing n.l weight": _no_cosine,
    "faces +x and -x swapped": _rearranged((1, 0, 2, 3, 4, 5)),
    "faces +x and +y swapped": _rearranged((2, 1, 0, 3, 4, 5)),
    "face +x mirrored": _rearranged(range(6), 0),
    "face +y mirrored": _rearranged(range(6), 2),
    "face -z mirrored": _rearranged(range(6), 5),
    "half-texel shift": _half_texel_off,
    "sun lost to clamping": _clamped,
    "solid angles forgotten": _no_solid_angles,
    "yaw of 1 degree": _yawed,
    "level 1 of another sky": _stale(1),
    "level 4 of another sky": _stale(4),
    "2 % too bright": _scaled(1.02),
    "2 % too dark": _scaled(0.98),
}

# Only the sun is bright enough to be clamped.
SEEN = [(sky, fault) for fault in FAULTS for sky in SKIES if sky == "sun" or "clamping" not in fault]
