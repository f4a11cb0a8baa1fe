"""Whether two codings of one cube map hold the same light: every texel, and the flux of all."""

from typing import NamedTuple

import numpy as np

from skykiln.light.coding_error import flux_error

FLUX = 0.01  # of a level's flux at the worst channel; what codings cost stays below a third of it
NOT_FINITE = float(np.finfo(np.float32).max)  # what NaN and infinities count as


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
    allowed : (6, n, n, 3), the roundings of both together.
    """
    other = np.nan_to_num(other.astype(np.float64), nan=NOT_FINITE, posinf=NOT_FINITE, neginf=NOT_FINITE)
    apart = np.abs(other - level)
    used = np.divide(apart, allowed, out=np.where(apart > 0, np.inf, 0.0), where=allowed > 0)
    flux = flux_error(level, other)
    return Agreement(max(float(used.max()), flux / FLUX), float((used <= 1).all(-1).mean()), flux)
