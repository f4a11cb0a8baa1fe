"""Source layouts: from a picture, or six, to one panorama.

Pictures that hold a cube are cut, flipped into the six world faces of `directions`, and resampled once;
so are discs, each a chart of `charts`. Equirectangular pictures are taken as they are.

Cube pictures differ in how their images lie. `openexr`: each image is what a camera sees from inside a
right-handed world, faces in the order of `FACES` (ImfEnvmap.h, read through its pixel positions; from
memory), with the pixel grid of `directions`. Crosses are unfolded in front of a viewer who looks along +z,
so +x lies left. Strips and single images may also follow the cube-map table of graphics interfaces, which
is left-handed: `negate_x`, `negate_z` or `direct` then say which world they show (`cube_axes`).

A panorama is made as fine as its source: a quarter of its width for each cube face, and the disc's own
pixel pitch at its middle, in angle.
"""

import math
from typing import NamedTuple

import numpy as np

from skykiln.light.charts import ANGULAR, CUBE, FISHEYE, MIRROR_BALL
from skykiln.light.cube_axes import CUBE_AXES, from_cube_space
from skykiln.light.ground import with_ground
from skykiln.light.resampling import footprint_means
from skykiln.light.seams import seam

OPENEXR = "openexr"
FACE_CONVENTIONS = (OPENEXR, *CUBE_AXES)


class Layout(NamedTuple):
    """A layout's aspect as whole numbers, and the function that makes it a panorama."""

    aspect: tuple  # width, height
    panorama: object  # (picture (H, W, 3), faces: name of a face convention or None) -> panorama
    upper: bool = False  # it shows the sky above the horizon alone, and needs a ground


def fitting_layouts(width, height):
    """Names of the layouts that a picture of this size can have, none or several."""
    return tuple(
        name for name, layout in LAYOUTS.items()
        if width * layout.aspect[1] == height * layout.aspect[0]
    )  # fmt: skip


def panorama_from(picture, layout, faces=None, ground=None):
    """The panorama of a picture.

    Parameters
    ----------
    picture : (H, W, 3) float32, radiance.
    layout : a name of `LAYOUTS`; the picture has its aspect.
    faces : a name of `FACE_CONVENTIONS` for strips; None: `negate_x`.
    ground : (kind, value) as of `with_ground`, for layouts that show the upper half alone.

    Returns: (H', W', 3) float32, radiance, W' = 2 H'.
    """
    chosen = LAYOUTS[layout]
    panorama = chosen.panorama(picture, faces)
    if not chosen.upper:
        return panorama
    if ground is None:
        raise ValueError(f"a picture of layout {layout} needs a ground")
    return with_ground(panorama, 2 * panorama.shape[0], *ground)


def panorama_of_faces(faces):
    """World faces (6, n, n, 3) float32 to a panorama (2 n, 4 n, 3) float32."""
    size = faces.shape[1]
    return footprint_means(faces, CUBE, 4 * size, 2 * size)


def world_faces(images, convention):
    """Six face images (6, n, n, c) of a named convention to world faces; pixels only move."""
    if convention != OPENEXR:
        return from_cube_space(images, convention)
    return _flipped(images, [(False, True), (False, True), (True, False), (True, False),
                             (False, True), (False, True)])  # fmt: skip


def likely_convention(images):
    """`openexr` or `negate_x`: the convention under which the images join best along the cube's edges.

    The three left-handed conventions join alike; they differ by a half turn, or mirror the world.
    """
    return min((OPENEXR, "negate_x"), key=lambda name: seam(world_faces(images, name)) or 0.0)


def cut_faces(picture, places):
    """Images (6, n, n, c) of a picture cut into squares; places: row and column of each, in squares."""
    size = picture.shape[0] // (max(row for row, _ in places) + 1)
    return np.stack([
        picture[row * size : (row + 1) * size, column * size : (column + 1) * size]
        for row, column in places
    ])  # fmt: skip


def _flipped(images, flips):
    return np.ascontiguousarray(np.stack([
        image[:: -1 if rows else 1, :: -1 if columns else 1]
        for image, (rows, columns) in zip(images, flips, strict=True)
    ]))  # fmt: skip


def _cross(places, upside_down):
    """Crosses are seen from inside, hence mirrored against the table of faces; `upside_down`: the -z
    face hangs under the others, turned by half a turn."""
    flips = [(False, True)] * 5 + [(True, False) if upside_down else (False, True)]
    return lambda picture, faces: panorama_of_faces(_flipped(cut_faces(picture, places), flips))


def _strip(places, only=None):
    return lambda picture, faces: panorama_of_faces(
        world_faces(cut_faces(picture, places), only or faces or "negate_x")
    )


def _disc(chart, pixels_round, upper=False):
    """A disc; `pixels_round`: pixels of its pitch at the middle round the sphere, over its width."""

    def panorama(picture, faces):
        height = 2 * math.ceil(pixels_round * picture.shape[1] / 4)
        rows = height // 2 if upper else height
        return footprint_means(picture[None], chart, 2 * height, height, rows)

    return panorama


def _as_it_is(picture, faces):
    return picture


_ACROSS = [(0, k) for k in range(6)]
_DOWN = [(k, 0) for k in range(6)]

LAYOUTS = {
    "equirect": Layout((2, 1), _as_it_is),
    "equirect_upper": Layout((4, 1), _as_it_is, upper=True),
    "cube": Layout((1, 6), _strip(_DOWN, OPENEXR)),
    "cross_horizontal": Layout(
        (4, 3), _cross([(1, 0), (1, 2), (0, 1), (2, 1), (1, 1), (1, 3)], upside_down=False)
    ),
    "cross_vertical": Layout(
        (3, 4), _cross([(1, 0), (1, 2), (0, 1), (2, 1), (1, 1), (3, 1)], upside_down=True)
    ),
    "strip_horizontal": Layout((6, 1), _strip(_ACROSS)),
    "strip_vertical": Layout((1, 6), _strip(_DOWN)),
    "angular": Layout((1, 1), _disc(ANGULAR, 1.0)),
    "mirror_ball": Layout((1, 1), _disc(MIRROR_BALL, math.pi / 2)),
    "fisheye": Layout((1, 1), _disc(FISHEYE, 2.0, upper=True), upper=True),
}
