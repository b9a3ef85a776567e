"""Paths through the angle plane: static beams, arcs of the gantry, of the couch or of both, and moves.

A path is straight between control points. It is permitted when the whole tolerance rectangle about every point of it
is proved; cells are divided along the path alone, finer than the whole plane could be.
"""

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from geometry.kernel import Memory
from geometry.legs import (
    FIRST_CELL_DEG,
    ROUNDING_DEG,
    Point,
    Run,
    checked_points,
    halvings_for,
    leg_of,
    roots_of,
    straight_runs,
)
from geometry.path_kernel import Least, Leg, Line, Open, prove_band, search_line
from geometry.plane_kernel import Lists
from geometry.planes import Plane, planes_of
from geometry.progress import Progress, Silent, stop_if_cancelled
from geometry.scene import Scene
from geometry.setup import Setup
from geometry.spans import ANGLE_DEG, Tolerances
from geometry.states import State
from geometry.sweep import angles_of, sweep_plane
from geometry.tasks import scratch_for

Array = NDArray[np.float64]

# Smallest cells of a band, deg: what a narrow pass may be wider than the tolerances and still be refused.
RESOLUTION_DEG = 0.02
# Proved cells are divided further for the sake of the least bound while wider than this, deg.
TIGHTEN_DEG = 0.25
# Something short is found when it lasts longer than this on the path, deg.
SHORT_DEG = 0.002
# The nearest approach is sought to this, deg.
COARSE_DEG = 0.03


@dataclass(frozen=True)
class Approach:
    """A place of a path and what is nearest there.

    `segment` counts from 0, from the control point of that number to the next. Angles unwrapped, deg. `clearance_mm`
    and `slack_mm` are exact or proved bounds, as the field that holds this says; NaN where there is none. Parts index
    `Scene.parts`, -1 for none.
    """

    segment: int
    gantry_deg: float
    couch_deg: float
    clearance_mm: float
    slack_mm: float
    machine_part: int
    couch_part: int


@dataclass(frozen=True)
class Verdict:
    """What is known of a path.

    `state`: contact or short when the path itself is, its readings taken as true; no travel when it leaves the travel
    or the set-up cannot be reached (`reason` names the axis); permitted when the tolerance rectangle about each of its
    points is proved; otherwise unproved.

    `least` is the proved lower bound of the clearance over path and tolerances, at the true angles about which it is
    attained (they may lie off the path by the tolerances); `tightest` likewise that of the slack; both None unless
    permitted, or where no pair is checked. `nearest` is the exact nearest approach on the path itself, to 0.1 mm; None
    for no travel. `first_short`: for contact and short the first place on the path that is, exact; for unproved the
    first reading whose tolerance rectangle is not proved, with its exact clearance and the parts in the way.
    """

    state: State
    least: Approach | None = None
    tightest: Approach | None = None
    nearest: Approach | None = None
    first_short: Approach | None = None
    reason: str = ""

    @property
    def least_clearance_mm(self) -> float:
        """The proved bound over path and tolerances: NaN unless permitted, infinite where no pair is checked."""
        if self.state is not State.PERMITTED:
            return math.nan
        return self.least.clearance_mm if self.least else math.inf


class PathProver:
    """Proves paths of one scene, one after the other.

    `resolution_deg` is the smallest cells' width; `planes` stand in for the scene's own where given. Raises ValueError
    for a resolution that is not in 1e-4 to 1 deg.
    """

    def __init__(
        self,
        scene: Scene,
        tolerances: Tolerances,
        resolution_deg: float = RESOLUTION_DEG,
        planes: tuple[Plane, ...] | None = None,
    ) -> None:
        if not 1e-4 <= resolution_deg <= 1.0:
            raise ValueError(f"resolution_deg = {resolution_deg}; allowed: 0.0001 to 1")
        self._scene = scene
        self._planes = planes_of(scene) if planes is None else planes
        self._tolerances = tolerances
        self._resolution_deg = resolution_deg
        self.evaluations = 0

    def verdict(self, points_deg: Sequence[Point], progress: Progress | None = None) -> Verdict:
        """Return what is known of the path through control points (gantry, couch), deg, both unwrapped.

        One point is a static beam. Raises ValueError for no points or angles that are no angles, and Cancelled.
        """
        progress = progress or Silent()
        points = checked_points(points_deg)
        reason = self._beyond(points)
        if reason:
            return Verdict(State.NO_TRAVEL, reason=reason)
        runs = straight_runs(points)
        scratch = [scratch_for(plane.pairs) for plane in self._planes]
        line = self._search(runs, scratch, progress)
        if line.state is not State.PERMITTED:
            return line
        return self._prove(runs, scratch, line, progress)

    def exact(self, segment: int, gantry_deg: float, couch_deg: float) -> Approach:
        """Return the exact clearance and slack at one pair of true angles; clearance NaN where none was found."""
        return exact_approach(self._planes, segment, gantry_deg, couch_deg)

    def _beyond(self, points: Array) -> str:
        """Name the axis that would leave its travel; empty if none."""
        if self._scene.no_travel:
            return "; ".join(self._scene.no_travel)
        travels = self._tolerances.gantry_travel_deg, self._tolerances.couch_travel_deg
        for name, (low, high), angles in zip(("gantry", "couch"), travels, points.T, strict=True):
            worst = max(angles, key=lambda angle: max(low - angle, angle - high))
            if max(low - worst, worst - high) > ANGLE_DEG:
                return f"{name} = {worst:g} deg is outside its travel {low:g} to {high:g}"
        return ""

    def _search(self, runs: list[Run], scratch: list[tuple[Memory, Lists]], progress: Progress) -> Verdict:
        """Search the path itself: contact, short, or as yet permitted, with the nearest approach."""
        clearance, slack = np.full(1, np.inf), np.full(1, np.inf)
        nearest = tightest = (runs[0], 0.0)
        first: tuple[Run, float] | None = None
        for done, run in enumerate(runs):
            line = Line(clearance, np.full(1, -1.0), slack, np.full(1, -1.0), np.full(1, np.inf))
            if first is not None:
                # An earlier run has the first short place: this one is searched for the nearest approach alone.
                line.first[0] = -1.0
            extent = float(np.abs(run.change).max())
            parts = max(math.ceil(extent / FIRST_CELL_DEG), 1)
            halvings = halvings_for(extent / parts, SHORT_DEG, 16)
            coarse = halvings_for(extent / parts, COARSE_DEG, 16)
            for plane, (memory, lists) in zip(self._planes, scratch, strict=True):
                stop_if_cancelled(progress)
                leg = leg_of(plane, run, (0.0, 0.0))
                self.evaluations += search_line(
                    plane.a, plane.b, plane.pairs, leg, parts, halvings, coarse, memory, lists, line
                )
            if line.clearance_at[0] >= 0.0:
                nearest = run, float(line.clearance_at[0])
            if line.slack_at[0] >= 0.0:
                tightest = run, float(line.slack_at[0])
            if first is None and line.first[0] <= 1.0:
                first = run, float(line.first[0])
            progress.report(0.5 * (done + 1) / len(runs), "path")
        near, tight = self._exact(*nearest), self._exact(*tightest)
        if near.clearance_mm == 0.0:
            return Verdict(State.CONTACT, nearest=near, first_short=self._exact(*(first or nearest)))
        if math.isnan(near.clearance_mm) or math.isnan(tight.slack_mm):
            failed = near if math.isnan(near.clearance_mm) else tight
            return Verdict(State.UNPROVED, nearest=near, first_short=failed, reason="no valid distance was found")
        if first is not None:
            return Verdict(State.SHORT, nearest=near, first_short=self._exact(*first))
        return Verdict(State.PERMITTED, nearest=near)

    def _exact(self, run: Run, place: float) -> Approach:
        return self.exact(run.segment(place), *run.point_deg(place))

    def _prove(
        self, runs: list[Run], scratch: list[tuple[Memory, Lists]], line: Verdict, progress: Progress
    ) -> Verdict:
        """Prove the tolerance rectangle about every point of the path, run by run."""
        around = self._tolerances.of_gantry_deg + ROUNDING_DEG, self._tolerances.of_couch_deg + ROUNDING_DEG
        least: dict[str, Approach | None] = {"clearance": None, "slack": None}
        known = [np.full(1, np.inf), np.full(1, np.inf)]
        for done, run in enumerate(runs):
            first: tuple[float, Approach] | None = None
            for plane, (memory, lists) in zip(self._planes, scratch, strict=True):
                stop_if_cancelled(progress)
                leg = leg_of(plane, run, around)
                roots, halvings = roots_of(leg, self._resolution_deg)
                found = _least(known[0], least["clearance"], "clearance"), _least(known[1], least["slack"], "slack")
                place = Open(np.full(1, first[0] if first else np.inf), np.zeros(1), np.zeros(1), np.full(1, -1))
                tighten = math.radians(TIGHTEN_DEG)
                self.evaluations += prove_band(
                    plane.a, plane.b, plane.pairs, leg, roots, halvings, tighten, memory, lists, *found, place
                )
                for kind, one in zip(least, found, strict=True):
                    if one.pair[0] >= 0:
                        least[kind] = _bound(plane, run, leg, one, kind)
                if place.pair[0] >= 0:
                    first = float(place.first[0]), self._in_the_way(plane, run, place)
            if first is not None:
                return replace(line, state=State.UNPROVED, first_short=first[1])
            progress.report(0.5 + 0.5 * (done + 1) / len(runs), "path")
        return replace(line, least=least["clearance"], tightest=least["slack"])

    def _in_the_way(self, plane: Plane, run: Run, place: Open) -> Approach:
        """Return the exact clearance at a reading, with the pair that stands in the way within its tolerances."""
        at = self._exact(run, float(place.first[0]))
        machine, other = _parts(plane, int(place.pair[0]))
        return replace(at, machine_part=machine, couch_part=other)


def prove_path(
    scene: Scene,
    points_deg: Sequence[Point],
    tolerances: Tolerances,
    resolution_deg: float = RESOLUTION_DEG,
    progress: Progress | None = None,
) -> Verdict:
    """Return what is known of one path: see `PathProver`."""
    return PathProver(scene, tolerances, resolution_deg).verdict(points_deg, progress)


def with_collimator(setup: Setup, collimator_deg: Sequence[float]) -> Setup:
    """Return the set-up for a path with these collimator angles at its control points.

    A collimator that is held stands at its angle; one that turns counts as all that it can sweep.
    """
    held = len(set(collimator_deg)) == 1
    return replace(setup, collimator_deg=float(collimator_deg[0]) if held else None)


def exact_approach(planes: Sequence[Plane], segment: int, gantry_deg: float, couch_deg: float) -> Approach:
    """Return the exact clearance and slack over all planes at one pair of true angles.

    Contact outranks a missing distance (NaN), which outranks any other distance.
    """
    clearance, slack, machine, other = math.inf, math.inf, -1, -1
    for plane in planes:
        field = sweep_plane(
            plane,
            angles_of(np.array([gantry_deg if plane.with_gantry else 0.0])),
            angles_of(np.array([couch_deg if plane.with_couch else 0.0])),
            threads=1,
        )
        here = float(field.clearance[0, 0])
        if here < clearance or (math.isnan(here) and clearance > 0.0):
            clearance = here
            pair = int(field.pair[0, 0])
            machine, other = _parts(plane, pair) if pair >= 0 else (-1, -1)
        slack = float(np.minimum(slack, field.slack[0, 0]))
    return Approach(segment, gantry_deg, couch_deg, clearance, slack, machine, other)


def _least(known: Array, so_far: Approach | None, kind: str) -> Least:
    bound = math.inf if so_far is None else (so_far.clearance_mm if kind == "clearance" else so_far.slack_mm)
    return Least(known, np.full(1, bound), np.zeros(1), np.zeros(1), np.full(1, -1))


def _bound(plane: Plane, run: Run, leg: Leg, found: Least, kind: str) -> Approach:
    """Return a proved bound at its cell's middle; the segment is that of the nearest point of the path."""
    at = np.array(
        [
            math.degrees(found.at_a[0]) if plane.with_gantry else run.start[0],
            math.degrees(found.at_b[0]) if plane.with_couch else run.start[1],
        ]
    )
    moves = np.array([leg.by_gantry != 0.0, leg.by_couch != 0.0]) * run.change
    length2 = float(moves @ moves)
    place = float(np.clip((at - run.start) @ moves / length2, 0.0, 1.0)) if length2 > 0.0 else 0.0
    value = float(found.bound[0])
    machine, other = _parts(plane, int(found.pair[0]))
    required = float(plane.pairs.required[found.pair[0]])
    clearance, slack = (value, value - required) if kind == "clearance" else (value + required, value)
    return Approach(run.segment(place), float(at[0]), float(at[1]), clearance, slack, machine, other)


def _parts(plane: Plane, pair: int) -> tuple[int, int]:
    """Return the parts of a pair, machine's first, as indices into `Scene.parts`."""
    return int(plane.a.part[plane.pairs.i[pair]]), int(plane.b.part[plane.pairs.j[pair]])
