"""A stack of prisms cut into cells, each with the hull of the prisms in it. mm.

Why the hulls contain the solid. Each prism's outline is a set of polygons apart from each other. Every polygon goes
whole to one cell, or is cut along a plane between two, and each cell's hull contains all of its prisms.

Why they contain straight lines between the outlines of neighbouring slices too, from a point of one outline to a
point of the other that is no farther away, across z, than any corner of either outline is from the other one's edge,
and no farther than `STEEPEST` times the slices' distance (what moves more is a step, which the prism has as a step).
As long as a prism is cut at slices only, a hull contains both ends of such a line. Before it is first cut along z, its
outline is grown: each point of the line lies within half that distance of one of the ends, and in the outline's convex
hull.
"""

import math
from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property
from itertools import pairwise
from typing import Final

import numpy as np
import shapely
from numpy.typing import NDArray

from geometry.imported.hulls import Hull, hull_of
from geometry.imported.subdivision import Cell, cut_positions

Array = NDArray[np.float64]

STEEPEST: Final = 3.0
# Sides of a quarter turn in grown outlines.
_QUARTER: Final = 4


@dataclass(frozen=True, eq=False)
class Prism:
    """An outline between two heights. `slices` are the solid's at both ends, as long as it was not cut along z."""

    low_mm: float
    high_mm: float
    outline: shapely.Geometry
    slices: tuple[shapely.Geometry, shapely.Geometry] | None = None

    def of(self, outline: shapely.Geometry) -> "Prism":
        """Return a prism of some of the polygons of the outline."""
        return Prism(self.low_mm, self.high_mm, outline, self.slices)

    @cached_property
    def grown(self) -> "Prism":
        """The prism with all straight lines between its slices, so that it may be cut along z."""
        if self.slices is None:
            return self
        most_mm = STEEPEST * (self.high_mm - self.low_mm)
        outlines = [_grown(polygon, *self.slices, most_mm) for polygon in _polygons(self.outline)]
        return Prism(self.low_mm, self.high_mm, shapely.union_all(outlines))


def _grown(
    polygon: shapely.Polygon, below: shapely.Geometry, above: shapely.Geometry, most_mm: float
) -> shapely.Geometry:
    """Return a polygon that contains both slices there, with the lines between them of at most `most_mm` across."""
    ends = below.intersection(polygon), above.intersection(polygon)
    if any(end.is_empty for end in ends):
        return polygon
    farthest_mm = min(float(shapely.hausdorff_distance(*ends)), most_mm)
    # GEOS grows by polygons inscribed in circles; divided by the cosine they enclose the circle that is meant.
    reach_mm = farthest_mm / 2.0 / math.cos(math.pi / 4.0 / _QUARTER)
    return polygon.union(polygon.buffer(reach_mm, quad_segs=_QUARTER).intersection(polygon.convex_hull))


@dataclass(frozen=True, eq=False)
class ContourCell:
    """Prisms one upon the other, connected."""

    prisms: tuple[Prism, ...]

    @cached_property
    def hull(self) -> Hull:
        """The hull of the prisms."""
        points = []
        for prism in self.prisms:
            corners = shapely.get_coordinates(prism.outline.convex_hull)
            points += [np.column_stack([corners, np.full(len(corners), z)]) for z in (prism.low_mm, prism.high_mm)]
        return hull_of(np.vstack(points))

    def cuts(self, through: Array) -> list[list[Cell]]:
        """Return the cells on both sides of a slice and of planes along z, near the point `through`."""
        ways: list[list[Cell]] = []
        wide = float(np.abs(self.hull.vertices).max()) * 2.0 + 1.0
        for axis, at in cut_positions(self.hull, through):
            if axis < 2:
                prisms = [prism.grown for prism in self.prisms]
                boxes = _both_sides(axis, at, wide)
                sides = [[prism.of(prism.outline.intersection(box)) for prism in prisms] for box in boxes]
            elif len(self.prisms) > 1:
                borders = np.array([prism.low_mm for prism in self.prisms[1:]])
                first = int(np.abs(borders - at).argmin()) + 1
                sides = [list(self.prisms[:first]), list(self.prisms[first:])]
            else:
                continue
            ways.append([cell for side in sides for cell in connected_cells(side)])
        return ways


def connected_cells(prisms: Sequence[Prism]) -> list[ContourCell]:
    """Return the cells of prisms one upon the other: polygons are in the same cell where they stand on each other."""
    from scipy.cluster.hierarchy import DisjointSet  # noqa: PLC0415 - SciPy takes long to import

    polygons = [_polygons(prism.outline) for prism in prisms]
    first = np.cumsum([0, *map(len, polygons)])
    standing = DisjointSet(range(int(first[-1])))
    for start, (below, above) in zip(first, pairwise(polygons), strict=False):
        for one, other in np.argwhere(shapely.intersects(below[:, None], above[None, :])):
            standing.merge(int(start + one), int(start + len(below) + other))
    cells = []
    for members in standing.subsets():
        numbers = np.sort(list(members))
        parts = np.split(numbers, np.searchsorted(numbers, first[1:-1]))
        own = [every[part - start] for every, part, start in zip(polygons, parts, first[:-1], strict=True)]
        cells.append(
            ContourCell(
                tuple(
                    prism if len(some) == len(every) else prism.of(shapely.multipolygons(some))
                    for prism, some, every in zip(prisms, own, polygons, strict=True)
                    if len(some)
                )
            )
        )
    return cells


def simpler_outline(outline: shapely.Geometry, tolerance_mm: float, *, within: bool) -> shapely.Geometry:
    """Return an outline of fewer points that contains `outline`, or is within it, and differs by about twice as much.

    Grown by the tolerance, it may be smoothed by as much and still contains what it was; shrunk, it stays within.
    Rounding is not trusted: where this fails, or saves few points, the outline itself is returned.
    """
    distance_mm = 1.1 * tolerance_mm * (-1.0 if within else 1.0)
    simpler = outline.buffer(distance_mm, quad_segs=_QUARTER).simplify(tolerance_mm)
    saves = shapely.get_num_coordinates(simpler) < 0.8 * shapely.get_num_coordinates(outline)
    holds = outline.covers(simpler) if within else simpler.covers(outline)
    return simpler if saves and holds else outline


def parts_of(geometry: object) -> NDArray[np.object_]:
    """Return the parts of a geometry or an array of them, those of collections within collections too."""
    parts: NDArray[np.object_] = shapely.get_parts(shapely.get_parts(geometry))
    return parts


def _polygons(outline: shapely.Geometry) -> NDArray[np.object_]:
    """Return the polygons of a geometry; lines and points, which a cut may leave, belong to its other side too."""
    parts = parts_of(outline)
    polygons: NDArray[np.object_] = parts[shapely.area(parts) > 0.0]
    return polygons


def _both_sides(axis: int, at: float, wide: float) -> tuple[shapely.Polygon, shapely.Polygon]:
    low, high = [-wide, -wide], [wide, wide]
    low[axis], high[axis] = at, at
    return shapely.box(-wide, -wide, *high), shapely.box(*low, wide, wide)
