"""Convex hulls that do not fail on flat input, and simpler hulls that enclose them. mm."""

from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Indices = NDArray[np.int64]

# Half of the thickness, mm, that flat points are given so that they span a volume.
_FLAT_MM: Final = 1e-3
_NO_VOLUME_MM3: Final = 1e-6
# Planes of a simpler hull stand off by this, mm, so that rounding in their corners cannot bring them inside.
_ROUNDING_MM: Final = 1e-6
_FEW_VERTICES: Final = 24
# Cosine of the angle, about 18 deg, within which planes of a simpler hull are added one after the other.
_SAME_DIRECTION: Final = 0.95
# Vertices among which the point of a hull that is nearest to another is sought.
_NEAREST: Final = 50


@dataclass(frozen=True, eq=False)
class Hull:
    """A convex hull.

    `vertices` (n, 3), mm; `edges` (m, 2), indices into them; `planes` (k, 4), outward unit normal and offset, so that
    normal · p + offset is at most 0 inside; `volume_mm3`.
    """

    vertices: Array
    edges: Indices
    planes: Array
    volume_mm3: float

    def holds(self, points: Array, tolerance_mm: float) -> bool:
        """Tell whether all of `points`, shape (n, 3), mm, lie inside or within the tolerance of each plane."""
        return bool(np.all(points @ self.planes[:, :3].T + self.planes[:, 3] <= tolerance_mm))


def hull_of(points: Array) -> Hull:
    """Return the hull of `points`, shape (n, 3), mm; a flat set is thickened by a thousandth of a millimetre."""
    # SciPy takes longer to import than the program's start should.
    from scipy.spatial import ConvexHull, QhullError  # noqa: PLC0415

    try:
        hull = ConvexHull(points)
    except (QhullError, ValueError):
        hull = None
    if hull is None or hull.volume < _NO_VOLUME_MM3:
        points = _thickened(points)
        hull = ConvexHull(points)
    renumbered = np.full(len(points), -1)
    renumbered[hull.vertices] = np.arange(len(hull.vertices))
    triangles = renumbered[hull.simplices]
    sides = np.sort(np.vstack([triangles[:, [0, 1]], triangles[:, [1, 2]], triangles[:, [2, 0]]]), axis=1)
    codes = np.unique(sides[:, 0] * len(hull.vertices) + sides[:, 1])
    edges = np.column_stack(np.divmod(codes, len(hull.vertices)))
    return Hull(points[hull.vertices], edges, hull.equations, float(hull.volume))


def simpler_hull(hull: Hull, tolerance_mm: float) -> Hull:
    """Return a hull that encloses `hull` with fewer vertices, or `hull` itself where that gains little.

    It is bounded by some of the planes of `hull` and by the sides of its box along the axes, as many as it takes for
    no vertex to lie more than `tolerance_mm` beyond any plane of `hull`. It therefore contains `hull`, whatever is
    left out.
    """
    if len(hull.vertices) <= _FEW_VERTICES:
        return hull
    from scipy.spatial import HalfspaceIntersection  # noqa: PLC0415

    lowest, highest = hull.vertices.min(axis=0), hull.vertices.max(axis=0)
    box = np.vstack([np.column_stack([np.eye(3), -highest]), np.column_stack([-np.eye(3), lowest])])
    bounded = HalfspaceIntersection(_off(box), hull.vertices.mean(axis=0), incremental=True)
    planes = np.unique(hull.planes, axis=0)
    while True:
        corners = bounded.intersections
        beyond = corners @ planes[:, :3].T + planes[:, 3]
        worst = beyond.max(axis=1)
        if worst.max() <= tolerance_mm:
            break
        bounded.add_halfspaces(_off(planes[_apart(planes, beyond, worst, tolerance_mm)]))
    simpler = hull_of(np.unique(corners, axis=0))
    return simpler if len(simpler.vertices) < 0.8 * len(hull.vertices) else hull


def _apart(planes: Array, beyond: Array, worst: Array, tolerance_mm: float) -> list[int]:
    """Return planes that the worst corners lie beyond, all of different directions.

    One plane at a time would take long, and all at once would be more planes than needed: neighbouring corners are
    often cut off together.
    """
    chosen: list[int] = []
    for corner in np.argsort(-worst)[: np.count_nonzero(worst > max(tolerance_mm, worst.max() / 2.0))]:
        plane = int(beyond[corner].argmax())
        if np.all(planes[chosen, :3] @ planes[plane, :3] < _SAME_DIRECTION):
            chosen.append(plane)
    return chosen


def distance_beyond(hull: Hull, points: Array) -> float:
    """Return the greatest distance, mm, of any of `points`, shape (n, 3), to a hull, or a little more.

    The nearest point is sought as a sum of the hull's nearest vertices with weights that are not negative. Scaled to a
    sum of 1 they give a point of the hull, however good the search was, and the distance to it cannot be too small.
    """
    from scipy.optimize import nnls  # noqa: PLC0415
    from scipy.spatial import cKDTree  # noqa: PLC0415

    beyond = points[np.any(points @ hull.planes[:, :3].T + hull.planes[:, 3] > 0.0, axis=1)]
    count = min(_NEAREST, len(hull.vertices))
    _, nearest = cKDTree(hull.vertices).query(beyond, k=count)
    size = float(np.ptp(hull.vertices, axis=0).max())
    greatest = 0.0
    for point, numbers in zip(beyond, nearest, strict=True):
        towards = np.vstack([(hull.vertices[numbers] - point).T, np.full(count, size)])
        weights, _ = nnls(towards, [0.0, 0.0, 0.0, size])
        greatest = max(greatest, float(np.linalg.norm(towards[:3] @ weights)) / float(weights.sum()))
    return greatest


def _off(planes: Array) -> Array:
    return planes - [0.0, 0.0, 0.0, _ROUNDING_MM]


def _thickened(points: Array) -> Array:
    """Return the points moved to both sides along each direction in which they have no extent."""
    centre = points.mean(axis=0)
    _, extents, directions = np.linalg.svd(points - centre, full_matrices=True)
    extents = np.pad(extents, (0, 3 - len(extents)))
    for direction, extent in zip(directions, extents, strict=True):
        if extent <= max(_FLAT_MM, 1e-6 * extents[0]):
            points = np.vstack([points + _FLAT_MM * direction, points - _FLAT_MM * direction])
    return points
