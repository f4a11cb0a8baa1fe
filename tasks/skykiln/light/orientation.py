"""Turning what a source holds into the world's axes.

World directions are d' = R d with R = yaw pitch roll, the roll first, so that a capture is levelled before
it is pointed somewhere. Positive yaw turns what lay at +z towards +x, positive pitch lifts what lay at +z
towards +y, positive roll turns what lay at +y towards +x, which is left in the picture.

A yaw alone needs no resampling (`extract_faces` takes it), and mirroring only moves pixels. A picture is
mirrored before it is turned.
"""

import math

import numpy as np

from skykiln.light.charts import PANORAMA
from skykiln.light.resampling import footprint_means

# A world whose up is +z, as it looks with +y up: (x, y, z) becomes (x, z, -y).
UP_Z = np.array([[1.0, 0, 0], [0, 0, 1], [0, -1, 0]])


MIRROR_X = np.diag([-1.0, 1, 1])


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


def source_to_world(pitch=0.0, roll=0.0, flip=False, up="y"):
    """What is to be done to a source but for its yaw: (3, 3) float64, or None if nothing is.

    Parameters: pitch, roll : rad; flip : mirrored first; up : 'y' or 'z', of the source's own world
    """
    turn = turn_of(0.0, pitch, roll) @ (UP_Z if up == "z" else np.eye(3)) @ (MIRROR_X if flip else np.eye(3))
    return None if (turn == np.eye(3)).all() else turn


def reoriented(panorama, turn):
    """A panorama under a matrix of `source_to_world`; resampled only where pixels don't just move."""
    if turn is None:
        return panorama
    return mirrored(panorama) if (turn == MIRROR_X).all() else turned(panorama, turn)


def turned(panorama, turn):
    """A panorama (H, W, 3) float32 turned by a matrix, flux conserved; same shape and dtype.

    Every pixel is the mean over its footprint, so a sun keeps its flux but spreads by up to a pixel.
    """
    height, width, _ = panorama.shape
    return footprint_means(panorama[None], PANORAMA, width, height, turn=turn)


def mirrored(panorama):
    """A panorama seen in a mirror, +x and -x exchanged: undoes a picture that was saved reversed."""
    return np.ascontiguousarray(panorama[:, ::-1])
