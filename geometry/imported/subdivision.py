"""Cut the piece that stands out most, again and again."""

import heapq
from collections.abc import Sequence
from itertools import count
from typing import Final, Protocol

import numpy as np
from numpy.typing import NDArray

from geometry.decompose import Faceted
from geometry.imported.hulls import Hull, simpler_hull
from geometry.imported.levels import Level, coarser, measured, with_neighbours

Array = NDArray[np.float64]

# Excesses below this, mm, are not looked at more closely.
_FINE_MM: Final = 0.1
# Where to cut need not be known as well as what is left in the end.
_LEVELS_WHILE_CUTTING: Final = 120


class Cell(Protocol):
    """Some of a solid, and the hull that contains it."""

    @property
    def hull(self) -> Hull:
        """The convex hull of what is in the cell."""
        ...

    def cuts(self, through: Array) -> "list[list[Cell]]":
        """Return ways to cut the cell, each as the cells that result, near the point `through`, shape (3,), mm."""
        ...


def subdivided(roots: Sequence[Cell], levels: Sequence[Level], wanted_mm: float, most: int) -> list[Hull]:
    """Return hulls that together contain all that the cells contain.

    The cell whose hull has the greatest excess is cut where it is greatest, along the axis that leaves the least
    volume, until every excess is at most `wanted_mm`, no cell can be cut, or there are `most` hulls.
    """
    order = count()
    heap: list[tuple[float, int, Array, Cell]] = []
    uncut: list[Cell] = []

    def put(cell: Cell) -> None:
        found = measured(cell.hull, levels, wanted_mm)
        heapq.heappush(heap, (-found.excess_mm, next(order), found.where, cell))

    for root in roots:
        put(root)
    while heap and -heap[0][0] > wanted_mm and len(heap) + len(uncut) < most:
        _, _, where, cell = heapq.heappop(heap)
        ways = cell.cuts(where)
        if not ways:
            uncut.append(cell)
            continue
        for part in min(ways, key=lambda parts: sum(part.hull.volume_mm3 for part in parts)):
            put(part)
    return [cell.hull for cell in uncut] + [cell.hull for _, _, _, cell in heap]


def enclosing_pieces(
    roots: Sequence[Cell], levels: Sequence[Level], wanted_mm: float, most: int, tolerance_mm: float
) -> Faceted:
    """Return convex pieces that contain all that the cells contain, and their excess, measured from above.

    Hulls with many vertices give way to simpler ones about them, which stand out up to `tolerance_mm` further.
    """
    cut = subdivided(roots, coarser(levels, _LEVELS_WHILE_CUTTING), wanted_mm, most)
    hulls = [simpler_hull(hull, tolerance_mm) for hull in _not_covered(cut)]
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
