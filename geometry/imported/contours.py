"""A solid told by outlines on slices across z, as an RT Structure Set has it. mm."""

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field
from functools import cached_property
from itertools import pairwise
from typing import Final

import numpy as np
import shapely
from numpy.typing import NDArray

from geometry.decompose import Faceted
from geometry.errors import GeometryError
from geometry.imported.contour_cells import Prism, connected_cells, parts_of, simpler_outline
from geometry.imported.levels import Level
from geometry.imported.subdivision import enclosing_pieces
from geometry.outlines import LARGEST_MM, checked_excess, number

Array = NDArray[np.float64]
Flags = NDArray[np.bool_]

MOST_CONTOURS: Final = 2_000
MOST_POINTS: Final = 500_000
MOST_POINTS_OF_A_SLICE: Final = 5_000
MOST_PIECES: Final = 2_000
# Outlines whose heights differ by no more than this are on one slice.
SAME_SLICE_MM: Final = 0.01
# What has less area than this is widened, so that nothing that an outline says is lost.
_SMALLEST_AREA_MM2: Final = 1e-3
_WIDENED_MM: Final = 0.1
# How far outlines are smoothed before they are cut and measured: what follows takes time with every point.
_SMOOTHED_MM: Final = 0.25


@dataclass(frozen=True, eq=False)
class ContourStack:
    """The solid inside closed outlines on slices at two or more heights z.

    `contours`: height in mm and points, shape (n, 2), mm, of each outline, in any order. On a slice the solid is all
    that any outline encloses: an outline within another counts as filled, since an envelope has no hollows. Between
    two slices it is all that is in either; that contains the solid however it is interpolated between the two by
    signed distance or by the nearest slice. Beyond the first and the last slice it goes on for half the distance to
    the next.

    The pieces contain all straight lines between neighbouring outlines, too (`contour_cells`). Cutting into pieces
    ends where none stands out more than `wanted_excess_mm`, or at `most_pieces`; outlines that nothing joins are
    pieces of their own, however many they are.
    """

    contours: tuple[tuple[float, Array], ...] = field(repr=False)
    wanted_excess_mm: float = 5.0
    most_pieces: int = 200

    def __post_init__(self) -> None:
        if len(self.contours) > MOST_CONTOURS:
            raise GeometryError(f"{len(self.contours)} contours; allowed: at most {MOST_CONTOURS}")
        points = sum(len(outline) for _, outline in self.contours)
        if points > MOST_POINTS:
            raise GeometryError(f"{points} points of contours; allowed: at most {MOST_POINTS}")
        contours = tuple(_checked_contour(k + 1, *contour) for k, contour in enumerate(self.contours))
        object.__setattr__(self, "contours", contours)
        object.__setattr__(self, "wanted_excess_mm", checked_excess(self.wanted_excess_mm))
        object.__setattr__(self, "most_pieces", int(number("most_pieces", self.most_pieces, 1, MOST_PIECES)))
        slices = _by_height(contours)
        if len(slices) < 2:
            raise GeometryError(f"contours on {len(slices)} slices; allowed: 2 or more, at different z")
        fullest = max(sum(map(len, outlines)) for _, outlines in slices)
        if fullest > MOST_POINTS_OF_A_SLICE:
            raise GeometryError(f"{fullest} points on one slice; allowed: at most {MOST_POINTS_OF_A_SLICE}")

    def faceted(self, max_excess_mm: float) -> Faceted:
        """Return convex pieces that contain the solid, and their excess over it, measured from above.

        How far they stand out depends on the solid's folds: it is stated, not kept. Pieces have fewer vertices than
        the hulls of what they hold, at the cost of `max_excess_mm` or a quarter of `wanted_excess_mm`, the greater.
        """
        tolerance_mm = max(checked_excess(max_excess_mm), self.wanted_excess_mm / 4.0)
        inner, outer = (
            [simpler_outline(outline, _SMOOTHED_MM, within=within) for _, outline in self._slices]
            for within in (True, False)
        )
        levels = [Level(one.low_mm, one.high_mm, ((one.outline, 0.0),)) for one in _stacked(self._slices, inner)]
        cells = connected_cells(_stacked(self._slices, outer))
        return enclosing_pieces(cells, levels, self.wanted_excess_mm, self.most_pieces, tolerance_mm)

    def contains(self, points: Array) -> Flags:
        """Tell which of `points`, shape (n, 3), mm, lie in the solid; on its surface, rounding decides."""
        inside = np.zeros(len(points), dtype=bool)
        for prism in self._prisms:
            here = np.flatnonzero((points[:, 2] >= prism.low_mm) & (points[:, 2] <= prism.high_mm))
            inside[here] |= shapely.intersects_xy(prism.outline, points[here, 0], points[here, 1])
        return inside

    @cached_property
    def _slices(self) -> tuple[tuple[float, shapely.Geometry], ...]:
        return tuple((height, _filled(outlines)) for height, outlines in _by_height(self.contours))

    @cached_property
    def _prisms(self) -> tuple[Prism, ...]:
        return _stacked(self._slices, [outline for _, outline in self._slices])


def _stacked(
    slices: Sequence[tuple[float, shapely.Geometry]], outlines: Sequence[shapely.Geometry]
) -> tuple[Prism, ...]:
    """Return prisms of the outlines from slice to slice, and for half a slice beyond the first and the last."""
    heights, regions = zip(*slices, strict=True)
    between = [
        Prism(low, high, shapely.union(*pair), ends)
        for (low, high), pair, ends in zip(pairwise(heights), pairwise(outlines), pairwise(regions), strict=True)
    ]
    start, end = (3.0 * heights[0] - heights[1]) / 2.0, (3.0 * heights[-1] - heights[-2]) / 2.0
    return Prism(start, heights[0], outlines[0]), *between, Prism(heights[-1], end, outlines[-1])


def _checked_contour(place: int, height: float, outline: Array) -> tuple[float, Array]:
    """Return a contour as numbers; GeometryError names it by its place, from 1."""
    z = number(f"z of contour {place}", height, -LARGEST_MM, LARGEST_MM)
    points = np.array(outline, dtype=np.float64)
    if points.ndim != 2 or points.shape[1] != 2 or len(points) < 3:
        raise GeometryError(f"contour {place} of shape {points.shape}; allowed: 3 or more points of 2 coordinates")
    wrong = np.flatnonzero(~np.all(np.abs(points) <= LARGEST_MM, axis=1))
    if len(wrong):
        raise GeometryError(
            f"point {wrong[0] + 1} of contour {place} = {points[wrong[0]].tolist()} mm; "
            f"allowed: numbers from -{LARGEST_MM:g} to {LARGEST_MM:g}"
        )
    points.setflags(write=False)
    return z, points


def _by_height(contours: Iterable[tuple[float, Array]]) -> list[tuple[float, list[Array]]]:
    """Return the heights of the slices, rising, each with its outlines."""
    slices: list[tuple[float, list[Array]]] = []
    for height, outline in sorted(contours, key=lambda contour: contour[0]):
        if not slices or height - slices[-1][0] > SAME_SLICE_MM:
            slices.append((height, []))
        slices[-1][1].append(outline)
    return slices


def _filled(outlines: Iterable[Array]) -> shapely.Geometry:
    """Return all that any of the outlines encloses, holes filled.

    An outline that crosses itself counts with all its loops, and where it has no width it is given some.
    """
    pieces = parts_of(shapely.make_valid([shapely.Polygon(outline) for outline in outlines]))
    thin = shapely.area(pieces) < _SMALLEST_AREA_MM2
    pieces[thin] = shapely.buffer(pieces[thin], _WIDENED_MM)
    return shapely.union_all([shapely.Polygon(part.exterior) for part in parts_of(shapely.union_all(pieces))])
