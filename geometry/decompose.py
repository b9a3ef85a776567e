"""Convex pieces: what they are, and how concave polygons and turning parts become convex.

A piece is a float64 array, shape (n, 3), mm: the vertices of its convex hull and no other points.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np
import shapely
from numpy.typing import NDArray

from geometry.errors import GeometryError
from geometry.outlines import LARGEST_MM, checked_polygon, circumscribed, regular_polygon

Array = NDArray[np.float64]
Loop = list[int]
Edge = tuple[int, int]

# Rounding: sines of turns that count as straight, areas that count as equal (relative), lengths that count as none.
_STRAIGHT: Final = 1e-12
_SAME_AREA: Final = 1e-9
_NOTHING_MM: Final = 1e-9


@dataclass(frozen=True, eq=False)
class Faceted:
    """Convex pieces whose union contains a solid.

    `excess_mm` is the greatest distance of any point of a piece to the true solid, or an upper bound of it.
    """

    pieces: tuple[Array, ...]
    excess_mm: float


def convex_parts(polygon: shapely.Polygon) -> tuple[Array, ...]:
    """Return few convex polygons whose union is `polygon`, each counter-clockwise, shape (n, 2), mm.

    Neighbours share their edges' ends exactly, so there are no gaps. Raises GeometryError for a polygon that crosses
    itself, is empty or has more than `outlines.MOST_VERTICES` vertices.
    """
    checked_polygon("polygon", polygon)
    whole = corners(np.array(polygon.exterior.coords))
    if not polygon.interiors and _area(whole) <= polygon.area * (1.0 + _STRAIGHT):
        return (whole,)
    points, triangles = _triangles(polygon)
    # The hull of a loop contains it, so that corners taken for straight cannot lose anything.
    hulls = [corners(points[loop]) for loop in _merged(points, triangles)]
    # A sliver without area by rounding lies along its neighbours' edges and is part of them.
    parts = tuple(hull for hull in hulls if len(hull))
    if abs(sum(_area(part) for part in parts) - polygon.area) > _SAME_AREA * polygon.area:
        raise GeometryError("polygon cannot be cut into convex parts of the same area; allowed are cleaner vertices")
    return parts


def revolved(pieces: Sequence[Array], max_excess_mm: float) -> Faceted:
    """Return convex solids of revolution about z, faceted, that contain all that `pieces` sweep in a whole turn.

    Each solid is filled up to the axis, so that it is convex; what lies wholly inside another is left out. The
    excess, at most `max_excess_mm`, is that over these solids of revolution: the excess that the pieces have
    themselves comes on top. Raises GeometryError for a piece that is not of shape (n, 3) and finite.
    """
    profiles = _without_covered([_profile(piece) for piece in pieces])
    faceted = [_turned(profile, max_excess_mm) for profile in profiles]
    return Faceted(tuple(solid for solid, _ in faceted), max((excess_mm for _, excess_mm in faceted), default=0.0))


def corners(points: Array) -> Array:
    """Return the corners of the convex hull of `points`, counter-clockwise; shape (m, 2), (0, 2) if it has no area.

    Corners that are straight up to rounding are left out.
    """
    hull = shapely.convex_hull(shapely.MultiPoint(points))
    if not isinstance(hull, shapely.Polygon):
        return np.empty((0, 2))
    ring = np.array(shapely.orient_polygons(hull).exterior.coords[:-1])
    while len(ring) > 2:
        bent = _bends(np.roll(ring, 1, axis=0), ring, np.roll(ring, -1, axis=0)) > _STRAIGHT
        if bent.all():
            return ring
        # One at a time: the neighbours of a corner that is left out bend differently without it.
        ring = np.delete(ring, int(np.argmin(bent)), axis=0)
    return np.empty((0, 2))


def _area(ring: Array) -> float:
    """Return the area of a counter-clockwise ring, shape (n, 2), mm²."""
    x, y = (ring - ring[:1]).T
    return float(np.sum(x * np.roll(y, -1) - y * np.roll(x, -1))) / 2.0


def _bends(before: Array, at: Array, after: Array) -> Array:
    """Return the sine of the left turn at each corner; -1 where the path goes straight back; shape (n,)."""
    arriving, leaving = at - before, after - at
    lengths = np.hypot(*arriving.T) * np.hypot(*leaving.T)
    cross = arriving[:, 0] * leaving[:, 1] - arriving[:, 1] * leaving[:, 0]
    back = (np.sum(arriving * leaving, axis=1) < 0.0) & (np.abs(cross) <= _STRAIGHT * lengths)
    return np.where(back, -1.0, cross / np.where(lengths > 0.0, lengths, 1.0))


def _triangles(polygon: shapely.Polygon) -> tuple[Array, list[Loop]]:
    """Return the polygon's vertices, shape (n, 2), and triangles of them, each a counter-clockwise loop of indices."""
    cut = shapely.orient_polygons(shapely.constrained_delaunay_triangles(polygon))
    rings = np.array([triangle.exterior.coords[:3] for triangle in cut.geoms]).reshape(-1, 2)
    points, index = np.unique(rings, axis=0, return_inverse=True)
    return points, index.reshape(-1, 3).tolist()


def _merged(points: Array, triangles: list[Loop]) -> list[Loop]:
    """Return the loops that are left when every diagonal that is not needed for convexity is taken out.

    The method of Hertel and Mehlhorn (1983): at most four times the least possible number of parts. The longest
    diagonals go first, which leaves stouter parts.
    """
    loops = dict(enumerate(triangles))
    owner = {edge: key for key, loop in loops.items() for edge in _edges(loop)}
    diagonals = [edge for edge in owner if edge[0] < edge[1] and edge[::-1] in owner]
    lengths = {edge: float(np.hypot(*(points[edge[1]] - points[edge[0]]))) for edge in diagonals}
    for edge in sorted(diagonals, key=lambda diagonal: -lengths[diagonal]):
        keep, drop = owner[edge], owner[edge[::-1]]
        joined = _joined(points, loops[keep], loops[drop], edge)
        if joined is not None:
            del loops[drop]
            loops[keep] = joined
            owner.update(dict.fromkeys(_edges(joined), keep))
    return list(loops.values())


def _joined(points: Array, first: Loop, second: Loop, edge: Edge) -> Loop | None:
    """Return the union of two convex loops, `first` with `edge` and `second` with its reverse; None if not convex."""
    start, end = edge
    at, there = first.index(end), second.index(start)
    round_first = first[at:] + first[:at]
    round_second = second[there:] + second[:there]
    # From `end` round the first to `start`, then round the second back to just before `end`.
    union = round_first + round_second[1:-1]
    seams = [0, len(round_first) - 1]
    around = [[union[i - 1], union[i], union[(i + 1) % len(union)]] for i in seams]
    before, here, after = points[np.array(around).T]
    return union if bool(np.all(_bends(before, here, after) >= -_STRAIGHT)) else None


def _edges(loop: Loop) -> list[Edge]:
    return list(zip(loop, loop[1:] + loop[:1], strict=True))


def _profile(piece: Array) -> Array:
    """Return the convex profile (r, z) that a piece fills up to the axis in a whole turn about z, shape (n, 2), mm.

    The distance to the axis is a convex function, so that no point of the piece lies beyond the hull of its
    vertices' (r, z) and their feet on the axis.
    """
    if piece.ndim != 2 or piece.shape[1] != 3 or not np.all(np.abs(piece) <= LARGEST_MM):
        raise GeometryError(f"piece of shape {piece.shape} is not allowed; allowed is (n, 3) within ±{LARGEST_MM:g} mm")
    radii, heights = np.hypot(piece[:, 0], piece[:, 1]), piece[:, 2]
    outer = np.column_stack([np.where(radii > _NOTHING_MM, radii, 0.0), heights])
    profile = corners(np.vstack([outer, np.column_stack([np.zeros_like(heights), heights])]))
    if not len(profile):
        raise GeometryError("piece is flat or on the axis; allowed is a piece with a volume")
    return profile


def _without_covered(profiles: list[Array]) -> list[Array]:
    """Return the profiles that do not lie wholly in another one."""
    kept: list[tuple[Array, shapely.Polygon]] = []
    for profile in sorted(profiles, key=_area, reverse=True):
        vertices = shapely.points(profile)
        if not any(shapely.distance(vertices, larger).max() <= _NOTHING_MM for _, larger in kept):
            kept.append((profile, shapely.Polygon(profile)))
    return [profile for profile, _ in kept]


def _turned(profile: Array, max_excess_mm: float) -> tuple[Array, float]:
    """Return the piece, shape (n, 3), that encloses the solid of revolution of a convex profile, and its excess, mm.

    All rings have the same number of sides, side by side, so that each height's section is a polygon about its disc.
    """
    radii, heights = profile.T
    sides, reach_mm, excess_mm = circumscribed(float(radii.max()), max_excess_mm)
    turn = regular_polygon(sides) * (reach_mm / float(radii.max()))
    rims = [np.column_stack([radius * turn, np.full(sides, z)]) for radius, z in profile if radius > 0.0]
    tips = [[[0.0, 0.0, z]] for z in (heights.min(), heights.max()) if not np.any(radii[heights == z] > 0.0)]
    return np.vstack([*rims, *tips]), excess_mm
