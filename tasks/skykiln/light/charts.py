"""Where a direction lies in a picture: the projections that pictures of surroundings come in.

A chart takes a unit direction to one of the pictures of a set and a place (u, v) in it, u to the right
and v downwards, 0..1 between its edges; pixel (row j, column i) covers [i, i + 1] x [j, j + 1] of
(u w, v h). With r the distance from the picture's middle over half its width:

    PANORAMA     equirectangular; axes of `directions`
    CUBE         six faces whose table direction is the world direction (`directions`)
    ANGULAR      r = angle/pi around +z: an equidistant fisheye of the whole sphere, the angular map
                 (Debevec 1998, "Rendering synthetic objects into real scenes")
    MIRROR_BALL  photograph of a mirroring ball from afar, camera looking along +z: the middle reflects
                 what is behind the camera, -z, the rim +z, and r = cos(angle from +z / 2)
    FISHEYE      r = angle/(pi/2) around +y: an equidistant fisheye of the upper hemisphere

ANGULAR and MIRROR_BALL have +y above and +x to the left of the middle, as a camera that looks along
+z; FISHEYE, looking up, has +z above and +x to the right. None of the discs is seen mirrored, but a
mirroring ball mirrors.
"""

import math

from skykiln.jit import formula

PANORAMA, CUBE, ANGULAR, MIRROR_BALL, FISHEYE = range(5)


@formula
def place_in(chart, size, x, y, z):
    """Number of the picture, u and v of a unit direction. `size`: pixels across a disc's picture."""
    if chart == PANORAMA:
        u = 0.5 - math.atan2(x, z) / (2.0 * math.pi)
        return 0, u, math.atan2(math.sqrt(x * x + z * z), y) / math.pi
    if chart == CUBE:
        return _place_on_cube(x, y, z)
    if chart == FISHEYE:
        right, up, radius = x, z, math.atan2(math.sqrt(x * x + z * z), y) / (math.pi / 2)
    elif chart == ANGULAR:
        right, up, radius = -x, y, math.atan2(math.sqrt(x * x + y * y), z) / math.pi
    else:
        right, up, radius = -x, y, math.sqrt(max(0.0, (1.0 + z) / 2.0))
    # The centre of the pixel that is looked up lies on the disc: beyond it is the picture's background.
    radius = min(radius, 1.0 - math.sqrt(2.0) / size)
    length = math.sqrt(right * right + up * up)
    if length == 0.0:
        right, length = 1.0, 1.0
    return 0, 0.5 + 0.5 * radius * right / length, 0.5 - 0.5 * radius * up / length


@formula
def pixel_solid_angle(chart, height, width, x, y, z):
    """Solid angle of the source pixel at a unit direction, sr, from the chart's own Jacobian; beside a
    pole or a rim, where pixels shrink to nothing, that of those next to it."""
    if chart == PANORAMA:
        sine = math.sqrt(max(0.0, 1.0 - y * y) + 1.0 / (height * height))
        return 2.0 * math.pi * math.pi / (height * width) * sine
    if chart == CUBE:
        return 4.0 / (height * width) * max(abs(x), abs(y), abs(z)) ** 3
    if chart == MIRROR_BALL:
        return 16.0 / (height * width)  # dl = 4 x area of the unit disc
    span, cosine = (math.pi / 2, y) if chart == FISHEYE else (math.pi, z)
    sine = math.sqrt(max(0.0, 1.0 - cosine * cosine) + 1.0 / (height * height))
    return (2.0 * span) ** 2 / (height * width) * sine / max(sine, math.acos(min(1.0, max(-1.0, cosine))))


@formula
def _place_on_cube(x, y, z):
    """OpenGL 4.6 core specification, section 8.13: face, and s and t, of a direction."""
    ax, ay, az = abs(x), abs(y), abs(z)
    if ax >= ay and ax >= az:
        face, a, b = (0, -z / ax, -y / ax) if x > 0.0 else (1, z / ax, -y / ax)
    elif ay >= az:
        face, a, b = (2, x / ay, z / ay) if y > 0.0 else (3, x / ay, -z / ay)
    else:
        face, a, b = (4, x / az, -y / az) if z > 0.0 else (5, -x / az, -y / az)
    return face, 0.5 + 0.5 * a, 0.5 + 0.5 * b
