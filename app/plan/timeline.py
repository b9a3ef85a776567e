"""A checked plan as a course of time: when the machine is where, at the speeds of its room. No Qt, no files.

Fields run with both axes together, moves one axis after the other, as they were checked. What takes no time of the
machine's, or a time that nobody states, is a stop of a nominal length, and says so.
"""

import math
from bisect import bisect_right
from collections.abc import Sequence
from dataclasses import dataclass, replace
from itertools import pairwise
from typing import Final, Literal

import numpy as np

from geometry.angle_graph import Speeds, speeds_of
from geometry.legs import Point
from geometry.paths import Approach, Verdict
from geometry.scene import Scene
from geometry.states import State
from geometry.treatment.data import CheckReport, FieldCheck, MoveCheck, MoveStep
from geometry.treatment.stages import seconds_of

Kind = Literal["field", "turn", "collimator", "table", "fit", "out of reach"]

# How long a static beam is shown, s: its time is the dose's, not the machine's.
STATIC_S: Final = 3.0
# How long a stop is shown whose time nobody states, s: work by hand, a table without a speed, a place out of reach.
UNKNOWN_S: Final = 3.0
_SAME_DEG: Final = 1e-6


@dataclass(frozen=True, eq=False)
class Segment:
    """A stretch of time: a field, or one step of a move.

    `start_s` to `stop_s` on the timeline. `points_deg` (gantry, couch), unwrapped, are passed at `at_s`; a stop has
    one. `scene` is the set-up as it is then, `state` what was found of all of it. `is_timed`: the length is the
    machine's; otherwise it is nominal. `field`, `move`: its place among the report's fields, or among the moves of
    the order that is shown; None for what it is not. `places`: exact places on it that the check tells of, `tightest`
    the one to look at. `bound_mm`: what is proved of the clearance throughout, where no exact one can be sampled.
    """

    kind: Kind
    text: str
    scene: Scene
    state: State
    start_s: float
    at_s: tuple[float, ...]
    stop_s: float
    points_deg: tuple[Point, ...]
    is_timed: bool
    field: int | None = None
    move: int | None = None
    places: tuple[Approach, ...] = ()
    tightest: Approach | None = None
    bound_mm: float = math.nan

    @property
    def is_stop(self) -> bool:
        """Tell whether neither axis turns."""
        return len(self.points_deg) == 1

    @property
    def is_reachable(self) -> bool:
        """Tell whether the machine can stand where this segment has it."""
        return self.state is not State.NO_TRAVEL

    def angles_at(self, seconds: float) -> Point:
        """Return the gantry and couch angle at a time, those of its ends before and after it."""
        after = bisect_right(self.at_s, seconds)
        if after == 0 or after == len(self.at_s):
            return self.points_deg[0 if after == 0 else -1]
        start, stop = self.at_s[after - 1 : after + 1]
        share = (seconds - start) / (stop - start)
        one, other = self.points_deg[after - 1 : after + 1]
        return one[0] + share * (other[0] - one[0]), one[1] + share * (other[1] - one[1])

    def seconds_of(self, place: Approach) -> float:
        """Return when a place of the path is passed."""
        if self.is_stop:
            return self.start_s
        at = np.array([place.gantry_deg, place.couch_deg])
        legs = list(pairwise(self.points_deg))
        leg = min(max(place.segment, 0), len(legs) - 1)
        apart, share = _nearest_on_leg(at, *legs[leg])
        if apart > _SAME_DEG:
            # The leg that the check names is the one, unless the place lies beside it.
            found = [_nearest_on_leg(at, *ends) for ends in legs]
            leg = min(range(len(legs)), key=lambda k: found[k][0])
            share = found[leg][1]
        return self.at_s[leg] + share * (self.at_s[leg + 1] - self.at_s[leg])


@dataclass(frozen=True, eq=False)
class Timeline:
    """Segments one after the other from 0 on. `assumed`: axes whose speed the room does not state."""

    segments: tuple[Segment, ...]
    assumed: tuple[str, ...] = ()

    @property
    def seconds(self) -> float:
        """How long all of it takes."""
        return self.segments[-1].stop_s if self.segments else 0.0

    def segment_at(self, seconds: float) -> int:
        """Return the place of the segment at a time; at a border the later one. ValueError for an empty timeline."""
        if not self.segments:
            raise ValueError("a timeline without segments")
        starts = [segment.start_s for segment in self.segments]
        return max(bisect_right(starts, seconds) - 1, 0)

    def pose_at(self, seconds: float) -> tuple[Segment, float, float]:
        """Return the segment at a time with gantry and couch angle, unwrapped; times are kept within the timeline."""
        segment = self.segments[self.segment_at(seconds)]
        return segment, *segment.angles_at(seconds)

    def start_of(self, field: int) -> float:
        """Return when a field of the report begins, s. ValueError for one that is not on the timeline."""
        for segment in self.segments:
            if segment.field == field:
                return segment.start_s
        raise ValueError(f"field = {field} is not on this timeline")


def timeline_of(report: CheckReport, *, better: bool = False) -> Timeline:
    """Return the course of a whole plan, in its own order or in the better one, where there is one."""
    made = _Course(report.speeds)
    other = report.better if better else None
    order = other.fields if other is not None else tuple(range(len(report.fields)))
    moves = other.moves if other is not None else report.moves
    paths = other.points_deg if other is not None else tuple(check.points_deg for check in report.fields)
    for place, (field, points) in enumerate(zip(order, paths, strict=True)):
        made.add_field(field, report.fields[field], points)
        if place < len(moves):
            made.add_move(place, moves[place], report.fields[moves[place].after])
    return Timeline(tuple(made.segments), report.speeds.assumed)


def timeline_of_field(check: FieldCheck, field: int = 0) -> Timeline:
    """Return the course of one field, the report's `field`."""
    speeds = speeds_of(check.scene.setup.room)
    made = _Course(speeds)
    made.add_field(field, check, check.points_deg)
    return Timeline(tuple(made.segments), speeds.assumed)


class _Course:
    """Puts segments one after the other."""

    def __init__(self, speeds: Speeds) -> None:
        self.segments: list[Segment] = []
        self._speeds = speeds
        self._now = 0.0

    def add_field(self, place: int, check: FieldCheck, points_deg: tuple[Point, ...]) -> None:
        """Add a field that runs through these points, its own or the same a turn further on."""
        by = tuple(one - other for one, other in zip(points_deg[0], check.points_deg[0], strict=True))
        places = tuple(_moved(at, by) for at in _exact_places(check.verdict))
        tightest = _moved(check.place, by) if check.place is not None else None
        if tightest is not None and not math.isfinite(tightest.clearance_mm):
            tightest = None
        name, scene, state = check.field.name, check.scene, check.state
        if state is State.NO_TRAVEL:
            self._stop("out of reach", name, scene, state, points_deg[0], UNKNOWN_S, is_timed=False, field=place)
            return
        times = self._times(points_deg, together=True)
        if times[-1] == self._now:
            self._stop("field", name, scene, state, points_deg[0], STATIC_S, is_timed=False, field=place)
        else:
            self._add(Segment("field", name, scene, state, self._now, times, times[-1], points_deg, True, place))
        self.segments[-1] = replace(self.segments[-1], places=places, tightest=tightest)

    def add_move(self, place: int, move: MoveCheck, after: FieldCheck) -> None:
        """Add the steps of a move; one that cannot be begun is a stop that says why."""
        for step in move.steps:
            self._add_step(place, step)
        if not move.steps and move.state is not State.PERMITTED:
            at = self.segments[-1].points_deg[-1]
            text = move.reason or "no way to the next field"
            self._stop("out of reach", text, after.scene, move.state, at, UNKNOWN_S, is_timed=False, move=place)

    def _add_step(self, place: int, step: MoveStep) -> None:
        points, scene, state = step.points_deg, step.scene, step.state
        if step.kind == "turn":
            times = self._times(points, together=False)
            self._add(Segment("turn", step.text, scene, state, self._now, times, times[-1], points, True, move=place))
        else:
            known = math.isfinite(step.seconds)
            length = step.seconds if known else UNKNOWN_S
            self._stop(step.kind, step.text, scene, state, points[0], length, is_timed=known, move=place)
        places = _exact_places(step.verdict) if step.verdict is not None else ()
        refused = state is not State.PERMITTED
        bound = step.table.least_clearance_mm if step.table is not None else math.nan
        worst = next(iter(sorted(places, key=lambda at: at.slack_mm)), None) if refused else None
        self.segments[-1] = replace(self.segments[-1], places=places, tightest=worst, bound_mm=bound)

    def _times(self, points_deg: Sequence[Point], *, together: bool) -> tuple[float, ...]:
        """Return when each point is passed, from now on."""
        times = [self._now]
        for leg in pairwise(points_deg):
            times.append(times[-1] + seconds_of(leg, self._speeds.gantry, self._speeds.couch, together=together))
        return tuple(times)

    def _stop(
        self,
        kind: Kind,
        text: str,
        scene: Scene,
        state: State,
        at: Point,
        seconds: float,
        *,
        is_timed: bool,
        field: int | None = None,
        move: int | None = None,
    ) -> None:
        now = self._now
        self._add(Segment(kind, text, scene, state, now, (now,), now + seconds, (at,), is_timed, field, move))

    def _add(self, segment: Segment) -> None:
        self.segments.append(segment)
        self._now = segment.stop_s


def _exact_places(verdict: Verdict) -> tuple[Approach, ...]:
    """Return the places of a verdict that are exact and lie on the path."""
    found = (verdict.nearest, verdict.first_short)
    return tuple(at for at in found if at is not None and math.isfinite(at.clearance_mm))


def _moved(place: Approach, by_deg: Sequence[float]) -> Approach:
    return replace(place, gantry_deg=place.gantry_deg + by_deg[0], couch_deg=place.couch_deg + by_deg[1])


def _nearest_on_leg(at: np.typing.NDArray[np.float64], one: Point, other: Point) -> tuple[float, float]:
    """Return how far a place is from a leg, deg, and at which share of it that is."""
    start = np.array(one)
    change = np.array(other) - start
    length2 = float(change @ change)
    share = float(np.clip((at - start) @ change / length2, 0.0, 1.0)) if length2 > 0.0 else 0.0
    return float(np.abs(start + share * change - at).max()), share
