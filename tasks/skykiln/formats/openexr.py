"""OpenEXR pictures, through the `OpenEXR` package.

The header is read by itself first: sizes and layout are judged before any pixel is allocated, and the
parts that the second read returns are counted against it.
"""

import numpy as np
import OpenEXR

from skykiln.errors import FileError
from skykiln.formats.image import AS_IT_IS, Image, ReadOptions, check_size
from skykiln.formats.openexr_package import open_openexr
from skykiln.formats.openexr_parts import Part, Picture, Window, choose_picture, read_part
from skykiln.formats.openexr_pixels import rgb_pixels

_PIXEL_TYPES = {np.dtype("float16"): "half", np.dtype("float32"): "float", np.dtype("uint32"): "uint"}
# The package takes memory for whole tiles, so a damaged tile size is judged as the picture's is.
_TILE_PIXELS = 1 << 20
# The package reads every channel of every part: the limit is of that many channels of the largest picture.
_CHANNELS = 16
# Of the display window against the data window.
_LARGEST_SHARE = 64


def read_openexr(path, options: ReadOptions = AS_IT_IS) -> Image:
    """Read one picture of a file: half, float or uint, scan lines or tiles, of mip levels the largest.

    It has the display window's size; where the data window doesn't reach, `uncovered` says so.

    Raises: FileError where none, or more than one picture is meant, and for damaged or cut files.
    """
    name = str(path)
    headers = [part.header for part in open_openexr(name, name, header_only=True).parts]
    parts = [read_part(name, number, header) for number, header in enumerate(headers)]
    for part in parts:
        _check_part(name, part)
    _check_samples(name, parts, options.max_pixels)
    picture = choose_picture(name, parts, options)
    for window in (picture.part.display, picture.part.window):
        check_size(name, *_size(window), options.max_pixels)
    _check_share(name, picture.part)
    channels = _read_channels(name, picture.part, len(parts))
    pixels, uncovered = rgb_pixels(name, picture, channels)
    return Image(
        pixels,
        _facts(picture, len(parts), channels),
        chromaticities=picture.part.chromaticities,
        white_luminance=_white_luminance(name, picture.part),
        envmap=picture.part.envmap,
        uncovered=uncovered,
    )


def _size(window: Window) -> tuple[int, int]:
    return window[2] - window[0] + 1, window[3] - window[1] + 1


def _check_part(name: str, part: Part) -> None:
    width, height = _size(part.window)
    if part.storage in (OpenEXR.deepscanline, OpenEXR.deeptile):
        raise FileError(f"{name}: part {part.number} is a deep image; flatten it and export it again")
    if part.tile_pixels > max(_TILE_PIXELS, width * height):
        raise FileError(f"{name}: its tiles are far larger than the picture; export it again")


def _check_share(name: str, part: Part) -> None:
    """A damaged window would make a sky of nothing."""
    (width, height), (columns, rows) = _size(part.display), _size(part.window)
    if width * height > _LARGEST_SHARE * columns * rows:
        raise FileError(
            f"{name}: of its display window, {width} x {height}, there are {columns} x {rows} pixels; "
            "mend its header"
        )


def _check_samples(name: str, parts: list[Part], max_pixels: int) -> None:
    samples = 0
    for part in parts:
        width, height = _size(part.window)
        samples += sum(max(0, width * height) // max(1, x * y) for x, y in part.sampling.values())
    if samples > _CHANNELS * max_pixels:
        raise FileError(
            f"{name}: its parts and channels hold {samples} values, more than {_CHANNELS} for each "
            f"of at most {max_pixels} pixels; export the picture alone, or raise limits.max_pixels"
        )


def _read_channels(name: str, part: Part, count: int) -> dict:
    parts = open_openexr(name, name, header_only=False).parts
    if len(parts) != count or set(parts[part.number].channels) != set(part.sampling):
        raise FileError(f"{name}: damaged or cut pixel data; export it again")
    return parts[part.number].channels


def _white_luminance(name: str, part: Part) -> float | None:
    white = part.white_luminance
    if white is not None and not 0 < white < 1e12:
        raise FileError(f"{name}: its whiteLuminance is {white:g} cd/m2; mend or remove that attribute")
    return white


def _facts(picture: Picture, parts: int, channels: dict) -> dict:
    part = picture.part
    width, height = _size(part.display)
    kinds = {_PIXEL_TYPES[channels[c].pixels.dtype] for c in picture.channels}
    return {
        "format": "openexr",
        "width": width,
        "height": height,
        "parts": parts,
        "part": part.number if part.name is None else part.name,
        "layer": picture.layer,
        "channels": picture.kind,
        "pixel_type": next(kind for kind in ("uint", "float", "half") if kind in kinds),
        "compression": part.compression,
        "tiled": part.storage == OpenEXR.tiledimage,
        "data_window": list(part.window),
        "display_window": list(part.display),
        "envmap": part.envmap,
        "chromaticities": part.chromaticities and [number for pair in part.chromaticities for number in pair],
        "white_luminance": part.white_luminance,
    }
