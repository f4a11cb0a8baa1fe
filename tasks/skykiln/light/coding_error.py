"""What a pixel coding took from a chain of levels: flux, and detail as an eye sees it."""

import numpy as np

from skykiln.light.directions import cube_texel_solid_angles

_FLOOR = 1e-3  # of a level's mean: darker than that counts as black


def flux_error(level, coded):
    """Relative error of a level's flux, at the worst channel.

    Parameters: level, coded : (6, n, n, 3) before and after coding
    Returns:    number, against the flux of the brightest channel
    """
    weights = cube_texel_solid_angles(level.shape[1])[None, :, :, None]
    flux, lost = ((cube * weights).sum((0, 1, 2)) for cube in (level, coded - level))
    return float(np.abs(lost).max() / flux.max()) if flux.max() > 0 else 0.0


def log2_rms(level, coded):
    """Root mean square over all values of a level of their change in stops, black held at 1/1000 of the
    level's mean.

    Parameters: level, coded : (6, n, n, 3) before and after coding
    Returns:    number, stops
    """
    floor = _FLOOR * float(level.mean())
    if floor <= 0:
        return 0.0
    stops = np.log2((coded + np.float32(floor)) / (level + np.float32(floor)))
    return float(np.sqrt(np.square(stops, dtype=np.float64).mean()))
