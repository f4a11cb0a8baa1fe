"""Source layouts: from a picture, or six, to one panorama.

Pictures that hold a cube are cut, flipped into the six world faces of `directions`, and resampled once;
so are discs, each a chart of `charts`. Equirectangular pictures are taken as they are.

Cube pictures differ in how their images lie. `openexr`: each image is what a camera sees from inside a
right-handed world, faces in the order of `FACES` (ImfEnvmap.h, read through its pixel positions; from
memory), with the pixel grid of `directions`. Crosses are unfolded in front of a viewer who looks along +z,
so +x lies left. Strips and single images may also follow the cube-map table of graphics interfaces, which
is left-handed: `negate_x`, `negate_z` or `direct` then say which world they show (`cube_axes`).

A panorama is made as fine as its source: a quarter of its width for each cube face, and the disc's own
pixel pitch at its middle, in angle. A turn is taken in the same step, so that nothing is resampled twice;
only where a ground has to be filled in first, the whole panorama is turned after that.
"""

import math
from typing import NamedTuple

import numpy as np

from skykiln.light.charts import ANGULAR, CUBE, FISHEYE, MIRROR_BALL, PANORAMA
from skykiln.light.cube_axes import CUBE_AXES, from_cube_space
from skykiln.light.ground import with_ground
from skykiln.light.orientation import reoriented
from skykiln.light.resampling import footprint_means
from skykiln.light.seams import seam

OPENEXR = "openexr"
FACE_CONVENTIONS = (OPENEXR, *CUBE_AXES)


class Layout(NamedTuple):
    """What a layout's picture holds."""

    aspect: tuple  # width, height, as whole numbers
    chart: int
    images: object  # (picture (H, W, 3), faces: name of a face convention or None) -> images of the chart
    pixels_round: float  # pixels of an image's pitch at its middle round the sphere, over its width
    upper: bool = False  # it shows the sky above the horizon alone, and needs a ground


def fitting_layouts(width, height):
    """Names of the layouts that a picture of this size can have, none or several."""
    return tuple(
        name for name, layout in LAYOUTS.items()
        if width * layout.aspect[1] == height * layout.aspect[0]
    )  # fmt: skip


def panorama_from(picture, layout, faces=None, ground=None, turn=None):
    """The panorama of a picture.

    Parameters
    ----------
    picture : (H, W, 3) float32, radiance.
    layout : a name of `LAYOUTS`; the picture has its aspect.
    faces : a name of `FACE_CONVENTIONS` for strips; None: `negate_x`.
    ground : (kind, value) as of `with_ground`, for layouts that show the upper half alone.
    turn : (3, 3), source directions to world directions, a rotation that may mirror too; None: the same.

    Returns: (H', W', 3) float32, radiance, W' = 2 H'; equirectangular pictures keep their size.
    """
    chosen = LAYOUTS[layout]
    if chosen.upper and ground is None:
        raise ValueError(f"a picture of layout {layout} needs a ground")
    images = chosen.images(picture, faces)
    if chosen.upper:
        upper = _resampled(images, chosen, None)
        return reoriented(with_ground(upper, 2 * upper.shape[0], *ground), turn)
    return reoriented(images[0], turn) if chosen.chart == PANORAMA else _resampled(images, chosen, turn)


def panorama_of_faces(faces, turn=None):
    """World faces (6, n, n, 3) float32 to a panorama (2 n, 4 n, 3) float32, turned as by `panorama_from`."""
    size = faces.shape[1]
    return footprint_means(faces, CUBE, 4 * size, 2 * size, turn=turn)


def _resampled(images, layout, turn):
    """A panorama, or its upper half, of a chart's images."""
    if layout.chart == PANORAMA:
        return images[0]
    height = 2 * math.ceil(layout.pixels_round * images.shape[2] / 4)
    rows = height // 2 if layout.upper else None
    return footprint_means(images, layout.chart, 2 * height, height, rows, turn)


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
    return lambda picture, faces: _flipped(cut_faces(picture, places), flips)


def _strip(places, only=None):
    return lambda picture, faces: world_faces(cut_faces(picture, places), only or faces or "negate_x")


def _single(picture, faces):
    return picture[None]


STRIPS = {
    "strip_horizontal": [(0, k) for k in range(6)],
    "strip_vertical": [(k, 0) for k in range(6)],
}  # the places of their images

LAYOUTS = {
    "equirect": Layout((2, 1), PANORAMA, _single, 1),
    "equirect_upper": Layout((4, 1), PANORAMA, _single, 1, upper=True),
    "cube": Layout((1, 6), CUBE, _strip(STRIPS["strip_vertical"], OPENEXR), 4),
    "cross_horizontal": Layout(
        (4, 3), CUBE, _cross([(1, 0), (1, 2), (0, 1), (2, 1), (1, 1), (1, 3)], upside_down=False), 4
    ),
    "cross_vertical": Layout(
        (3, 4), CUBE, _cross([(1, 0), (1, 2), (0, 1), (2, 1), (1, 1), (3, 1)], upside_down=True), 4
    ),
    "strip_horizontal": Layout((6, 1), CUBE, _strip(STRIPS["strip_horizontal"]), 4),
    "strip_vertical": Layout((1, 6), CUBE, _strip(STRIPS["strip_vertical"]), 4),
    "angular": Layout((1, 1), ANGULAR, _single, 1.0),
    "mirror_ball": Layout((1, 1), MIRROR_BALL, _single, math.pi / 2),
    "fisheye": Layout((1, 1), FISHEYE, _single, 2.0, upper=True),
}
