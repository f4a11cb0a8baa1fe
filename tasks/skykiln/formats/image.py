"""What every reader of source files returns, and the limit that all of them keep."""

from typing import NamedTuple

import numpy as np

from skykiln.errors import FileError

# 16384 x 8192: four times the pixels of the largest panoramas in use, and 1.6 GB once decoded.
MAX_PIXELS = 1 << 27


class Image(NamedTuple):
    """A decoded picture.

    pixels : (H, W, 3) float32, C-contiguous, linear radiance as the file has it: NaN, infinities
        and negative values included. Row 0 is the top row.
    facts : what the header said, in JSON's types.
    """

    pixels: np.ndarray
    facts: dict


def check_size(name: str, width: int, height: int, max_pixels: int) -> None:
    """Refuse empty pictures and pictures over the limit, before anything is allocated for them."""
    if width < 1 or height < 1:
        raise FileError(f"{name}: the header gives an empty picture, {width} x {height}; export it again")
    if width * height > max_pixels:
        raise FileError(
            f"{name}: {width} x {height} is more than the limit of {max_pixels} pixels; "
            "scale the picture down, or check whether its header is damaged"
        )
