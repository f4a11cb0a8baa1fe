"""Filtered levels as OpenEXR, for programs that compose and grade pictures.

One part per level, named 'level 0', 'level 1' and so on. In a part the six faces of cube space stand
side by side, +x -x +y -y +z -z from left to right, each n x n: a data window of 6 n x n. OpenEXR wants
one display window for all parts, so it is the largest level's. Text that belongs to all stands in
string attributes of the first part.
"""

import io
from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np
import OpenEXR

from skykiln.errors import FileError
from skykiln.formats.half import nearest_half
from skykiln.formats.image import check_size
from skykiln.formats.mip_levels import check_chain, level_size
from skykiln.formats.openexr_package import open_openexr
from skykiln.limits import MAX_PIXELS


def _nearest_float(values) -> np.ndarray:
    """float32 without NaN, negative and infinite values."""
    largest = np.finfo(np.float32).max
    return np.fmin(np.fmax(values, np.float32(0)), largest) + np.float32(0)


EXR_PIXELS = {"half": nearest_half, "float": _nearest_float}


@dataclass(frozen=True, eq=False)
class ExrLevels:
    """A cube's levels.

    pixels : 'half' or 'float'
    levels : one (6, n, n, 3) float32 per level, the largest first; level p is max(1, n >> p) wide
    metadata : names and texts
    chromaticities : CIE x and y of red, green, blue and white, eight numbers; None: Rec. 709
    """

    pixels: str
    levels: tuple[np.ndarray, ...]
    metadata: Mapping[str, str] = field(default_factory=dict)
    chromaticities: tuple[float, ...] | None = None


def write_exr_levels(texture: ExrLevels) -> bytes:
    """The file's bytes, ZIP-packed: the same for the same levels, always."""
    faces, size, _ = check_chain(texture.levels, 3)
    display = _window(faces * size, size)
    parts = []
    for number, level in enumerate(texture.levels):
        pixels = EXR_PIXELS[texture.pixels](level)
        strip = np.ascontiguousarray(np.concatenate(list(pixels), axis=1))
        header = {
            "compression": OpenEXR.ZIP_COMPRESSION,
            "type": OpenEXR.scanlineimage,
            "displayWindow": display,
            "dataWindow": _window(strip.shape[1], strip.shape[0]),
        }
        header |= texture.metadata if number == 0 else {}
        if texture.chromaticities is not None:
            header["chromaticities"] = texture.chromaticities
        parts.append(OpenEXR.Part(header, {"RGB": strip}, f"level {number}"))
    file = io.BytesIO()
    OpenEXR.File(parts).write(file)
    return file.getvalue()


def read_exr_levels(data: bytes, name: str) -> ExrLevels:
    """Read what `write_exr_levels` made.

    Raises: FileError with the file's name for anything else.
    """
    headers = [part.header for part in open_openexr(io.BytesIO(data), name, header_only=True).parts]
    size = _check_headers(name, headers)
    parts = open_openexr(io.BytesIO(data), name, header_only=False).parts
    if len(parts) != len(headers):
        raise FileError(f"{name}: damaged or cut pixel data; bake it again")
    levels = [_faces(part, level_size(size, size, p)[0]) for p, part in enumerate(parts)]
    half = parts[0].channels["R"].pixels.dtype == np.float16
    texts = {key: value for key, value in headers[0].items() if isinstance(value, str) and key != "name"}
    return ExrLevels("half" if half else "float", tuple(levels), texts)


def _window(width: int, height: int) -> tuple[np.ndarray, np.ndarray]:
    return np.array([0, 0], np.int32), np.array([width - 1, height - 1], np.int32)


def _check_headers(name: str, headers: list[dict]) -> int:
    """The base's face size; every part must be the level that its place says."""
    size = 0
    for level, header in enumerate(headers):
        try:
            low, high = (np.asarray(corner, np.int64) for corner in header["dataWindow"])
            width, height = (int(n) for n in high - low + 1)
            channels = sorted(channel.name for channel in header["channels"])
            part = header.get("name")
        except (KeyError, UnicodeDecodeError) as error:
            raise FileError(f"{name}: the header of part {level} is damaged; bake it again") from error
        check_size(name, width, height, MAX_PIXELS)
        size = size or height
        expected = level_size(size, size, level)[0]
        if (width, height) != (6 * expected, expected) or low.any() or level >= size.bit_length():
            raise FileError(
                f"{name}: part {level} is {width} x {height}, not {6 * expected} x {expected}: "
                "no cube's levels; bake it again"
            )
        if channels != ["B", "G", "R"] or part != f"level {level}":
            raise FileError(f"{name}: part {level} is no level of a cube; bake it again")
    if not size:
        raise FileError(f"{name}: no parts; bake it again")
    return size


def _faces(part, size: int) -> np.ndarray:
    """(6, size, size, 3) float32 of a strip of faces."""
    strip = np.stack([part.channels[c].pixels for c in "RGB"], axis=-1).astype(np.float32)
    return np.ascontiguousarray(strip.reshape(size, 6, size, 3).transpose(1, 0, 2, 3))
