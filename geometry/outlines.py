"""Plane outlines, mm, the polygons that enclose them, and the checks that shapes share.

A curved outline is enclosed by a polygon of its tangents, so the facets lie outside. The excess of a polygon is the
greatest distance of any of its points to the outline; since the distance to a convex outline is a convex function,
a vertex has it.
"""

import math
from collections.abc import Sequence
from dataclasses import dataclass
from numbers import Real
from typing import Final, Protocol, cast

import numpy as np
import shapely
from numpy.typing import NDArray

from geometry.errors import GeometryError

Array = NDArray[np.float64]
Flags = NDArray[np.bool_]
Point = tuple[float, float]

SMALLEST_MM: Final = 1e-3
LARGEST_MM: Final = 1e5
LARGEST_EXCESS_MM: Final = 100.0
MOST_VERTICES: Final = 2000
# Points on each quadrant of a superellipse, for either of two spacings, that its tangents are chosen from.
_FINENESS: Final = 1024


class Outline(Protocol):
    """A closed region of a plane."""

    def enclosing(self, max_excess_mm: float) -> tuple[shapely.Polygon, float]:
        """Return a polygon that contains the outline and its excess in mm, at most `max_excess_mm`.

        Raises GeometryError when that would take more than `MOST_VERTICES` vertices.
        """
        ...

    def contains(self, points: Array) -> Flags:
        """Tell for each of `points`, shape (n, 2), mm, whether the true outline, edge included, contains it."""
        ...

    def boundary(self, count: int) -> Array:
        """Return points of the true outline's outer edge, counter-clockwise, shape (m, 2), mm.

        Every corner is among them; a curved edge has about `count` points in a whole turn.
        """
        ...


@dataclass(frozen=True)
class PolygonOutline:
    """A polygon, concave allowed, with holes. Its points are in order, mm, the first not repeated at the end."""

    points: tuple[Point, ...]
    holes: tuple[tuple[Point, ...], ...] = ()

    def __post_init__(self) -> None:
        holes = sequence("holes", self.holes, 0, MOST_VERTICES // 3)
        object.__setattr__(self, "points", _ring("points", self.points))
        object.__setattr__(self, "holes", tuple(_ring(f"holes[{i}]", hole) for i, hole in enumerate(holes)))
        checked_polygon("points", self._polygon())

    def enclosing(self, max_excess_mm: float) -> tuple[shapely.Polygon, float]:
        """Return the polygon itself; its excess is 0."""
        checked_excess(max_excess_mm)
        return self._polygon(), 0.0

    def contains(self, points: Array) -> Flags:
        """Tell which of `points`, shape (n, 2), mm, lie in the polygon and in none of its holes."""
        inside: Flags = shapely.intersects_xy(self._polygon(), points[:, 0], points[:, 1])
        return inside

    def boundary(self, count: int) -> Array:  # noqa: ARG002 - a polygon needs no count
        """Return the outer vertices, shape (m, 2), mm."""
        return np.array(shapely.orient_polygons(self._polygon()).exterior.coords[:-1])

    def _polygon(self) -> shapely.Polygon:
        return shapely.Polygon(self.points, self.holes)


@dataclass(frozen=True)
class CircleOutline:
    """A disc."""

    radius_mm: float
    centre_mm: Point = (0.0, 0.0)

    def __post_init__(self) -> None:
        object.__setattr__(self, "radius_mm", length("radius_mm", self.radius_mm))
        object.__setattr__(self, "centre_mm", place("centre_mm", self.centre_mm, 2))

    def enclosing(self, max_excess_mm: float) -> tuple[shapely.Polygon, float]:
        """Return a regular polygon about the disc, as wide and as high as the disc, and its excess in mm."""
        sides, reach_mm, excess_mm = circumscribed(self.radius_mm, max_excess_mm)
        return shapely.Polygon(reach_mm * regular_polygon(sides) + self.centre_mm), excess_mm

    def contains(self, points: Array) -> Flags:
        """Tell which of `points`, shape (n, 2), mm, lie in the disc."""
        inside: Flags = np.hypot(*(points - self.centre_mm).T) <= self.radius_mm
        return inside

    def boundary(self, count: int) -> Array:
        """Return `count` points of the circle, shape (count, 2), mm."""
        return self.radius_mm * regular_polygon(count) + self.centre_mm


@dataclass(frozen=True)
class EllipseOutline:
    """A superellipse |u/a|^n + |v/b|^n <= 1: an ellipse for n = 2, nearer to its rectangle as n grows.

    `half_width_mm` is a, `half_height_mm` b and `exponent` n, 2 to 50.
    """

    half_width_mm: float
    half_height_mm: float
    centre_mm: Point = (0.0, 0.0)
    exponent: float = 2.0

    def __post_init__(self) -> None:
        object.__setattr__(self, "half_width_mm", length("half_width_mm", self.half_width_mm))
        object.__setattr__(self, "half_height_mm", length("half_height_mm", self.half_height_mm))
        object.__setattr__(self, "centre_mm", place("centre_mm", self.centre_mm, 2))
        object.__setattr__(self, "exponent", number("exponent", self.exponent, 2.0, 50.0))

    def enclosing(self, max_excess_mm: float) -> tuple[shapely.Polygon, float]:
        """Return a polygon of tangents, as wide and as high as the outline, and an upper bound of its excess in mm.

        The tangents are nearer to each other where the curve bends, so that few are needed. With radius of curvature
        r and a turn t between two tangents, their meeting point is about r t^2 / 8 away from the curve; equal steps
        of the integral of sqrt(r) dt therefore give equal excess, and sqrt(r) dt is sqrt(ds dt) for an arc of
        length ds.
        """
        points, normals = self._quadrant()
        turns = np.diff(np.arctan2(normals[:, 1], normals[:, 0]))
        arcs = np.hypot(*np.diff(points, axis=0).T)
        progress = np.concatenate([[0.0], np.cumsum(np.sqrt(arcs * np.maximum(turns, 0.0)))])
        inscribed = shapely.LineString(points)
        # The rule holds for fine steps only: coarse ones may do with fewer, so the search starts below it.
        first = max(1, math.floor(0.75 * progress[-1] / math.sqrt(8.0 * checked_excess(max_excess_mm))))
        for count in range(first, MOST_VERTICES // 4 + 1):
            chosen = np.unique(np.searchsorted(progress, np.linspace(0.0, progress[-1], count + 1)))
            corners = _meetings(points[chosen], normals[chosen])
            # The inscribed line is part of the outline, so that a distance to it is never less than the true one.
            excess_mm = float(shapely.distance(shapely.points(corners), inscribed).max())
            if excess_mm <= max_excess_mm:
                return shapely.Polygon(_mirrored(corners) + self.centre_mm), excess_mm
        raise too_fine(max_excess_mm, MOST_VERTICES)

    def contains(self, points: Array) -> Flags:
        """Tell which of `points`, shape (n, 2), mm, lie in the superellipse."""
        scaled = np.abs(points - self.centre_mm) / (self.half_width_mm, self.half_height_mm)
        # Far points are brought near, still outside, so that the powers cannot overflow.
        inside: Flags = np.sum(np.minimum(scaled, 2.0) ** self.exponent, axis=1) <= 1.0
        return inside

    def boundary(self, count: int) -> Array:
        """Return about `count` points of the curve, shape (m, 2), mm."""
        points, _ = self._quadrant(max(1, count // 8))
        return _distinct(_mirrored(points)) + self.centre_mm

    def _quadrant(self, fineness: int = _FINENESS) -> tuple[Array, Array]:
        """Return points from (a, 0) to (0, b) about the centre and their outward unit normals, shape (m, 2) each.

        Even steps of the polar angle keep the flat sides dense, even steps of the curve's own parameter the bends.
        """
        step = math.pi / 2.0 / fineness
        parameter = step * np.arange(1, fineness)
        power = 2.0 / self.exponent
        bends = np.arctan2(np.sin(parameter) ** power, np.cos(parameter) ** power)
        polar = np.unique(np.concatenate([bends, step * (np.arange(fineness) + 0.5)]))
        rays = np.vstack([[1.0, 0.0], np.column_stack([np.cos(polar), np.sin(polar)]), [0.0, 1.0]])
        unit = rays / np.sum(rays**self.exponent, axis=1, keepdims=True) ** (1.0 / self.exponent)
        half_sizes = np.array([self.half_width_mm, self.half_height_mm])
        normals = unit ** (self.exponent - 1.0) / half_sizes
        return unit * half_sizes, normals / np.hypot(normals[:, :1], normals[:, 1:])


@dataclass(frozen=True)
class RoundedRectangle:
    """A rectangle whose corners are quarter circles of `radius_mm`, 0 to half of the shorter side."""

    width_mm: float
    height_mm: float
    radius_mm: float
    centre_mm: Point = (0.0, 0.0)

    def __post_init__(self) -> None:
        object.__setattr__(self, "width_mm", length("width_mm", self.width_mm))
        object.__setattr__(self, "height_mm", length("height_mm", self.height_mm))
        largest = min(self.width_mm, self.height_mm) / 2.0
        object.__setattr__(self, "radius_mm", number("radius_mm", self.radius_mm, 0.0, largest))
        object.__setattr__(self, "centre_mm", place("centre_mm", self.centre_mm, 2))

    def enclosing(self, max_excess_mm: float) -> tuple[shapely.Polygon, float]:
        """Return a polygon with the same straight sides, regular about the corners, and its excess in mm."""
        checked_excess(max_excess_mm)
        sides, reach_mm, excess_mm = 4, 0.0, 0.0
        if self.radius_mm > 0.0:
            sides, reach_mm, excess_mm = circumscribed(self.radius_mm, max_excess_mm)
        return shapely.Polygon(self._spread(reach_mm * regular_polygon(sides)[: sides // 4])), excess_mm

    def contains(self, points: Array) -> Flags:
        """Tell which of `points`, shape (n, 2), mm, lie in the rounded rectangle."""
        beyond = np.maximum(np.abs(points - self.centre_mm) - self._core(), 0.0)
        inside: Flags = np.hypot(*beyond.T) <= self.radius_mm
        return inside

    def boundary(self, count: int) -> Array:
        """Return points of the edge, about `count` of them on the corners, shape (m, 2), mm."""
        angle = np.linspace(0.0, math.pi / 2, max(2, count // 4 + 1))
        return _distinct(self._spread(self.radius_mm * np.column_stack([np.cos(angle), np.sin(angle)])))

    def _core(self) -> Array:
        """Return the half sizes of the rectangle of the corners' centres, shape (2,), mm."""
        return np.array([self.width_mm, self.height_mm]) / 2.0 - self.radius_mm

    def _spread(self, quadrant: Array) -> Array:
        return _mirrored(quadrant + self._core()) + self.centre_mm


def circumscribed(radius_mm: float, max_excess_mm: float) -> tuple[int, float, float]:
    """Return the number of sides, the vertices' radius and the excess, mm, of a regular polygon about a circle.

    The number is the least multiple of 4 that keeps the excess, so that the polygon is as wide and as high as the
    circle. Raises GeometryError when that is more than `MOST_VERTICES`.
    """
    # cos(half) = r / (r + excess), in the form that keeps its digits for small angles.
    ratio = checked_excess(max_excess_mm) / (2.0 * (radius_mm + max_excess_mm))
    half_turn = 2.0 * math.asin(math.sqrt(ratio))
    sides = 4 * math.ceil(math.pi / half_turn / 4.0)
    if sides > MOST_VERTICES:
        raise too_fine(max_excess_mm, MOST_VERTICES)
    reach_mm = radius_mm / math.cos(math.pi / sides)
    return sides, reach_mm, reach_mm - radius_mm


def regular_polygon(sides: int) -> Array:
    """Return the vertices, on the unit circle, of a regular polygon with a side square to +u, shape (sides, 2)."""
    angle = (np.arange(sides) + 0.5) * (2.0 * math.pi / sides)
    return np.column_stack([np.cos(angle), np.sin(angle)])


def number(name: str, value: object, low: float, high: float) -> float:
    """Return `value` as a float; raise GeometryError unless it is a number from `low` to `high`."""
    if isinstance(value, bool) or not isinstance(value, Real) or not low <= float(value) <= high:
        raise GeometryError(f"{name} = {value!r:.80} is not allowed; allowed is a number from {low:g} to {high:g}")
    return float(value)


def length(name: str, value_mm: object) -> float:
    """Return a size as a float; raise GeometryError outside of `SMALLEST_MM` to `LARGEST_MM`."""
    return number(name, value_mm, SMALLEST_MM, LARGEST_MM)


def sequence(name: str, value: object, least: int, most: int) -> Sequence[object]:
    """Return `value`, a tuple, list or array of `least` to `most` things; raise GeometryError if it is not."""
    if not isinstance(value, tuple | list | np.ndarray) or not least <= len(value) <= most:
        found = f"{len(value)} things" if isinstance(value, tuple | list | np.ndarray) else repr(value)[:80]
        wanted = f"{least}" if least == most else f"{least} to {most}"
        raise GeometryError(f"{name} = {found} is not allowed; allowed is a sequence of {wanted}")
    return cast("Sequence[object]", value)


def place(name: str, value_mm: object, count: int) -> tuple[float, ...]:
    """Return `count` coordinates as floats; raise GeometryError outside of ±`LARGEST_MM`."""
    values = sequence(name, value_mm, count, count)
    return tuple(number(f"{name}[{i}]", value, -LARGEST_MM, LARGEST_MM) for i, value in enumerate(values))


def checked_excess(max_excess_mm: object) -> float:
    """Return the greatest excess allowed, mm; raise GeometryError outside of `SMALLEST_MM` to `LARGEST_EXCESS_MM`."""
    return number("max_excess_mm", max_excess_mm, SMALLEST_MM, LARGEST_EXCESS_MM)


def checked_polygon(name: str, polygon: shapely.Polygon) -> shapely.Polygon:
    """Return `polygon`; raise GeometryError if it crosses itself, has next to no area or too many vertices."""
    vertices = shapely.get_num_coordinates(polygon) - 1 - len(polygon.interiors)
    if vertices > MOST_VERTICES:
        raise GeometryError(f"{name} has {vertices} vertices; allowed are at most {MOST_VERTICES}, holes included")
    if not polygon.is_valid:
        reason = shapely.is_valid_reason(polygon)
        raise GeometryError(f"{name} is no simple polygon ({reason}); allowed are sides that do not cross or overlap")
    if not polygon.area >= SMALLEST_MM**2:
        raise GeometryError(f"{name} has an area of {polygon.area:g} mm²; allowed is {SMALLEST_MM**2:g} mm² or more")
    return polygon


def too_fine(max_excess_mm: float, most: int) -> GeometryError:
    """Return the error for an excess so small that a curve would need more than `most` facets in a turn."""
    return GeometryError(
        f"max_excess_mm = {max_excess_mm:g} is too small for this size; allowed is what {most} facets in a turn keep"
    )


def _ring(name: str, value: object) -> tuple[Point, ...]:
    points = [place(f"{name}[{i}]", p, 2) for i, p in enumerate(sequence(name, value, 3, MOST_VERTICES))]
    return cast("tuple[Point, ...]", tuple(points))


def _meetings(points: Array, normals: Array) -> Array:
    """Return where each tangent, by a point and its normal, meets the next one, shape (m - 1, 2)."""
    offsets = np.sum(points * normals, axis=1)
    (u, v), (u_next, v_next) = normals[:-1].T, normals[1:].T
    turn = u * v_next - v * u_next
    crossing = [offsets[:-1] * v_next - offsets[1:] * v, u * offsets[1:] - u_next * offsets[:-1]]
    return np.column_stack([crossing[0] / turn, crossing[1] / turn])


def _mirrored(quadrant: Array) -> Array:
    """Return the closed turn, counter-clockwise, of which `quadrant` is the first quarter, shape (4 m, 2)."""
    back = quadrant[::-1]
    return np.vstack([quadrant, back * (-1.0, 1.0), -quadrant, back * (1.0, -1.0)])


def _distinct(ring: Array) -> Array:
    """Return the closed `ring` without points that repeat the one before, shape (m, 2)."""
    return ring[np.any(ring != np.roll(ring, 1, axis=0), axis=1)]
