"""Chromaticities that a file gives: CIE 1931 xy of red, green, blue and white, as four pairs."""

import numpy as np

from skykiln.errors import FileError

Chromaticities = tuple[tuple[float, float], ...]

# ITU-R BT.709-6, items 1.3 and 1.4; what OpenEXR means where a file says nothing.
REC709 = ((0.64, 0.33), (0.30, 0.60), (0.15, 0.06), (0.3127, 0.3290))
# CIE XYZ itself: X, Y and Z are the corners of the chromaticity diagram, equal energy is (1, 1, 1).
XYZ = ((1.0, 0.0), (0.0, 1.0), (0.0, 0.0), (1 / 3, 1 / 3))


def chromaticities(name: str, numbers) -> Chromaticities:
    """Eight numbers of a header, red's x first and white's y last, as pairs.

    Raises: FileError where they span no colour space.
    """
    pairs = tuple((float(x), float(y)) for x, y in zip(numbers[::2], numbers[1::2], strict=True))
    if _amounts(pairs) is None:
        shown = " ".join(f"{number:.4g}" for pair in pairs for number in pair)
        raise FileError(f"{name}: its chromaticities {shown} span no colour space; mend its header")
    return pairs


def luminance_weights(pairs: Chromaticities) -> np.ndarray:
    """(3,) float64, sum 1: what each primary adds to the luminance of white (SMPTE RP 177-1993)."""
    return _amounts(pairs) * [y for _, y in pairs[:3]]


def _amounts(pairs):
    """How much of each primary x, y, 1 - x - y makes white of luminance 1; None if that's impossible."""
    columns = np.array([[x, y, 1.0 - x - y] for x, y in pairs], dtype=np.float64).T
    if not (np.isfinite(columns).all() and columns[1, 3] > 0 and np.linalg.cond(columns[:, :3]) < 1e6):
        return None
    amounts = np.linalg.solve(columns[:, :3], columns[:, 3] / columns[1, 3])
    return amounts if (amounts > 0).all() else None
