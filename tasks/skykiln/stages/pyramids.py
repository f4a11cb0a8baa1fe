"""The node pyramid of the probe at work: built once, remembered for its levels and its irradiance."""

import functools
import math

from ..engine.content import Input


@functools.lru_cache(maxsize=1)
def pyramid_of(pixels: Input, yaw_deg: float):
    """Pyramid of a panorama file; the digest in `pixels` tells one content from another."""
    from ..light.pyramid import build_pyramid

    return build_pyramid(pixels.array(), math.radians(yaw_deg))
