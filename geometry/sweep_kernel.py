"""The exact sweep over a grid of angles, compiled.

Within a small block each pair's lower bound is carried from one pose to the next, and only pairs whose bound falls
below the nearest one so far are asked again. One pair, the leader, is asked everywhere first: it settles most others.
"""

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from geometry.kernel import BEYOND, FAILED, Hulls, Memory, compiled, distance, fall, pasted
from geometry.plane_kernel import Lists, Pairs, gather, sift, turn_between


class Angles(NamedTuple):
    """Rising angles of one axis, in radians, with their cosines and sines; a body that stands still has one, 0."""

    angle: NDArray[np.float64]
    cos: NDArray[np.float64]
    sin: NDArray[np.float64]


class Field(NamedTuple):
    """What a sweep finds at every pose; each array (couch angles, gantry angles), points (..., 3) in a's system.

    `clearance` mm, NaN when no valid distance was found; `slack` mm likewise; `pair` indexes `Pairs`, -1 for none.
    """

    clearance: NDArray[np.float64]
    slack: NDArray[np.float64]
    pair: NDArray[np.int32]
    point_a: NDArray[np.float64]
    point_b: NDArray[np.float64]


@pasted
def record_pair(field, row, column, a, b, p, turn, memory):
    """Write pair p and its nearest points, from the corners and weights that its last query left, in a's system."""
    field.pair[row, column] = p
    r0, r1, r2, r3, r4, r5, r6, r7, r8 = turn
    size = memory.size[p]
    for axis in range(3):
        field.point_a[row, column, axis] = 0.0
        field.point_b[row, column, axis] = 0.0
    for k in range(size):
        weight = memory.weights[p, k]
        va = memory.corners[p, k, 0]
        vb = memory.corners[p, k, 1]
        x, y, z = b.vertices[vb, 0], b.vertices[vb, 1], b.vertices[vb, 2]
        field.point_b[row, column, 0] += weight * (r0 * x + r1 * y + r2 * z)
        field.point_b[row, column, 1] += weight * (r3 * x + r4 * y + r5 * z)
        field.point_b[row, column, 2] += weight * (r6 * x + r7 * y + r8 * z)
        for axis in range(3):
            field.point_a[row, column, axis] += weight * a.vertices[va, axis]


@pasted
def _follow_leader(a, b, pairs, gantry, couch, cell, memory, p, field):
    """Write pair p into `field` at every pose of a block: no other pair matters beyond what that leaves.

    Returns (near, tight): at no pose of the block is the least distance, or the least slack, greater.
    """
    i0, i1, j0, j1 = cell
    near = 0.0
    for row in range(j0, j1):
        for step in range(i1 - i0):
            column = i0 + step if (row - j0) % 2 == 0 else i1 - 1 - step
            turn = turn_between(gantry.cos[column], gantry.sin[column], couch.cos[row], couch.sin[row])
            low, high, status = distance(a, pairs.i[p], b, pairs.j[p], turn, memory, p, np.inf, 0.0, 0.0)
            near = max(near, high)
            if status != FAILED:
                # The lower bound, not the upper: never claim more room than is certified.
                field.clearance[row, column] = low
                field.slack[row, column] = low - pairs.required[p]
                record_pair(field, row, column, a, b, p, turn, memory)
    return near, near - pairs.required[p]


@pasted
def _walk_block(a, b, pairs, gantry, couch, cell, memory, lists, leader, field):
    """Find the nearest pair of the list at depth 1 at each pose of a block, in serpentines, carrying the bounds along.

    The leader is in the field already, unless it failed. Returns the pair that was nearest last.
    """
    i0, i1, j0, j1 = cell
    nearest = 0
    for row in range(j0, j1):
        for step in range(i1 - i0):
            column = i0 + step if (row - j0) % 2 == 0 else i1 - 1 - step
            nearest = find_nearest(a, b, pairs, gantry, couch, row, column, memory, lists, leader, nearest, field)
    return lists.pair[1, nearest]


@pasted
def find_nearest(a, b, pairs, gantry, couch, row, column, memory, lists, leader, start, field):
    """Write clearance, slack and witness of one pose; return the place of the nearest pair in the list.

    `start` is that of the pose before.
    """
    count = lists.length[1]
    angle_a = gantry.angle[column]
    angle_b = couch.angle[row]
    turn = turn_between(gantry.cos[column], gantry.sin[column], couch.cos[row], couch.sin[row])
    clearance = np.inf
    slack = np.inf
    led = field.pair[row, column] >= 0
    if led:
        clearance = field.clearance[row, column]
        slack = field.slack[row, column]
    doubt = np.inf  # least lower bound among pairs whose distance was not found
    doubt_slack = np.inf
    nearest = start
    for step in range(count):
        # The nearest of the pose before goes first: its distance settles most of the others.
        k = start if step == 0 else (step if step > start else step - 1)
        p = lists.pair[1, k]
        if led and p == leader:
            continue
        i = pairs.i[p]
        j = pairs.j[p]
        required = pairs.required[p]
        by_a = abs(angle_a - lists.at_a[1, k])
        by_b = abs(angle_b - lists.at_b[1, k])
        falls = fall(a.reach[i], b.reach[j], lists.rate_a[1, k], lists.rate_b[1, k], by_a, by_b)
        least = max(lists.lower[1, k] - falls, 0.0)
        if least >= clearance and least - required >= slack:
            continue
        limit = max(clearance, slack + required)
        low, _, status = distance(a, i, b, j, turn, memory, p, limit, 0.0, 0.0)
        lists.lower[1, k] = low
        lists.at_a[1, k] = angle_a
        lists.at_b[1, k] = angle_b
        lists.rate_a[1, k] = memory.rate_a[p]
        lists.rate_b[1, k] = memory.rate_b[p]
        if status == FAILED:
            doubt = min(doubt, low)
            doubt_slack = min(doubt_slack, low - required)
        elif status != BEYOND:
            slack = min(slack, low - required)
            if low < clearance:
                clearance = low
                nearest = k
                record_pair(field, row, column, a, b, p, turn, memory)
    field.clearance[row, column] = clearance
    field.slack[row, column] = slack
    # Contact is certain whatever else could not be found.
    if clearance > 0.0 and (doubt < clearance or doubt_slack < slack):
        field.clearance[row, column] = np.nan
        field.slack[row, column] = np.nan
        field.pair[row, column] = -1
    return nearest


@compiled
def sweep_tiles(
    a: Hulls,
    b: Hulls,
    pairs: Pairs,
    gantry: Angles,
    couch: Angles,
    tiles: NDArray[np.int64],
    block: tuple[int, int],
    memory: Memory,
    lists: Lists,
    field: Field,
) -> None:
    """Fill `field` for the poses [i0, i1) of `gantry` by [j0, j1) of `couch` of each row (i0, i1, j0, j1) of `tiles`.

    `block` = (columns, rows) is the size of the blocks that are walked; from block to block the bounds are carried too.
    """
    for k in range(len(tiles)):
        i0, i1, j0, j1 = tiles[k, 0], tiles[k, 1], tiles[k, 2], tiles[k, 3]
        leader = -1
        for row in range(j0, j1, block[1]):
            for column in range(i0, i1, block[0]):
                cell = (column, min(column + block[0], i1), row, min(row + block[1], j1))
                leader = _sweep_block(a, b, pairs, gantry, couch, cell, memory, lists, leader, field)


@pasted
def _sweep_block(a, b, pairs, gantry, couch, cell, memory, lists, leader, field):
    """Fill one block; `leader` is the nearest pair of the block before, -1 for none. Returns the last nearest one."""
    at_a, half_a, cos_a, sin_a = middle_of(gantry, cell[0], cell[1])
    at_b, half_b, cos_b, sin_b = middle_of(couch, cell[2], cell[3])
    turn = turn_between(cos_a, sin_a, cos_b, sin_b)
    if leader < 0:
        leader = gather(a, b, pairs, turn, at_a, at_b, memory, lists)
    near, tight = _follow_leader(a, b, pairs, gantry, couch, cell, memory, leader, field)
    sift(a, b, pairs, turn, at_a, at_b, half_a, half_b, memory, lists, 1, leader, near, tight)
    return _walk_block(a, b, pairs, gantry, couch, cell, memory, lists, leader, field)


@pasted
def middle_of(angles, low, high):
    """Return the middle one of the angles [low, high), the half-width about it, its cosine and sine."""
    k = (low + high) // 2
    half = max(angles.angle[high - 1] - angles.angle[k], angles.angle[k] - angles.angle[low])
    return angles.angle[k], half, angles.cos[k], angles.sin[k]
