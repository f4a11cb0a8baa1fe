"""The sums of a group of tiles of points: walks of the node pyramid, shared as far as that goes.

The group, and then each tile of points, walks down the pyramid once and shares lists of nodes (`walk`). How
exact a node must be follows from the smallest result expected in the tile: far from the lobe, where the
kernel is small, large parts of the sky will do; a sun is followed down to its pixels.
"""

import math

import numpy as np

from skykiln.jit import formula
from skykiln.light.lobe_sums import ENTRY, append, sum_above, sum_across, sum_coloured
from skykiln.light.node_record import FLUX, RADIUS, RECORD, SPREAD
from skykiln.light.walk import (
    ACROSS,
    BATCH,
    COLOURED,
    DROP,
    OPEN,
    STACK,
    fetch,
    has_room,
    judge,
    pop_batch,
    push_quarters,
    push_roots,
    rough_sums,
)

_BLOCK = 256  # entries of a list that are summed at a time: they fit the nearest cache
_DEFERRED = 8192  # nodes that a group may leave to its tiles
_ROUGH = 0.2  # relative error of the first look at a group
_SMALLEST = 0.7  # of the smallest of five rough sums: what is counted on as a tile's smallest


@formula
def sum_group(tree, texels, step, tile, alpha, part, base, floor, target):
    """All points of a group: one walk for what its tiles share, then one per tile for the rest. Returns
    the strongest kink."""
    b, a2 = 1.0 - alpha * alpha, 2.0 * alpha * alpha
    across, area = target.shape[1] // tile, tile * tile
    count = texels.shape[0] // area
    sums = np.zeros((texels.shape[0], 3), np.float32)
    centre = np.empty(3)
    radius = _bounds(texels, centre)
    per_part = np.empty((count + 1, 3))
    _tile_limits(tree, texels, tile, centre, radius, b, a2, per_part)
    for c in range(3):
        for t in range(count):
            per_part[t, c] = 1.0 / (part * max(per_part[t, c] + base[c], floor))
        per_part[count, c] = per_part[:count, c].max()
    levels, deferred = np.empty(_DEFERRED, np.int32), np.empty(_DEFERRED, np.int64)
    none_level, none = np.empty(0, np.int32), np.empty(0, np.int64)
    roots_level, roots = np.empty(2, np.int32), np.empty(2, np.int64)
    push_roots(tree, roots_level, roots)
    space = _workspace()
    shared_flux, own_flux = np.zeros(3), np.zeros(3)
    left = _sum_nodes(
        tree, texels, centre, radius, b, a2, per_part[count],
        roots_level, roots, levels, deferred, space, sums, step, shared_flux,
    )  # fmt: skip
    kink = 0.0
    for t in range(count):
        own, own_sums = texels[t * area : t * area + area], sums[t * area : t * area + area]
        radius = _bounds(own, centre)
        own_flux[:] = shared_flux
        _sum_nodes(
            tree, own, centre, radius, b, a2, per_part[t],
            levels[:left], deferred[:left], none_level, none, space, own_sums, step, own_flux,
        )  # fmt: skip
        for c in range(3):
            kink = max(kink, own_flux[c] * per_part[t, c] / ((b + a2) * (b + a2)))  # K'(0) = 1/A^2
        for k in range(area):
            target[t // across * tile + k // tile, t % across * tile + k % tile] = own_sums[k]
    return kink


@formula
def _bounds(texels, centre):
    """Mean direction of some texels (into `centre`), and the largest distance from it."""
    centre[:] = 0.0
    for k in range(texels.shape[0]):
        for x in range(3):
            centre[x] += texels[k, x]
    centre /= math.sqrt(centre[0] ** 2 + centre[1] ** 2 + centre[2] ** 2)
    largest = 0.0
    for k in range(texels.shape[0]):
        square = 0.0
        for x in range(3):
            square += (texels[k, x] - centre[x]) ** 2
        largest = max(largest, square)
    return math.sqrt(largest)


@formula
def _tile_limits(tree, texels, tile, centre, radius, b, a2, limits):
    """The smallest sums expected in each tile, from its corners and its middle, into limits (tiles, 3)."""
    area, last = tile * tile, tile - 1
    count = texels.shape[0] // area
    corners = np.array([0, last, tile * last, tile * last + last, tile // 2 * tile + tile // 2])
    probes = np.empty((3, 5 * count), np.float32)
    for p in range(5 * count):
        for x in range(3):
            probes[x, p] = texels[p // 5 * area + corners[p % 5], x]
    sums = np.zeros((3, 5 * count), np.float32)
    rough_sums(tree, probes, centre, radius, b, a2, _ROUGH, sums)
    for t in range(count):
        for c in range(3):
            limits[t, c] = _SMALLEST * sums[c, 5 * t : 5 * t + 5].min()


@formula
def _workspace():
    """What a walk needs besides its result: stack, batch, and the lists of entries."""
    return (
        np.empty(STACK, np.int32), np.empty(STACK, np.int64),
        np.empty(BATCH, np.int64), np.empty(BATCH, np.int64), np.empty(BATCH, np.int32),
        np.empty((BATCH, RECORD), np.float32),
        np.empty((ENTRY, _BLOCK), np.float32), np.empty((ENTRY, _BLOCK), np.float32),
        np.empty((ENTRY, _BLOCK), np.float32),
    )  # fmt: skip


@formula
def _sum_nodes(tree, texels, centre, radius, b, a2, per_part,
               seed_levels, seeds, deferred_levels, deferred, space, sums, step, kinked_flux):  # fmt: skip
    """Walks down from the seeds and sums what is taken into sums (texels, 3).

    A node to be opened that is smaller than the texels' group is left to its tiles while `deferred` has
    room. Returns how many were. The flux of what may stand across a horizon is added to `kinked_flux`, of
    nodes wider than a step in part: over an even stretch the errors of interpolating kinks cancel.
    """
    stack_level, stack_node, batch, rows, verdicts, scratch, above, coloured, kinked = space
    n_above, n_coloured, n_kinked = 0, 0, 0
    left, used, top = 0, 0, 0
    while used < seeds.shape[0] or top > 0:
        while top < BATCH and used < seeds.shape[0] and (top == 0 or seed_levels[used] == stack_level[0]):
            stack_level[top], stack_node[top] = seed_levels[used], seeds[used]
            top, used = top + 1, used + 1
        level, count, top = pop_batch(stack_level, stack_node, top, batch)
        records = fetch(tree, level, batch, count, scratch, rows)
        judge(records, rows, count, centre, radius, b, a2, per_part, verdicts)
        for e in range(count):
            verdict, node = verdicts[e] & 3, records[rows[e]]
            if verdict == OPEN and not has_room(top):
                verdict = COLOURED
            if verdict == OPEN:
                if left < deferred.shape[0] and (level <= 0 or node[RADIUS] < 1.2 * radius):
                    deferred_levels[left], deferred[left] = level, batch[e]
                    left += 1
                else:
                    top = push_quarters(stack_level, stack_node, top, level, batch[e])
            elif verdict == DROP:
                continue
            elif verdicts[e] & ACROSS:
                n_kinked = append(kinked, n_kinked, node, True)
                narrow = min(1.0, step / (2.0 * math.sqrt(max(node[SPREAD], np.float32(1e-20)))))
                for c in range(3):
                    kinked_flux[c] += narrow * node[FLUX + c]
                if n_kinked == _BLOCK:
                    sum_across(kinked, n_kinked, texels, b, a2, sums)
                    n_kinked = 0
            elif verdict == COLOURED:
                n_coloured = append(coloured, n_coloured, node, True)
                if n_coloured == _BLOCK:
                    sum_coloured(coloured, n_coloured, texels, b, a2, sums)
                    n_coloured = 0
            else:
                n_above = append(above, n_above, node, False)
                if n_above == _BLOCK:
                    sum_above(above, n_above, texels, b, a2, sums)
                    n_above = 0
    sum_above(above, n_above, texels, b, a2, sums)
    sum_coloured(coloured, n_coloured, texels, b, a2, sums)
    sum_across(kinked, n_kinked, texels, b, a2, sums)
    return left
