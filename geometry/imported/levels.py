"""How far convex pieces stand out beyond an imported solid: measured level by level, from above. mm.

A level is the part of space between two heights z. Above or below every point of a level's `region` the solid is at
most `slack_mm` away, seen from any height of the level. So where all of a piece's shadow on the level lies within r of
the region, no point of the piece there is farther than hypot(r, slack) from the solid. Where a surface lies almost
level, the sections next to it say more; `with_neighbours` adds them as a second region with a slack of its own.
"""

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np
import shapely
from numpy.typing import NDArray

from geometry.imported.hulls import Hull

Array = NDArray[np.float64]

# The figure found is at most this too large, mm and relative.
_STEP_MM: Final = 0.1
_STEP: Final = 0.02
_SMOOTHED_MM: Final = 0.5
# Sides of a quarter turn in grown regions.
_QUARTER: Final = 6


@dataclass(frozen=True, eq=False)
class Level:
    """What is known of the solid between two heights: regions, each with its slack in mm."""

    low_mm: float
    high_mm: float
    regions: tuple[tuple[shapely.Geometry, float], ...]


@dataclass(frozen=True, eq=False)
class Measured:
    """An upper bound of a piece's excess, mm, and about where the piece has it, shape (3,)."""

    excess_mm: float
    where: Array


def with_neighbours(levels: Sequence[Level]) -> list[Level]:
    """Return levels of one region each, one upon the other, with the regions of three levels as a second one."""
    found = []
    for k, level in enumerate(levels):
        near = levels[max(k - 1, 0) : k + 2]
        region = shapely.union_all([one.regions[0][0] for one in near])
        slack_mm = level.high_mm - level.low_mm + max(one.regions[0][1] for one in near)
        found.append(Level(level.low_mm, level.high_mm, (*level.regions, (region, slack_mm))))
    return found


def coarser(levels: Sequence[Level], most: int) -> list[Level]:
    """Return `levels` of one region each joined to at most `most`, smoothed, without slack: no bound, but guidance."""
    size = -(-len(levels) // most)
    groups = [levels[start : start + size] for start in range(0, len(levels), size)]
    regions = [shapely.union_all([level.regions[0][0] for level in group]).simplify(_SMOOTHED_MM) for group in groups]
    return [
        Level(group[0].low_mm, group[-1].high_mm, ((region, 0.0),))
        for group, region in zip(groups, regions, strict=True)
    ]


def measured(hull: Hull, levels: Sequence[Level], enough_mm: float) -> Measured:
    """Return the excess of a piece; what is below `enough_mm` is not looked at more closely."""
    lowest, highest = float(hull.vertices[:, 2].min()), float(hull.vertices[:, 2].max())
    # A piece touches the solid, so that none of its points is farther away than the piece is long.
    most_mm = float(np.linalg.norm(np.ptp(hull.vertices, axis=0)))
    excess_mm, where = min(enough_mm, most_mm), hull.vertices.mean(axis=0)
    spans = [(max(level.low_mm, lowest), min(level.high_mm, highest), level) for level in levels]
    crossed = [(_shadow(hull, low, high), (low + high) / 2.0, level) for low, high, level in spans if low < high]
    # The worst are likely to come first, so that one look is enough for the others.
    crossed.sort(key=lambda one: one[2].regions[0][0].area - one[0].area)
    for shadow, height, level in crossed:
        if not _within(shadow, level, excess_mm):
            short_mm, excess_mm = _narrowed(shadow, level, excess_mm, most_mm)
            point = _uncovered(shadow, level, short_mm)
            where = where if point is None else np.array([*point, height])
    return Measured(excess_mm, where)


def _within(shadow: shapely.Geometry, level: Level, bound_mm: float) -> bool:
    """Tell whether what casts a shadow on a level is known to lie within a distance of the solid.

    GEOS' buffers are polygons inscribed in the true ones, so that this errs towards no.
    """
    return any(reached.covers(shadow) for reached in _reached(shadow, level, bound_mm))


def _reached(shadow: shapely.Geometry, level: Level, bound_mm: float) -> Iterator[shapely.Geometry]:
    """Yield, for each region of a level, the part of it near a shadow grown as far as the bound allows."""
    left, low, right, high = shadow.bounds
    for region, slack_mm in level.regions:
        if slack_mm <= bound_mm:
            near = shapely.clip_by_rect(region, left - bound_mm, low - bound_mm, right + bound_mm, high + bound_mm)
            yield near.buffer(math.sqrt(bound_mm**2 - slack_mm**2), quad_segs=_QUARTER)


def _narrowed(shadow: shapely.Geometry, level: Level, short_mm: float, most_mm: float) -> tuple[float, float]:
    """Return a distance that does not suffice and one that does, close together; `short_mm` does not."""
    low, high = short_mm, min(2.0 * short_mm + _STEP_MM, most_mm)
    while high < most_mm and not _within(shadow, level, high):
        low, high = high, min(2.0 * high, most_mm)
    while high - low > _STEP_MM + _STEP * high:
        middle = (low + high) / 2.0
        low, high = (low, middle) if _within(shadow, level, middle) else (middle, high)
    return low, high


def _uncovered(shadow: shapely.Geometry, level: Level, bound_mm: float) -> tuple[float, float] | None:
    """Return a point of the shadow that is not known to lie within a distance of the solid, if rounding leaves one."""
    for reached in _reached(shadow, level, bound_mm):
        shadow = shadow.difference(reached)
    point = shadow.representative_point()
    return None if point.is_empty else (point.x, point.y)


def _shadow(hull: Hull, low: float, high: float) -> shapely.Geometry:
    """Return what a hull covers, seen along z, between two heights."""
    z = hull.vertices[:, 2]
    points = [hull.vertices[(z >= low) & (z <= high), :2]]
    first, second = hull.vertices[hull.edges[:, 0]], hull.vertices[hull.edges[:, 1]]
    for height in (low, high):
        across = (first[:, 2] < height) != (second[:, 2] < height)
        start, end = first[across], second[across]
        part = (height - start[:, 2]) / (end[:, 2] - start[:, 2])
        points.append((start + part[:, None] * (end - start))[:, :2])
    return shapely.MultiPoint(np.vstack(points)).convex_hull
