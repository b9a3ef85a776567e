"""Distances of convex pieces by a library: coal, or python-fcl where coal has no wheel (Windows).

Convex hulls, so that one solid inside another counts as contact: a triangle mesh has no inside. Boxes are hulls
too, since `fcl.Box` against `fcl.Box` is wrong when turned.
"""

from dataclasses import dataclass
from functools import lru_cache
from typing import Any, Protocol

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import ConvexHull
from scipy.spatial.transform import Rotation

from geometry.setup import Setup
from tests.reference.poses import Carrier, asked, required_mm, standing_parts, turns

try:
    import coal
except ImportError:  # no wheel for Windows
    coal = None

Array = NDArray[np.float64]

# What counts as touching, and how near the libraries come, mm.
CONTACT_MM = 1e-7
TOLERANCE_MM = 1e-6


class Library(Protocol):
    """What is asked of a distance library; the `Any`s are its own objects."""

    def hull(self, points: Array) -> Any:  # noqa: ANN401
        """Return the convex hull of points, (n, 3), mm."""

    def turned(self, turn: Rotation) -> Any:  # noqa: ANN401
        """Return the library's form of a turn about the origin."""

    def distance_mm(self, first: Any, second: Any, turn_first: Any, turn_second: Any) -> float:  # noqa: ANN401
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

    def turned(self, turn: Rotation) -> Any:  # noqa: ANN401
        """Return coal's transform."""
        return coal.Transform3s(turn.as_matrix(), np.zeros(3))

    def distance_mm(self, first: Any, second: Any, turn_first: Any, turn_second: Any) -> float:  # noqa: ANN401
        """Return coal's signed distance."""
        return float(coal.distance(first, turn_first, second, turn_second, self.request, coal.DistanceResult()))


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

    def turned(self, turn: Rotation) -> Any:  # noqa: ANN401
        """Return fcl's transform."""
        import fcl

        return fcl.Transform(turn.as_matrix(), np.zeros(3))

    def distance_mm(self, first: Any, second: Any, turn_first: Any, turn_second: Any) -> float:  # noqa: ANN401
        """Return fcl's distance, 0 or less in contact."""
        import fcl

        placed = fcl.CollisionObject(first, turn_first), fcl.CollisionObject(second, turn_second)
        return float(fcl.distance(*placed, fcl.DistanceRequest(), fcl.DistanceResult()))


def library() -> Library:
    """Return the better library that there is."""
    return Fcl() if coal is None else Coal()


def hull_distance_mm(first: Array, second: Array, by: Library | None = None) -> float:
    """Return the distance of the hulls of two point sets, (n, 3), mm; 0 in contact."""
    by = by or library()
    still = by.turned(Rotation.identity())
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
        self.part_of = [part for part in self.parts for _ in part.pieces]
        self.pieces = [piece for part in self.parts for piece in part.pieces]
        self.hulls = [self.by.hull(piece) for piece in self.pieces]
        self.pairs = self._pairs(setup)
        self.boxes_at = lru_cache(maxsize=512)(self._boxes_at)

    def at(self, gantry_deg: float, couch_deg: float) -> Found:
        """Return clearance and slack at a pair of angles; infinite where no pair is asked."""
        turned = turns(gantry_deg, couch_deg)
        low, high = np.empty((2, len(self.pieces), 3))
        for carrier, angle_deg in (("gantry", gantry_deg), ("couch", couch_deg), ("nothing", 0.0)):
            which, low_of, high_of = self.boxes_at(carrier, angle_deg)
            low[which], high[which] = low_of, high_of
        i, j, required = self.pairs
        gaps = np.maximum(np.maximum(low[i] - high[j], low[j] - high[i]), 0.0)
        between_boxes = np.sqrt(np.einsum("ij,ij->i", gaps, gaps))
        poses = {carrier: self.by.turned(turn) for carrier, turn in turned.items()}
        clearance, slack, nearest = np.inf, np.inf, None
        for k in np.argsort(between_boxes):
            apart, asked_mm = float(between_boxes[k]), float(required[k])
            if apart >= clearance and apart - asked_mm >= slack:
                # Later pairs have boxes as far apart, but may require more.
                if apart - required.max() >= slack:
                    break
                continue
            one, other = self.part_of[i[k]], self.part_of[j[k]]
            distance = self.by.distance_mm(self.hulls[i[k]], self.hulls[j[k]], poses[one.carrier], poses[other.carrier])
            distance = distance if distance > CONTACT_MM else 0.0
            slack = min(slack, distance - asked_mm)
            if distance < clearance:
                clearance, nearest = distance, (one.label, other.label)
        return Found(clearance, slack, nearest)

    def _boxes_at(self, carrier: Carrier, angle_deg: float) -> tuple[list[int], Array, Array]:
        """Return the pieces that ride on a carrier, and the boxes about them when it is turned."""
        turn = turns(angle_deg, angle_deg)[carrier]
        which = [k for k, part in enumerate(self.part_of) if part.carrier == carrier]
        points = [turn.apply(self.pieces[k]) for k in which]
        boxes = np.array([[p.min(axis=0), p.max(axis=0)] for p in points]).reshape(-1, 2, 3)
        return which, boxes[:, 0], boxes[:, 1]

    def _pairs(self, setup: Setup) -> tuple[NDArray[np.int64], NDArray[np.int64], Array]:
        """Return the pieces of each pair that is asked, and what is required of it, mm."""
        among = {
            (one, other): required_mm(one, other, setup)
            for one in self.parts
            for other in self.parts
            if asked(one, other, setup)
        }
        found = [
            (i, j, among[one, other])
            for i, one in enumerate(self.part_of)
            for j, other in enumerate(self.part_of[:i])
            if (one, other) in among
        ]
        first, second, required = zip(*found, strict=True) if found else ((), (), ())
        return np.array(first, np.int64), np.array(second, np.int64), np.array(required)
