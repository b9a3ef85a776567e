"""The exact sweep of a scene whose couch side stands a little off one that was swept before, compiled.

An anchor (`anchor_kernel`) keeps the pairs that can matter at each pose, with a plane that parts each. Of those a pose
of the shifted scene asks the one whose plane is nearest, and the few that are not farther than what it finds.
"""

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from geometry.kernel import BEYOND, CONTACT, FAILED, ROUNDING_MM, Hulls, Memory, compiled, distance, pasted
from geometry.plane_kernel import Lists, Pairs, keep_pair, turn_between
from geometry.sweep_kernel import Angles, Field, find_nearest, middle_of, record_pair

# Pairs kept at a pose, at most; where more could matter, all of the block are searched.
MOST = 12
# Bounds of a block are kept in whole mm, in a byte; a pair that cannot matter has the last value.
FARTHEST = 254
SETTLED = 255


class Kept(NamedTuple):
    """What an anchor keeps of one plane.

    `size` (couch angles, gantry angles) pairs can matter at a pose, -1 where all of the block must be searched. Where
    `hinges`, that holds only if the first of them is found in contact. `pair` (..., MOST) and `plane` (..., MOST, 4): a
    unit normal, fixed system, and a lower bound of the distance, mm, from which what a shift is along the normal is to
    be taken off. `least` (block rows, block columns, pairs): lower bounds over a block.
    """

    size: NDArray[np.int8]
    hinges: NDArray[np.bool_]
    pair: NDArray[np.int32]
    plane: NDArray[np.float32]
    least: NDArray[np.uint8]


@compiled
def carry_tiles(
    a: Hulls,
    b: Hulls,
    pairs: Pairs,
    gantry: Angles,
    couch: Angles,
    tiles: NDArray[np.int64],
    block: tuple[int, int],
    shift: NDArray[np.float64],
    kept: Kept,
    memory: Memory,
    lists: Lists,
    field: Field,
) -> None:
    """Fill `field` for the poses of each tile, see `sweep_tiles`; b's pieces stand `shift` (pieces, 3), mm, off.

    `shift` is in b's system and no longer than the limit that `kept` was made for. A pose at which no pair can matter,
    for what other planes have there, gets an infinite clearance. The points come in the fixed system.
    """
    for k in range(len(tiles)):
        i0, i1, j0, j1 = tiles[k, 0], tiles[k, 1], tiles[k, 2], tiles[k, 3]
        memory.size[:] = 0
        for row in range(j0, j1, block[1]):
            for column in range(i0, i1, block[0]):
                cell = (column, min(column + block[0], i1), row, min(row + block[1], j1))
                _carry_block(a, b, pairs, gantry, couch, cell, block, shift, kept, memory, lists, field)


@pasted
def _carry_block(a, b, pairs, gantry, couch, cell, block, shift, kept, memory, lists, field):
    """Fill one block, in serpentines; the poses that what is kept does not settle are searched with carried bounds."""
    i0, i1, j0, j1 = cell
    nearest = -1
    for row in range(j0, j1):
        for step in range(i1 - i0):
            column = i0 + step if (row - j0) % 2 == 0 else i1 - 1 - step
            if _ask_kept(a, b, pairs, gantry, couch, row, column, shift, kept, memory, lists, field):
                continue
            if nearest < 0:
                nearest = 0
                at_a, _, _, _ = middle_of(gantry, i0, i1)
                at_b, _, _, _ = middle_of(couch, j0, j1)
                _list_block(pairs, at_a, at_b, shift, kept.least[row // block[1], column // block[0]], lists)
            field.pair[row, column] = -1
            nearest = find_nearest(a, b, pairs, gantry, couch, row, column, memory, lists, -1, nearest, field)
    for row in range(j0, j1):
        for column in range(i0, i1):
            _turn_points(gantry.cos[column], gantry.sin[column], row, column, field)


@pasted
def _turn_points(cos_a, sin_a, row, column, field):
    """Turn a pose's points from a's system into the fixed one."""
    for points in (field.point_a, field.point_b):
        x = points[row, column, 0]
        z = points[row, column, 2]
        points[row, column, 0] = cos_a * x + sin_a * z
        points[row, column, 2] = cos_a * z - sin_a * x


@pasted
def _list_block(pairs, at_a, at_b, shift, least, lists):
    """Put the pairs that can matter in a block into the list at depth 1, with bounds that hold throughout."""
    count = 0
    for p in range(len(pairs.i)):
        if least[p] != SETTLED:
            j = pairs.j[p]
            falls = np.sqrt(shift[j, 0] * shift[j, 0] + shift[j, 1] * shift[j, 1] + shift[j, 2] * shift[j, 2])
            keep_pair(lists, 1, count, p, least[p] - falls - ROUNDING_MM, at_a, at_b, 0.0, 0.0)
            count += 1
    lists.length[1] = count


@pasted
def _ask_kept(a, b, pairs, gantry, couch, row, column, shift, kept, memory, lists, field):
    """Write one pose from the pairs kept for it; return False where that does not settle it."""
    count = kept.size[row, column]
    if count < 0:
        return False
    hinges = kept.hinges[row, column]
    cos_b, sin_b = couch.cos[row], couch.sin[row]
    first = 0
    for k in range(count):
        j = pairs.j[kept.pair[row, column, k]]
        along = (
            kept.plane[row, column, k, 0] * (cos_b * shift[j, 0] - sin_b * shift[j, 1])
            + kept.plane[row, column, k, 1] * (sin_b * shift[j, 0] + cos_b * shift[j, 1])
            + kept.plane[row, column, k, 2] * shift[j, 2]
        )
        lists.here[k] = kept.plane[row, column, k, 3] - along
        if not hinges and lists.here[k] < lists.here[first]:
            first = k
    turn = turn_between(gantry.cos[column], gantry.sin[column], cos_b, sin_b)
    clearance = np.inf
    slack = np.inf
    field.pair[row, column] = -1
    for step in range(count):
        k = first if step == 0 else (step if step > first else step - 1)
        p = kept.pair[row, column, k]
        required = pairs.required[p]
        least = max(lists.here[k], 0.0)
        if least >= clearance and least - required >= slack:
            continue
        limit = max(clearance, slack + required)
        low, _, status = distance(a, pairs.i[p], b, pairs.j[p], turn, memory, p, limit, 0.0, 0.0)
        # What fails here is looked at among all others.
        if status == FAILED or (hinges and step == 0 and status != CONTACT):
            return False
        if status != BEYOND:
            slack = min(slack, low - required)
            if low < clearance:
                clearance = low
                record_pair(field, row, column, a, b, p, turn, memory)
    field.clearance[row, column] = clearance
    field.slack[row, column] = slack
    return True
