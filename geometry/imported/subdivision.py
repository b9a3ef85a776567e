"""Cut the piece that stands out most, again and again."""

import heapq
import math
from collections.abc import Sequence
from dataclasses import dataclass
from itertools import count
from typing import Final, Protocol

import numpy as np
from numpy.typing import NDArray

from geometry.decompose import Faceted
from geometry.imported.hulls import Hull, simpler_hull
from geometry.imported.levels import Level, Measured, coarser, measured, with_neighbours

Array = NDArray[np.float64]

# Excesses below this, mm, are not looked at more closely.
_FINE_MM: Final = 0.1
# Where to cut need not be known as well as what is left in the end.
_LEVELS_WHILE_CUTTING: Final = 120
# A cut is in vain for a part that keeps more than this of the excess; after some of them in a row it is left as it is.
_GAIN: Final = 0.9
_CUTS_IN_VAIN: Final = 6
# A cut stays this far from the ends of what it cuts, mm and relative.
_LEAST_CUT_MM: Final = 2.0
_LEAST_CUT: Final = 0.1


class Cell(Protocol):
    """Some of a solid, and the hull that contains it."""

    @property
    def hull(self) -> Hull:
        """The convex hull of what is in the cell."""
        ...

    def cuts(self, through: Array) -> "list[list[Cell]]":
        """Return ways to cut the cell, each as the cells that result, near the point `through`, shape (3,), mm.

        A cut across a longer extent comes before one across a shorter one.
        """
        ...


def cut_positions(hull: Hull, through: Array) -> list[tuple[int, float]]:
    """Return axes and where to cut across them, mm, near a point; the longest extent first, and no slivers."""
    lowest, highest = hull.vertices.min(axis=0), hull.vertices.max(axis=0)
    extent = highest - lowest
    least = np.maximum(_LEAST_CUT_MM, _LEAST_CUT * extent)
    wide = [int(axis) for axis in np.argsort(-extent, kind="stable") if extent[axis] > 2.0 * least[axis]]
    return [(k, float(np.clip(through[k], lowest[k] + least[k], highest[k] - least[k]))) for k in wide]


@dataclass(frozen=True, eq=False)
class _Open:
    """A cell that may be cut further, and how many cuts in a row were in vain for it."""

    cell: Cell
    found: Measured
    vain: int


def subdivided(roots: Sequence[Cell], levels: Sequence[Level], wanted_mm: float, most: int) -> list[Cell]:
    """Return cells that together contain all that the cells contain.

    The cell whose hull has the greatest excess is cut where it is greatest, in the way that leaves the least volume or,
    with little between them, across the longest extent. That ends when every excess is at most `wanted_mm`, or no
    cell can be cut any more without there being more than `most`.
    """
    order = count()
    heap: list[tuple[float, int, _Open]] = []
    finished: list[Cell] = []

    def put(cell: Cell, before_mm: float, vain: int) -> None:
        found = measured(cell.hull, levels, wanted_mm)
        vain = vain + 1 if found.excess_mm > _GAIN * before_mm else 0
        heapq.heappush(heap, (-found.excess_mm, next(order), _Open(cell, found, vain)))

    for root in roots:
        put(root, math.inf, 0)
    while heap and heap[0][2].found.excess_mm > wanted_mm:
        _, _, worst = heapq.heappop(heap)
        parts = _best_cut(worst) if worst.vain < _CUTS_IN_VAIN else None
        if parts is None or len(heap) + len(finished) + len(parts) > most:
            finished.append(worst.cell)
        else:
            for part in parts:
                put(part, worst.found.excess_mm, worst.vain)
    return finished + [remaining.cell for _, _, remaining in heap]


def _best_cut(worst: _Open) -> list[Cell] | None:
    """Return the cells that leave the least volume, to a hundredth, of all ways to cut a cell; None without a way."""
    ways = worst.cell.cuts(worst.found.where)
    volume_mm3 = worst.cell.hull.volume_mm3
    left = [round(sum(part.hull.volume_mm3 for part in parts) / volume_mm3, 2) for parts in ways]
    return ways[left.index(min(left))] if ways else None


def enclosing_pieces(
    roots: Sequence[Cell], levels: Sequence[Level], wanted_mm: float, most: int, tolerance_mm: float
) -> Faceted:
    """Return convex pieces that contain all that the cells contain, and their excess, measured from above.

    Hulls with many vertices give way to simpler ones about them, which stand out up to `tolerance_mm` further.
    """
    cells = subdivided(roots, coarser(levels, _LEVELS_WHILE_CUTTING), wanted_mm, most)
    hulls = [simpler_hull(hull, tolerance_mm) for hull in _not_covered([cell.hull for cell in cells])]
    excess_mm = _FINE_MM
    exact = with_neighbours(levels)
    for hull in hulls:
        excess_mm = max(excess_mm, measured(hull, exact, excess_mm).excess_mm)
    return Faceted(tuple(hull.vertices for hull in hulls), excess_mm)


def _not_covered(hulls: list[Hull]) -> list[Hull]:
    """Return the hulls that do not lie wholly in a larger one."""
    lowest = np.array([hull.vertices.min(axis=0) for hull in hulls])
    highest = np.array([hull.vertices.max(axis=0) for hull in hulls])
    kept: list[int] = []
    for k in np.argsort([-hull.volume_mm3 for hull in hulls], kind="stable"):
        boxes_hold = np.all((lowest[kept] <= lowest[k]) & (highest[kept] >= highest[k]), axis=1)
        if not any(hulls[larger].holds(hulls[k].vertices, 0.0) for larger in np.array(kept)[boxes_hold]):
            kept.append(int(k))
    return [hulls[k] for k in kept]
