"""From relative radiance to measured light: scale factors, a clipped sun's lost light, white balance.

Each measurement asks for a factor, measured over found:

    horizontal_lux  illuminance of the level surface
    sun_lux         illuminance of a surface that faces the sun, sun and sky together
    patch           mean luminance of a patch, given in cd/m2, or of a Lambertian card: reflectance x lux/pi

Two that differ by more than hand-held meters do contradict each other (20 %: total error of class C of
DIN 5032-7; from memory). Else the factor is their geometric mean.

A clipped sun has lost an unknown illuminance F, facing it, so a measurement that sees it says less: with the
factor k, the sine s of the sun's elevation and E as found,

    k E_level + s F = horizontal_lux,   k E_facing + F = sun_lux.

Both together give k and F; either gives F where k is known, from a patch or from a calibrated file.

What both together say of k is worth little under a high clear sun, where the sky is a small difference of
large numbers: from k = (horizontal_lux - s sun_lux) / (E_level - s E_facing),

    d ln k / d ln horizontal_lux = horizontal_lux / (horizontal_lux - s sun_lux),

and for sun_lux one less, with the other sign.
"""

import math
from typing import NamedTuple

AGREEMENT = 1.2

# Goes with every figure in cd/m2 and lux that is shown to somebody.
CAUTION = (
    "Calibrated from a picture: for design and preview. Where sun, glare or light levels can hurt someone, "
    "measured data, local codes and licensed practice come first. Never look at the sun to measure it."
)


class Contradiction(ValueError):
    """Measurements that can't be true of one sky; the message holds both numbers."""


class Measurement(NamedTuple):
    """One measured quantity, and what the picture holds of it before any scaling."""

    name: str  # as the user knows it
    measured: float
    found: float

    @property
    def scale(self):
        return self.measured / self.found


class Calibration(NamedTuple):
    """The factor of the whole picture, and the illuminance facing the sun that clipping had taken.

    leverage : relative change of the factor over that of horizontal_lux, where it hangs on sun_lux too; less
               one, over that of sun_lux. None where the measurements don't share light out
    """

    scale: float
    lost_lux: float
    leverage: float | None = None


def card_luminance(reflectance, lux):
    """Luminance in cd/m2 of a Lambertian card under an illuminance on its own plane."""
    return reflectance * lux / math.pi


def neutral_gains(grey, weights):
    """Factors (3,) that make the radiance of a grey card neutral and leave its luminance."""
    if not min(grey) > 0:
        raise ValueError("the grey card has a channel without light")
    return grey @ weights / grey


def agreed_scale(measurements):
    """The one factor of all measurements.

    Raises: Contradiction; ValueError when the picture has nothing of what was measured
    """
    for each in measurements:
        if not each.found > 0:
            raise ValueError(f"{each.name}: the picture has no light there to scale")
    ordered = sorted(measurements, key=lambda each: each.scale)
    low, high = ordered[0], ordered[-1]
    if high.scale > AGREEMENT * low.scale:
        raise Contradiction(
            f"{low.name} {low.measured:g} and {high.name} {high.measured:g} contradict each other: "
            f"the picture would have to be scaled by {low.scale:.4g} and by {high.scale:.4g}"
        )
    return math.exp(math.fsum(math.log(each.scale) for each in measurements) / len(measurements))


def clipped_calibration(level, facing, sine, patch=None):
    """The factor and the lost light of a sky whose sun is clipped.

    Parameters
    ----------
    level, facing : Measurement of horizontal_lux and of sun_lux, or None where not measured.
    sine : of the sun's elevation.
    patch : Measurement, or None; one with measured = found says that the file is calibrated.

    Raises: Contradiction
    """
    if patch is None:
        return _of_two(level, facing, sine) if level and facing else Calibration(
            agreed_scale([level or facing]), 0.0
        )
    scale = agreed_scale([patch])
    for each in (level, facing):
        if each and scale * each.found > AGREEMENT * each.measured:
            agreed_scale([each, patch])  # raises: no lost light makes a picture that is too bright right
    return Calibration(scale, _lost(level, facing, sine, scale))


def _of_two(level, facing, sine):
    measured, found = (level.measured - sine * facing.measured, level.found - sine * facing.found)
    if not (measured > 0 and found > 0):
        raise Contradiction(
            f"{level.name} {level.measured:g} and {facing.name} {facing.measured:g} contradict each other: "
            f"a light of {facing.measured:g} alone gives {sine * facing.measured:.4g} on the level surface"
        )
    lost, leverage = facing.measured - measured / found * facing.found, level.measured / measured
    if lost < 0:
        return Calibration(agreed_scale([level, facing]), 0.0, leverage)
    return Calibration(measured / found, lost, leverage)


def _lost(level, facing, sine, scale):
    """Lost illuminance facing the sun, where the factor is known."""
    if not facing:
        return max(0.0, level.measured - scale * level.found) / sine if level and sine > 0 else 0.0
    lost = max(0.0, facing.measured - scale * facing.found)
    if level:
        restored = level._replace(found=scale * level.found + sine * lost)
        agreed_scale([restored, facing._replace(found=scale * facing.found + lost)])
    return lost
