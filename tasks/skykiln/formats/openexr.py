"""OpenEXR pictures, through the `OpenEXR` package.

The header is read by itself first: sizes and layout are judged before any pixel is allocated, and the
parts that the second read returns are counted against it.
"""

from typing import NamedTuple

import numpy as np
import OpenEXR

from skykiln.errors import FileError
from skykiln.formats.image import Image, check_size
from skykiln.formats.openexr_package import open_openexr

_PIXEL_TYPES = {np.dtype("float16"), np.dtype("float32")}
_ENVMAPS = {OpenEXR.ENVMAP_LATLONG: "latlong", OpenEXR.ENVMAP_CUBE: "cube"}
# The package takes memory for whole tiles, so a damaged tile size is judged as the picture's is.
_TILE_PIXELS = 1 << 20
# OpenEXR's own default, also what a file without the attribute means: ITU-R BT.709, D65.
_REC709 = (0.64, 0.33, 0.30, 0.60, 0.15, 0.06, 0.3127, 0.3290)


def read_openexr(path, max_pixels: int) -> Image:
    """Read a single-part RGB picture, half or float, scan lines or tiles.

    Raises: FileError for anything else, and for damaged or cut files.
    """
    name = str(path)
    parts = open_openexr(name, name, header_only=True).parts
    if len(parts) != 1:
        raise FileError(
            f"{name}: a multi-part file with {len(parts)} parts; export the picture as a single part"
        )
    header = _read_header(name, parts[0].header)
    _check_header(name, header, max_pixels)
    pixels, pixel_type = _gather_channels(name, _read_channels(name), header)
    return Image(pixels, _facts(header, pixel_type))


class _Header(NamedTuple):
    """What of a header is looked at."""

    window: tuple[int, int, int, int]  # lowest and highest column and row, x first
    display: tuple[int, int, int, int]
    channels: list[str]
    subsampled: bool
    storage: OpenEXR.Storage
    tile_pixels: int  # 0 for scan lines
    compression: str
    envmap: str | None
    chromaticities: list[float] | None

    @property
    def width(self) -> int:
        return self.window[2] - self.window[0] + 1

    @property
    def height(self) -> int:
        return self.window[3] - self.window[1] + 1


def _read_header(name: str, header: dict) -> _Header:
    try:
        channels = header["channels"]
        colour = header.get("chromaticities")
        return _Header(
            window=_window(header["dataWindow"]),
            display=_window(header["displayWindow"]),
            channels=sorted(channel.name for channel in channels),
            subsampled=any((channel.xSampling, channel.ySampling) != (1, 1) for channel in channels),
            storage=header["type"],
            tile_pixels=header["tiles"].xSize * header["tiles"].ySize if "tiles" in header else 0,
            compression=header["compression"].name.removesuffix("_COMPRESSION").lower(),
            envmap=_ENVMAPS.get(header.get("envmap")),
            chromaticities=None if colour is None else [float(c) for c in colour],
        )
    # The package hands out headers with attributes missing, and names that are no UTF-8.
    except (KeyError, UnicodeDecodeError) as error:
        raise FileError(f"{name}: its header is damaged ({error}); export it again") from error


def _window(corners) -> tuple[int, int, int, int]:
    return tuple(int(x) for corner in corners for x in corner)


def _check_header(name: str, header: _Header, max_pixels: int) -> None:
    """Judge size and layout by the header alone."""
    check_size(name, header.width, header.height, max_pixels)
    if header.tile_pixels > max(_TILE_PIXELS, header.width * header.height):
        raise FileError(f"{name}: its tiles are far larger than the picture; export it again")
    if header.storage in (OpenEXR.deepscanline, OpenEXR.deeptile):
        raise FileError(f"{name}: a deep image; flatten it and export it again")
    if header.window != header.display:
        raise FileError(
            f"{name}: the data window differs from the display window; export the whole picture uncropped"
        )
    if header.envmap == "cube":
        raise FileError(f"{name}: an OpenEXR cube map; convert it to a lat-long panorama")
    _check_channels(name, header)
    colour = header.chromaticities
    if colour is not None and not np.allclose(colour, _REC709, atol=2e-3):
        raise FileError(
            f"{name}: its chromaticities ({' '.join(f'{c:.4f}' for c in colour)}) are not those of Rec. 709; "
            "convert it to linear Rec. 709 and export it again"
        )


def _check_channels(name: str, header: _Header) -> None:
    names = header.channels
    if names not in (["B", "G", "R"], ["A", "B", "G", "R"]):
        found = ", ".join(names[:8]) + (", ..." if len(names) > 8 else "")
        if {"Y", "RY", "BY"} <= set(names):
            found = f"luminance-chroma: {found}"
        raise FileError(f"{name}: its channels are {found}; export it as R, G, B with or without A")
    if header.subsampled:
        raise FileError(f"{name}: its channels are subsampled; export R, G and B in full size")


def _read_channels(name: str) -> dict:
    parts = open_openexr(name, name, header_only=False).parts
    if len(parts) != 1:
        raise FileError(f"{name}: damaged or cut pixel data; export it again")
    return parts[0].channels


def _gather_channels(name: str, channels: dict, header: _Header) -> tuple[np.ndarray, str]:
    """R, G and B as one array, and the name of their type. Alpha is left: radiance is premultiplied."""
    kinds = {channels[c].pixels.dtype for c in "RGB"}
    if not kinds <= _PIXEL_TYPES:
        raise FileError(f"{name}: its pixels are whole numbers (uint); export them as half or float")
    pixels = np.empty((header.height, header.width, 3), np.float32)
    for i, channel in enumerate("RGB"):
        pixels[..., i] = channels[channel].pixels
    return pixels, "float" if np.dtype("float32") in kinds else "half"


def _facts(header: _Header, pixel_type: str) -> dict:
    return {
        "format": "openexr",
        "width": header.width,
        "height": header.height,
        "parts": 1,
        "pixel_type": pixel_type,
        "compression": header.compression,
        "tiled": header.storage == OpenEXR.tiledimage,
        "envmap": header.envmap,
        "chromaticities": header.chromaticities,
    }
