"""Set-ups that differ between the fields of a plan, each as a scene that is made once and shared."""

import math
import threading
from collections.abc import Hashable, Sequence
from itertools import pairwise, product

import numpy as np
import shapely
from numpy.typing import NDArray

from geometry.angle_graph import AngleGraph, speeds_of
from geometry.assess import Options, proof_steps, tolerances_of
from geometry.legs import Point
from geometry.paths import Approach, PathProver, Verdict, exact_approach
from geometry.planes import planes_of
from geometry.progress import Progress
from geometry.proof import Proof, prove
from geometry.scene import build_scene
from geometry.setup import Setup
from geometry.spans import ANGLE_DEG, permitted_region

# Distance of the lines along which a way round is sought, deg: no narrower pass is taken between two fields.
STEP_DEG = 1.0


class Stage:
    """One state of patient, table, collimator and accessories, in which gantry and couch turn.

    `stops`: where ways are going to start and end. Safe to use from several threads.
    """

    def __init__(self, setup: Setup, options: Options, stops: Sequence[Point]) -> None:
        self.setup = setup
        self.tolerances = tolerances_of(setup.room, options)
        self.scene = build_scene(setup)
        self._options = options
        self._stops = stops
        self._planes = planes_of(self.scene)
        self._proof: Proof | None = None
        self._regions: NDArray[np.object_] = np.empty(0, np.object_)
        self._net: AngleGraph | None = None
        self._poses: dict[Point, Verdict] = {}
        self._lock = threading.Lock()

    def verdict(self, points_deg: Sequence[Point], progress: Progress) -> Verdict:
        """Return what is known of a path; see `PathProver`. Raises Cancelled."""
        return PathProver(self.scene, self.tolerances, planes=self._planes).verdict(points_deg, progress)

    def pose(self, at: Point, progress: Progress) -> Verdict:
        """Return what is known of one pair of angles; remembered. Raises Cancelled."""
        if at not in self._poses:
            self._poses[at] = self.verdict([at], progress)
        return self._poses[at]

    def worst_within(self, places: Sequence[Approach]) -> Approach:
        """Return, of the angles within the tolerances about readings that are looked at, those with least slack."""
        around = self.tolerances.of_gantry_deg, self.tolerances.of_couch_deg
        shares = product(places, (-1.0, -0.5, 0.0, 0.5, 1.0), (-1.0, -0.5, 0.0, 0.5, 1.0))
        found = [
            exact_approach(
                self._planes, at.segment, at.gantry_deg + gantry * around[0], at.couch_deg + couch * around[1]
            )
            for at, gantry, couch in shares
        ]
        return min(found, key=lambda at: at.slack_mm if math.isfinite(at.slack_mm) else -math.inf)

    def way_round(self, start: Point, stop: Point, progress: Progress) -> tuple[Point, ...] | None:
        """Return the quickest way over the proved plane by its corners, None where there is none. Raises Cancelled."""
        with self._lock:
            if self._proof is None:
                self._proof = prove(self.scene, *proof_steps(self.setup.room, self._options), progress)
                self._regions = shapely.get_parts(permitted_region(self._proof, self.tolerances))
            if self._both_turn() and not self._joined(start, stop):
                return None
            if self._net is None:
                speeds = speeds_of(self.setup.room)
                self._net = AngleGraph(self._proof, self.tolerances, speeds, self._stops, STEP_DEG)
            way = self._net.way(start, stop)
            return None if way.blocked else way.points_deg

    def _both_turn(self) -> bool:
        travels = self.tolerances.gantry_travel_deg, self.tolerances.couch_travel_deg
        return all(high > low for low, high in travels)

    def _joined(self, start: Point, stop: Point) -> bool:
        """Tell whether two readings lie in one connected region of permitted ones: quicker than to look for a way."""
        near = [shapely.distance(self._regions, shapely.Point(*at)) <= ANGLE_DEG for at in (start, stop)]
        return bool((near[0] & near[1]).any())


class Stages:
    """The stages of one check. Safe to use from several threads."""

    def __init__(self, options: Options, stops: Sequence[Point]) -> None:
        self.options = options
        self._stops = stops
        self._known: dict[Hashable, Stage] = {}
        self._lock = threading.Lock()

    def of(self, setup: Setup) -> Stage:
        """Return the stage of a set-up. GeometryError for one that cannot be built."""
        key = state_of(setup)
        with self._lock:
            if key not in self._known:
                self._known[key] = Stage(setup, self.options, self._stops)
            return self._known[key]


def state_of(setup: Setup) -> tuple[Hashable, ...]:
    """Return what may differ between the fields of one set-up: equal states have equal scenes."""
    return (*table_of(setup), *tilt_of(setup), setup.collimator_deg, setup.fitted, setup.arm_positions)


def table_of(setup: Setup) -> tuple[Hashable, ...]:
    """Return what the places of table, patient and devices follow from, tilt apart."""
    return setup.isocentre, setup.on_table, setup.devices


def tilt_of(setup: Setup) -> tuple[float, float, float]:
    """Return pitch, roll and eccentric angle, deg."""
    return setup.pitch_deg, setup.roll_deg, setup.eccentric_deg


def arms_of(setup: Setup) -> dict[str, str | float]:
    """Return where each arm of the room stands, also those that a set-up does not name."""
    chosen = dict(setup.arm_positions)
    return {
        arm.name: chosen.get(arm.name, arm.positions[0].name if arm.positions else (arm.travel_mm or (0.0, 0.0))[0])
        for arm in setup.room.arms
    }


def seconds_of(points_deg: Sequence[Point], gantry_speed: float, couch_speed: float, *, together: bool) -> float:
    """Return the least time along a path, s: both axes together, or one after the other. Speeds in deg/s."""
    total = 0.0
    for one, other in pairwise(points_deg):
        times = abs(other[0] - one[0]) / gantry_speed, abs(other[1] - one[1]) / couch_speed
        total += max(times) if together else math.fsum(times)
    return total
