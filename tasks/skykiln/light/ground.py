"""The ground under a sky that was only captured above the horizon.

`upper` is the top of a panorama, (rows, W, 3) float32 with at least half of its `height` rows; what is
below is filled in one of three ways of `GROUNDS`:

    colour       one radiance, in the units of the sky
    mirror       the sky upside down, as still water under it at grazing angles
    reflectance  a level Lambertian plain lit by the sky: radiance = reflectance x E/pi
"""

import numpy as np

from skykiln.light.photometry import level_irradiance


def with_ground(upper, height, kind, value=None):
    """The whole panorama.

    Parameters
    ----------
    upper : (rows, W, 3) float32, radiance, height/2 <= rows <= height.
    height : rows of the whole panorama, an even number.
    kind : one of `GROUNDS`.
    value : radiance (a number or three) for 'colour', 0..1 (a number or three) for 'reflectance'.

    Returns: (height, W, 3) float32, radiance.
    """
    rows = upper.shape[0]
    if height % 2 or not height // 2 <= rows <= height:
        raise ValueError(f"{rows} rows are no upper part of an even panorama of {height} rows")
    panorama = np.zeros((height, *upper.shape[1:]), dtype=np.float32)
    panorama[:rows] = upper
    panorama[rows:] = _ground_of(panorama, kind, value)[rows:]
    return panorama


def filled(panorama, uncovered, kind, value=None):
    """A whole panorama whose pixels under `uncovered`, (H, W) bool, are the ground's.

    Raises: ValueError for 'mirror' where what would be mirrored is uncovered too
    """
    if kind == "mirror" and (uncovered & uncovered[::-1]).any():
        raise ValueError("what would be mirrored isn't covered either")
    covered = np.where(uncovered[..., None], np.float32(0), panorama)
    return np.where(uncovered[..., None], _ground_of(covered, kind, value), covered)


def _ground_of(panorama, kind, value):
    return np.broadcast_to(GROUNDS[kind](panorama, value), panorama.shape)


def _of_colour(panorama, value):
    return np.asarray(value, dtype=np.float32)


def _of_mirror(panorama, value):
    return panorama[::-1]


def _of_reflectance(panorama, value):
    return (np.asarray(value) * level_irradiance(panorama) / np.pi).astype(np.float32)


GROUNDS = {"colour": _of_colour, "mirror": _of_mirror, "reflectance": _of_reflectance}
