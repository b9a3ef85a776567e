"""Search and proof along a straight leg of a path through the angle plane, compiled.

A leg is a straight line of readings. The true angles that it can lead to are the line widened by the tolerance
rectangle: its band, a hexagon. The line itself is searched for its nearest approach and for the first place that is
short; the band is proved by cells that are halved as in the proof of the plane, but only where they meet the band, and
down to a resolution that would be too fine for the whole plane.
"""

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from geometry.kernel import Hulls, Memory, compiled, pasted
from geometry.plane_kernel import Lists, Pairs, gather, sift, turn_between

# Halvings that the lists of pairs have room for, of both axes together and of one.
HALVINGS = 22
HALVINGS_OF_ONE = 11
# A place is looked at more closely while more than this may be gained on the least clearance known, mm; below ten
# times that, a tenth of it, so that contact is told from nearness.
FINE_MM = 0.1
# The proved bound of the least clearance is this near to the distance found, or its cell is small, mm.
TIGHT_MM = 0.5


class Leg(NamedTuple):
    """A straight leg, radians: where it starts, by how much it turns, and the tolerances about each of its points."""

    gantry: float
    couch: float
    by_gantry: float
    by_couch: float
    around_gantry: float
    around_couch: float


class Line(NamedTuple):
    """What is known of the least on the lines searched so far, each (1,).

    `clearance` and `slack`, mm, infinite for nothing, with their places `clearance_at`, `slack_at` on the leg, 0 to 1,
    -1 where an earlier search found them. `first`: the first place of this leg that is short, infinite for none.
    """

    clearance: NDArray[np.float64]
    clearance_at: NDArray[np.float64]
    slack: NDArray[np.float64]
    slack_at: NDArray[np.float64]
    first: NDArray[np.float64]


class Least(NamedTuple):
    """The least bound over the cells proved so far, each (1,): mm, the angles of its cell's middle, radians, its pair.

    `known`, mm: no more than about this can be proved, since it was found somewhere.
    """

    known: NDArray[np.float64]
    bound: NDArray[np.float64]
    at_a: NDArray[np.float64]
    at_b: NDArray[np.float64]
    pair: NDArray[np.int64]


class Open(NamedTuple):
    """The first place on the leg, 0 to 1, whose rectangle meets an unproved cell; infinite for none. Each (1,).

    `at_a`, `at_b`, radians: the middle of that cell; `pair`: what stands in the way.
    """

    first: NDArray[np.float64]
    at_a: NDArray[np.float64]
    at_b: NDArray[np.float64]
    pair: NDArray[np.int64]


@compiled
def search_line(
    a: Hulls,
    b: Hulls,
    pairs: Pairs,
    leg: Leg,
    parts: int,
    halvings: int,
    coarse: int,
    memory: Memory,
    lists: Lists,
    line: Line,
) -> int:
    """Search the line of a leg, without tolerances, for its least clearance and slack and for the first short place.

    The leg is cut into `parts`, each of which is halved up to `halvings` times to find what is short, up to `coarse`
    times to find the least. Nothing short is missed that lasts longer than a smallest piece. Returns the number of
    evaluations.
    """
    evaluated = 0
    leader = -1
    cells = lists.cells
    whole = 1 << halvings
    for part in range(parts):
        cells[0, 0] = 0
        cells[0, 1] = whole
        cells[0, 4] = 1
        waiting = 1
        while waiting > 0:
            waiting -= 1
            i0, count, depth = cells[waiting, 0], cells[waiting, 1], cells[waiting, 4]
            start = (part + i0 / whole) / parts
            half = 0.5 * count / whole / parts
            middle = start + half
            at_a = leg.gantry + middle * leg.by_gantry
            at_b = leg.couch + middle * leg.by_couch
            half_a = abs(leg.by_gantry) * half * (1.0 + 1e-9)
            half_b = abs(leg.by_couch) * half * (1.0 + 1e-9)
            turn = turn_between(np.cos(at_a), np.sin(at_a), np.cos(at_b), np.sin(at_b))
            if leader < 0:
                leader = gather(a, b, pairs, turn, at_a, at_b, memory, lists)
            place = leader if depth == 1 else 0
            tight, bound, _, slack_bound, _, slack = sift(
                a, b, pairs, turn, at_a, at_b, half_a, half_b, memory, lists, depth, place, np.inf, np.inf
            )
            if depth == 1:
                leader = lists.pair[1, 0]
            evaluated += 1
            _note(line, lists.lower[depth, 0], slack, middle)
            smallest = count == 1
            if tight < 0.0:
                line.first[0] = min(line.first[0], start)
            elif smallest and slack < 0.0:
                line.first[0] = min(line.first[0], middle)
            known = line.clearance[0]
            gain = min(FINE_MM, 0.1 * known)
            nearer = bound < known - gain or slack_bound < line.slack[0] - FINE_MM
            wanted = nearer and depth <= coarse
            wanted = wanted or (slack_bound < 0.0 <= tight and start < line.first[0])
            if smallest or not wanted:
                continue
            # The half that comes first lies on top.
            for k in range(2):
                child = cells[waiting]
                child[0] = i0 + (1 - k) * (count // 2)
                child[1] = count // 2
                child[4] = depth + 1
                waiting += 1
    return evaluated


@pasted
def _note(line, clearance, slack, middle):
    """Keep what was found at a place of the line, if it is less than what was known."""
    if clearance < line.clearance[0]:
        line.clearance[0] = clearance
        line.clearance_at[0] = middle
    if slack < line.slack[0]:
        line.slack[0] = slack
        line.slack_at[0] = middle


@pasted
def _enters(leg, low_a, high_a, low_b, high_b):
    """Return the first place of the leg, 0 to 1, whose tolerance rectangle meets a cell; infinite for none."""
    enter = 0.0
    leave = 1.0
    for axis in range(2):
        at = leg.gantry if axis == 0 else leg.couch
        by = leg.by_gantry if axis == 0 else leg.by_couch
        around = leg.around_gantry if axis == 0 else leg.around_couch
        low = (low_a if axis == 0 else low_b) - around - at
        high = (high_a if axis == 0 else high_b) + around - at
        if by == 0.0:
            if low > 0.0 or high < 0.0:
                leave = -1.0
        else:
            enter = max(enter, min(low / by, high / by))
            leave = min(leave, max(low / by, high / by))
    return enter if enter <= leave else np.inf


@compiled
def prove_band(
    a: Hulls,
    b: Hulls,
    pairs: Pairs,
    leg: Leg,
    roots: NDArray[np.float64],
    halvings: NDArray[np.int64],
    tighten: float,
    memory: Memory,
    lists: Lists,
    clearance: Least,
    slack: Least,
    unproved: Open,
) -> int:
    """Prove the band of a leg; `roots` (n, 4), rows (low, high) of the gantry and of the couch, radians, cover it.

    Each root is halved up to `halvings` (n, 2) times, gantry and couch. Proved cells wider than `tighten` radians are
    halved too while their bounds are far below what is known. Goes no further along the leg than the first place that
    is not proved. Returns the number of evaluations.
    """
    evaluated = 0
    leader = -1
    cells = lists.cells
    for root in range(len(roots)):
        step_a = (roots[root, 1] - roots[root, 0]) / (1 << halvings[root, 0])
        step_b = (roots[root, 3] - roots[root, 2]) / (1 << halvings[root, 1])
        cells[0, 0] = 0
        cells[0, 1] = 1 << halvings[root, 0]
        cells[0, 2] = 0
        cells[0, 3] = 1 << halvings[root, 1]
        cells[0, 4] = 1
        waiting = 1
        while waiting > 0:
            waiting -= 1
            i0, ni, j0, nj, depth = cells[waiting]
            low_a = roots[root, 0] + i0 * step_a
            high_a = roots[root, 0] + (i0 + ni) * step_a
            low_b = roots[root, 2] + j0 * step_b
            high_b = roots[root, 2] + (j0 + nj) * step_b
            enter = _enters(leg, low_a, high_a, low_b, high_b)
            if enter >= unproved.first[0]:
                continue
            at_a = 0.5 * (low_a + high_a)
            at_b = 0.5 * (low_b + high_b)
            # The factor covers the rounding of borders and middle.
            half_a = 0.5 * (high_a - low_a) * (1.0 + 1e-12) + 1e-14
            half_b = 0.5 * (high_b - low_b) * (1.0 + 1e-12) + 1e-14
            turn = turn_between(np.cos(at_a), np.sin(at_a), np.cos(at_b), np.sin(at_b))
            if leader < 0:
                leader = gather(a, b, pairs, turn, at_a, at_b, memory, lists)
            place = leader if depth == 1 else 0
            tight, bound, bound_pair, slack_bound, slack_pair, here = sift(
                a, b, pairs, turn, at_a, at_b, half_a, half_b, memory, lists, depth, place, np.inf, np.inf
            )
            if depth == 1:
                leader = lists.pair[1, 0]
            evaluated += 1
            clearance.known[0] = min(clearance.known[0], lists.lower[depth, 0])
            slack.known[0] = min(slack.known[0], here)
            smallest = ni == 1 and nj == 1
            far = bound < clearance.known[0] - TIGHT_MM or slack_bound < slack.known[0] - TIGHT_MM
            far = far and 2.0 * max(half_a, half_b) > tighten
            if slack_bound >= 0.0 and (smallest or not far):
                _lower(clearance, bound, at_a, at_b, bound_pair)
                _lower(slack, slack_bound, at_a, at_b, slack_pair)
                continue
            if smallest or tight < 0.0:
                unproved.first[0] = enter
                unproved.at_a[0] = at_a
                unproved.at_b[0] = at_b
                unproved.pair[0] = slack_pair
                continue
            moves_a = memory.rate_a[slack_pair] * half_a
            moves_b = memory.rate_b[slack_pair] * half_b
            across_a = ni > 1 and (nj == 1 or moves_a >= moves_b)
            # The half that the leg comes to first lies on top.
            ahead = leg.by_gantry < 0.0 if across_a else leg.by_couch < 0.0
            for k in range(2):
                far_half = 1 - k if not ahead else k
                child = cells[waiting]
                child[0] = i0 + far_half * (ni // 2) if across_a else i0
                child[1] = ni // 2 if across_a else ni
                child[2] = j0 if across_a else j0 + far_half * (nj // 2)
                child[3] = nj if across_a else nj // 2
                child[4] = depth + 1
                waiting += 1
    return evaluated


@pasted
def _lower(least, bound, at_a, at_b, pair):
    """Keep a proved cell's bound, if it is less than what was known."""
    if bound < least.bound[0]:
        least.bound[0] = bound
        least.at_a[0] = at_a
        least.at_b[0] = at_b
        least.pair[0] = pair
