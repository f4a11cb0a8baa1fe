"""A sky scaled to what was measured of it, and what its clipped sun lacks where that is known.

`calibration` has the formulas; here the picture is asked for what they need. The sun is looked for where a
measurement faces it, or where another tells what clipping took from the level surface.
"""

from typing import NamedTuple

import numpy as np

from skykiln.light.calibration import (
    Calibration,
    Measurement,
    agreed_scale,
    clipped_calibration,
    neutral_gains,
)
from skykiln.light.facing import irradiance_facing, patch_radiance
from skykiln.light.photometry import level_irradiance
from skykiln.light.separate_sun import Sun, separate_sun


class MeasuredPatch(NamedTuple):
    """A patch of known luminance; `balance`: it is grey, and white is balanced by it."""

    direction: np.ndarray  # (3,), unit vector in the panorama's own axes
    angular_radius: float  # rad
    luminance: float  # cd/m2
    balance: bool


class Measured(NamedTuple):
    """What was measured; None where not.

    horizontal_lux, sun_lux : illuminance of the level surface, and of one that faces the sun
    white_luminance : cd/m2 of the pixel (1, 1, 1)
    """

    horizontal_lux: float | None = None
    sun_lux: float | None = None
    patch: MeasuredPatch | None = None
    white_luminance: float | None = None

    @property
    def names(self):
        return [name for name, value in self._asdict().items() if value is not None]


class CalibratedSky(NamedTuple):
    """A sky in cd/m2.

    scale : factor of the whole picture; gains : (3,) that balanced white before
    lost_lux : illuminance facing the sun that clipping had taken, which `pixels` still lack
    sun : Sun as `pixels` show it, if it was looked for and found
    leverage : as of `Calibration`
    """

    pixels: np.ndarray
    scale: float
    gains: np.ndarray
    lost_lux: float = 0.0
    sun: Sun | None = None
    leverage: float | None = None


def calibrated_sky(panorama, measured, weights):
    """The sky scaled to all that was measured.

    Parameters: panorama : (H, W, 3) float32; measured : Measured, of which something is given
                weights : (3,), luminance weights of its colour space
    Raises:     Contradiction; ValueError where the picture lacks what was measured
    """
    gains = _gains(panorama, measured.patch, weights)
    if (gains != 1).any():
        panorama = panorama * gains.astype(np.float32)
    known = _known(panorama, measured, weights)
    level = None
    if measured.horizontal_lux is not None:
        found = float(level_irradiance(panorama) @ weights)
        level = Measurement("horizontal_lux", measured.horizontal_lux, found)
    if measured.sun_lux is None and not (level and known):
        scale = agreed_scale([*([level] if level else ()), *known])
        return CalibratedSky(scaled(panorama, scale), scale, gains)
    _, sun = separate_sun(panorama, weights)
    scale, lost, leverage = _by_the_sun(panorama, sun, measured, level, known, weights)
    sun = sun and sun._replace(irradiance=scale * sun.irradiance)
    return CalibratedSky(scaled(panorama, scale), scale, gains, float(lost), sun, leverage)


def _gains(panorama, patch, weights):
    if patch is None or not patch.balance:
        return np.ones(3)
    return neutral_gains(patch_radiance(panorama, patch.direction, patch.angular_radius), weights)


def _known(panorama, measured, weights):
    """Measurements that no sun has a part in."""
    known = []
    if measured.patch is not None:
        patch = measured.patch
        found = patch_radiance(panorama, patch.direction, patch.angular_radius)
        known.append(Measurement("patch", patch.luminance, float(found @ weights)))
    if measured.white_luminance is not None:
        known.append(Measurement("white_luminance", measured.white_luminance, 1.0))
    return known


def _by_the_sun(panorama, sun, measured, level, known, weights):
    """Calibration by measurements that the sun has a part in."""
    if sun is None and measured.sun_lux is not None:
        raise ValueError("sun_lux: no sun is found in the picture; remove sun_lux")
    facing = None
    if measured.sun_lux is not None:
        found = float(irradiance_facing(panorama, sun.direction) @ weights)
        facing = Measurement("sun_lux", measured.sun_lux, found)
    if sun is None or not sun.clipped:
        return Calibration(agreed_scale([each for each in (level, facing, *known) if each]), 0.0)
    fixed = known[0] if len(known) == 1 else None
    if len(known) == 2:
        fixed = Measurement("patch and white_luminance", agreed_scale(known), 1.0)
    return clipped_calibration(level, facing, float(sun.direction[1]), fixed)


def scaled(panorama, scale):
    """Radiance times a factor, float32. Raises ValueError where that overflows."""
    largest = float(panorama.max()) * scale
    if not largest <= float(np.finfo(np.float32).max):
        raise ValueError(f"scaled by {scale:.4g} its brightest pixel overflows")
    return panorama if scale == 1 else panorama * np.float32(scale)
