"""Portable float maps (.pfm), by our own reader: three words of header and the raster.

'PF' for R, G, B or 'Pf' for grey; width, height; a scale that is negative where the floats are
little-endian; each word ends in white space, the last in exactly one. Rows run from bottom to top (Netpbm,
manual page "pfm"). What the scale's amount means is left open there: OpenImageIO multiplies by it, Netpbm's
own programs divide. So the values are taken as they stand, and an amount that isn't 1 is told.
"""

import re
from pathlib import Path

import numpy as np

from skykiln.errors import FileError
from skykiln.formats.image import AS_IT_IS, Image, ReadOptions, check_size

_HEADER = re.compile(
    rb"(PF|Pf)\s+(\d{1,9})\s+(\d{1,9})\s+([-+]?(?:\d+\.?\d*|\.\d+)(?:[eE][-+]?\d+)?)\s", re.ASCII
)
_LONGEST_HEADER = 200


def read_pfm(path: Path, options: ReadOptions = AS_IT_IS) -> Image:
    """Raises: FileError for other headers, and where the file is not as long as its header says."""
    with path.open("rb") as file:
        start = file.read(_LONGEST_HEADER)
    found = _HEADER.match(start)
    scale = float(found[4]) if found else 0.0
    if not found or not 1e-30 < abs(scale) < 1e30:
        raise FileError(
            f"{path}: its header is not that of a PFM picture, such as 'PF 1024 512 -1.0'; export it again"
        )
    width, height, channels = int(found[2]), int(found[3]), 3 if found[1] == b"PF" else 1
    check_size(str(path), width, height, options.max_pixels)
    present, needed = path.stat().st_size - found.end(), 4 * width * height * channels
    if present != needed:
        raise FileError(
            f"{path}: {present} bytes of pixels, where {width} x {height} take {needed}; export it again"
        )
    stored = np.fromfile(path, "<f4" if scale < 0 else ">f4", width * height * channels, offset=found.end())
    pixels = np.empty((height, width, 3), np.float32)
    pixels[:] = stored.reshape(height, width, channels)[::-1]
    warnings = () if abs(scale) == 1 else (_told(abs(scale)),)
    return Image(pixels, _facts(width, height, scale, channels), warnings=warnings)


def _told(scale: float) -> str:
    return (
        f"its header gives the scale {scale:g}, by which some programs multiply and others divide; the "
        "values were taken as they stand: exposure_ev or a calibration sets them right"
    )


def _facts(width: int, height: int, scale: float, channels: int) -> dict:
    return {
        "format": "pfm",
        "width": width,
        "height": height,
        "pixel_type": "float",
        "channels": "RGB" if channels == 3 else "luminance",
        "byte_order": "little" if scale < 0 else "big",
        "scale": abs(scale),
    }
