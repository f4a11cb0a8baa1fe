"""KTX2 cube maps as sources: the largest level, as radiance.

Files of skykiln's own say in their metadata by how many stops they are darkened, which is taken back, and
in which cube space their images lie, which is handed on. Files of others say neither.
"""

import json
from pathlib import Path

import numpy as np

from skykiln.errors import FileError
from skykiln.formats.chromaticities import REC709, Chromaticities
from skykiln.formats.image import AS_IT_IS, Image, ReadOptions, check_size
from skykiln.formats.ktx2 import Ktx2Texture, read_ktx2
from skykiln.formats.ktx2_layout import HEADER_BYTES, read_header

ABOUT_KEY = "skykiln"  # of the metadata: what a loader must know, as JSON
AXES = ("negate_x", "negate_z", "direct")  # what cube_axes may be
_MOST_STOPS = 128  # a half or a shared exponent brightened by more leaves the floats
# CIE xy of the spaces that a descriptor can name (ITU-R BT.2020-2, table 3; Academy S-2014-004 and
# SMPTE ST 2065-1; SMPTE EG 432-1 with the white of D65; numbers from memory).
_PRIMARIES = {
    "rec709": REC709,
    "rec2020": ((0.708, 0.292), (0.170, 0.797), (0.131, 0.046), (0.3127, 0.3290)),
    "acescg": ((0.713, 0.293), (0.165, 0.830), (0.128, 0.044), (0.32168, 0.33767)),
    "aces2065_1": ((0.7347, 0.2653), (0.0, 1.0), (0.0001, -0.077), (0.32168, 0.33767)),
    "display_p3": ((0.680, 0.320), (0.265, 0.690), (0.150, 0.060), (0.3127, 0.3290)),
}


def read_cube_texture(path: Path, options: ReadOptions = AS_IT_IS) -> Image:
    """Read the images of level 0, (6, n, n, 3).

    Raises: FileError for 2-D textures, irradiance, other codings than ours, and broken files.
    """
    name = str(path)
    # Sixteen bytes a pixel, a third more for the smaller levels.
    if path.stat().st_size > 22 * options.max_pixels + (1 << 20):
        raise FileError(f"{name}: larger than any cube of {options.max_pixels} pixels; scale it down")
    data = path.read_bytes()
    if len(data) >= HEADER_BYTES:
        header = read_header(data)
        check_size(name, header.pixelWidth, header.pixelHeight * header.faceCount, options.max_pixels)
    texture = read_ktx2(data, name)
    faces = texture.levels[0]
    if faces.shape[0] != 6 or faces.shape[-1] < 3:
        raise FileError(f"{name}: a texture of {faces.shape[0]} face, no cube map; name a cube map")
    about = _about(name, texture)
    if about.get("content") == "irradiance":
        raise FileError(f"{name}: holds irradiance, not radiance; name the probe's specular file")
    stops, axes = _stops(name, about), _axes(name, about)
    with np.errstate(over="ignore", invalid="ignore"):
        pixels = np.ascontiguousarray(faces[..., :3] * np.float32(2.0**stops), np.float32)
    space = _PRIMARIES.get(texture.primaries)
    return Image(pixels, _facts(texture, stops, axes, about, space), chromaticities=space)


def _about(name: str, texture: Ktx2Texture) -> dict:
    text = texture.metadata.get(ABOUT_KEY)
    if text is None:
        return {}
    try:
        about = json.loads(text)
    except (ValueError, RecursionError):
        about = None
    if not isinstance(about, dict):
        raise FileError(f"{name}: its metadata {ABOUT_KEY!r} is damaged; bake it again")
    return about


def _stops(name: str, about: dict) -> int:
    stops = about.get("storage_ev", 0)
    if not isinstance(stops, int) or not 0 <= stops <= _MOST_STOPS:
        raise FileError(f"{name}: its storage_ev is {str(stops)[:20]}, no number of stops; bake it again")
    return stops


def _axes(name: str, about: dict) -> str | None:
    axes = about.get("cube_axes")
    if axes is not None and axes not in AXES:
        raise FileError(f"{name}: its cube_axes are {str(axes)[:20]}, none of {AXES}; bake it again")
    return axes


def _facts(
    texture: Ktx2Texture, stops: int, axes: str | None, about: dict, space: Chromaticities | None
) -> dict:
    size = texture.levels[0].shape[1]
    return {
        "format": "ktx2",
        "width": size,
        "height": size,
        "faces": 6,
        "pixel_type": texture.pixels,
        "cube_axes": axes,
        "storage_ev": stops,
        "units": about["units"] if isinstance(about.get("units"), str) else None,
        "chromaticities": space and [number for pair in space for number in pair],
    }
