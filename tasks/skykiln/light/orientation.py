"""Turning what a source holds into the world's axes.

World directions are d' = R d with R = yaw pitch roll, the roll first, so that a capture is levelled before
it is pointed somewhere. Positive yaw turns what lay at +z towards +x, positive pitch lifts what lay at +z
towards +y, positive roll turns what lay at +y towards +x, which is left in the picture.

A yaw alone needs no resampling (`extract_faces` takes it); mirroring and whole quarter turns of a cube
only move pixels.
"""

import math

import numpy as np

from skykiln.light.charts import PANORAMA
from skykiln.light.directions import FACE_AXES
from skykiln.light.resampling import footprint_means

# A world whose up is +z, as it looks with +y up: (x, y, z) becomes (x, z, -y).
UP_Z = np.array([[1.0, 0, 0], [0, 0, 1], [0, -1, 0]])


def turn_of(yaw=0.0, pitch=0.0, roll=0.0):
    """Rotation matrix (3, 3) float64 of three angles in rad, applied as world = R @ source."""
    cy, sy = math.cos(yaw), math.sin(yaw)
    cp, sp = math.cos(pitch), math.sin(pitch)
    cr, sr = math.cos(roll), math.sin(roll)
    return (
        np.array([[cy, 0, sy], [0, 1, 0], [-sy, 0, cy]])
        @ np.array([[1, 0, 0], [0, cp, sp], [0, -sp, cp]])
        @ np.array([[cr, sr, 0], [-sr, cr, 0], [0, 0, 1]])
    )


def turned(panorama, turn):
    """A panorama (H, W, 3) float32 turned by a rotation matrix, flux conserved; same shape and dtype.

    Every pixel is the mean over its footprint, so a sun keeps its flux but spreads by up to a pixel.
    """
    height, width, _ = panorama.shape
    return footprint_means(panorama[None], PANORAMA, width, height, turn=turn)


def turned_faces(faces, turn):
    """World faces (6, n, n, c) turned by whole quarter turns: pixels move, none is resampled.

    Parameters: turn : (3, 3), a rotation matrix of entries -1, 0 and 1
    """
    axes = np.rint(FACE_AXES @ turn).astype(int)  # each world face's axes in the source's frame
    return np.ascontiguousarray(np.stack([_face_of(faces, *rows) for rows in axes]))


def _face_of(faces, major, right, down):
    """The face image seen along `major` whose columns and rows rise along `right` and `down`."""
    source = int(np.flatnonzero((FACE_AXES[:, 0] == major).all(1))[0])
    image, (_, source_right, source_down) = faces[source], FACE_AXES[source]
    if right @ source_right == 0:
        image, source_right, source_down = image.swapaxes(0, 1), source_down, source_right
    return image[:: int(down @ source_down), :: int(right @ source_right)]


def mirrored(panorama):
    """A panorama seen in a mirror, +x and -x exchanged: undoes a picture that was saved reversed."""
    return np.ascontiguousarray(panorama[:, ::-1])
