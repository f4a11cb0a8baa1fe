"""Paints of the concourse: panelled walls, lit signs, the departure board, a back-lit picture."""

import numpy as np

from .paints import across, plain
from .shapes import Surface


def panelled(colour, width):
    """A wall of panels with dark joints and a dado rail."""

    def paint(points, normals):
        u = across(points, normals)
        surface = plain(colour)(points, normals)
        inside = u - np.floor(u / width) * width
        joint = np.minimum(inside, width - inside) < 0.03
        surface.albedo[joint | (np.abs(points[:, 1] + 2.65) < 0.05)] *= 0.4
        surface.albedo[points[:, 1] < -3.55] *= 0.5
        return surface

    return paint


def letters(glow):
    """A lit sign whose strokes stand for writing."""

    def paint(points, normals):
        u = across(points, normals) / 0.16
        stroke = (np.floor(u) % 4 != 3) & (np.sin(12.9 * np.floor(u)) * 0.25 < points[:, 1])
        return Surface(
            np.full(points.shape, 0.03), np.where(stroke[:, None], glow, 0.12 * glow), np.zeros(len(points))
        )

    return paint


def board():
    """The departure board: rows of amber blocks on black."""

    def paint(points, normals):
        u, v = across(points, normals), points[:, 1]
        row, column = np.floor(v / 0.24), np.floor(u / 0.17)
        cell = np.abs(v / 0.24 - row - 0.5) < 0.3
        word = np.sin(7.3 * np.floor(u / 1.4) + 3.1 * row) + 0.35 * np.sin(5.1 * column + 2.3 * row) > -0.2
        upright = np.abs(normals[:, 1]) < 0.5
        lit = cell & word & upright & (np.abs(u) < 3.3)
        emission = np.where(lit[:, None], np.array([420.0, 260.0, 40.0]), np.array([3.0, 3.0, 3.0]))
        return Surface(np.full(points.shape, 0.02), emission, np.zeros(len(points)))

    return paint


def picture():
    """A back-lit picture: sun over a sea of stripes."""

    def paint(points, normals):
        u, v = across(points, normals), points[:, 1]
        sun = (u - 0.6) ** 2 + (v - 0.25) ** 2 < 0.16
        wave = v < -0.2 + 0.08 * np.sin(5 * u)
        emission = np.where(wave[:, None], [20.0, 90.0, 130.0], [260.0, 150.0, 60.0])
        emission = np.where(sun[:, None], [700.0, 520.0, 260.0], emission)
        return Surface(np.full(points.shape, 0.05), emission, np.zeros(len(points)))

    return paint
