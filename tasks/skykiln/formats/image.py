"""What every reader of source files takes and returns, and the limit that all of them keep."""

from typing import NamedTuple

import numpy as np

from skykiln.errors import FileError
from skykiln.limits import MAX_PIXELS


class ReadOptions(NamedTuple):
    """What the user says of a file that holds more than one picture, or less than the light.

    part : of a multi-part OpenEXR file its name or number, of a TIFF the page's number, from 0
    layer : of an OpenEXR part the name before its channels: 'sky' for sky.R, sky.G, sky.B
    allow_ldr : read pictures of whole numbers, which have no range for a sun
    max_pixels : the largest picture; of a cube the six faces together
    """

    part: str | int | None = None
    layer: str | None = None
    allow_ldr: bool = False
    max_pixels: int = MAX_PIXELS


AS_IT_IS = ReadOptions()


class Image(NamedTuple):
    """A decoded picture, or the six images of a cube map.

    pixels : (H, W, 3) float32, C-contiguous, linear radiance as the file has it: NaN, infinities
        and negative values included. Row 0 is the top row, whatever the file's own order. Or
        (6, n, n, 3): the images of a cube map, whose fact 'cube_axes' names their cube space, None
        if the file doesn't say.
    facts : what the header said, in JSON's types.
    chromaticities : CIE xy of red, green, blue and white, in this order, if the file gives them. CIE
        XYZ is told as such a space too: (1, 0), (0, 1), (0, 0) and the white (1/3, 1/3).
    white_luminance : cd/m2 of the pixel (1, 1, 1), if the file gives it
    envmap : 'latlong', 'cube' (a strip of faces, OpenEXR's convention) or None: OpenEXR's attribute
    uncovered : (H, W) bool, pixels that the file leaves open and that are 0 here; None for none
    warnings : sentences that whoever uses the probe must be told
    """

    pixels: np.ndarray
    facts: dict
    chromaticities: tuple[tuple[float, float], ...] | None = None
    white_luminance: float | None = None
    envmap: str | None = None
    uncovered: np.ndarray | None = None
    warnings: tuple[str, ...] = ()


def check_size(name: str, width: int, height: int, max_pixels: int) -> None:
    """Refuse empty pictures and pictures over the limit, before anything is allocated for them."""
    if width < 1 or height < 1:
        raise FileError(f"{name}: the header gives an empty picture, {width} x {height}; export it again")
    if width * height > max_pixels:
        raise FileError(
            f"{name}: {width} x {height} is more than the limit of {max_pixels} pixels; "
            "scale the picture down, raise limits.max_pixels, or check whether its header is damaged"
        )
