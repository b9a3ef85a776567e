"""The adaptive proof over cells of the angle plane, compiled.

A cell is proved when a lower bound of the slack, valid at every pose in it, is not negative. Otherwise it is halved
across the angle that moves the tightest pair more, down to the edge resolution; what is still open then is unproved.
A cell that is short at every pose is left at once: an upper bound of its least slack is negative.
"""

from typing import NamedTuple

import numpy as np
from numba import njit
from numpy.typing import NDArray

from geometry.kernel import COMPILED, INLINE
from geometry.plane_kernel import gather, sift, turn_between

# A proved cell is still halved while its bound gives away more than this share of the slack at its middle, so that the
# least clearance of a span is not far below the truth.
GIVEN_AWAY = 0.75


class Strip(NamedTuple):
    """One axis cut into steps: step k is [start + k * step, start + (k + 1) * step], clipped to [low, high], radians."""

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


@njit(**INLINE)
def _middle(strip, first, count):  # type: ignore[no-untyped-def]
    """Return middle and half-width, radians, of steps [first, first + count) of a strip."""
    low = max(strip.start + first * strip.step, strip.low)
    high = min(strip.start + (first + count) * strip.step, strip.high)
    # A step beyond the end is a point there; half-widths cover the rounding of the middle.
    high = max(high, low)
    return 0.5 * (low + high), 0.5 * (high - low) * (1.0 + 1e-12)


@njit(**INLINE)
def _rounded_down(value):  # type: ignore[no-untyped-def]
    """Return the greatest number of single precision that certainly does not exceed `value`."""
    return np.float32(value - abs(value) * 1e-7)


@njit(**COMPILED)
def prove_tile(a, b, pairs, gantry, couch, tile, memory, lists, proved):  # type: ignore[no-untyped-def]
    """Prove the steps [i0, i0 + ni) of strip `gantry` by [j0, j0 + nj) of `couch`, `tile` = (i0, ni, j0, nj).

    ni and nj are powers of two. Nothing is remembered from tiles before, so that a tile gives the same whether it is
    proved alone or among others. Returns the number of cells evaluated.
    """
    memory.size[:] = 0
    rows, columns = proved.slack.shape
    cells = lists.cells
    cells[0, 0], cells[0, 1], cells[0, 2], cells[0, 3] = tile
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
        if depth == 1:
            gather(a, b, pairs, turn, at_a, at_b, lists)
        tight, bound, bound_pair, slack_bound, slack_pair, slack = sift(
            a, b, pairs, turn, at_a, at_b, half_a, half_b, memory, lists, depth, np.inf, np.inf
        )
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
    return evaluated
