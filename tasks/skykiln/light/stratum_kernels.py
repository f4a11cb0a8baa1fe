"""What a stratum is weighed by: a lobe's kernel or a texel's footprint, and its range over a cap.

    GGX         K = c / ((1 - c)(1 - a^2) + 2 a^2)^2, rising with c = n.l  (`ggx`)
    SHEEN       K = c (1 - c)^p, p = 1/(2 a), greatest at c = 1/(1 + p)    (`sheen`)
    FOOTPRINT   1 between four planes through a texel's sides, else 0

Both lobes end at c = 0. A cap holds a node of the source: around a middle, by the cosine and sine of its
angular radius; the range of n.l over it has a closed form.
"""

import math

from skykiln.jit import formula
from skykiln.light.ggx import ggx_norm
from skykiln.light.sheen import sheen_norm

FOOTPRINT, GGX, SHEEN = 0, 1, 2

LOBES = {"ggx": GGX, "sheen": SHEEN}


def kernel_norm(kind, alpha, solid_angle):
    """The kernel's integral over the sphere, sr."""
    if kind == FOOTPRINT:
        return solid_angle
    return (ggx_norm if kind == GGX else sheen_norm)(alpha)


@formula
def kernel_range(cap, kind, n, alpha, edges):
    """Least and greatest K over a cap (x, y, z, cosine, sine)."""
    if kind == FOOTPRINT:
        return _footprint_range(cap, edges)
    least, greatest = _dot_range(n, cap)
    if greatest <= 0.0:
        return 0.0, 0.0
    low = _kernel(kind, least, alpha) if least > 0.0 else 0.0
    high = _kernel(kind, greatest, alpha)
    if kind == GGX:
        return low, high
    peak = 2.0 * alpha / (2.0 * alpha + 1.0)
    inside = least < peak < greatest
    return min(low, high), (_kernel(kind, peak, alpha) if inside else max(low, high))


@formula
def _footprint_range(cap, edges):
    least_inside = 1.0
    for e in range(4):
        least, greatest = _dot_range(edges[e], cap)
        if greatest <= 0.0:
            return 0.0, 0.0
        if least < 0.0:
            least_inside = 0.0
    return least_inside, 1.0


@formula
def _dot_range(n, cap):
    """Range of n.l over a cap; all of -1..1 for one whose radius is half a turn."""
    x, y, z, cosine, sine = cap
    c = n[0] * x + n[1] * y + n[2] * z
    s = math.sqrt(max(0.0, 1.0 - c * c))
    greatest = 1.0 if c >= cosine else c * cosine + s * sine
    least = -1.0 if c <= -cosine else c * cosine - s * sine
    return least, greatest


@formula
def _kernel(kind, c, alpha):
    """K of a lobe for 0 < c <= 1."""
    if kind == GGX:
        a2 = alpha * alpha
        x = (1.0 - c) * (1.0 - a2) + 2.0 * a2
        return c / (x * x)
    return c * math.exp(0.5 / alpha * math.log(max(1.0 - c, 1e-300)))


@formula
def kernel_at(x, y, z, kind, n, alpha, edges):
    """K in one direction."""
    if kind != FOOTPRINT:
        c = min(n[0] * x + n[1] * y + n[2] * z, 1.0)
        return _kernel(kind, c, alpha) if c > 0.0 else 0.0
    for e in range(4):
        if edges[e, 0] * x + edges[e, 1] * y + edges[e, 2] * z < 0.0:
            return 0.0
    return 1.0
