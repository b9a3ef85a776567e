"""Which pairs of pieces matter in a cell of the angle plane, compiled: what sweep, proof and paths have in common.

Near poses have near distances: a piece at distance `reach` from its axis moves by at most the chord
2 * reach * sin(turn / 2). So a pair that is far away in the middle of a cell of the angle plane cannot be the nearest
anywhere in the cell, and drops out for all of it and for every cell within. Bounds found in one cell are brought along
to the next ones.
"""

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from geometry.kernel import ROUNDING_MM, compiled, distance, fall, inlined, pasted

# Levels of nested cells that lists are kept for.
DEPTH = 24


class Groups(NamedTuple):
    """Neighbouring pairs of one piece of body a that are looked at together: g holds pairs first[g] to first[g + 1].

    `centres` (groups, 3) and `radii` (groups,) are spheres about all their pieces of b, `reach` (groups,) is their
    greatest reach, `required` (groups,) the most that any of them must keep.
    """

    first: NDArray[np.int32]
    centres: NDArray[np.float64]
    radii: NDArray[np.float64]
    reach: NDArray[np.float64]
    required: NDArray[np.float64]


# No pair begins at place -1: every pair is looked at by itself.
NO_GROUPS = Groups(np.full(1, -1, np.int32), np.zeros((0, 3)), np.zeros(0), np.zeros(0), np.zeros(0))


class Pairs(NamedTuple):
    """Which pieces are checked: piece `i` of body a against piece `j` of body b, `required` mm, each (pairs,)."""

    i: NDArray[np.int32]
    j: NDArray[np.int32]
    required: NDArray[np.float64]
    groups: Groups = NO_GROUPS


class Lists(NamedTuple):
    """Scratch of one worker: for each depth of nested cells the `length` (DEPTH,) of a list of pairs.

    Each (DEPTH, pairs): `pair`, a lower bound `lower` of its distance at the pose (`at_a`, `at_b`), radians, and how
    fast that bound can fall, `rate_a`, `rate_b`, mm per radian. At depth 0 stand all pairs in their order, with the
    last that is known of each. `here` (pairs,) is scratch; `cells` (4 * DEPTH, 5) are the cells still to do.
    """

    length: NDArray[np.int64]
    pair: NDArray[np.int32]
    lower: NDArray[np.float64]
    at_a: NDArray[np.float64]
    at_b: NDArray[np.float64]
    rate_a: NDArray[np.float64]
    rate_b: NDArray[np.float64]
    here: NDArray[np.float64]
    cells: NDArray[np.int64]


@inlined
def turn_between(cos_a, sin_a, cos_b, sin_b):
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


@inlined
def chord(angle):
    """Return how far a point at distance 1 from the axis gets when it turns by up to `angle` radians."""
    return 2.0 * np.sin(0.5 * min(angle, np.pi))


@inlined
def _between(p, i, q, j, turn):
    """Return the distance of point i of p, in a's system, and point j of q, in b's."""
    r0, r1, r2, r3, r4, r5, r6, r7, r8 = turn
    x, y, z = q[j, 0], q[j, 1], q[j, 2]
    dx = p[i, 0] - (r0 * x + r1 * y + r2 * z)
    dy = p[i, 1] - (r3 * x + r4 * y + r5 * z)
    dz = p[i, 2] - (r6 * x + r7 * y + r8 * z)
    return np.sqrt(dx * dx + dy * dy + dz * dz)


@inlined
def between_spheres(a, i, b, j, turn):
    """Return the distance of two pieces' enclosing spheres, negative where they overlap: a lower bound."""
    return _between(a.centres, i, b.centres, j, turn) - a.radii[i] - b.radii[j]


@pasted
def gather(a, b, pairs, turn, at_a, at_b, memory, lists):
    """Put every pair into the list at depth 0, bounded by enclosing spheres at the pose (`at_a`, `at_b`), radians.

    Forgets what was known of them. Returns the place of the pair whose spheres are nearest.
    """
    nearest = 0
    for p in range(len(pairs.i)):
        i = pairs.i[p]
        j = pairs.j[p]
        memory.size[p] = 0
        lists.pair[0, p] = p
        lists.lower[0, p] = between_spheres(a, i, b, j, turn)
        lists.at_a[0, p] = at_a
        lists.at_b[0, p] = at_b
        lists.rate_a[0, p] = a.reach[i]
        lists.rate_b[0, p] = b.reach[j]
        if lists.lower[0, p] < lists.lower[0, nearest]:
            nearest = p
    lists.length[0] = len(pairs.i)
    return nearest


@compiled
def sift(a, b, pairs, turn, at_a, at_b, half_a, half_b, memory, lists, depth, leader, near, tight):
    """Copy to `depth` those pairs of the level above that may matter somewhere in a cell; the nearest comes first.

    The cell's middle is the pose (`at_a`, `at_b`), `turn` its rotation, `half_a` and `half_b` the half-widths, radians.
    A pair matters where it may be the nearest or have the least slack. It is asked for its distance at the middle only
    when the bound that it brings along does not settle that. The one at place `leader` above is asked first and kept.
    `near` and `tight` are what is known before, infinite for nothing, else by the leader: no least distance in the cell
    exceeds near, no least slack tight.

    Returns (tight, bound, bound_pair, slack_bound, slack_pair, slack): tight as known after; lower bounds of the
    distance and of the slack over the whole cell, each with its pair; the certified slack at the middle.
    """
    chord_a = chord(half_a)
    chord_b = chord(half_b)
    above = depth - 1
    nearest = 0
    tightest = 0
    bound = np.inf
    bound_pair = -1
    slack_bound = np.inf
    slack_pair = -1
    slack = np.inf
    kept = 0
    group = 0
    following = -1
    while following < lists.length[above]:
        led = following < 0
        k = leader if led else following
        following += 1
        if not led:
            if above == 0 and k == pairs.groups.first[group]:
                group += 1
                if group_settled(a, pairs, group - 1, turn, chord_a, chord_b, near, tight):
                    following = pairs.groups.first[group]
                    continue
            if k == leader:
                continue
        p = lists.pair[above, k]
        i = pairs.i[p]
        j = pairs.j[p]
        required = pairs.required[p]
        low = lists.lower[above, k]
        by_a = abs(at_a - lists.at_a[above, k]) + half_a
        by_b = abs(at_b - lists.at_b[above, k]) + half_b
        brought = low - fall(a.reach[i], b.reach[j], lists.rate_a[above, k], lists.rate_b[above, k], by_a, by_b)
        brought = max(brought, 0.0)
        if not led and brought >= near and brought - required >= tight:
            continue
        motion = a.reach[i] * chord_a + b.reach[j] * chord_b + ROUNDING_MM
        brought = max(brought, between_spheres(a, i, b, j, turn) - motion)
        if not led and brought >= near and brought - required >= tight:
            continue
        limit = max(near, tight + required)
        low, high, _ = distance(a, i, b, j, turn, memory, p, limit, half_a, half_b)
        rate_a = memory.rate_a[p]
        rate_b = memory.rate_b[p]
        falls = fall(a.reach[i], b.reach[j], rate_a, rate_b, half_a, half_b)
        least = max(low - falls, brought)
        if not least >= 0.0:
            # Not a number: nothing is known.
            least = 0.0
        # An overlap deeper than the motion lasts through the whole cell.
        most = max(min(high + motion, _rise(low, high, falls, motion)), 0.0)
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
        keep_pair(lists, depth, kept, p, low, at_a, at_b, rate_a, rate_b)
        if above == 0:
            keep_pair(lists, 0, p, p, low, at_a, at_b, rate_a, rate_b)
        lists.here[kept] = least
        kept += 1
    _drop_settled(pairs, lists, depth, kept, near, tight, nearest, tightest)
    return tight, bound, bound_pair, slack_bound, slack_pair, slack


@pasted
def group_settled(a, pairs, group, turn, chord_a, chord_b, near, tight):
    """Tell whether no pair of a group can matter in a cell, by the spheres about them all."""
    groups = pairs.groups
    i = pairs.i[groups.first[group]]
    between = _between(a.centres, i, groups.centres, group, turn) - a.radii[i] - groups.radii[group]
    least = max(between - a.reach[i] * chord_a - groups.reach[group] * chord_b - ROUNDING_MM, 0.0)
    return least >= near and least - groups.required[group] >= tight


@pasted
def keep_pair(lists, depth, place, p, low, at_a, at_b, rate_a, rate_b):
    """Put pair p at a place of the list at `depth`, with its bound, where that was found, and how fast it can fall."""
    lists.pair[depth, place] = p
    lists.lower[depth, place] = low
    lists.at_a[depth, place] = at_a
    lists.at_b[depth, place] = at_b
    lists.rate_a[depth, place] = rate_a
    lists.rate_b[depth, place] = rate_b


@pasted
def _drop_settled(pairs, lists, depth, asked, near, tight, nearest, tightest):
    """Drop from the list at `depth` the asked pairs that, now that near and tight are known, cannot matter."""
    kept = 0
    first = 0
    for k in range(asked):
        p = lists.pair[depth, k]
        least = lists.here[k]
        # The first is the leader.
        # Asked so that what is not a number stays.
        settled = least >= near and least - pairs.required[p] >= tight
        if not settled or k in (0, nearest, tightest):
            keep_pair(
                lists,
                depth,
                kept,
                p,
                lists.lower[depth, k],
                lists.at_a[depth, k],
                lists.at_b[depth, k],
                lists.rate_a[depth, k],
                lists.rate_b[depth, k],
            )
            if k == nearest:
                first = kept
            kept += 1
    lists.length[depth] = kept
    for column in (lists.lower, lists.rate_a, lists.rate_b, lists.at_a, lists.at_b):
        column[depth, 0], column[depth, first] = column[depth, first], column[depth, 0]
    lists.pair[depth, 0], lists.pair[depth, first] = lists.pair[depth, first], lists.pair[depth, 0]


@inlined
def _rise(low, high, falls, motion):
    """Return an upper bound of a distance in [low, high] after a motion of which at most `falls` is along the normal.

    `high` is the length of a vector whose part along the normal is `low` at least; the rest may stand across it.
    """
    if high <= 0.0:
        return np.inf
    across = np.sqrt(max(high * high - low * low, 0.0)) + motion
    return np.sqrt((high + falls) ** 2 + across * across)
