"""From world faces to the bytes of a packed cube."""

import numpy as np

from ..formats.ktx2 import Ktx2Texture, write_ktx2
from ..light.cube_axes import to_cube_space
from ..light.directions import cube_texel_solid_angles
from ..light.storage import STORED_MAX, storage_ev


def shared_storage_ev(cubes) -> int:
    """The stops by which all files of a probe are darkened, so that its greatest value fits."""
    return storage_ev(max(float(cube.max()) for cube in cubes))


def pack_faces(levels, pixels, cube_axes, stops, writer) -> bytes:
    """A KTX2 cube of world faces.

    Parameters: levels : arrays (6, n, n, 3), the largest first; pixels : name of the coding
                writer : what packs, and which version of it
    """
    images = [to_cube_space(darkened(level, stops), cube_axes) for level in levels]
    metadata = {
        "KTXwriter": writer,
        "skykiln.cube_axes": cube_axes,
        "skykiln.storage_ev": str(stops),
    }
    return write_ktx2(Ktx2Texture(pixels, tuple(images), metadata))


def darkened(cube, stops):
    """Stored values of radiance: exact, a power of two only moves the exponent."""
    return cube * np.float32(2.0**-stops)


def share_lost(faces, stops) -> float:
    """Share of the flux of faces (6, n, n, 3) that is above the largest stored value after darkening."""
    above = np.maximum(darkened(faces, stops) - np.float32(STORED_MAX), 0)
    if not above.any():
        return 0.0
    weights = cube_texel_solid_angles(faces.shape[1])[None, :, :, None]
    return float((above * weights).sum() * 2.0**stops / (faces * weights).sum())
