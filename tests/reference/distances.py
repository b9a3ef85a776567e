"""Distances of convex pieces by a library: coal, or python-fcl where coal has no wheel (Windows).

Convex hulls, so that one solid inside another counts as contact: a triangle mesh has no inside. Boxes are hulls
too, since `fcl.Box` against `fcl.Box` is wrong when turned.
"""

from dataclasses import dataclass
from functools import cached_property
from typing import Any, Protocol

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import ConvexHull
from scipy.spatial.transform import Rotation

from geometry.setup import Setup
from tests.reference.poses import Standing, asked, required_mm, standing_parts

try:
    import coal
except ImportError:  # no wheel for Windows
    coal = None

Array = NDArray[np.float64]

# What counts as touching, and how near the libraries come, mm.
CONTACT_MM = 1e-7
TOLERANCE_MM = 1e-6


class Library(Protocol):
    """What is asked of a distance library."""

    def hull(self, points: Array) -> Any:  # noqa: ANN401 - the libraries' own objects
        """Return the convex hull of points, (n, 3), mm."""

    def distance_mm(self, first: Any, second: Any, turn_first: Rotation, turn_second: Rotation) -> float:  # noqa: ANN401
        """Return the distance of two hulls, each turned about the origin; 0 or less in contact."""


class Coal:
    """coal: GJK and EPA over convex hulls."""

    def __init__(self) -> None:
        self.request = coal.DistanceRequest()
        self.request.gjk_tolerance = 1e-9

    def hull(self, points: Array) -> Any:  # noqa: ANN401
        """Return coal's convex hull of points, (n, 3), mm."""
        vertices = coal.StdVec_Vec3s()
        for point in points:
            vertices.append(point)
        return coal.Convex.convexHull(vertices, False, "")

    def distance_mm(self, first: Any, second: Any, turn_first: Rotation, turn_second: Rotation) -> float:  # noqa: ANN401
        """Return coal's signed distance."""
        poses = [coal.Transform3s(turn.as_matrix(), np.zeros(3)) for turn in (turn_first, turn_second)]
        return float(coal.distance(first, poses[0], second, poses[1], self.request, coal.DistanceResult()))


class Fcl:
    """python-fcl over convex hulls."""

    def hull(self, points: Array) -> Any:  # noqa: ANN401
        """Return fcl's convex solid of the hull of points, (n, 3), mm, faces counter-clockwise from outside."""
        import fcl

        hull = ConvexHull(points)
        faces = hull.simplices.copy()
        corner = points[faces]
        normal = np.cross(corner[:, 1] - corner[:, 0], corner[:, 2] - corner[:, 0])
        inward = np.einsum("ij,ij->i", normal, hull.equations[:, :3]) < 0.0
        faces[inward] = faces[inward][:, ::-1]
        listed = np.column_stack([np.full(len(faces), 3), faces]).astype(np.int32)
        return fcl.Convex(points, len(faces), listed.ravel())

    def distance_mm(self, first: Any, second: Any, turn_first: Rotation, turn_second: Rotation) -> float:  # noqa: ANN401
        """Return fcl's distance, 0 or less in contact."""
        import fcl

        placed = [
            fcl.CollisionObject(solid, fcl.Transform(turn.as_matrix(), np.zeros(3)))
            for solid, turn in ((first, turn_first), (second, turn_second))
        ]
        return float(fcl.distance(*placed, fcl.DistanceRequest(), fcl.DistanceResult()))


def library() -> Library:
    """Return the better library that there is."""
    return Fcl() if coal is None else Coal()


def hull_distance_mm(first: Array, second: Array, by: Library | None = None) -> float:
    """Return the distance of the hulls of two point sets, (n, 3), mm; 0 in contact."""
    by = by or library()
    still = Rotation.identity()
    distance = by.distance_mm(by.hull(first), by.hull(second), still, still)
    return distance if distance > CONTACT_MM else 0.0


@dataclass(frozen=True)
class Found:
    """What the reference finds at a pair of angles, mm; `pair` are the labels of the nearest two parts."""

    clearance_mm: float
    slack_mm: float
    pair: tuple[str, str] | None


class LeastDistances:
    """A set-up whose clearance and slack can be asked at any pair of angles.

    Every pair of pieces whose boxes along the axes are nearer than what was found so far is asked of the library.
    """

    def __init__(self, setup: Setup, by: Library | None = None) -> None:
        self.by = by or library()
        self.parts = standing_parts(setup)
        self.setup = setup

    @cached_property
    def _pieces(self) -> list[tuple[Standing, Array, Any]]:
        return [(part, piece, self.by.hull(piece)) for part in self.parts for piece in part.pieces]

    @cached_property
    def _pairs(self) -> tuple[NDArray[np.int64], NDArray[np.int64], Array]:
        """The pieces of each pair that is asked, and what is required of it, mm."""
        found = [
            (i, j, required_mm(one, other, self.setup))
            for i, (one, _, _) in enumerate(self._pieces)
            for j, (other, _, _) in enumerate(self._pieces[:i])
            if asked(one, other, self.setup)
        ]
        first, second, required = zip(*found, strict=True) if found else ((), (), ())
        return np.array(first, np.int64), np.array(second, np.int64), np.array(required)

    def at(self, gantry_deg: float, couch_deg: float) -> Found:
        """Return clearance and slack at a pair of angles; infinite where no pair is asked."""
        turns = {part: part.turn(gantry_deg, couch_deg) for part in self.parts}
        placed = [turns[part].apply(piece) for part, piece, _ in self._pieces]
        low = np.array([piece.min(axis=0) for piece in placed])
        high = np.array([piece.max(axis=0) for piece in placed])
        i, j, required = self._pairs
        between_boxes = np.linalg.norm(np.maximum(0.0, np.maximum(low[i] - high[j], low[j] - high[i])), axis=1)
        clearance, slack, nearest = np.inf, np.inf, None
        for k in np.argsort(between_boxes):
            if between_boxes[k] >= clearance and between_boxes[k] - required[k] >= slack:
                # Later pairs have boxes as far apart, but may require more.
                if between_boxes[k] - required.max() >= slack:
                    break
                continue
            one, _, solid_one = self._pieces[i[k]]
            other, _, solid_other = self._pieces[j[k]]
            distance = self.by.distance_mm(solid_one, solid_other, turns[one], turns[other])
            distance = distance if distance > CONTACT_MM else 0.0
            slack = min(slack, distance - required[k])
            if distance < clearance:
                clearance, nearest = distance, (one.label, other.label)
        return Found(clearance, slack, nearest)
