"""One sky, photographed in every layout: forward projections, written apart from the code under test.

A projection takes picture coordinates u, v in 0..1 (arrays of one shape) to world directions (..., 3), and
says where there is no picture by NaN.
"""

import numpy as np

# Images of cube pictures: direction of the middle, of rising u, of rising v.
AXES = dict(zip(("+x", "+y", "+z", "-x", "-y", "-z"), [*np.eye(3), *-np.eye(3)], strict=True))


def image(text):
    """'middle right down', each an axis, as three vectors."""
    return tuple(AXES[axis] for axis in text.split())


# Pixel positions of ImfEnvmap (from memory): what each image of the strip shows.
OPENEXR = [image(text) for text in
           ("+x +z -y", "-x -z -y", "+y +x -z", "-y +x +z", "+z -x -y", "-z +x -y")]  # fmt: skip
# The cube-map table of OpenGL 4.6, section 8.13, in cube space.
TABLE = [image(text) for text in
         ("+x -z -y", "-x +z -y", "+y +x +z", "-y +x -z", "+z +x -y", "-z -x -y")]  # fmt: skip
# An unfolded cube seen from inside by a viewer who looks along +z and has +x to his left.
LEFT, AHEAD, RIGHT, BEHIND = (image(text) for text in ("+x +z -y", "+z -x -y", "-x -z -y", "-z +x -y"))
ABOVE, BELOW, BEHIND_BELOW = (image(text) for text in ("+y -x +z", "-y -x -z", "-z -x +y"))


def tiled(rows):
    """A projection of square images in rows; None where no image is."""

    def directions(u, v):
        x, y = u * len(rows[0]), v * len(rows)
        d = np.full((*u.shape, 3), np.nan)
        for j, row in enumerate(rows):
            for i, axes in enumerate(row):
                if axes is None:
                    continue
                inside = (np.floor(x) == i) & (np.floor(y) == j)
                a, b = 2 * (x[inside] - i) - 1, 2 * (y[inside] - j) - 1
                d[inside] = axes[0] + a[:, None] * axes[1] + b[:, None] * axes[2]
        return d / np.linalg.norm(d, axis=-1, keepdims=True)

    return directions


def sampled_with(signs):
    """The table's images of a renderer that samples world directions multiplied by `signs`."""
    return [tuple(axis * signs for axis in axes) for axes in TABLE]


def equirect(u, v, lowest=-np.pi / 2):
    latitude = np.pi / 2 + v * (lowest - np.pi / 2)
    longitude = np.pi * (1 - 2 * u)
    across = np.cos(latitude)
    return np.stack([across * np.sin(longitude), np.sin(latitude), across * np.cos(longitude)], -1)


def equirect_upper(u, v):
    return equirect(u, v, lowest=0.0)


def _disc(u, v):
    """Right and up from the middle, -1..1, and the distance, NaN outside of the disc."""
    right, up = 2 * u - 1, 1 - 2 * v
    r = np.hypot(right, up)
    return right, up, np.where(r > 1, np.nan, r)


def angular(u, v):
    right, up, r = _disc(u, v)
    ring = np.sinc(r) * np.pi  # sin(pi r)/r
    return np.stack([-right * ring, up * ring, np.cos(np.pi * r)], -1)


def fisheye(u, v):
    right, up, r = _disc(u, v)
    ring = np.sinc(r / 2) * np.pi / 2
    return np.stack([right * ring, np.cos(np.pi / 2 * r), up * ring], -1)


def mirror_ball(u, v):
    """By the law of reflection: camera far away on -z, looking along +z, +x on its left."""
    right, up, r = _disc(u, v)
    normal = np.stack([-right, up, -np.sqrt(1 - r * r)], -1)
    ray = np.array([0.0, 0.0, 1.0])
    return ray - 2 * (normal @ ray)[..., None] * normal


CROSS_HORIZONTAL = tiled([[None, ABOVE, None, None], [LEFT, AHEAD, RIGHT, BEHIND], [None, BELOW, None, None]])
CROSS_VERTICAL = tiled([[None, ABOVE, None], [LEFT, AHEAD, RIGHT], [None, BELOW, None],
                        [None, BEHIND_BELOW, None]])  # fmt: skip
NEGATE_X = sampled_with(np.array([-1, 1, 1]))

# Layout: projection, and its picture's width and height over the edge of a face or disc.
PROJECTIONS = {
    "equirect": (equirect, (4, 2)),
    "cube": (tiled([[axes] for axes in OPENEXR]), (1, 6)),
    "cross_horizontal": (CROSS_HORIZONTAL, (4, 3)),
    "cross_vertical": (CROSS_VERTICAL, (3, 4)),
    "strip_horizontal": (tiled([NEGATE_X]), (6, 1)),
    "strip_vertical": (tiled([[axes] for axes in NEGATE_X]), (1, 6)),
    "angular": (angular, (4, 4)),
    "mirror_ball": (mirror_ball, (4, 4)),
    "equirect_upper": (equirect_upper, (4, 1)),
    "fisheye": (fisheye, (2, 2)),
}


def photographed(sky, projection, width, height, samples=2):
    """(height, width, 3) float32: means of samples^2 points of each pixel; black where no picture is."""
    total = np.zeros((height, width, 3))
    for j in range(samples):
        for i in range(samples):
            u = (np.arange(width) + (i + 0.5) / samples) / width
            v = (np.arange(height) + (j + 0.5) / samples) / height
            d = projection(*np.meshgrid(u, v))
            total += np.nan_to_num(sky(d))
    return (total / samples**2).astype(np.float32)


def pixel_solid_angle(projection, width, height, column, row, parts=40):
    """Solid angle of one pixel: planar triangles of a fine mesh over it (they lie close to the sphere)."""
    u, v = np.meshgrid(
        (column + np.linspace(1e-6, 1 - 1e-6, parts + 1)) / width,
        (row + np.linspace(1e-6, 1 - 1e-6, parts + 1)) / height,
    )
    d = projection(u, v)
    a, b = d[1:, 1:] - d[:-1, :-1], d[1:, :-1] - d[:-1, 1:]
    return float(np.linalg.norm(np.cross(a, b), axis=-1).sum() / 2)


MARKS = [
    # Place, angular size in rad, colour: none the mirror image of another, some on every side.
    ((0.9, 0.3, 0.2), 0.15, (6, 0, 0)),
    ((-0.7, 0.5, -0.1), 0.2, (0, 4, 0)),
    ((0.2, 0.9, 0.35), 0.12, (0, 0, 8)),
    ((0.3, -0.8, 0.5), 0.2, (3, 3, 0)),
    ((0.1, 0.25, 0.95), 0.1, (0, 5, 5)),
    ((-0.45, -0.2, 0.8), 0.15, (5, 0, 5)),
    ((-0.3, 0.35, -0.9), 0.15, (2, 6, 1)),
    ((0.5, 0.62, -0.6), 0.06, (90, 80, 60)),
]


def marked_sky(d):
    """1 + 0.8 x, 1 + 0.8 y, 1 + 0.8 z, with asymmetrical coloured marks and a small smooth sun."""
    light = 1 + 0.8 * d
    for place, size, colour in MARKS:
        toward = np.array(place) / np.linalg.norm(place)
        away = ((d - toward) ** 2).sum(-1, keepdims=True)
        light = light + np.exp(-away / (2 * size * size)) * colour
    return light


GROUND = (0.3, 0.2, 0.1)


def marked_sky_over_ground(d):
    return np.where(d[..., 1:2] > 0, marked_sky(d), GROUND)
