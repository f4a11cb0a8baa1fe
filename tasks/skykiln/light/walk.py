"""Which nodes of the pyramid a group of output texels takes whole, and which it opens.

A node is taken when what the sum over it leaves out (`lobe_sums`) is at most one part, the error allowed
for one node. With K's derivatives in the distance |n - m| bounded by

    |K^(k)| / k! <= (k+1)(k+2)(k+3)/6 K / s^k,   s^2 = |n - m|^2 + 4 a^2/(1 - a^2)

(the generating function of (1 - x)^-4) the remainder follows from the node's third and fourth moments.
A group is described by its centre, its radius and, per channel, how many parts a unit of flux weighs.
"""

import math

import numpy as np

from skykiln.jit import formula
from skykiln.light.cells import cell_moments
from skykiln.light.node_record import (
    FLUX,
    FOURTH,
    KINK,
    MEAN,
    RADIUS,
    RECORD,
    SHIFT,
    SLIM,
    SPREAD,
    SPREAD_GAP,
    THIRD,
)

OPEN, TAKE, COLOURED, DROP = 0, 1, 2, 3
ACROSS = 4  # added to a verdict: the node may stand across a horizon
BATCH = 64  # nodes of one level that are judged together
STACK = 4096  # a depth-first walk in batches needs 3 BATCH entries a level
# Colours that drift across the sky shift all nodes the same way: these errors add up, where others
# cancel.
COHERENT = np.float32(20.0)

_f = np.float32


@formula
def pop_batch(stack_level, stack_node, top, batch):
    """Moves the topmost nodes of one level to `batch`; returns (level, how many, new top)."""
    level = stack_level[top - 1]
    count = 0
    while top > 0 and count < BATCH and stack_level[top - 1] == level:
        top -= 1
        batch[count] = stack_node[top]
        count += 1
    return level, count, top


@formula
def push_roots(tree, stack_level, stack_node):
    """The two halves of the sphere onto an empty stack; returns its top."""
    for half in range(2):
        stack_level[half], stack_node[half] = tree[5].shape[0] - 2, half
    return 2


@formula
def has_room(top):
    """Whether a node may still be opened. Else it is taken as it is, some ten levels below a pixel."""
    return top + 4 <= STACK


@formula
def push_quarters(stack_level, stack_node, top, level, node):
    """Adds the four quarters of a node; returns the new top."""
    for k in range(4):
        stack_level[top + k] = level - 1
        stack_node[top + k] = 4 * node + k
    return top + 4


@formula
def fetch(tree, level, batch, count, scratch, rows):
    """The array that holds the records of a batch, and in `rows` where: among the stored ones, or, for
    smaller cells, made in `scratch`."""
    nodes, offsets = tree[4], tree[5]
    if level > 0:
        for e in range(count):
            rows[e] = offsets[level] + batch[e]
        return nodes
    for e in range(count):
        cell_moments(tree, level, batch[e], scratch[e])
        rows[e] = e
    return scratch


@formula
def judge(records, rows, count, centre, radius, b, a2, per_part, verdicts):
    """What to do with each node of a batch; without branches, so that it vectorises."""
    cx, cy, cz, radius = _f(centre[0]), _f(centre[1]), _f(centre[2]), _f(radius)
    half_b, a2 = _f(0.5 * b), _f(a2)
    red, green, blue = _f(per_part[0]), _f(per_part[1]), _f(per_part[2])
    zero, half, one = _f(0.0), _f(0.5), _f(1.0)
    for e in range(count):
        n = rows[e]
        strength = max(
            records[n, FLUX] * red, max(records[n, FLUX + 1] * green, records[n, FLUX + 2] * blue)
        )
        mx, my, mz = records[n, MEAN], records[n, MEAN + 1], records[n, MEAN + 2]
        height = cx * mx + cy * my + cz * mz
        extent = records[n, RADIUS]
        reach = radius + extent
        dx, dy, dz = cx - mx, cy - my, cz - mz
        near = max(zero, math.sqrt(dx * dx + dy * dy + dz * dz) - radius)
        inverse = one / (half_b * near * near + a2)
        r2 = half_b * inverse
        r = math.sqrt(r2)
        strength *= inverse * inverse * records[n, SLIM]
        cosine = min(one, max(zero, height + radius))
        across = height < reach
        remainder = _left_out(records[n, THIRD], records[n, FOURTH], records[n, SPREAD], cosine, r)
        remainder = strength * (remainder + (records[n, KINK] if across else zero))
        shift, gap = records[n, SHIFT], records[n, SPREAD_GAP]
        first = COHERENT * strength * shift * (_f(4.0) * cosine * r + one)
        second = strength * (_f(2.0) * gap + _f(4.0) * shift * shift) * (_f(10.0) * cosine * r + _f(4.0)) * r
        verdict = OPEN if remainder + second > one else (COLOURED if remainder + first > one else TAKE)
        verdict = OPEN if extent * extent * r2 > half else verdict
        verdict = DROP if strength <= zero or height < -reach else verdict
        verdicts[e] = verdict + (ACROSS if across else 0)


@formula
def _left_out(third, fourth, spread, cosine, r):
    """Third moment, a share of the fourth (uneven between directions) and the sixth, as a part of the
    flux and of 1/(B q + 2 a^2)^2; r = 1/s. The sixth moment is at least fourth^2/spread (Lyapunov)."""
    fourth *= (_f(4.0) + _f(43.0) * fourth / max(spread, _f(1e-30)) * r * r) * r
    return (cosine * (_f(20.0) * third + fourth) * r + _f(10.0) * third + _f(0.6) * fourth) * r * r


@formula
def rough_sums(tree, probes, centre, radius, b, a2, rough, sums):
    """A rough estimate, per channel, of the sums at some directions of a group; on the low side, since nodes
    across the horizon are left out.

    probes (3, p) float32; sums (3, p) float32, zero on entry; rough, the relative error.
    """
    half, one, zero = _f(0.5), _f(1.0), _f(0.0)
    half_b, b_, a2_ = _f(0.5 * b), _f(b), _f(a2)
    stack_level, stack_node = np.empty(STACK, np.int32), np.empty(STACK, np.int64)
    batch, rows = np.empty(BATCH, np.int64), np.empty(BATCH, np.int64)
    scratch = np.empty((BATCH, RECORD), np.float32)
    top = push_roots(tree, stack_level, stack_node)
    while top > 0:
        level, count, top = pop_batch(stack_level, stack_node, top, batch)
        records = fetch(tree, level, batch, count, scratch, rows)
        for e in range(count):
            node = records[rows[e]]
            height = centre[0] * node[MEAN] + centre[1] * node[MEAN + 1] + centre[2] * node[MEAN + 2]
            reach = radius + node[RADIUS]
            if node[FLUX] + node[FLUX + 1] + node[FLUX + 2] <= zero or height < -reach:
                continue
            mx, my, mz, spread = node[MEAN], node[MEAN + 1], node[MEAN + 2], node[SPREAD]
            dx, dy, dz = centre[0] - mx, centre[1] - my, centre[2] - mz
            near = max(0.0, math.sqrt(dx * dx + dy * dy + dz * dz) - radius)
            r2 = half_b / (half_b * near * near + a2_)
            across = height < reach
            # 35 = (4+3)!/(4! 3!), of the fourth derivative; 0.3 rad across a horizon is no node to leave out.
            coarse = node[FOURTH] * r2 * r2 * 35.0 > rough or (across and node[RADIUS] > 0.3)
            if coarse and has_room(top):
                top = push_quarters(stack_level, stack_node, top, level, batch[e])
            elif not across:
                red, green, blue = node[FLUX], node[FLUX + 1], node[FLUX + 2]
                for k in range(probes.shape[1]):
                    dx, dy, dz = probes[0, k] - mx, probes[1, k] - my, probes[2, k] - mz
                    q = half * (dx * dx + dy * dy + dz * dz + spread)
                    inverse = one / (b_ * q + a2_)
                    value = max(zero, one - q) * inverse * inverse
                    sums[0, k] += red * value
                    sums[1, k] += green * value
                    sums[2, k] += blue * value
