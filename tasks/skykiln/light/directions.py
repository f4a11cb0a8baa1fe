"""Directions, faces, texels and their solid angles: the conventions that everything else refers to.

World: right-handed, y up. Vectors are unit length, the last axis holds x, y, z. Angles in radians,
solid angles in steradian, radiance linear.

Panorama (H, W): the axes of OpenEXR's latitude-longitude convention (ImfEnvmap.h): row 0 touches +y,
the centre column looks along +z, longitude +pi/2 is +x and lies left of the centre. Pixel (row j,
column i) covers [i, i + 1] x [j, j + 1]; its centre is at ((i + 0.5)/W, (j + 0.5)/H).

Cube (6, n, n): faces in the order of `FACES`; row 0 is t = 0, column 0 is s = 0, with s and t as in the
OpenGL 4.6 core specification, section 8.13 (cube-map face table; table number 8.19 from memory). Texel
(row j, column i) has its centre at s = (i + 0.5)/n, t = (j + 0.5)/n. A texel's table direction *is* its
world direction here; the change to a renderer's left-handed cube space is made once, in `cube_axes`.
"""

import numpy as np

FACES = ("+x", "-x", "+y", "-y", "+z", "-z")

# Rows: the major axis, and the directions in which s and t rise (OpenGL 4.6, section 8.13).
FACE_AXES = np.array(
    [
        [[1, 0, 0], [0, 0, -1], [0, -1, 0]],
        [[-1, 0, 0], [0, 0, 1], [0, -1, 0]],
        [[0, 1, 0], [1, 0, 0], [0, 0, 1]],
        [[0, -1, 0], [1, 0, 0], [0, 0, -1]],
        [[0, 0, 1], [1, 0, 0], [0, -1, 0]],
        [[0, 0, -1], [-1, 0, 0], [0, -1, 0]],
    ],
    dtype=np.float64,
)


def alpha_from_roughness(roughness):
    """GGX alpha of a perceptual roughness in 0..1: its square (common practice)."""
    return roughness * roughness


def texel_coordinates(size):
    """Face coordinates of texel centres, 2 s - 1. Returns (size,) float64 in -1..1."""
    return (2.0 * np.arange(size) + 1.0) / size - 1.0


def cube_directions(size):
    """World directions of texel centres. Returns (6, size, size, 3) float64, unit vectors."""
    a = texel_coordinates(size)
    major, right, down = FACE_AXES[:, 0], FACE_AXES[:, 1], FACE_AXES[:, 2]
    d = (
        major[:, None, None, :]
        + right[:, None, None, :] * a[None, None, :, None]
        + down[:, None, None, :] * a[None, :, None, None]
    )
    return d / np.linalg.norm(d, axis=-1, keepdims=True)


def cube_texel_solid_angles(size):
    """Exact solid angles of a face's texels. Returns (size, size) float64, sr; six faces make 4 pi.

    Source: solid angle of a rectangular pyramid from the face's centre, atan(x y / sqrt(1 + x^2 + y^2))
    (standard closed form), differenced over the four corners of a texel.
    """
    corner = 2.0 * np.arange(size + 1) / size - 1.0
    x, y = corner[None, :], corner[:, None]
    to_corner = np.arctan2(x * y, np.sqrt(x * x + y * y + 1.0))
    return np.diff(np.diff(to_corner, axis=0), axis=1)


def panorama_directions(width, height):
    """World directions of pixel centres. Returns (height, width, 3) float64, unit vectors."""
    longitude = np.pi - 2.0 * np.pi * (np.arange(width) + 0.5) / width
    latitude = np.pi / 2 - np.pi * (np.arange(height) + 0.5) / height
    across = np.cos(latitude)[:, None]
    return np.stack(
        [
            across * np.sin(longitude),
            np.broadcast_to(np.sin(latitude)[:, None], (height, width)),
            across * np.cos(longitude),
        ],
        axis=-1,
    )


def panorama_row_solid_angles(width, height):
    """Exact solid angle of one pixel of each row. Returns (height,) float64, sr."""
    edges = np.pi * np.arange(height + 1) / height
    # The product form keeps the digits that a difference of cosines loses beside the poles.
    return 4.0 * np.pi / width * np.sin(np.pi / (2 * height)) * np.sin((edges[:-1] + edges[1:]) / 2)
