"""The eight ways in which a picture's rows and columns may be stored, by the tag of TIFF and Exif.

TIFF 6.0, tag 274, "Orientation": where the stored picture's row 0 and column 0 are, seen upright.
"""

import numpy as np

# Number -> whether rows and columns are exchanged, then whether the upright rows and columns run backwards.
_STORED = {
    1: (False, False, False), 2: (False, False, True), 3: (False, True, True), 4: (False, True, False),
    5: (True, False, False), 6: (True, False, True), 7: (True, True, True), 8: (True, True, False),
}  # fmt: skip


def upright(pixels: np.ndarray, orientation: int) -> np.ndarray:
    """(H, W, c) as seen, of pixels as stored; contiguous. An unknown number is taken as 1."""
    exchanged, rows, columns = _STORED.get(orientation, _STORED[1])
    if exchanged:
        pixels = pixels.transpose(1, 0, 2)
    return np.ascontiguousarray(pixels[:: -1 if rows else 1, :: -1 if columns else 1])
