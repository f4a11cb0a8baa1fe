"""From world faces to the bytes of a packed cube, and what came of them."""

import numpy as np

from ..config import canonical_json
from ..formats.dds import DdsTexture, write_dds
from ..formats.exr_levels import ExrLevels, write_exr_levels
from ..formats.ktx2 import Ktx2Texture, write_ktx2
from ..formats.texture_files import read_texture
from ..light.coding_error import flux_error, log2_rms
from ..light.colour import SPACES
from ..light.cube_axes import to_cube_space
from ..light.directions import cube_texel_solid_angles
from ..light.seams import seam
from ..light.storage import STORED_MAX, storage_ev

ABOUT_KEY = "skykiln"  # of the metadata: what a loader must know, as JSON


def shared_storage_ev(cubes) -> int:
    """The stops by which all files of a probe are darkened, so that its greatest value fits."""
    return storage_ev(max(float(cube.max()) for cube in cubes))


def darkened(cube, stops):
    """Stored values of radiance: exact, a power of two only moves the exponent."""
    return cube * np.float32(2.0**-stops)


def pack_images(images, container, pixels, compress, about, writer, primaries) -> bytes:
    """The file of a cube map.

    Parameters: images : arrays (6, n, n, 3) of cube space, the largest first
                about : the values of ABOUT_KEY; writer : what packs, and which version of it
                primaries : a key of `light.colour.SPACES` that `formats.dfd` knows too
    """
    texts = {ABOUT_KEY: canonical_json(about)}
    return _WRITERS[container](pixels, images, compress, texts, writer, primaries)


def _ktx2(pixels, images, compress, texts, writer, primaries):
    return write_ktx2(Ktx2Texture(pixels, images, {**texts, "KTXwriter": writer}, primaries), compress)


def _dds(pixels, images, compress, texts, writer, primaries):
    return write_dds(DdsTexture(pixels, images))  # which has no place for texts


def _exr(pixels, images, compress, texts, writer, primaries):
    space = SPACES[primaries]
    chromaticities = None if primaries == "rec709" else tuple(x for pair in space for x in pair)
    return write_exr_levels(ExrLevels(pixels, images, {**texts, "software": writer}, chromaticities))


_WRITERS = {"ktx2": _ktx2, "dds": _dds, "exr": _exr}


def stored_images(levels, cube_axes, stops):
    """World faces (6, n, n, 3) of every level -> the images of a file."""
    return tuple(to_cube_space(darkened(level, stops), cube_axes) for level in levels)


def packed_facts(data, name, images) -> dict:
    """What a renderer finds in a packed file: it is read back, as a renderer would.

    Parameters: data : the file's bytes; images : what was packed
    """
    texture = read_texture(data, name)
    pairs = list(zip(images, texture.levels, strict=True))
    return {
        "gpu_bytes": texture.gpu_bytes,
        "coding_error": {
            "flux": _short(max(flux_error(image, coded) for image, coded in pairs)),
            "log2_rms": _short(max(log2_rms(image, coded) for image, coded in pairs)),
        },
        "seams": [_short(seam(level)) for level in texture.levels],
    }


def _short(number):
    return number if number is None else float(f"{number:.4g}")


def share_lost(faces, stops) -> float:
    """Share of the flux of faces (6, n, n, 3) that is above the largest stored value after darkening."""
    above = np.maximum(darkened(faces, stops) - np.float32(STORED_MAX), 0)
    if not above.any():
        return 0.0
    weights = cube_texel_solid_angles(faces.shape[1])[None, :, :, None]
    return float((above * weights).sum() * 2.0**stops / (faces * weights).sum())
