"""Paints: what a point of a shape looks like. Each function here returns one."""

import numpy as np

from .shapes import Surface

UP_FACE = 0.5  # |y| of the normal above which a face counts as level


def plain(albedo, gloss=0.0, emission=(0, 0, 0)):
    """One colour all over."""
    return lambda points, normals: _surface(len(points), albedo, gloss, emission)


def banded(low, high, at, gloss=0.0):
    """Two colours, changing at the local height `at`."""

    def paint(points, normals):
        surface = _surface(len(points), high, gloss)
        surface.albedo[points[:, 1] < at] = low
        return surface

    return paint


def ringed(one, other, height):
    """Rings of two colours, each `height` high."""

    def paint(points, normals):
        surface = _surface(len(points), one)
        surface.albedo[np.floor(points[:, 1] / height) % 2 == 0] = other
        return surface

    return paint


def ribbed(albedo, pitch=0.6):
    """Sheet metal with upright ribs, as containers have."""

    def paint(points, normals):
        surface = _surface(len(points), albedo)
        rib = np.cos(2 * np.pi * across(points, normals) / pitch)
        level = np.abs(normals[:, 1]) > UP_FACE
        surface.albedo[:] *= np.where(level, 1.0, 1 + 0.18 * rib)[:, None]
        return surface

    return paint


def windowed(wall, cell, opening, lit=0.0, glow=(30, 22, 13), glass=(0.03, 0.04, 0.05), seed=1):
    """A wall with a window in the middle of every cell; `lit` of them shine.

    cell, opening : (width, height) in metres
    """

    def paint(points, normals):
        surface = _surface(len(points), wall)
        u, v = across(points, normals) / cell[0], points[:, 1] / cell[1]
        in_cell = [np.abs((x - np.floor(x)) - 0.5) * size for x, size in ((u, cell[0]), (v, cell[1]))]
        pane = (in_cell[0] < opening[0] / 2) & (in_cell[1] < opening[1] / 2)
        pane &= np.abs(normals[:, 1]) < UP_FACE
        surface.albedo[pane], surface.gloss[pane] = glass, 1.0
        on = pane & (cell_hash(np.floor(u), np.floor(v), seed) < lit)
        shade = 0.4 + 0.6 * cell_hash(np.floor(u), np.floor(v), seed + 7)
        surface.emission[on] = shade[on, None] * np.array(glow)
        return surface

    return paint


def paved(stone, slab, marks=()):
    """Concrete slabs with joints, and painted marks: rectangles (x0, x1, z0, z1, colour)."""

    def paint(points, normals):
        x, z = points[:, 0], points[:, 2]
        tone = 0.86 + 0.2 * cell_hash(np.floor(x / slab), np.floor(z / slab), 3)
        surface = _surface(len(points), stone)
        surface.albedo[:] *= tone[:, None]
        joint = np.minimum(_from_edge(x, slab), _from_edge(z, slab)) < 0.02
        surface.albedo[joint] *= 0.55
        for x0, x1, z0, z1, colour in marks:
            surface.albedo[(x > x0) & (x < x1) & (z > z0) & (z < z1)] = colour
        return surface

    return paint


def varnished(paint, gloss):
    """Another paint under a glossy coat."""
    return lambda points, normals: paint(points, normals)._replace(gloss=np.full(len(points), gloss))


def across(points, normals):
    """The level coordinate along an upright face."""
    return np.where(np.abs(normals[:, 0]) > np.abs(normals[:, 2]), points[:, 2], points[:, 0])


def cell_hash(i, j, seed):
    """A number in 0..1 for every pair of whole numbers: the same everywhere, as it is integer arithmetic."""
    i, j = np.asarray(i).astype(np.int64), np.asarray(j).astype(np.int64)
    mixed = (i * 374761393 + j * 668265263 + seed * 2246822519) & 0xFFFFFFFF
    mixed = ((mixed ^ (mixed >> 13)) * 1274126177) & 0xFFFFFFFF
    return ((mixed ^ (mixed >> 16)) & 0xFFFF) / 65536.0


def _from_edge(x, size):
    inside = x - np.floor(x / size) * size
    return np.minimum(inside, size - inside)


def _surface(count, albedo, gloss=0.0, emission=(0, 0, 0)):
    return Surface(
        np.tile(np.array(albedo, float), (count, 1)),
        np.tile(np.array(emission, float), (count, 1)),
        np.full(count, float(gloss)),
    )
