"""The least distance over many pairs of pieces at many pairs of angles, compiled.

Near poses have near distances: a piece at distance `reach` from its axis moves by at most the chord
2 * reach * sin(turn / 2). So a pair that is far away in the middle of a cell of the angle plane cannot be the nearest
anywhere in the cell, and drops out for all of it; and within a small block each pair's lower bound is carried from one
pose to the next, and only pairs whose bound falls below the nearest one so far are asked again.
"""

from typing import NamedTuple

import numpy as np
from numba import njit
from numpy.typing import NDArray

from geometry.kernel import BEYOND, COMPILED, CONTACT, FAILED, INLINE, Hulls, Memory, distance

# A block of at most this many angles each way is walked pose by pose.
BLOCK = 8
# Covers rounding in carried bounds; far above 1e-16 * 10 m, far below what anyone can measure.
ROUNDING_MM = 1e-7
DEPTH = 24


class Pairs(NamedTuple):
    """Which pieces are checked against which: piece `i` of body a, piece `j` of body b, `required` mm (each (pairs,))."""

    i: NDArray[np.int32]
    j: NDArray[np.int32]
    required: NDArray[np.float64]


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


class Lists(NamedTuple):
    """Scratch of one worker: for each depth of nested cells the `count` (DEPTH,) pairs still in play.

    Each (DEPTH, pairs): `pair`, a lower bound `lower` of its distance at the pose (`at_a`, `at_b`), radians, and how fast
    that bound can fall, `rate_a`, `rate_b`, mm per radian. `here` (pairs,) is scratch; `cells` (4 * DEPTH, 5) are the
    cells still to do.
    """

    count: NDArray[np.int64]
    pair: NDArray[np.int32]
    lower: NDArray[np.float64]
    at_a: NDArray[np.float64]
    at_b: NDArray[np.float64]
    rate_a: NDArray[np.float64]
    rate_b: NDArray[np.float64]
    here: NDArray[np.float64]
    cells: NDArray[np.int64]


@njit(**INLINE)
def turn_between(cos_a, sin_a, cos_b, sin_b):  # type: ignore[no-untyped-def]
    """Return Ry(-a) @ Rz(b), row by row: from the system turned by b about Z to the one turned by a about Y."""
    return (
        cos_a * cos_b,
        -cos_a * sin_b,
        -sin_a,
        sin_b,
        cos_b,
        0.0,
        sin_a * cos_b,
        -sin_a * sin_b,
        cos_a,
    )


@njit(**INLINE)
def chord(angle):  # type: ignore[no-untyped-def]
    """Return how far a point at distance 1 from the axis gets when it turns by up to `angle` radians."""
    return 2.0 * np.sin(0.5 * min(angle, np.pi))


@njit(**INLINE)
def fall(reach_a, reach_b, rate_a, rate_b, by_a, by_b):  # type: ignore[no-untyped-def]
    """Return by how much a bound may fall when the bodies turn by up to `by_a` and `by_b` radians.

    The lesser of what the separating plane allows (see `kernel.distance`) and of what the pieces can move at all.
    """
    plane = rate_a * by_a + rate_b * by_b + 0.5 * (reach_a * by_a * by_a + reach_b * by_b * by_b)
    # The arc stands in for its chord: no sine for each pair at each pose.
    return min(plane, reach_a * by_a + reach_b * by_b) + ROUNDING_MM


@njit(**COMPILED)
def gather(a, b, pairs, turn, at_a, at_b, lists):  # type: ignore[no-untyped-def]
    """Put every pair into the list at depth 0, bounded by enclosing spheres at the pose `at_a`, `at_b`, nearest first."""
    r0, r1, r2, r3, r4, r5, r6, r7, r8 = turn
    count = len(pairs.i)
    nearest = 0
    for p in range(count):
        i = pairs.i[p]
        j = pairs.j[p]
        x, y, z = b.centres[j, 0], b.centres[j, 1], b.centres[j, 2]
        dx = a.centres[i, 0] - (r0 * x + r1 * y + r2 * z)
        dy = a.centres[i, 1] - (r3 * x + r4 * y + r5 * z)
        dz = a.centres[i, 2] - (r6 * x + r7 * y + r8 * z)
        lists.pair[0, p] = p
        lists.lower[0, p] = np.sqrt(dx * dx + dy * dy + dz * dz) - a.radii[i] - b.radii[j]
        lists.at_a[0, p] = at_a
        lists.at_b[0, p] = at_b
        lists.rate_a[0, p] = a.reach[i]
        lists.rate_b[0, p] = b.reach[j]
        if lists.lower[0, p] < lists.lower[0, nearest]:
            nearest = p
    lists.count[0] = count
    _swap_first(lists, 0, nearest)


@njit(**COMPILED)
def sift(a, b, pairs, turn, at_a, at_b, half_a, half_b, memory, lists, depth, near, tight):  # type: ignore[no-untyped-def]
    """Copy to `depth` those pairs of the level above that may matter somewhere in a cell; the nearest comes first.

    The cell's middle is the pose (`at_a`, `at_b`), `turn` its rotation, `half_a` and `half_b` the half-widths, radians.
    A pair matters where it may be the nearest or have the least slack. It is asked for its distance at the middle only
    when the bound that it brings along does not settle that. `near` and `tight` are what is known before, infinite for
    nothing: no least distance in the cell exceeds near, no least slack tight.

    Returns (tight, bound, bound_pair, slack_bound, slack_pair, slack): tight as known after; lower bounds of the
    distance and of the slack over the whole cell, each with its pair; the certified slack at the middle.
    """
    chord_a = chord(half_a)
    chord_b = chord(half_b)
    above = depth - 1
    nearest = -1
    tightest = -1
    bound = np.inf
    bound_pair = -1
    slack_bound = np.inf
    slack_pair = -1
    slack = np.inf
    kept = 0
    for k in range(lists.count[above]):
        p = lists.pair[above, k]
        i = pairs.i[p]
        j = pairs.j[p]
        required = pairs.required[p]
        low = lists.lower[above, k]
        by_a = abs(at_a - lists.at_a[above, k]) + half_a
        by_b = abs(at_b - lists.at_b[above, k]) + half_b
        brought = low - fall(a.reach[i], b.reach[j], lists.rate_a[above, k], lists.rate_b[above, k], by_a, by_b)
        brought = max(brought, 0.0)
        # The first is asked whatever its bound: it is the one that near, if known before, was found by.
        if k > 0 and brought >= near and brought - required >= tight:
            continue
        motion = a.reach[i] * chord_a + b.reach[j] * chord_b + ROUNDING_MM
        limit = max(near, tight + required) + motion
        low, high, _ = distance(a, i, b, j, turn, memory, p, limit)
        rate_a = memory.rate_a[p]
        rate_b = memory.rate_b[p]
        falls = fall(a.reach[i], b.reach[j], rate_a, rate_b, half_a, half_b)
        least = max(low - falls, brought)
        # An overlap deeper than the motion lasts through the whole cell.
        most = max(min(high + motion, _rise(high, falls, motion)), 0.0)
        if most < near:
            near = most
            nearest = kept
        if most - required < tight:
            tight = most - required
            tightest = kept
        if least < bound:
            bound = least
            bound_pair = p
        if least - required < slack_bound:
            slack_bound = least - required
            slack_pair = p
        slack = min(slack, low - required)
        lists.pair[depth, kept] = p
        lists.lower[depth, kept] = low
        lists.rate_a[depth, kept] = rate_a
        lists.rate_b[depth, kept] = rate_b
        lists.here[kept] = least
        kept += 1
    _keep(pairs, lists, depth, kept, near, tight, nearest, tightest, at_a, at_b)
    return tight, bound, bound_pair, slack_bound, slack_pair, slack


@njit(**INLINE)
def _rise(high, falls, motion):  # type: ignore[no-untyped-def]
    """Return an upper bound of a distance, now `high` along a normal, after a motion of which `falls` is along it."""
    if high <= 0.0:
        return np.inf
    return np.sqrt((high + falls) ** 2 + motion * motion)


@njit(**INLINE)
def _keep(pairs, lists, depth, asked, near, tight, nearest, tightest, at_a, at_b):  # type: ignore[no-untyped-def]
    """Drop from the list at `depth` the asked pairs that, now that near and tight are known, cannot matter."""
    kept = 0
    first = 0
    for k in range(asked):
        p = lists.pair[depth, k]
        least = lists.here[k]
        if k in (0, nearest, tightest) or least < near or least - pairs.required[p] < tight:
            lists.pair[depth, kept] = p
            lists.lower[depth, kept] = lists.lower[depth, k]
            lists.rate_a[depth, kept] = lists.rate_a[depth, k]
            lists.rate_b[depth, kept] = lists.rate_b[depth, k]
            lists.at_a[depth, kept] = at_a
            lists.at_b[depth, kept] = at_b
            if k == nearest:
                first = kept
            kept += 1
    lists.count[depth] = kept
    _swap_first(lists, depth, first)


@njit(**INLINE)
def _swap_first(lists, depth, k):  # type: ignore[no-untyped-def]
    for column in (lists.lower, lists.rate_a, lists.rate_b, lists.at_a, lists.at_b):
        column[depth, 0], column[depth, k] = column[depth, k], column[depth, 0]
    lists.pair[depth, 0], lists.pair[depth, k] = lists.pair[depth, k], lists.pair[depth, 0]


@njit(**INLINE)
def _record(field, row, column, a, b, p, turn, memory):  # type: ignore[no-untyped-def]
    """Write the nearest points of pair p, from the corners and weights that its last query left, in a's system."""
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


@njit(**COMPILED)
def _follow_leader(a, b, pairs, gantry, couch, cell, memory, lists, depth):  # type: ignore[no-untyped-def]
    """Ask the mother's nearest pair at every pose of a block: no other pair matters beyond what that leaves.

    Returns (near, tight): at no pose of the block is the least distance, or the least slack, greater.
    """
    i0, i1, j0, j1 = cell
    p = lists.pair[depth - 1, 0]
    near = 0.0
    for row in range(j0, j1):
        for step in range(i1 - i0):
            column = i0 + step if (row - j0) % 2 == 0 else i1 - 1 - step
            turn = turn_between(gantry.cos[column], gantry.sin[column], couch.cos[row], couch.sin[row])
            _, high, _ = distance(a, pairs.i[p], b, pairs.j[p], turn, memory, p, np.inf)
            near = max(near, high)
    return near, near - pairs.required[p]


@njit(**COMPILED)
def _walk_block(a, b, pairs, gantry, couch, cell, memory, lists, depth, field):  # type: ignore[no-untyped-def]
    """Find the nearest pair at each pose of a block, in serpentines, carrying the bounds from pose to pose."""
    i0, i1, j0, j1 = cell
    nearest = 0
    for row in range(j0, j1):
        for step in range(i1 - i0):
            column = i0 + step if (row - j0) % 2 == 0 else i1 - 1 - step
            nearest = _find_nearest(a, b, pairs, gantry, couch, row, column, memory, lists, depth, nearest, field)


@njit(**INLINE)
def _find_nearest(  # type: ignore[no-untyped-def]
    a, b, pairs, gantry, couch, row, column, memory, lists, depth, start, field
):
    """Write clearance, slack and witness of one pose; return the place of the nearest pair in the list."""
    count = lists.count[depth]
    angle_a = gantry.angle[column]
    angle_b = couch.angle[row]
    turn = turn_between(gantry.cos[column], gantry.sin[column], couch.cos[row], couch.sin[row])
    for k in range(count):
        p = lists.pair[depth, k]
        by_a = abs(angle_a - lists.at_a[depth, k])
        by_b = abs(angle_b - lists.at_b[depth, k])
        lists.here[k] = lists.lower[depth, k] - fall(
            a.reach[pairs.i[p]], b.reach[pairs.j[p]], lists.rate_a[depth, k], lists.rate_b[depth, k], by_a, by_b
        )
    clearance = np.inf
    slack = np.inf
    doubt = np.inf  # least lower bound among pairs whose distance was not found
    doubt_slack = np.inf
    nearest = start
    for step in range(count):
        # The nearest of the pose before goes first: its distance settles most of the others.
        k = start if step == 0 else (step if step > start else step - 1)
        p = lists.pair[depth, k]
        required = pairs.required[p]
        least = max(lists.here[k], 0.0)
        if least < clearance or least - required < slack:
            limit = max(clearance, slack + required)
            low, _, status = distance(a, pairs.i[p], b, pairs.j[p], turn, memory, p, limit)
            lists.lower[depth, k] = low
            lists.at_a[depth, k] = angle_a
            lists.at_b[depth, k] = angle_b
            lists.rate_a[depth, k] = memory.rate_a[p]
            lists.rate_b[depth, k] = memory.rate_b[p]
            if status == FAILED:
                doubt = min(doubt, low)
                doubt_slack = min(doubt_slack, low - required)
            elif status != BEYOND:
                # The lower bound, not the upper: never claim more room than is certified.
                slack = min(slack, low - required)
                if low < clearance:
                    clearance = low
                    nearest = k
    # Contact is certain whatever else could not be found.
    if clearance > 0.0 and (doubt < clearance or doubt_slack < slack):
        field.clearance[row, column] = np.nan
        field.slack[row, column] = np.nan
        field.pair[row, column] = -1
    elif count > 0:
        field.clearance[row, column] = clearance
        field.slack[row, column] = slack
        field.pair[row, column] = lists.pair[depth, nearest]
        _record(field, row, column, a, b, lists.pair[depth, nearest], turn, memory)
    return nearest


@njit(**COMPILED)
def sweep_tile(a, b, pairs, gantry, couch, tile, memory, lists, field):  # type: ignore[no-untyped-def]
    """Fill `field` for the poses [i0, i1) of `gantry` by [j0, j1) of `couch` of `tile` = (i0, i1, j0, j1)."""
    i0, i1, j0, j1 = tile
    at_a, half_a, cos_a, sin_a = _middle(gantry, i0, i1)
    at_b, half_b, cos_b, sin_b = _middle(couch, j0, j1)
    turn = turn_between(cos_a, sin_a, cos_b, sin_b)
    gather(a, b, pairs, turn, at_a, at_b, lists)
    sift(a, b, pairs, turn, at_a, at_b, half_a, half_b, memory, lists, 1, np.inf, np.inf)
    for row in range(j0, j1, BLOCK):
        for column in range(i0, i1, BLOCK):
            block = (column, min(column + BLOCK, i1), row, min(row + BLOCK, j1))
            at_a, half_a, cos_a, sin_a = _middle(gantry, block[0], block[1])
            at_b, half_b, cos_b, sin_b = _middle(couch, block[2], block[3])
            turn = turn_between(cos_a, sin_a, cos_b, sin_b)
            near, tight = _follow_leader(a, b, pairs, gantry, couch, block, memory, lists, 2)
            sift(a, b, pairs, turn, at_a, at_b, half_a, half_b, memory, lists, 2, near, tight)
            _walk_block(a, b, pairs, gantry, couch, block, memory, lists, 2, field)


@njit(**INLINE)
def _middle(angles, low, high):  # type: ignore[no-untyped-def]
    """Return the middle one of the angles [low, high), the half-width about it, its cosine and sine."""
    k = (low + high) // 2
    half = max(angles.angle[high - 1] - angles.angle[k], angles.angle[k] - angles.angle[low])
    return angles.angle[k], half, angles.cos[k], angles.sin[k]
