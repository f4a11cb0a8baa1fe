"""OpenEXR pictures, through the `OpenEXR` package.

The package doesn't raise on damaged pixels: it prints a warning on sys.stdout and leaves the part
out. So the header is read by itself first (sizes and layout are judged before any pixel is
allocated), and the parts that the second read returns are counted against it.
"""

import contextlib
import io
import sys

import numpy as np
import OpenEXR

from skykiln.errors import FileError
from skykiln.formats.image import Image, check_size

_PIXEL_TYPES = {np.dtype("float16"): "half", np.dtype("float32"): "float"}
_ENVMAPS = {OpenEXR.ENVMAP_LATLONG: "latlong", OpenEXR.ENVMAP_CUBE: "cube"}
_WARNING = "Warning: Exception raised"
# OpenEXR's own default, also what a file without the attribute means: ITU-R BT.709, D65.
_REC709 = (0.64, 0.33, 0.30, 0.60, 0.15, 0.06, 0.3127, 0.3290)


def read_openexr(path, max_pixels: int) -> Image:
    """Read a single-part RGB picture, half or float, scan lines or tiles.

    Raises: FileError for anything else, and for damaged or cut files.
    """
    name = str(path)
    parts = _open(name, header_only=True).parts
    if len(parts) != 1:
        raise FileError(
            f"{name}: a multi-part file with {len(parts)} parts; export the picture as a single part"
        )
    header = parts[0].header
    width, height = _check_header(name, header, max_pixels)
    pixels, pixel_type = _gather_channels(name, _read_channels(name), (height, width))
    return Image(pixels, _facts(header, width, height, pixel_type))


def _open(name: str, header_only: bool):
    """The package's file object; raises with the cause that it only prints."""
    printed = io.StringIO()
    try:
        with contextlib.redirect_stdout(printed):
            file = OpenEXR.File(name, separate_channels=True, header_only=header_only)
    except Exception as error:
        raise FileError(
            f"{name}: not a readable OpenEXR file ({error}); its header is damaged or cut: export it again"
        ) from error
    finally:
        lines = printed.getvalue().splitlines()
        # What other threads printed meanwhile goes where it was meant to go.
        for line in lines:
            if line and not line.startswith(_WARNING):
                print(line, file=sys.stdout)
    warnings = [line for line in lines if line.startswith(_WARNING)]
    if warnings:
        cause = warnings[0].rpartition(" - ")[2].strip()
        raise FileError(f"{name}: damaged or cut pixel data ({cause}); export it again")
    return file


def _check_header(name: str, header: dict, max_pixels: int) -> tuple[int, int]:
    """Judge the layout by the header alone. Returns (width, height)."""
    low, high = (np.asarray(corner, np.int64) for corner in header["dataWindow"])
    width, height = (int(n) for n in high - low + 1)
    check_size(name, width, height, max_pixels)
    if header["type"] in (OpenEXR.deepscanline, OpenEXR.deeptile):
        raise FileError(f"{name}: a deep image; flatten it and export it again")
    if not np.array_equal(header["dataWindow"], header["displayWindow"]):
        raise FileError(
            f"{name}: the data window differs from the display window; export the whole picture uncropped"
        )
    if header.get("envmap") == OpenEXR.ENVMAP_CUBE:
        raise FileError(f"{name}: an OpenEXR cube map; convert it to a lat-long panorama")
    _check_channels(name, header["channels"])
    _check_colour(name, header.get("chromaticities"))
    return width, height


def _check_channels(name: str, channels: list) -> None:
    names = sorted(channel.name for channel in channels)
    if names not in (["B", "G", "R"], ["A", "B", "G", "R"]):
        found = ", ".join(names[:8]) + (", ..." if len(names) > 8 else "")
        if {"Y", "RY", "BY"} <= set(names):
            found = f"luminance-chroma: {found}"
        raise FileError(f"{name}: its channels are {found}; export it as R, G, B with or without A")
    if any(channel.xSampling != 1 or channel.ySampling != 1 for channel in channels):
        raise FileError(f"{name}: its channels are subsampled; export R, G and B in full size")


def _check_colour(name: str, chromaticities) -> None:
    if chromaticities is not None and not np.allclose(chromaticities, _REC709, atol=2e-3):
        found = " ".join(f"{c:.4f}" for c in chromaticities)
        raise FileError(
            f"{name}: its chromaticities ({found}) are not those of Rec. 709; "
            "convert it to linear Rec. 709 and export it again"
        )


def _read_channels(name: str) -> dict:
    parts = _open(name, header_only=False).parts
    if len(parts) != 1:
        raise FileError(f"{name}: damaged or cut pixel data; export it again")
    return parts[0].channels


def _gather_channels(name: str, channels: dict, shape) -> tuple[np.ndarray, str]:
    """R, G and B as one array, and the name of their type. Alpha is left: radiance is premultiplied."""
    kinds = {channels[c].pixels.dtype for c in "RGB"}
    if not kinds <= set(_PIXEL_TYPES):
        raise FileError(f"{name}: its pixels are whole numbers (uint); export them as half or float")
    pixels = np.empty((*shape, 3), np.float32)
    for i, channel in enumerate("RGB"):
        pixels[..., i] = channels[channel].pixels
    return pixels, "float" if np.dtype("float32") in kinds else "half"


def _facts(header: dict, width: int, height: int, pixel_type: str) -> dict:
    chromaticities = header.get("chromaticities")
    return {
        "format": "openexr",
        "width": width,
        "height": height,
        "parts": 1,
        "pixel_type": pixel_type,
        "compression": header["compression"].name.removesuffix("_COMPRESSION").lower(),
        "tiled": header["type"] == OpenEXR.tiledimage,
        "envmap": _ENVMAPS.get(header.get("envmap")),
        "chromaticities": chromaticities and [float(c) for c in chromaticities],
    }
