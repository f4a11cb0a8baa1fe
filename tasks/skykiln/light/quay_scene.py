"""The small scene that probes are looked at in: a quay bollard, a rail and a pavement slab.

Closed forms only: boxes, and rods with round ends (balls are rods of no length). Metres, in the world of
`directions`; the probe lights it from all around and nothing casts a shadow. Roughness changes along a
shape, from its start to its end: the slab from dry to wet, the rail from polished to blasted.

The eye goes round the scene: at yaw 0 it looks along +z, at +90 degrees along +x, as the sky is turned.
"""

import math
from typing import NamedTuple

import numpy as np


class Material(NamedTuple):
    """albedo : of the diffuse light; f0 : reflectance at normal incidence; both of the light's own primaries
    roughness : at the shape's start and end"""

    name: str
    albedo: tuple
    f0: tuple
    roughness: tuple


class Shape(NamedTuple):
    """A box between two corners (radius 0), or a rod with round ends between two points.

    Roughness runs along a rod from `start` to `end`, in a box along x.
    """

    start: tuple
    end: tuple
    radius: float
    material: Material


class Hits(NamedTuple):
    """What k rays meet first. Rows of rays that meet nothing hold zeros, n excepted: it faces the eye."""

    hit: np.ndarray  # (k,) bool
    n: np.ndarray  # (k, 3), unit, outwards
    albedo: np.ndarray  # (k, 3)
    f0: np.ndarray  # (k, 3)
    roughness: np.ndarray  # (k,)


# Reflectances: 0.04 of dielectrics with a refractive index of 1.5 (Fresnel 1823); iron's is a value in
# common use, from memory.
_IRON = (0.56, 0.57, 0.58)
_PAVING = Material("paving, dry to wet", (0.22, 0.21, 0.20), (0.04, 0.04, 0.04), (1.0, 0.1))
_PLASTER = Material("plaster", (0.75, 0.73, 0.69), (0.04, 0.04, 0.04), (1.0, 1.0))
_PAINT = Material("gloss paint", (0.45, 0.05, 0.03), (0.04, 0.04, 0.04), (0.25, 0.25))
_WORN = Material("worn iron", (0.0, 0.0, 0.0), _IRON, (0.08, 0.08))
_RAIL = Material("steel, polished to blasted", (0.0, 0.0, 0.0), _IRON, (0.0, 1.0))
_POST = Material("galvanised", (0.0, 0.0, 0.0), (0.60, 0.61, 0.63), (0.5, 0.5))

QUAY_SCENE = (
    Shape((-1.5, -0.12, -0.8), (1.5, 0.0, 0.8), 0.0, _PAVING),
    Shape((0.42, 0.0, -0.36), (1.14, 0.16, 0.36), 0.0, _PLASTER),
    Shape((0.78, 0.2, 0.0), (0.78, 0.62, 0.0), 0.16, _PAINT),
    Shape((0.78, 0.74, 0.0), (0.78, 0.74, 0.0), 0.26, _WORN),
    Shape((0.2, 0.78, 0.1), (-1.3, 0.78, 0.1), 0.09, _RAIL),
    Shape((0.05, 0.0, 0.1), (0.05, 0.78, 0.1), 0.05, _POST),
    Shape((-1.15, 0.0, 0.1), (-1.15, 0.78, 0.1), 0.05, _POST),
)
TARGET = (-0.1, 0.36, 0.0)  # what the eye goes round
DISTANCE = 4.6  # from the eye to it
FIELD_OF_VIEW = math.radians(32.0)  # from the picture's lower to its upper edge


def view_rays(width, height, yaw, pitch, field_of_view):
    """Directions through the pixels' centres: (height, width, 3) float64, unit; row 0 is the top.

    `yaw` is the longitude looked along, `pitch` the height above the horizon.
    """
    ahead = _gaze(yaw, pitch)
    right = np.array([-math.cos(yaw), 0.0, math.sin(yaw)])
    up = np.cross(right, ahead)
    reach = math.tan(field_of_view / 2)
    x = (2 * np.arange(width) + 1 - width) / height * reach
    y = (height - 2 * np.arange(height) - 1) / height * reach
    rays = ahead + x[None, :, None] * right + y[:, None, None] * up
    return rays / np.linalg.norm(rays, axis=-1, keepdims=True)


def scene_eye(yaw, pitch):
    """Where the eye stands when it looks along `yaw`, `pitch` at the scene: (3,)."""
    return np.array(TARGET) - DISTANCE * _gaze(yaw, pitch)


def first_hits(eye, rays, scene=QUAY_SCENE):
    """What rays (k, 3) of unit length from `eye` (3,) meet first. Returns Hits."""
    nearest = np.full(len(rays), np.inf)
    n = -np.array(rays, np.float64)
    albedo, f0, roughness = np.zeros((len(rays), 3)), np.zeros((len(rays), 3)), np.zeros(len(rays))
    for shape in scene:
        distance, normal = (_box_hits if shape.radius == 0 else _rod_hits)(shape, eye, rays)
        new = distance < nearest
        nearest[new], n[new] = distance[new], normal[new]
        albedo[new], f0[new] = shape.material.albedo, shape.material.f0
        roughness[new] = _roughness_at(shape, eye + distance[new, None] * rays[new])
    return Hits(np.isfinite(nearest), n, albedo, f0, roughness)


def _gaze(yaw, pitch):
    level = math.cos(pitch)
    return np.array([math.sin(yaw) * level, math.sin(pitch), math.cos(yaw) * level])


def _roughness_at(shape, points):
    start, end = np.array(shape.start), np.array(shape.end)
    way = end - start if shape.radius else (end - start) * [1, 0, 0]
    share = np.clip((points - start) @ way / max(way @ way, 1e-9), 0, 1)
    low, high = shape.material.roughness
    return low + (high - low) * share


def _box_hits(shape, eye, rays):
    """Distances and normals: the last of three slabs that a ray enters, if it leaves none before."""
    with np.errstate(divide="ignore"):
        to_planes = (np.array([shape.start, shape.end])[:, None] - eye) / rays
    enters, leaves = to_planes.min(0), to_planes.max(0)
    axis = enters.argmax(1)
    distance = enters.max(1)
    normal = np.eye(3)[axis] * -np.sign(rays)
    return np.where((distance > 0) & (distance < leaves.min(1)), distance, np.inf), normal


def _rod_hits(shape, eye, rays):
    """Distances and normals: the nearest of the mantle between both points and a ball about either."""
    start, end = np.array(shape.start), np.array(shape.end)
    length = np.linalg.norm(end - start)
    axis = (end - start) / length if length else np.zeros(3)
    # The mantle: |w + t r| = radius, with what lies along the axis taken off.
    along_eye, along_ray = (eye - start) @ axis, rays @ axis
    across_eye, across_ray = eye - start - along_eye * axis, rays - along_ray[:, None] * axis
    reach = across_eye @ across_eye - shape.radius**2
    mantle = _entry((across_ray**2).sum(1), across_ray @ across_eye, reach)
    share = along_eye + np.where(np.isfinite(mantle), mantle, 0) * along_ray
    entries = [np.where((share > 0) & (share < length), mantle, np.inf)]
    for centre in (start, end):
        off = eye - centre
        entries.append(_entry(np.ones(len(rays)), rays @ off, off @ off - shape.radius**2))
    distance = np.min(entries, axis=0)
    points = eye + np.where(np.isfinite(distance), distance, 0)[:, None] * rays
    nearest = start + np.clip((points - start) @ axis, 0, length)[:, None] * axis
    return distance, (points - nearest) / shape.radius


def _entry(a, b, c):
    """The smaller root of a t^2 + 2 b t + c, where there is one and it lies ahead; else infinity."""
    root = b * b - a * c
    with np.errstate(divide="ignore", invalid="ignore"):
        t = (-b - np.sqrt(np.maximum(root, 0))) / a
    return np.where((root > 0) & (t > 0), t, np.inf)
