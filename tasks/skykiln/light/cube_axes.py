"""The one step from world directions to the cube space that a renderer samples.

Cube-map space is left-handed (KTX 2.0 specification, appendix on cube-map orientation): a right-handed
world fed in unchanged is shown mirrored, so one axis is negated on the way. All three choices only
exchange and flip faces; nothing is resampled.
"""

import numpy as np

# For each face of the file: the world face it comes from, whether its columns run backwards, and
# whether its rows do.
_SOURCES = {
    "direct": ((0, False, False), (1, False, False), (2, False, False),
               (3, False, False), (4, False, False), (5, False, False)),
    "negate_x": ((1, True, False), (0, True, False), (2, True, False),
                 (3, True, False), (4, True, False), (5, True, False)),
    "negate_z": ((0, True, False), (1, True, False), (2, False, True),
                 (3, False, True), (5, True, False), (4, True, False)),
}  # fmt: skip

CUBE_AXES = tuple(_SOURCES)

# What a renderer multiplies a world direction by before it samples.
SAMPLING_SIGNS = {"direct": (1, 1, 1), "negate_x": (-1, 1, 1), "negate_z": (1, 1, -1)}


def to_cube_space(faces, cube_axes):
    """World faces (6, n, n, c) -> the six face images of a file, same shape and dtype, contiguous.

    `cube_axes` is 'negate_x' (the renderer samples with (-x, y, z)), 'negate_z' (with (x, y, -z)) or
    'direct' (with (x, y, z)).
    """
    return np.ascontiguousarray(np.stack(images_of(faces, cube_axes)))


def images_of(faces, cube_axes):
    """The same as six views (n, n, c), without a copy."""
    return [
        faces[face, :: -1 if flip_rows else 1, :: -1 if flip_columns else 1]
        for face, flip_columns, flip_rows in _SOURCES[cube_axes]
    ]


def from_cube_space(images, cube_axes):
    """The inverse of `to_cube_space`: each of the three maps undoes itself."""
    return to_cube_space(images, cube_axes)
