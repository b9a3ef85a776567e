"""The adaptive proof over cells of the angle plane, compiled.

A cell is proved when a lower bound of the slack, valid at every pose in it, is not negative. Otherwise it is halved
across the angle that moves the tightest pair more, down to the edge resolution; what is still open then is unproved.
A cell that is short at every pose is left at once: an upper bound of its least slack is negative.
"""

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from geometry.kernel import Hulls, Memory, compiled, inlined, pasted
from geometry.plane_kernel import Lists, Pairs, gather, sift, turn_between

# A proved cell is still halved while its bound gives away more than this share of the slack at its middle, so that the
# least clearance of a span is not far below the truth.
GIVEN_AWAY = 0.75


class Strip(NamedTuple):
    """One axis in steps: step k is [start + k * step, start + (k + 1) * step], clipped to [low, high], radians."""

    start: float
    step: float
    low: float
    high: float


class Proved(NamedTuple):
    """What is proved of every smallest cell, each (couch steps, gantry steps).

    `slack` and `clearance`: lower bounds, mm, rounded down; NaN where unproved. `pair` indexes `Pairs`: whose clearance
    that is, or for an unproved cell the pair that stands in the way. `depth`: how often its cell was halved.
    """

    slack: NDArray[np.float32]
    clearance: NDArray[np.float32]
    pair: NDArray[np.int32]
    depth: NDArray[np.int8]


@pasted
def _middle(strip, first, count):
    """Return middle and half-width, radians, of steps [first, first + count) of a strip."""
    low = max(strip.start + first * strip.step, strip.low)
    high = min(strip.start + (first + count) * strip.step, strip.high)
    # A step beyond the end is a point there; half-widths cover the rounding of the middle.
    high = max(high, low)
    return 0.5 * (low + high), 0.5 * (high - low) * (1.0 + 1e-12)


@inlined
def _rounded_down(value):
    """Return the greatest number of single precision that certainly does not exceed `value`."""
    return np.float32(value - abs(value) * 1e-7)


@compiled
def prove_tiles(
    a: Hulls,
    b: Hulls,
    pairs: Pairs,
    gantry: Strip,
    couch: Strip,
    tiles: NDArray[np.int64],
    first: tuple[int, int],
    memory: Memory,
    lists: Lists,
    proved: Proved,
) -> int:
    """Prove the steps [i0, i1) of strip `gantry` by [j0, j1) of `couch` of each row (i0, i1, j0, j1) of `tiles`.

    `first` = (ni, nj), powers of two, is the size of the cells that are looked at first. Nothing is remembered from
    tile to tile, so that a tile gives the same whether it is proved alone or among others. Returns the number of cells
    evaluated.
    """
    evaluated = 0
    for k in range(len(tiles)):
        leader = -1
        for j in range(tiles[k, 2], tiles[k, 3], first[1]):
            for i in range(tiles[k, 0], tiles[k, 1], first[0]):
                count, leader = _prove_cell(a, b, pairs, gantry, couch, i, j, first, memory, lists, leader, proved)
                evaluated += count
    return evaluated


@pasted
def _prove_cell(a, b, pairs, gantry, couch, i, j, first, memory, lists, leader, proved):
    """Prove one of the first cells; `leader` is the nearest pair of the one before, -1 for none.

    Returns (cells evaluated, nearest pair at the middle).
    """
    rows, columns = proved.slack.shape
    cells = lists.cells
    cells[0, 0] = i
    cells[0, 1] = first[0]
    cells[0, 2] = j
    cells[0, 3] = first[1]
    cells[0, 4] = 1
    waiting = 1
    evaluated = 0
    while waiting > 0:
        waiting -= 1
        i0, ni, j0, nj, depth = cells[waiting]
        if i0 >= columns or j0 >= rows:
            continue
        at_a, half_a = _middle(gantry, i0, ni)
        at_b, half_b = _middle(couch, j0, nj)
        turn = turn_between(np.cos(at_a), np.sin(at_a), np.cos(at_b), np.sin(at_b))
        if leader < 0:
            leader = gather(a, b, pairs, turn, at_a, at_b, memory, lists)
        place = leader if depth == 1 else 0
        tight, bound, bound_pair, slack_bound, slack_pair, slack = sift(
            a, b, pairs, turn, at_a, at_b, half_a, half_b, memory, lists, depth, place, np.inf, np.inf
        )
        if depth == 1:
            leader = lists.pair[1, 0]
        evaluated += 1
        smallest = ni == 1 and nj == 1
        good = slack_bound >= 0.0
        if tight < 0.0 or smallest or (good and slack - slack_bound <= GIVEN_AWAY * slack):
            for row in range(j0, min(j0 + nj, rows)):
                for column in range(i0, min(i0 + ni, columns)):
                    proved.slack[row, column] = _rounded_down(slack_bound) if good else np.float32(np.nan)
                    proved.clearance[row, column] = _rounded_down(bound) if good else np.float32(np.nan)
                    proved.pair[row, column] = bound_pair if good else slack_pair
                    proved.depth[row, column] = depth - 1
            continue
        moves_a = memory.rate_a[slack_pair] * half_a
        moves_b = memory.rate_b[slack_pair] * half_b
        across_a = ni > 1 and (nj == 1 or moves_a >= moves_b)
        for half in range(2):
            child = cells[waiting]
            child[0] = i0 + half * (ni // 2) if across_a else i0
            child[1] = ni // 2 if across_a else ni
            child[2] = j0 if across_a else j0 + half * (nj // 2)
            child[3] = nj if across_a else nj // 2
            child[4] = depth + 1
            waiting += 1
    return evaluated, leader
