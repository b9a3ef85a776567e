"""The outline of a body's sections: flat where the body lies on it, full on the other side."""

from dataclasses import dataclass
from functools import lru_cache
from typing import Final

import numpy as np
import shapely
from numpy.typing import NDArray

from geometry.outlines import EllipseOutline, Point

Array = NDArray[np.float64]
Flags = NDArray[np.bool_]

# Points on a quadrant that tangents are chosen from. Bodies are made anew while a value is dragged, so that few do: the
# excess stays an upper bound, only the tangents are a little less well spread.
_FINENESS: Final = 200


@dataclass(frozen=True)
class HalvedOutline:
    """Half of one superellipse below half of another, both of one width, so that the edge stays smooth.

    Below and above are along the outline's second coordinate; the exponents are those of `EllipseOutline`.
    """

    half_width_mm: float
    below_mm: float
    above_mm: float
    centre_mm: Point = (0.0, 0.0)
    below_exponent: float = 2.0
    above_exponent: float = 2.0

    def __post_init__(self) -> None:
        """Check the sizes, as the two superellipses do."""
        self._halves()

    def _halves(self) -> tuple[EllipseOutline, EllipseOutline]:
        return (
            EllipseOutline(self.half_width_mm, self.below_mm, self.centre_mm, self.below_exponent),
            EllipseOutline(self.half_width_mm, self.above_mm, self.centre_mm, self.above_exponent),
        )

    def enclosing(self, max_excess_mm: float) -> tuple[shapely.Polygon, float]:
        """Return a polygon about the outline, as wide and as high as it, and an upper bound of its excess in mm.

        The polygons about the two superellipses have upright sides at the common width, where they are joined.
        """
        (below, below_excess_mm), (above, above_excess_mm) = (
            _about(self.half_width_mm, half_height, exponent, max_excess_mm)
            for half_height, exponent in (
                (self.below_mm, self.below_exponent),
                (self.above_mm, self.above_exponent),
            )
        )
        joined = _joined(below, above) + self.centre_mm
        return shapely.Polygon(joined), max(below_excess_mm, above_excess_mm)

    def contains(self, points: Array) -> Flags:
        """Tell which of `points`, shape (n, 2), mm, lie in the outline."""
        below, above = self._halves()
        inside: Flags = np.where(points[:, 1] < self.centre_mm[1], below.contains(points), above.contains(points))
        return inside

    def boundary(self, count: int) -> Array:
        """Return about `count` points of the edge, counter-clockwise, shape (m, 2), mm."""
        halves = (half.boundary(count) - self.centre_mm for half in self._halves())
        return _joined(*halves) + self.centre_mm


def oval(half_width: float, half_height: float, centre: Point = (0.0, 0.0), exponent: float = 2.0) -> HalvedOutline:
    """Return the outline, mm, of one whole superellipse."""
    return HalvedOutline(half_width, half_height, half_height, centre, exponent, exponent)


class _Superellipse(EllipseOutline):
    """One whose tangents are found fast."""

    def _quadrant(self, fineness: int = _FINENESS) -> tuple[Array, Array]:
        return super()._quadrant(fineness)


@lru_cache(maxsize=4096)
def _about(half_width_mm: float, half_height_mm: float, exponent: float, max_excess_mm: float) -> tuple[Array, float]:
    """Return the polygon about a superellipse at the origin, shape (m, 2), read only, and its excess in mm.

    Remembered, since left and right are alike and a body's solids are faceted more than once.
    """
    outline = _Superellipse(half_width_mm, half_height_mm, exponent=exponent)
    polygon, excess_mm = outline.enclosing(max_excess_mm)
    turn = np.array(polygon.exterior.coords[:-1])
    turn.setflags(write=False)
    return turn, excess_mm


def _joined(below: Array, above: Array) -> Array:
    """Return the upper part of one closed turn about the origin, then the lower part of the other; both start right."""
    joined: Array = np.vstack([above[above[:, 1] >= 0.0], below[below[:, 1] < 0.0]])
    return joined
