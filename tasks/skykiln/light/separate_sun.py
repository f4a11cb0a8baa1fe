"""The sun taken out of a sky: a directional light, and the sky that is left.

Of the compact bright regions (`bright_regions`) the sun is the one that

- stands not under the horizon, where its glitter and its mirror images lie;
- is at least four times brighter than its surroundings, which the broad bright place of an overcast sky
  isn't; twice, where clipping hides how bright it was;
- is no wider than three times the sun's disc, when it isn't clipped, besides what its pixels may hide;
- outshines all other compact regions together, which no single lamp of a night does;
- casts a shadow that can be seen: it gives at least 2 % of the illuminance on a surface that faces it
  (the Weber fraction of brightness; common figure, from memory). Of a clipped sun a fourth is enough,
  since far more than that was taken off it.

Its light is what it has beyond the sky, filled in under it from its rim: pixel by pixel sky + excess is the
source. The flux-weighted mean direction makes the directional light's cosine exact wherever the whole
region is above a surface's horizon. The angular radius is that of the uniform disc with the same second
moment, r^2 = 2 <angle^2>, after taking off what the pixels' own extent adds.

A clipped sun shows as a flat top that is wider than the sun's disc. A whole one's is not, however even: the
pixels that it fills lie inside it, and those that it fills in part are alike in two rows at most, those that
meet in a corner.
"""

from typing import NamedTuple

import numpy as np

from skykiln.light.bright_regions import (
    SUN_RADIUS,
    cap_solid_angle,
    compact_regions,
    filled_from_rim,
    pixel_centres,
)
from skykiln.light.directions import panorama_row_solid_angles
from skykiln.light.facing import disc_pixels, irradiance_facing, pixel_vectors
from skykiln.light.photometry import LUMINANCE_WEIGHTS

_PLACES = 32  # bright places looked at
_LEAST_CONTRAST_EV = 2.0
_LEAST_CLIPPED_EV = 1.0
_LEAST_SHARE = 0.02
_LEAST_CLIPPED_SHARE = 0.005
_WIDEST = 3 * SUN_RADIUS
_LOWEST = -0.02  # sine of elevation: refraction, the dip from a height, and a capture a degree off level
_FLAT = 1e-3
_FLAT_ROWS = 3


class Sun(NamedTuple):
    """A directional light."""

    direction: np.ndarray  # (3,) float64, unit vector towards the sun
    angular_radius: float  # rad
    irradiance: np.ndarray  # (3,) float64, on a surface facing it
    contrast_ev: float  # stops by which it stands above its surroundings
    clipped: bool  # its top is flat as only a clipped one is: some of its light is missing


def separate_sun(panorama, weights=LUMINANCE_WEIGHTS):
    """The sky without its sun, and the sun.

    Parameters
    ----------
    panorama : (H, W, 3) float32, radiance, none negative; level.
    weights : (3,), luminance weights of its colour space.

    Returns
    -------
    sky : (H, W, 3) float32; the panorama itself when there is no sun.
    sun : Sun, or None.
    """
    brightness = (panorama @ weights.astype(np.float32)).astype(np.float32)
    lights = [
        (region, *_light_of(panorama, region, weights))
        for region in compact_regions(brightness, _PLACES)
        if region.contrast_ev >= _LEAST_CLIPPED_EV
    ]
    chosen = _sun_among(panorama, [light for light in lights if _stands_out(light[2])], weights)
    if chosen is None:
        return panorama, None
    region, fill, sun = chosen
    sky = panorama.copy()
    sky[region.rows, region.columns] = fill
    return sky, sun


def restored_sun(sun, lux, weights=LUMINANCE_WEIGHTS):
    """The sun with `lux` more of illuminance on a surface facing it, in the colour that it has.

    What clipping took off had come from the sun's own disc, so the second moments of both are added.
    """
    found = float(sun.irradiance @ weights)
    moment = (found * sun.angular_radius**2 + lux * SUN_RADIUS**2) / (found + lux)
    return sun._replace(irradiance=sun.irradiance * (1 + lux / found), angular_radius=float(np.sqrt(moment)))


def with_restored_sun(panorama, sun, lux, weights=LUMINANCE_WEIGHTS):
    """The panorama with `lux` more of illuminance facing its sun, from the sun's disc and in its colour."""
    height, width, _ = panorama.shape
    rows, columns = disc_pixels(width, height, sun.direction, SUN_RADIUS)
    more = np.zeros(panorama.shape)
    share = lux / len(rows) / panorama_row_solid_angles(width, height)[rows]
    np.add.at(more, (rows, columns), share[:, None] * sun.irradiance / float(sun.irradiance @ weights))
    return (panorama + more).astype(np.float32)


def _stands_out(sun):
    return sun.clipped or sun.contrast_ev >= _LEAST_CONTRAST_EV


def _may_be_the_sun(sun, panorama):
    """It is not under the horizon, and not too wide."""
    # Shared evenly by four pixels of width p, a point has <angle^2> = p^2/2, p^2/6 of it taken off.
    hidden = np.sqrt(2 / 3) * np.pi / panorama.shape[0]
    return sun.direction[1] > _LOWEST and (sun.clipped or sun.angular_radius <= _WIDEST + hidden)


def _sun_among(panorama, lights, weights):
    """The light that is the sun, or None."""
    powers = [float(sun.irradiance @ weights) for _, _, sun in lights]
    possible = [k for k, (_, _, sun) in enumerate(lights) if _may_be_the_sun(sun, panorama)]
    if not possible:
        return None
    best = max(possible, key=powers.__getitem__)
    sun = lights[best][2]
    around = float(irradiance_facing(panorama, sun.direction) @ weights)
    least = (_LEAST_CLIPPED_SHARE if sun.clipped else _LEAST_SHARE) * around
    outshines = powers[best] > sum(powers) - powers[best]
    return lights[best] if outshines and powers[best] >= least else None


def _light_of(panorama, region, weights):
    """What the sky is under a region, (n, 3) float32, and its excess as a Sun."""
    rows, columns, contrast_ev = region
    height, width, _ = panorama.shape
    source = panorama[rows, columns]
    fill = np.minimum(filled_from_rim(panorama, rows, columns), source).astype(np.float32)
    excess = source.astype(np.float64) - fill
    across, upwards, turns = pixel_vectors(width, height)
    vectors = np.stack(
        [across[rows] * turns[columns, 0], upwards[rows], across[rows] * turns[columns, 1]], axis=1
    )
    irradiances = vectors.T @ excess  # x, y, z of each channel
    direction = irradiances @ weights
    direction /= np.linalg.norm(direction)
    radius = _angular_radius(region, excess @ weights, direction, width, height)
    clipped = _is_clipped(source, rows, width, height)
    return fill, Sun(direction, radius, direction @ irradiances, contrast_ev, clipped)


def _angular_radius(region, excess, direction, width, height):
    rows, columns, _ = region
    flux = excess * panorama_row_solid_angles(width, height)[rows]
    away = ((pixel_centres(rows, columns, width, height) - direction) ** 2).sum(1)
    across = 2 * np.pi / width * np.sqrt(max(0.0, 1 - direction[1] ** 2))
    of_pixels = ((np.pi / height) ** 2 + across**2) / 12
    return max(SUN_RADIUS, float(np.sqrt(max(0.0, 2 * (flux @ away / flux.sum() - of_pixels)))))


def _is_clipped(source, rows, width, height):
    flat = (source >= (1 - _FLAT) * source.max(0)).any(1)
    wide = panorama_row_solid_angles(width, height)[rows[flat]].sum() > cap_solid_angle(SUN_RADIUS)
    return bool(wide and len(np.unique(rows[flat])) >= _FLAT_ROWS)
