"""Seams of a cube's level: the steps that a renderer shows across edges, against those beside them.

Both are measured on what seamless bilinear filtering gives (`sample_cube`). On a line that crosses an
edge at a right angle, samples half a texel to both sides of the edge make the step across it; the next
sample on either side, one texel further in, makes a step inside. A step is the difference in stops of
luminance, with a floor far below the level's mean, so that it counts what an eye sees. The filtered
levels of a sky are smooth, so steps across edges are like those beside them; where faces are exchanged,
turned, mirrored or filtered apart, they are not. Level 0 is as sharp as the source: an edge of what it
shows that lies along a face's edge counts there too.
"""

import numpy as np

from skykiln.light.directions import FACE_AXES, texel_coordinates
from skykiln.light.photometry import luminance
from skykiln.light.sample_cube import sample_level

_FLOOR = 1e-3  # of the mean: darker than that counts as black
_SEEN = 0.02  # stops: a step that an eye sees at best; what is smaller makes no seam

_RIGHT, _DOWN = FACE_AXES[:, 1], FACE_AXES[:, 2]
_OUTWARDS = np.stack([_RIGHT, -_RIGHT, _DOWN, -_DOWN], axis=1)  # (6, 4, 3), a face's four sides
_SIDEWAYS = np.stack([_DOWN, _DOWN, _RIGHT, _RIGHT], axis=1)


def _neighbours():
    """(24,) number of the side that each side of a face touches, 4 face + side: their middles agree."""
    middles = (FACE_AXES[:, None, 0] + _OUTWARDS).reshape(24, 3)
    touching = (middles[:, None] == middles).all(-1) & ~np.eye(24, dtype=bool)
    return touching.argmax(1)


_NEIGHBOURS = _neighbours()


def seam(faces):
    """How many times larger than the steps inside the steps across the edges are, at the worst face.

    Parameters: faces : (6, n, n, 3) radiance, in the cube space of the table of faces
    Returns:    number, near 1 where there is no seam; None for n = 1, where no step lies inside
    """
    if faces.shape[1] == 1:
        return None
    values = luminance(_samples(faces))
    floor = max(_FLOOR * float(values.mean()), np.finfo(np.float32).tiny)
    stops = np.log2(values + floor)
    across = np.abs(stops[..., 1] - stops[..., 2]).mean((1, 2))
    inside = np.abs(stops[..., 0] - stops[..., 1]).mean(-1).reshape(24)
    beside = ((inside + inside[_NEIGHBOURS]) / 2).reshape(6, 4).mean(1)
    return float(((across + _SEEN) / (beside + _SEEN)).max())


def _samples(faces):
    """(6, 4, n, 3, 3): faces, their sides, places along one, samples from the inside out, channels."""
    size = faces.shape[1]
    depth = 1 - np.array([3.0, 1.0, -1.0]) / size  # face coordinate along the axis that leaves the face
    along = texel_coordinates(size)
    directions = (
        FACE_AXES[:, None, None, None, 0]
        + _OUTWARDS[:, :, None, None] * depth[:, None]
        + _SIDEWAYS[:, :, None, None] * along[:, None, None]
    )
    values = sample_level(faces, directions.reshape(-1, 3))
    return values.reshape(6, 4, size, 3, faces.shape[-1])
