"""Which panorama a probe is made from: the source's, or what is left of it without the sun.

Level 0, the filter, the irradiance and the audit read the same one, all through here.
"""

from .decode_source import DecodeSource
from .separate_sun import SeparateSun


def sky_of(stage):
    """The stage whose output `pixels`, (H, W, 3) float32, is the sky of the probe that `stage` works for."""
    return stage.of_same(SeparateSun if is_sun_apart(stage.probe) else DecodeSource)


def is_sun_apart(probe) -> bool:
    """Whether the probe's sun becomes a directional light instead of staying in its sky."""
    return probe.sun_action == "separate"
