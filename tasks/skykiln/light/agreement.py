"""Whether two codings of one cube map hold the same light: every texel, and the flux of all."""

from typing import NamedTuple

import numpy as np

from skykiln.light.directions import cube_texel_solid_angles

FLUX = 0.01  # of a level's flux at the worst channel; what codings cost stays below a third of it
_LEAST = np.float32(1e-30)  # stands in for a rounding of nothing


class Agreement(NamedTuple):
    """How far one cube map is from another."""

    used: float  # largest difference over what roundings allow, or of the flux over FLUX; above 1: apart
    share: float  # of texels within their roundings, all channels
    flux: float  # relative error of the flux, at the worst channel


def agreement(level, other, allowed) -> Agreement:
    """Hold a cube map against another that should be the same but for rounding.

    Parameters
    ----------
    level, other : (6, n, n, 3) float32, radiance.
    allowed : (6, n, n, 3) float32, the roundings of both together.
    """
    with np.errstate(all="ignore"):  # what is not finite is infinitely far off
        apart = np.abs(other - level)
        within = apart <= allowed
        apart /= np.maximum(allowed, _LEAST)
        flux = _flux_error(level, other)
    used = max(_finite(apart.max()), flux / FLUX)
    red, green, blue = np.moveaxis(within, -1, 0)  # far quicker than a reduction of three
    return Agreement(used, float((red & green & blue).mean()), flux)


def _flux_error(level, other):
    """Relative error of the flux at the worst channel, against that of the brightest."""
    weights = cube_texel_solid_angles(level.shape[1]).astype(np.float32).ravel()
    mine, theirs = ((weights @ cube.reshape(6, -1, 3)).sum(0, dtype=np.float64) for cube in (level, other))
    largest = mine.max()
    off = np.abs(theirs - mine).max()
    return _finite(off / largest) if largest > 0 else _finite(off * np.inf if off else 0.0)


def _finite(number):
    """The number; infinity in place of NaN."""
    return float("inf") if np.isnan(number) else float(number)
