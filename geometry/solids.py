"""Solids that rooms and patients are made of, and the convex pieces that contain them. mm throughout.

Every solid states the excess of its pieces: the greatest distance of any of their points to the true solid, or an
upper bound of it.
"""

import math
from dataclasses import dataclass
from itertools import pairwise
from typing import Final, Literal, Protocol, cast

import numpy as np
from numpy.typing import NDArray

from geometry.decompose import Faceted, convex_parts, corners
from geometry.errors import GeometryError
from geometry.frames import moved
from geometry.outlines import (
    LARGEST_MM,
    SMALLEST_MM,
    Outline,
    checked_excess,
    circumscribed,
    length,
    number,
    place,
    regular_polygon,
    sequence,
    too_fine,
)

__all__ = ["Box", "Cylinder", "Extrusion", "Faceted", "Frustum", "Group", "Loft", "Placed", "Ring", "Solid"]

Array = NDArray[np.float64]
Flags = NDArray[np.bool_]
Vector = tuple[float, float, float]
AxisName = Literal["x", "y", "z"]

MOST_SECTIONS: Final = 500
MOST_WEDGES: Final = 720
MOST_SOLIDS: Final = 2000
# Where an outline's two coordinates and the position along the axis go among x, y, z.
_COLUMNS: Final = {"x": [1, 2, 0], "y": [0, 2, 1], "z": [0, 1, 2]}
_SMALLEST_ARC_DEG: Final = 0.1
# Points in a turn that stand for a curved section where membership is asked for: within 5e-5 of its half width.
_FINE_TURN: Final = 720


class Solid(Protocol):
    """A closed region of space, whose numbers were checked when it was made (GeometryError)."""

    def faceted(self, max_excess_mm: float) -> Faceted:
        """Return convex pieces that contain the solid, and their excess.

        The excess of solids that the program makes itself is at most `max_excess_mm`; that of imported surfaces is
        stated only. Raises GeometryError when the excess asked for would take too many facets.
        """
        ...

    def contains(self, points: Array) -> Flags:
        """Tell for each of `points`, shape (n, 3), mm, whether the true solid, surface included, contains it."""
        ...


@dataclass(frozen=True)
class Box:
    """A box along the axes."""

    size_mm: Vector
    centre_mm: Vector = (0.0, 0.0, 0.0)

    def __post_init__(self) -> None:
        sizes = enumerate(sequence("size_mm", self.size_mm, 3, 3))
        object.__setattr__(self, "size_mm", tuple(length(f"size_mm[{i}]", size) for i, size in sizes))
        object.__setattr__(self, "centre_mm", place("centre_mm", self.centre_mm, 3))

    def faceted(self, max_excess_mm: float) -> Faceted:
        """Return the box itself; its excess is 0."""
        checked_excess(max_excess_mm)
        signs = np.array([[x, y, z] for x in (-0.5, 0.5) for y in (-0.5, 0.5) for z in (-0.5, 0.5)])
        return Faceted((signs * self.size_mm + self.centre_mm,), 0.0)

    def contains(self, points: Array) -> Flags:
        """Tell which of `points`, shape (n, 3), mm, lie in the box."""
        inside: Flags = np.all(np.abs(points - self.centre_mm) <= np.array(self.size_mm) / 2.0, axis=1)
        return inside


@dataclass(frozen=True)
class Cylinder:
    """A right circular cylinder between two points of its axis, ends flat."""

    radius_mm: float
    start_mm: Vector
    end_mm: Vector

    def __post_init__(self) -> None:
        object.__setattr__(self, "radius_mm", length("radius_mm", self.radius_mm))
        _set_ends(self)

    def faceted(self, max_excess_mm: float) -> Faceted:
        """Return one prism about the cylinder."""
        return _tapered(_AxisFrame(self.start_mm, self.end_mm), self.radius_mm, self.radius_mm, max_excess_mm)

    def contains(self, points: Array) -> Flags:
        """Tell which of `points`, shape (n, 3), mm, lie in the cylinder."""
        frame = _AxisFrame(self.start_mm, self.end_mm)
        across, along = frame.local(points)
        inside: Flags = frame.between_ends(along) & (np.hypot(*across.T) <= self.radius_mm)
        return inside


@dataclass(frozen=True)
class Frustum:
    """A right circular cone frustum between two points of its axis, ends flat; one radius may be 0 (a cone)."""

    start_radius_mm: float
    end_radius_mm: float
    start_mm: Vector
    end_mm: Vector

    def __post_init__(self) -> None:
        for name in ("start_radius_mm", "end_radius_mm"):
            value = number(name, getattr(self, name), 0.0, LARGEST_MM)
            object.__setattr__(self, name, value if value == 0.0 else length(name, value))
        if self.start_radius_mm == self.end_radius_mm == 0.0:
            raise GeometryError("start_radius_mm = end_radius_mm = 0 is not allowed; allowed is 0 for one of the two")
        _set_ends(self)

    def faceted(self, max_excess_mm: float) -> Faceted:
        """Return one piece about the frustum."""
        frame = _AxisFrame(self.start_mm, self.end_mm)
        return _tapered(frame, self.start_radius_mm, self.end_radius_mm, max_excess_mm)

    def contains(self, points: Array) -> Flags:
        """Tell which of `points`, shape (n, 3), mm, lie in the frustum."""
        frame = _AxisFrame(self.start_mm, self.end_mm)
        across, along = frame.local(points)
        radius = self.start_radius_mm + (self.end_radius_mm - self.start_radius_mm) * along / frame.length
        inside: Flags = frame.between_ends(along) & (np.hypot(*across.T) <= radius)
        return inside


@dataclass(frozen=True)
class Extrusion:
    """An outline drawn out along an axis from `low_mm` to `high_mm`.

    The outline's coordinates are the two other axes in alphabetical order: (y, z), (x, z) or (x, y).
    """

    outline: Outline
    axis: AxisName
    low_mm: float
    high_mm: float

    def __post_init__(self) -> None:
        _check_axis(self.axis)
        object.__setattr__(self, "low_mm", number("low_mm", self.low_mm, -LARGEST_MM, LARGEST_MM))
        object.__setattr__(self, "high_mm", number("high_mm", self.high_mm, self.low_mm + SMALLEST_MM, LARGEST_MM))

    def faceted(self, max_excess_mm: float) -> Faceted:
        """Return a prism for each convex part of the outline."""
        polygon, excess_mm = self.outline.enclosing(max_excess_mm)
        ends = (self.low_mm, self.high_mm)
        prisms = [np.vstack([_spread(self.axis, part, end) for end in ends]) for part in convex_parts(polygon)]
        return Faceted(tuple(prisms), excess_mm)

    def contains(self, points: Array) -> Flags:
        """Tell which of `points`, shape (n, 3), mm, lie in the extrusion."""
        u, v, along = points[:, _COLUMNS[self.axis]].T
        inside: Flags = (
            self.outline.contains(np.column_stack([u, v])) & (along >= self.low_mm) & (along <= self.high_mm)
        )
        return inside


@dataclass(frozen=True)
class Loft:
    """Convex outlines at rising positions along an axis; between neighbours the solid is their convex hull.

    That is, a section between two outlines is their Minkowski sum with linear weights. The outlines' coordinates are
    those of `Extrusion`.
    """

    sections: tuple[tuple[float, Outline], ...]
    axis: AxisName

    def __post_init__(self) -> None:
        _check_axis(self.axis)
        sections: list[tuple[float, Outline]] = []
        lowest = -LARGEST_MM
        for i, section in enumerate(sequence("sections", self.sections, 2, MOST_SECTIONS)):
            position, outline = sequence(f"sections[{i}]", section, 2, 2)
            position_mm = number(f"position of sections[{i}]", position, lowest, LARGEST_MM)
            sections.append((position_mm, _convex(f"outline of sections[{i}]", cast("Outline", outline))))
            lowest = position_mm + SMALLEST_MM
        object.__setattr__(self, "sections", tuple(sections))

    def faceted(self, max_excess_mm: float) -> Faceted:
        """Return a piece for each pair of neighbouring sections: the hull of the polygons about them.

        A point of such a hull lies on a line between points of the two polygons. Each has a point of its outline
        within its excess, and the line between these two belongs to the solid; so the hull's excess is at most the
        greater of the two.
        """
        rims, excesses_mm = [], []
        for position_mm, outline in self.sections:
            polygon, excess_mm = outline.enclosing(max_excess_mm)
            rims.append(_spread(self.axis, corners(np.array(polygon.exterior.coords)), position_mm))
            excesses_mm.append(excess_mm)
        return Faceted(tuple(np.vstack(pair) for pair in pairwise(rims)), max(excesses_mm))

    def contains(self, points: Array) -> Flags:
        """Tell which of `points`, shape (n, 3), mm, lie in the loft.

        Curved outlines count with inscribed polygons, so that points within 5e-5 of a half width of the surface may be
        taken for outside.
        """
        # Imported here, as it takes longer than the program's start should.
        from scipy.spatial import ConvexHull  # noqa: PLC0415

        rims = [_spread(self.axis, outline.boundary(_FINE_TURN), position) for position, outline in self.sections]
        inside = np.zeros(len(points), dtype=np.bool_)
        for pair in pairwise(rims):
            planes = ConvexHull(np.vstack(pair)).equations
            inside |= np.all(points @ planes[:, :3].T + planes[:, 3] <= SMALLEST_MM * 1e-6, axis=1)
        return inside


@dataclass(frozen=True)
class Ring:
    """A pipe between two points of its axis, whole (`arc_deg` None) or the part of it within an arc.

    The arc runs from the first angle to the second, at most 360 deg further, by the right hand about the direction
    from start to end. Angle 0 points along +x as nearly as a line square to the axis can, along +y where the axis
    lies within 30 deg of x. (Along +y: 0 is +x and 90 is -z.)
    """

    inner_radius_mm: float
    outer_radius_mm: float
    start_mm: Vector
    end_mm: Vector
    arc_deg: tuple[float, float] | None = None

    def __post_init__(self) -> None:
        inner_mm = number("inner_radius_mm", self.inner_radius_mm, 0.0, LARGEST_MM)
        if inner_mm < SMALLEST_MM:
            raise GeometryError(
                f"inner_radius_mm = {inner_mm:g} of a ring is not allowed; allowed is {SMALLEST_MM:g} or more "
                "(a solid without a hole is a cylinder)"
            )
        outer_mm = number("outer_radius_mm", self.outer_radius_mm, inner_mm + SMALLEST_MM, LARGEST_MM)
        object.__setattr__(self, "inner_radius_mm", inner_mm)
        object.__setattr__(self, "outer_radius_mm", outer_mm)
        _set_ends(self)
        if self.arc_deg is not None:
            first, last = sequence("arc_deg", self.arc_deg, 2, 2)
            start = number("arc_deg[0]", first, -360.0, 360.0)
            end = number("arc_deg[1]", last, start + _SMALLEST_ARC_DEG, start + 360.0)
            object.__setattr__(self, "arc_deg", (start, end))

    def faceted(self, max_excess_mm: float) -> Faceted:
        """Return wedges side by side: chords inside, tangents outside, flat along the radii that part them.

        A chord lies nearer to the axis than the bore by r (1 - cos(half)) at its middle, which sets how many wedges
        there are; a tangent polygon's vertices lie r / cos(half) from the axis.
        """
        first, extent = self._arc()
        inner_mm, outer_mm = self.inner_radius_mm, self.outer_radius_mm
        # Half of a wedge: cos(half) = 1 - excess / r, and no more than 45 deg so that wedges stay stout.
        reach = min(math.sin(math.pi / 8.0) ** 2, checked_excess(max_excess_mm) / (2.0 * inner_mm))
        wedges = math.ceil(extent / (4.0 * math.asin(math.sqrt(reach))))
        least_sides, _, _ = circumscribed(outer_mm, max_excess_mm)
        if wedges > MOST_WEDGES:
            raise too_fine(max_excess_mm, MOST_WEDGES)
        wedge = extent / wedges
        facets = math.ceil(wedge / (2.0 * math.pi / least_sides))
        rim_mm = outer_mm / math.cos(wedge / facets / 2.0)
        excess_mm = max(inner_mm * (1.0 - math.cos(wedge / 2.0)), rim_mm - outer_mm)
        frame = _AxisFrame(self.start_mm, self.end_mm)
        # All angles at once, so that neighbours have the very same vertices on the radius between them.
        angles = first + np.linspace(0.0, extent, wedges * facets + 1)
        directions = np.column_stack([np.cos(angles), np.sin(angles)])
        if self.arc_deg is None:
            directions[-1] = directions[0]
        sectors = [directions[i : i + facets + 1] for i in range(0, wedges * facets, facets)]
        outlines = [np.vstack([inner_mm * sector[[0, -1]], rim_mm * sector]) for sector in sectors]
        return Faceted(tuple(frame.drawn_out(outline, outline) for outline in outlines), excess_mm)

    def contains(self, points: Array) -> Flags:
        """Tell which of `points`, shape (n, 3), mm, lie in the ring."""
        frame = _AxisFrame(self.start_mm, self.end_mm)
        across, along = frame.local(points)
        radius = np.hypot(*across.T)
        first, extent = self._arc()
        in_arc = np.mod(np.arctan2(across[:, 1], across[:, 0]) - first, 2.0 * math.pi) <= extent
        in_wall = (radius >= self.inner_radius_mm) & (radius <= self.outer_radius_mm)
        inside: Flags = frame.between_ends(along) & in_wall & in_arc
        return inside

    def _arc(self) -> tuple[float, float]:
        """Return where the arc begins and how far it goes, radians."""
        first, last = self.arc_deg or (0.0, 360.0)
        return math.radians(first), math.radians(last - first)


@dataclass(frozen=True, eq=False)
class Placed:
    """A solid moved by a rigid homogeneous matrix, shape (4, 4): p_mother = matrix @ p_solid."""

    solid: Solid
    matrix: Array

    def __post_init__(self) -> None:
        matrix = np.array(self.matrix, dtype=np.float64)
        if matrix.shape != (4, 4) or not np.all(np.abs(matrix) <= LARGEST_MM):
            raise GeometryError(
                f"matrix of shape {matrix.shape} is not allowed; allowed is (4, 4), numbers within ±{LARGEST_MM:g}"
            )
        turn = matrix[:3, :3]
        rigid = np.allclose(turn.T @ turn, np.eye(3), rtol=0.0, atol=1e-9) and np.linalg.det(turn) > 0.0
        if not rigid or np.any(matrix[3] != (0.0, 0.0, 0.0, 1.0)):
            raise GeometryError(f"matrix = {matrix.tolist()} is not allowed; allowed is a turn and a shift, no mirror")
        matrix.setflags(write=False)
        object.__setattr__(self, "matrix", matrix)

    def faceted(self, max_excess_mm: float) -> Faceted:
        """Return the solid's pieces, moved."""
        faceted = self.solid.faceted(max_excess_mm)
        return Faceted(tuple(moved(self.matrix, piece) for piece in faceted.pieces), faceted.excess_mm)

    def contains(self, points: Array) -> Flags:
        """Tell which of `points`, shape (n, 3), mm, lie in the moved solid."""
        return self.solid.contains((points - self.matrix[:3, 3]) @ self.matrix[:3, :3])


@dataclass(frozen=True)
class Group:
    """The union of solids."""

    solids: tuple[Solid, ...]

    def __post_init__(self) -> None:
        object.__setattr__(self, "solids", tuple(sequence("solids", self.solids, 1, MOST_SOLIDS)))

    def faceted(self, max_excess_mm: float) -> Faceted:
        """Return all pieces of all solids, and the greatest of their excesses."""
        every = [solid.faceted(max_excess_mm) for solid in self.solids]
        return Faceted(tuple(piece for one in every for piece in one.pieces), max(one.excess_mm for one in every))

    def contains(self, points: Array) -> Flags:
        """Tell which of `points`, shape (n, 3), mm, lie in any of the solids."""
        inside: Flags = np.any([solid.contains(points) for solid in self.solids], axis=0)
        return inside


class _AxisFrame:
    """Coordinates across and along an axis between two points; `Ring` tells how the directions across are chosen."""

    def __init__(self, start_mm: Vector, end_mm: Vector) -> None:
        self.start = np.array(start_mm)
        line = np.array(end_mm) - self.start
        self.length = float(np.linalg.norm(line))
        direction = line / self.length
        near_x = abs(direction[0]) > math.cos(math.radians(30.0))
        wanted = np.array([0.0, 1.0, 0.0] if near_x else [1.0, 0.0, 0.0])
        first = wanted - (wanted @ direction) * direction
        first /= np.linalg.norm(first)
        # Rows: the two directions across and the one along, right-handed.
        self.rows = np.vstack([first, np.cross(direction, first), direction])

    def local(self, points: Array) -> tuple[Array, Array]:
        """Return coordinates across, shape (n, 2), and along from the start, shape (n,), mm."""
        turned = (points - self.start) @ self.rows.T
        return turned[:, :2], turned[:, 2]

    def between_ends(self, along: Array) -> Flags:
        """Tell which positions along the axis, mm, lie between its ends."""
        inside: Flags = (along >= 0.0) & (along <= self.length)
        return inside

    def drawn_out(self, at_start: Array, at_end: Array) -> Array:
        """Return the points of two outlines across the axis, shape (n, 2) each, one at either end, shape (m, 3)."""
        ends = [np.column_stack([at_start, np.zeros(len(at_start))])]
        ends.append(np.column_stack([at_end, np.full(len(at_end), self.length)]))
        points: Array = np.vstack(ends) @ self.rows + self.start
        return points


def _tapered(frame: _AxisFrame, start_radius_mm: float, end_radius_mm: float, max_excess_mm: float) -> Faceted:
    """Return the piece about a cylinder, frustum or cone: regular polygons about both ends, side by side.

    Every section is such a polygon about its circle, so that the excess is greatest at the greater end, where it is
    that of the polygon exactly.
    """
    greatest = max(start_radius_mm, end_radius_mm)
    sides, reach_mm, excess_mm = circumscribed(greatest, max_excess_mm)
    turn = regular_polygon(sides) * (reach_mm / greatest)
    start, end = (turn * radius if radius > 0.0 else np.zeros((1, 2)) for radius in (start_radius_mm, end_radius_mm))
    return Faceted((frame.drawn_out(start, end),), excess_mm)


def _spread(axis: AxisName, points: Array, position_mm: float) -> Array:
    """Return points of an outline, shape (n, 2), at a position along an axis as points of space, shape (n, 3), mm."""
    spread = np.empty((len(points), 3))
    spread[:, _COLUMNS[axis]] = np.column_stack([points, np.full(len(points), position_mm)])
    return spread


def _check_axis(axis: object) -> None:
    if not isinstance(axis, str) or axis not in _COLUMNS:
        raise GeometryError(f"axis = {axis!r:.80} is not allowed; allowed is 'x', 'y' or 'z'")


def _convex(name: str, outline: Outline) -> Outline:
    """Return `outline`; raise GeometryError unless it is convex."""
    polygon, _ = outline.enclosing(1.0)
    if polygon.area < polygon.convex_hull.area * (1.0 - 1e-12):
        raise GeometryError(f"{name} is concave or has holes; allowed is a convex outline (or an extrusion)")
    return outline


def _set_ends(solid: Cylinder | Frustum | Ring) -> None:
    """Normalise the ends of a solid with an axis; raise GeometryError if they are too near to each other."""
    for name in ("start_mm", "end_mm"):
        object.__setattr__(solid, name, place(name, getattr(solid, name), 3))
    apart = math.dist(solid.start_mm, solid.end_mm)
    if apart < SMALLEST_MM:
        raise GeometryError(
            f"start_mm and end_mm = {solid.end_mm} are {apart:g} mm apart; allowed is {SMALLEST_MM:g} mm or more"
        )
