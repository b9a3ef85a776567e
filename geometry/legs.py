"""Paths as straight legs for the kernel: control points checked, gathered into runs, and covered by rectangles."""

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from geometry.path_kernel import HALVINGS_OF_ONE, Leg
from geometry.planes import Plane

Array = NDArray[np.float64]
Point = tuple[float, float]

# Cells of the first division, deg.
FIRST_CELL_DEG = 8.0
# The tolerances are widened by this to cover the rounding of the path and of cells, deg.
ROUNDING_DEG = 1e-9
# Control points are at most so many, and their angles so large, deg: beyond is no path of a machine.
MOST_POINTS = 100_000
MOST_DEG = 1000.0


@dataclass(frozen=True)
class Run:
    """Control points `first` to `last` on one straight line, passed in one sense; `share` (points,) from 0 to 1."""

    first: int
    start: Array
    change: Array
    share: Array

    def point_deg(self, place: float) -> Point:
        """Return the angles at a place of the run, 0 to 1."""
        at = self.start + place * self.change
        return float(at[0]), float(at[1])

    def segment(self, place: float) -> int:
        """Return the number of the control point before a place of the run, 0 to 1."""
        within = int(np.searchsorted(self.share, place, side="right")) - 1
        return self.first + min(max(within, 0), max(len(self.share) - 2, 0))


def checked_points(points_deg: Sequence[Point]) -> Array:
    """Return control points as an array (n, 2), deg. Raises ValueError for what is no path."""
    if not 1 <= len(points_deg) <= MOST_POINTS:
        raise ValueError(f"path of {len(points_deg)} control points; allowed: 1 to {MOST_POINTS}")
    points = np.array(points_deg, dtype=np.float64).reshape(-1, 2)
    if len(points) != len(points_deg) or not (np.abs(points) <= MOST_DEG).all():
        raise ValueError(f"control points of a path: allowed are pairs of angles within {MOST_DEG:g} deg")
    return points


def straight_runs(points: Array) -> list[Run]:
    """Cut a path into straight runs: control points on one line, such as those of an arc, need no proof each."""
    runs: list[Run] = []
    first = 0
    while first < len(points) - 1 or not runs:
        last = min(first + 1, len(points) - 1)
        while last + 1 < len(points) and _straight(points[first : last + 2]):
            last += 1
        start, change = points[first], points[last] - points[first]
        length2 = float(change @ change)
        along = (points[first : last + 1] - start) @ change
        share = along / length2 if length2 > 0.0 else np.linspace(0.0, 1.0, last - first + 1)
        runs.append(Run(first, start, change, share))
        first = last
    return runs


def _straight(points: Array) -> bool:
    """Tell whether the points, (n, 2), follow one another on a straight line, to far less than `ROUNDING_DEG`."""
    change = points[-1] - points[0]
    length = float(np.hypot(*change))
    if length == 0.0:
        return bool((points == points[0]).all())
    steps = np.diff(points, axis=0)
    offset = points - points[0]
    across = np.abs(offset[:, 0] * change[1] - offset[:, 1] * change[0]) / length
    return bool((steps @ change >= 0.0).all() and across.max() <= 0.1 * ROUNDING_DEG)


def leg_of(plane: Plane, run: Run, around_deg: Point) -> Leg:
    """Return a run as a plane sees it: an angle on which its pairs do not depend stays 0, without tolerance."""
    gantry, couch = float(plane.with_gantry), float(plane.with_couch)
    widened = [math.radians(around) for around in around_deg]
    start, change = np.radians(run.start), np.radians(run.change)
    return Leg(
        gantry * float(start[0]),
        couch * float(start[1]),
        gantry * float(change[0]),
        couch * float(change[1]),
        gantry * widened[0],
        couch * widened[1],
    )


def roots_of(leg: Leg, resolution_deg: float) -> tuple[Array, NDArray[np.int64]]:
    """Return rectangles (n, 4) that cover a leg's band, in its order, radians, and how often each may be halved.

    The band is cut across the axis that turns more; each rectangle holds all of the band between its two cuts.
    """
    start = np.array([leg.gantry, leg.couch])
    change = np.array([leg.by_gantry, leg.by_couch])
    around = np.array([leg.around_gantry, leg.around_couch])
    main = 0 if abs(leg.by_gantry) >= abs(leg.by_couch) else 1
    low = min(start[main], start[main] + change[main]) - around[main]
    high = max(start[main], start[main] + change[main]) + around[main]
    count = max(math.ceil((high - low) / math.radians(FIRST_CELL_DEG)), 1)
    cuts = np.linspace(low, high, count + 1)
    if change[main] < 0.0:
        cuts = cuts[::-1]
    roots = np.empty((count, 4))
    for k in range(count):
        ends = sorted((cuts[k], cuts[k + 1]))
        places = np.array([0.0, 1.0])
        if change[main] != 0.0:
            places = (np.array(ends) + np.array([-1.0, 1.0]) * around[main] - start[main]) / change[main]
        across = start[1 - main] + np.clip(places, 0.0, 1.0) * change[1 - main]
        roots[k, 2 * main : 2 * main + 2] = ends
        other = 2 * (1 - main)
        roots[k, other : other + 2] = across.min() - around[1 - main], across.max() + around[1 - main]
    widths = np.degrees(roots[:, 1::2] - roots[:, ::2])
    halvings = [[halvings_for(float(width), resolution_deg, HALVINGS_OF_ONE) for width in pair] for pair in widths]
    return roots, np.array(halvings, np.int64)


def halvings_for(width_deg: float, resolution_deg: float, most: int) -> int:
    """Return how often a width must be halved to reach a resolution, `most` at most."""
    return min(max(math.ceil(math.log2(max(width_deg, 1e-12) / resolution_deg)), 0), most)
