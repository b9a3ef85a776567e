"""Which parts stand in the way at a pair of angles: every pair that is nearer than required, not only the nearest."""

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from geometry.near.near_kernel import distances_at
from geometry.planes import Plane, planes_of
from geometry.scene import Scene, ScenePart
from geometry.tasks import scratch_for

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Obstacle:
    """Two parts nearer to each other than required. `clearance_mm`: 0 in contact, NaN without a valid distance."""

    machine_part: ScenePart
    couch_part: ScenePart
    clearance_mm: float
    required_mm: float

    @property
    def missing_mm(self) -> float:
        """How much clearance is missing; all of it where no distance was found."""
        return self.required_mm - (0.0 if math.isnan(self.clearance_mm) else self.clearance_mm)


def obstacles_at(scene: Scene, gantry_deg: float, couch_deg: float, margin_mm: float = 0.0) -> tuple[Obstacle, ...]:
    """Return every pair of parts with less than the required clearance and `margin_mm`, most missing first.

    The angles are taken as true, any finite ones, deg. Where the stages are beyond their travel the distances are those
    that would hold if they were not.
    """
    found: dict[tuple[int, int], float] = {}
    required: dict[tuple[int, int], float] = {}
    for plane in planes_of(scene):
        at = (gantry_deg if plane.with_gantry else 0.0, couch_deg if plane.with_couch else 0.0)
        distance = _distances(plane, at, margin_mm)
        # What is not a number is in the way as well.
        for p in np.flatnonzero(~(distance - plane.pairs.required >= margin_mm)):
            pair = int(plane.a.part[plane.pairs.i[p]]), int(plane.b.part[plane.pairs.j[p]])
            found[pair] = _nearer(found.get(pair, math.inf), float(distance[p]))
            required[pair] = float(plane.pairs.required[p])
    obstacles = [
        Obstacle(scene.parts[a], scene.parts[b], clearance, required[a, b]) for (a, b), clearance in found.items()
    ]
    return tuple(sorted(obstacles, key=lambda obstacle: -obstacle.missing_mm))


def _distances(plane: Plane, at_deg: tuple[float, float], margin_mm: float) -> Array:
    """Return the distance of every pair of pieces, (pairs,): infinite where it is far beyond what matters."""
    count = len(plane.pairs.i)
    lower, upper = np.zeros(count), np.zeros(count)
    memory, _ = scratch_for(plane.pairs)
    limit = float(plane.pairs.required.max()) + margin_mm
    distances_at(
        plane.a, plane.b, plane.pairs, math.radians(at_deg[0]), math.radians(at_deg[1]), limit, memory, lower, upper
    )
    return upper


def _nearer(known: float, other: float) -> float:
    """Return the lesser distance; contact outranks a missing distance, which outranks any other."""
    if known == 0.0 or other == 0.0:
        return 0.0
    return math.nan if math.isnan(known) or math.isnan(other) else min(known, other)
