"""Boxes and upright cylinders, and where rays meet them.

A shape carries a paint: (local points (n, 3), local normals (n, 3)) -> Surface.
"""

from collections.abc import Callable
from typing import NamedTuple

import numpy as np

FAR = 1e9
TINY = 1e-9
TOUCHING = 1e-4  # metres within which a ray still starts on the surface it left


class Surface(NamedTuple):
    """What a paint says of n points: albedo (n, 3), own radiance (n, 3), strength of a glossy coat (n,)."""

    albedo: np.ndarray
    emission: np.ndarray
    gloss: np.ndarray


class Shape(NamedTuple):
    """A box of half edges `half`, or with `radius` a cylinder of half height `half[1]`; turned about y."""

    centre: np.ndarray
    half: np.ndarray
    paint: Callable
    turn: float = 0.0  # radians, +z towards +x
    radius: float = 0.0


class Hits(NamedTuple):
    """First hits of n rays: distance (FAR: none), index of the shape (-1: none), world normals."""

    distance: np.ndarray
    shape: np.ndarray
    normal: np.ndarray


def box(centre, size, paint, turn_deg=0.0):
    return Shape(np.array(centre, float), np.array(size, float) / 2, paint, np.radians(turn_deg))


def cylinder(foot, radius, height, paint):
    centre = np.array(foot, float) + [0, height / 2, 0]
    return Shape(centre, np.array([radius, height / 2, radius]), paint, 0.0, radius)


def to_local(shape, vectors):
    """World vectors in the shape's own axes."""
    if not shape.turn:
        return vectors
    return _turned(vectors, -shape.turn)


def to_world(shape, vectors):
    if not shape.turn:
        return vectors
    return _turned(vectors, shape.turn)


def _turned(vectors, angle):
    x, y, z = vectors[..., 0], vectors[..., 1], vectors[..., 2]
    cos, sin = np.cos(angle), np.sin(angle)
    return np.stack([x * cos + z * sin, y, z * cos - x * sin], axis=-1)


def first_hits(origins, d, shapes):
    """Nearest meeting of each ray with the shapes. origins (n, 3) or (3,), d (n, 3) unit vectors."""
    origins = np.broadcast_to(origins, d.shape)
    distance = np.full(len(d), FAR)
    index = np.full(len(d), -1)
    normal = np.zeros_like(d)
    for k, shape in enumerate(shapes):
        near = _near(origins, d, shape)
        o, local = to_local(shape, origins[near] - shape.centre), _off_axis(to_local(shape, d[near]))
        enter, leave = _slabs(o, local, shape)
        t = enter.max(axis=1)
        closer = np.flatnonzero((t < leave) & (t > TOUCHING) & (t < distance[near]))
        which = near[closer]
        distance[which], index[which] = t[closer], k
        normal[which] = to_world(shape, _normals(o[closer], local[closer], enter[closer], shape))
    return Hits(distance, index, normal)


def blocked(origins, d, reach, shapes):
    """Whether a shape lies on each ray before `reach`. origins, d (n, 3); reach scalar or (n,)."""
    hidden = np.zeros(len(d), bool)
    rays, o, reach = np.arange(len(d)), origins, np.broadcast_to(reach, len(d))
    for shape in shapes:
        near = _near(o, d, shape)
        if len(near) == 0:
            continue
        local = to_local(shape, o[near] - shape.centre), _off_axis(to_local(shape, d[near]))
        enter, leave = _slabs(*local, shape)
        t = enter.max(axis=1)
        hit = near[(t < leave) & (t > TOUCHING) & (t < reach[near])]
        hidden[rays[hit]] = True
        if len(hit) > len(rays) // 16:
            rest = np.delete(np.arange(len(rays)), hit)
            rays, o, d, reach = rays[rest], o[rest], d[rest], reach[rest]
    return hidden


def casters(shapes, smallest):
    """The shapes whose half diagonal is `smallest` metres or more, the largest first."""
    large = [shape for shape in shapes if np.linalg.norm(shape.half) >= smallest]
    return sorted(large, key=lambda shape: -np.linalg.norm(shape.half))


def _near(origins, d, shape):
    """Indices of the rays that pass the shape's bounding sphere."""
    to_centre = shape.centre - origins
    along = np.einsum("ij,ij->i", to_centre, d)
    apart = np.einsum("ij,ij->i", to_centre, to_centre) - along * along
    size = shape.half @ shape.half
    return np.flatnonzero((apart < size) & (along > -np.sqrt(size)))


def _off_axis(d):
    """Directions without zeros, which the slabs divide by."""
    return np.where(np.abs(d) < TINY, TINY, d)


def _slabs(o, d, shape):
    """Where rays enter each pair of faces, (n, 3), and where they leave the shape, (n,)."""
    to_middle, half_way = -o / d, np.abs(shape.half / d)
    enter, leave = to_middle - half_way, to_middle + half_way
    if shape.radius:
        enter, leave = _round_side(o, d, shape.radius, enter, leave)
    return enter, leave.min(axis=1)


def _normals(o, d, enter, shape):
    """Outward normals where rays enter, in the shape's own axes."""
    axis, rows = enter.argmax(axis=1), np.arange(len(d))
    normals = np.zeros_like(d)
    normals[rows, axis] = -np.sign(d[rows, axis])
    if shape.radius:
        side = axis != 1
        point = (o + enter[rows, axis, None] * d)[side]
        normals[side] = point * [1, 0, 1] / shape.radius
    return normals


def _round_side(o, d, radius, enter, leave):
    """The slabs of x and z replaced by the round side of a cylinder."""
    a = d[:, 0] ** 2 + d[:, 2] ** 2
    b = o[:, 0] * d[:, 0] + o[:, 2] * d[:, 2]
    c = o[:, 0] ** 2 + o[:, 2] ** 2 - radius**2
    root = b * b - a * c
    spread = np.sqrt(np.maximum(root, 0))
    low = np.where(root > 0, (-b - spread) / a, FAR)
    high = np.where(root > 0, (-b + spread) / a, -FAR)
    return np.stack([low, enter[:, 1], low], 1), np.stack([high, leave[:, 1], high], 1)
