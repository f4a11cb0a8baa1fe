"""Light on the shapes: the sun with hard shadows, lamps, sky light with occlusion, and a sea that mirrors.

All radiance in cd/m2 per channel (Rec. 709), illuminance in lx, positions in metres.
"""

from collections.abc import Callable
from typing import NamedTuple

import numpy as np

from .panorama import add_disc, directions
from .shapes import FAR, blocked, first_hits, to_local
from .waves import glitter, wave_normals


class Lamp(NamedTuple):
    """A glowing ball: position, intensity (3,) in cd the same to all sides, radius in metres."""

    position: np.ndarray
    intensity: np.ndarray
    radius: float

    @property
    def radiance(self):
        return self.intensity / (np.pi * self.radius**2)


class Sea(NamedTuple):
    """A level sea: height, its own diffuse albedo, and the mean square slope of its waves."""

    height: float
    albedo: np.ndarray
    slope_variance: float


class World(NamedTuple):
    """What is seen and what lights it.

    casters : the shapes that throw shadows
    soft_light : (3, 2, 3) illuminance on surfaces that face -x, +x; -y, +y; -z, +z
    sun_illuminance : (3,), on a surface facing the sun
    fills : lamps that light but are not seen
    least : lx below which a lamp's light on a point is left out
    haze : metres after which 1/e of the contrast is left
    """

    eye: np.ndarray
    shapes: list
    casters: list
    background: Callable  # (n, 3) unit vectors -> (n, 3): sky, and land far away
    soft_light: np.ndarray
    sun: np.ndarray | None = None
    sun_illuminance: np.ndarray | None = None
    lamps: tuple = ()
    fills: tuple = ()
    sea: Sea | None = None
    least: float = 0.02
    haze: float = 6000.0


def light_of_sky(background, ground):
    """`soft_light` of a sky above and the radiance `ground` from below."""
    u, v = (np.arange(96) + 0.5) / 96, (np.arange(48) + 0.5) / 48
    d = directions(u[None, :], v[:, None]).reshape(-1, 3)
    light = np.where(d[:, 1:2] > 0, background(d), ground)
    weight = np.repeat(np.sin(np.pi * v), 96) * (np.pi / 48) * (2 * np.pi / 96)
    sides = [(np.maximum(sign * d[:, axis], 0) * weight) @ light for axis in range(3) for sign in (-1, 1)]
    return np.array(sides).reshape(3, 2, 3)


def picture_of(world):
    """The world's radiance seen from its eye, as a function of directions; lamps are added apart."""

    def radiance(d):
        light = world.background(d)
        hits = first_hits(world.eye, d, world.shapes)
        to_sea = _distance_to_sea(world, d)
        sea = to_sea < hits.distance
        solid = np.flatnonzero((hits.shape >= 0) & ~sea)
        points = world.eye + hits.distance[solid, None] * d[solid]
        seen = _surface_light(world, points, d[solid], hits.shape[solid], hits.normal[solid])
        light[solid] = _hazy(world, d[solid], hits.distance[solid], seen)
        if sea.any():
            light[sea] = _hazy(world, d[sea], to_sea[sea], _sea(world, d[sea], to_sea[sea]))
        return light

    return radiance


def add_lamps(picture, world):
    """Add every lamp that the eye sees to a panorama, each pixel with its exact share."""
    for lamp in world.lamps:
        offset = lamp.position - world.eye
        distance = np.linalg.norm(offset)
        towards = offset / distance
        if not blocked(world.eye[None], towards[None], distance - 0.5, world.shapes)[0]:
            add_disc(picture, towards, np.arcsin(lamp.radius / distance), lamp.radiance, fineness=64)


def _distance_to_sea(world, d):
    if world.sea is None:
        return np.full(len(d), FAR)
    drop = world.eye[1] - world.sea.height
    return np.where(d[:, 1] < 0, drop / np.maximum(-d[:, 1], 1e-9), FAR)


def _hazy(world, d, distance, light):
    """Distant things fade into the sky just above the horizon behind them."""
    low = d.copy()
    low[:, 1] = 0.01
    low /= np.linalg.norm(low, axis=1, keepdims=True)
    clear = np.exp(-distance / world.haze)[:, None]
    return light * clear + world.background(low) * (1 - clear)


def _surface_light(world, points, d, shape_of, normals, direct=True):
    """Radiance of points on shapes back along d; seen in a mirror (not direct) without fine shadows."""
    albedo, emission, gloss = _painted(world, shape_of, points, normals)
    points = points + 1e-3 * normals
    falling = _from_sky(world.soft_light, normals)
    if direct:
        falling *= _openness(world, points, normals)[:, None]
    falling += _from_sun(world, points, normals) + _from_lamps(world, points, normals, direct)
    light = albedo * falling / np.pi + emission
    glossy = np.flatnonzero(gloss) if direct else ()
    if len(glossy):
        light[glossy] += _coat(world, points[glossy], d[glossy], normals[glossy], gloss[glossy])
    return light


def _coat(world, points, d, normals, gloss):
    """What a varnish mirrors: Schlick's Fresnel term (1994) times the strength of the coat."""
    facing = np.clip(-np.einsum("ij,ij->i", d, normals), 0, 1)
    mirrored = d + 2 * facing[:, None] * normals
    strength = gloss * (0.05 + 0.95 * (1 - facing) ** 5)
    return strength[:, None] * _mirrored_light(world, points, mirrored)


def _mirrored_light(world, points, d):
    """What rays from mirroring points see: shapes, else the background. (n, 3)."""
    light = world.background(d)
    hits = first_hits(points, d, world.shapes)
    solid = np.flatnonzero(hits.shape >= 0)
    ends = points[solid] + hits.distance[solid, None] * d[solid]
    light[solid] = _surface_light(world, ends, d[solid], hits.shape[solid], hits.normal[solid], direct=False)
    return light


def _painted(world, shape_of, points, normals):
    """Albedo, emission and gloss of points on their shapes."""
    albedo, emission, gloss = np.zeros_like(points), np.zeros_like(points), np.zeros(len(points))
    for k in np.unique(shape_of):
        mine, shape = shape_of == k, world.shapes[k]
        surface = shape.paint(to_local(shape, points[mine] - shape.centre), to_local(shape, normals[mine]))
        albedo[mine], emission[mine], gloss[mine] = surface
    return albedo, emission, gloss


def _from_sky(soft_light, normals):
    """Irradiance by the squares of the normal's parts: exact for faces along the axes."""
    positive = (normals > 0).astype(int)
    return sum(normals[:, i, None] ** 2 * soft_light[i][positive[:, i]] for i in range(3))


def _openness(world, points, normals, reach=9.0):
    """Share of the hemisphere that is free of near shapes, by five directions weighted with the cosine."""
    helper = np.where(np.abs(normals[:, 1:2]) > 0.9, [1.0, 0, 0], [0, 1.0, 0])
    right = np.cross(normals, helper)
    right /= np.linalg.norm(right, axis=1, keepdims=True)
    down = np.cross(normals, right)
    free = 0.2 * ~blocked(points, normals, reach, world.casters)
    for a, b in ((0.6, 0.6), (-0.6, 0.6), (0.6, -0.6), (-0.6, -0.6)):
        d = normals + a * right + b * down
        d /= np.linalg.norm(d, axis=1, keepdims=True)
        free = free + 0.2 * ~blocked(points, d, reach, world.casters)
    return 0.15 + 0.85 * free


def _from_sun(world, points, normals):
    if world.sun is None:
        return 0.0
    facing = np.maximum(normals @ world.sun, 0)
    lit = np.zeros(len(points))
    some = np.flatnonzero(facing > 0)
    towards = np.broadcast_to(world.sun, (len(some), 3))
    lit[some] = facing[some] * ~blocked(points[some], towards, FAR, world.casters)
    return lit[:, None] * world.sun_illuminance


def _from_lamps(world, points, normals, shadows):
    """Illuminance from lamps; shadowed unless they are seen in a mirror."""
    falling = np.zeros_like(points)
    for lamp in (*world.lamps, *world.fills):
        offset = lamp.position - points
        square = np.einsum("ij,ij->i", offset, offset)
        distance = np.sqrt(square)
        facing = np.einsum("ij,ij->i", offset, normals) / distance
        strength = np.maximum(facing, 0) / (square + lamp.radius**2)
        some = np.flatnonzero(strength * lamp.intensity.max() > world.least)
        towards = offset[some] / distance[some, None]
        if shadows:
            strength[some] *= ~blocked(points[some], towards, distance[some] - 0.6, world.casters)
        falling[some] += strength[some, None] * lamp.intensity
    return falling


def _sea(world, d, distance):
    """Sea: the mirrored world, glitter of sun and lamps, and the water's own colour."""
    points = world.eye + distance[:, None] * d
    normals = wave_normals(points, distance, world.sea.slope_variance)
    facing = np.maximum(-np.einsum("ij,ij->i", d, normals), 0.03)
    mirrored = d + 2 * facing[:, None] * normals
    mirrored[:, 1] = np.maximum(np.abs(mirrored[:, 1]), 0.02)
    mirrored /= np.linalg.norm(mirrored, axis=1, keepdims=True)
    fresnel = (0.02 + 0.98 * (1 - facing) ** 5)[:, None]
    seen = _mirrored_light(world, points, mirrored)
    water = world.sea.albedo * world.soft_light[1][1] / np.pi
    light = fresnel * seen + (1 - fresnel) * water
    if world.sun is not None:
        towards = np.broadcast_to(world.sun, d.shape)
        light += glitter(world.sea.slope_variance, d, towards)[:, None] * world.sun_illuminance
    for lamp in world.lamps:
        offset = lamp.position - points
        square = np.einsum("ij,ij->i", offset, offset)
        strength = glitter(world.sea.slope_variance, d, offset / np.sqrt(square)[:, None]) / square
        light += strength[:, None] * lamp.intensity
    return light
