"""How near the other sides come to every place of the parts, over a turn, a path or the whole plane of angles.

Read at points of the parts' surfaces, close together where the sides come near: between two points a distance can be
less than at both, by at most half of how far they are apart. The clearance of a pose is the sweep's to tell.
"""

import math
from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

from geometry.errors import GeometryError
from geometry.machine import Axis
from geometry.near.display_mesh import display_mesh, edges_of, halved, lengths_mm, longest_of
from geometry.near.near_kernel import Found
from geometry.near.search import TOLERANCE_MM, Search, Share, nothing_found, prepare_near_kernel
from geometry.progress import Progress, Silent
from geometry.scene import Scene, ScenePart, Side
from geometry.spans import ANGLE_DEG

__all__ = [
    "TOLERANCE_MM",
    "Along",
    "Approaches",
    "GantryTurn",
    "Mark",
    "Over",
    "PartApproach",
    "WholePlane",
    "nearest_approaches",
    "prepare_near_kernel",
    "tightest_marks",
]

Array = NDArray[np.float64]
Indices = NDArray[np.int64]

# Longest edge of a triangle where the sides come near, unless asked otherwise, and of any triangle, mm.
EDGE_MM: Final = 60.0
COARSEST_MM: Final = 200.0
# Of an edge to the distance found at its ends, where they are not near.
EDGE_OF_DISTANCE: Final = 0.7
# Distances at the ends of an edge are alike when they differ by less than this share of its length.
ALIKE: Final = 0.1
# Times that edges are halved; each makes the longest shorter by half.
ROUNDS: Final = 8


@dataclass(frozen=True)
class GantryTurn:
    """The gantry's whole travel at one couch angle (unwrapped, deg)."""

    couch_deg: float


@dataclass(frozen=True)
class Along:
    """Straight lines through points of the plane, each (gantry, couch), unwrapped, deg: a field, or moves between."""

    points: tuple[tuple[float, float], ...]


@dataclass(frozen=True)
class WholePlane:
    """The travel of both axes."""


Over = GantryTurn | Along | WholePlane


@dataclass(frozen=True, eq=False)
class PartApproach:
    """How near the other sides come to the surface of a part.

    `points_mm` (n, 3) in the system of the part's motion and `triangles` (m, 3) draw it. Each (n,): `distance_mm`, 0
    in contact, infinite beyond the limit asked for, NaN where no valid distance was found or none can be reached;
    `gantry_deg` and `couch_deg` (unwrapped), the angles where the point is tightest, NaN where the distance says
    nothing. An angle that does not matter to the point stands where the search began.
    """

    part: ScenePart
    points_mm: Array
    triangles: Indices
    distance_mm: Array
    gantry_deg: Array
    couch_deg: Array


@dataclass(frozen=True, eq=False)
class Approaches:
    """The nearest approaches of a scene by part label. `max_mm`: the limit asked for."""

    scene: Scene
    over: Over
    max_mm: float
    parts: dict[str, PartApproach]


@dataclass(frozen=True, eq=False)
class Mark:
    """The tightest place of a part: `point_mm` (3,) in the system of its motion, and the angles (unwrapped, deg)."""

    part: ScenePart
    point_mm: Array
    distance_mm: float
    gantry_deg: float
    couch_deg: float


def nearest_approaches(
    scene: Scene,
    over: Over,
    max_mm: float = 400.0,
    edge_mm: float = EDGE_MM,
    progress: Progress | None = None,
    threads: int | None = None,
) -> Approaches:
    """Return how near the other sides come to every part of the gantry and of the couch's side, to within 1 mm.

    Joined pairs do not count. `max_mm` is the farthest that is asked for, `edge_mm` the longest edge of the triangles.
    GeometryError for angles outside the travel, Cancelled. Where the stages are out of their travel nothing can be
    reached, and every distance is NaN.
    """
    progress = progress or Silent()
    if not 0.0 < max_mm < math.inf:
        raise GeometryError(f"max_mm = {max_mm:g}; allowed: above 0")
    cells: Array = np.radians(_cells_deg(scene, over))
    shown = [k for k, part in enumerate(scene.parts) if part.side is not Side.ROOM]
    mesh = _Mesh.of(scene, shown, max(COARSEST_MM, edge_mm))
    found = nothing_found(len(mesh.points), max_mm)
    if scene.no_travel:
        found.distance[:] = np.nan
    else:
        search = Search(scene, cells, isinstance(over, Along), threads)
        search.run(mesh.points, mesh.of_part, found, 0, Share(progress, 0.0, 0.5))
        for done in range(1, ROUNDS):
            fresh = mesh.refined(found.distance, max_mm, edge_mm)
            if fresh is mesh:
                break
            start, mesh = len(mesh.points), fresh
            found = Found(
                *(np.append(*both) for both in zip(found, nothing_found(len(mesh.points) - start, max_mm), strict=True))
            )
            search.run(mesh.points, mesh.of_part, found, start, Share(progress, 1.0 - 0.5**done, 0.5 ** (done + 1)))
    nothing = found.distance == max_mm
    found.distance[nothing] = np.inf
    found.gantry[nothing] = np.nan
    found.couch[nothing] = np.nan
    parts = [mesh.part_approach(scene.parts[k], k, found) for k in shown]
    return Approaches(scene, over, max_mm, {part.part.label: part for part in parts})


def tightest_marks(approaches: Approaches, count: int) -> tuple[Mark, ...]:
    """Return the tightest place of each part that has a distance, the tightest parts first, `count` of them at most."""
    marks = []
    for approach in approaches.parts.values():
        known = np.flatnonzero(np.isfinite(approach.distance_mm))
        if len(known) == 0:
            continue
        at = known[np.argmin(approach.distance_mm[known])]
        marks.append(
            Mark(
                approach.part,
                approach.points_mm[at],
                float(approach.distance_mm[at]),
                float(approach.gantry_deg[at]),
                float(approach.couch_deg[at]),
            )
        )
    return tuple(sorted(marks, key=lambda mark: mark.distance_mm)[:count])


@dataclass(frozen=True, eq=False)
class _Mesh:
    """Points (n, 3) of all parts shown, in the systems of their motion; `of_part` (n,) indexes `scene.parts`."""

    points: Array
    triangles: Indices
    of_part: NDArray[np.int32]

    @classmethod
    def of(cls, scene: Scene, shown: list[int], max_edge_mm: float) -> "_Mesh":
        """Return the meshes of some parts as one."""
        meshes = [display_mesh(scene.parts[k], max_edge_mm) for k in shown]
        sizes = [len(points) for points, _ in meshes]
        starts = np.cumsum([0, *sizes])
        return cls(
            np.concatenate([points for points, _ in meshes]),
            np.concatenate([triangles + start for (_, triangles), start in zip(meshes, starts[:-1], strict=True)]),
            np.repeat(shown, sizes).astype(np.int32),
        )

    def refined(self, distance_mm: Array, max_mm: float, edge_mm: float) -> "_Mesh":
        """Return the mesh with those edges halved that are long for the distances at their ends; itself if none is."""
        edges, of_triangle = edges_of(self.triangles)
        at_ends = np.nan_to_num(distance_mm[edges], nan=0.0)
        nearer, farther = at_ends.min(axis=1), at_ends.max(axis=1)
        coarsest = max(COARSEST_MM, edge_mm)
        allowed = np.clip(EDGE_OF_DISTANCE * np.minimum(nearer, max_mm), edge_mm, coarsest)
        length = lengths_mm(self.points, edges)
        # Where both ends say much the same, and most of all within what touches, there is less to be seen.
        allowed = np.where(farther - nearer < ALIKE * length, np.minimum(2.0 * allowed, coarsest), allowed)
        allowed[farther == 0.0] = coarsest
        long = longest_of(length, of_triangle, allowed)
        if not long.any():
            return self
        points, triangles = halved(self.points, self.triangles, edges[long], of_triangle, long)
        return _Mesh(points, triangles, np.append(self.of_part, self.of_part[edges[long, 0]]))

    def part_approach(self, part: ScenePart, index: int, found: Found) -> PartApproach:
        """Return what was found of one part."""
        own = np.flatnonzero(self.of_part == index)
        renumbered = np.full(len(self.points), -1)
        renumbered[own] = np.arange(len(own))
        triangles = renumbered[self.triangles[self.of_part[self.triangles[:, 0]] == index]]
        angles = np.degrees(found.gantry[own]), np.degrees(found.couch[own])
        return PartApproach(part, self.points[own], triangles, found.distance[own], *angles)


def _cells_deg(scene: Scene, over: Over) -> Array:
    """Return the cells to search, (n, 4): middles and half-widths of gantry and couch. GeometryError off the travel."""
    room = scene.setup.room
    gantry, couch = room.gantry, room.couch.turntable
    if isinstance(over, Along):
        if not over.points:
            raise GeometryError("a path of no points; allowed: 1 or more")
        line = np.array([(_within(gantry, "gantry", g), _within(couch, "couch", c)) for g, c in over.points])
        ends = line[:-1] if len(line) > 1 else line, line[1:] if len(line) > 1 else line
        return np.concatenate([(ends[0] + ends[1]) / 2.0, (ends[1] - ends[0]) / 2.0], axis=1)
    at_deg = _within(couch, "couch", over.couch_deg) if isinstance(over, GantryTurn) else None
    low, high = (couch.low, couch.high) if at_deg is None else (at_deg, at_deg)
    return np.array(
        [[(gantry.low + gantry.high) / 2.0, (low + high) / 2.0, (gantry.high - gantry.low) / 2.0, (high - low) / 2.0]]
    )


def _within(axis: Axis, name: str, angle_deg: float) -> float:
    """Return the angle on the travel. GeometryError if it is not on it."""
    if not axis.low - ANGLE_DEG <= angle_deg <= axis.high + ANGLE_DEG:
        raise GeometryError(f"{name}_deg = {angle_deg:g} is outside the travel {axis.low:g} to {axis.high:g}")
    return min(max(angle_deg, axis.low), axis.high)
