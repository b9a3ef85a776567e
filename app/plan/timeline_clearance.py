"""The exact clearance along a course of time: samples a degree apart at most, and the places that the check tells of.

Between samples nothing is claimed; what is proved of a field or a move is in its verdict.
"""

import math
from dataclasses import dataclass, replace
from itertools import pairwise
from typing import Final

import numpy as np
from numpy.typing import NDArray

from app.plan.timeline import Segment, Timeline
from geometry.assess import exact_state
from geometry.paths import Approach
from geometry.progress import Progress, Silent, stop_if_cancelled
from geometry.scene import Scene
from geometry.states import CODE_OF, STATES, State
from geometry.sweep import ClearanceMap, sweep

Array = NDArray[np.float64]
Indices = NDArray[np.int64]

# How far samples are apart at most, deg of either axis.
STEP_DEG: Final = 1.0
# Nearer to each other two times are one, s.
_SAME_S: Final = 1e-6


@dataclass(frozen=True)
class TightPlace:
    """The place to look at of one segment: which sample of the curve it is, and when."""

    sample: int
    segment: int
    seconds: float
    clearance_mm: float
    state: State


@dataclass(frozen=True, eq=False)
class ClearanceOverTime:
    """Samples over a timeline, n of them in the order of time; angles unwrapped, deg, lengths in mm.

    `segment`: the place of each sample's segment. `clearance_mm`, `slack_mm`: exact; NaN where none is known, infinite
    where nothing is near. While a table moves it is the proved bound, with slack NaN. `required_mm`: of the nearest
    pair, NaN without one. `state`: codes into `STATES`; permitted only where all of the segment is. `machine_part`,
    `couch_part` index the parts of the segment's scene, -1 for none. `tight`: a place for each field and for each step
    of a move that is not permitted, in the order of time.
    """

    timeline: Timeline
    seconds: Array
    segment: Indices
    gantry_deg: Array
    couch_deg: Array
    clearance_mm: Array
    slack_mm: Array
    required_mm: Array
    state: NDArray[np.int8]
    machine_part: Indices
    couch_part: Indices
    tight: tuple[TightPlace, ...]

    def labels(self, sample: int) -> tuple[str, str] | None:
        """Return the labels of the nearest parts at a sample, the machine's first; None where none are known."""
        machine, other = int(self.machine_part[sample]), int(self.couch_part[sample])
        if machine < 0 or other < 0:
            return None
        parts = self.timeline.segments[int(self.segment[sample])].scene.parts
        return parts[machine].label, parts[other].label

    def state_at(self, sample: int) -> State:
        """Return the state at a sample."""
        return STATES[int(self.state[sample])]

    def sample_at(self, seconds: float) -> int:
        """Return the sample at a time, of the segment under way then; between two, the one with less to spare."""
        segment = self.timeline.segment_at(seconds)
        first = int(np.searchsorted(self.segment, segment, side="left"))
        last = int(np.searchsorted(self.segment, segment, side="right"))
        times = self.seconds[first:last]
        low = int(np.searchsorted(times, min(max(seconds, times[0]), times[-1]) - _SAME_S, side="left"))
        high = int(np.searchsorted(times, max(min(seconds, times[-1]), times[0]) + _SAME_S, side="right"))
        # Those of that very time, else those before and after it.
        around = range(first + low, first + high) if high > low else range(first + max(low - 1, 0), first + low + 1)
        return min(around, key=lambda k: (self.state[k], np.nan_to_num(self.clearance_mm[k], nan=-1.0)))

    @property
    def least(self) -> int | None:
        """The sample with the least clearance, None where none is known."""
        known = np.where(np.isfinite(self.clearance_mm), self.clearance_mm, np.inf)
        return int(np.argmin(known)) if np.isfinite(known).any() else None


def clearance_along(timeline: Timeline, progress: Progress | None = None) -> ClearanceOverTime:
    """Return the exact clearance along a timeline. Raises Cancelled."""
    progress = progress or Silent()
    samples = [one for place, segment in enumerate(timeline.segments) for one in _samples(place, segment)]
    _fill(samples, timeline, progress)
    states = [_state(timeline.segments[one.segment], one) for one in samples]
    return ClearanceOverTime(
        timeline,
        np.array([one.seconds for one in samples]),
        np.array([one.segment for one in samples], np.int64),
        np.array([one.angles[0] for one in samples]),
        np.array([one.angles[1] for one in samples]),
        np.array([one.clearance_mm for one in samples]),
        np.array([one.slack_mm for one in samples]),
        np.array([_required_mm(timeline.segments[one.segment].scene, one) for one in samples]),
        np.array([CODE_OF[state] for state in states], np.int8),
        np.array([one.machine_part for one in samples], np.int64),
        np.array([one.couch_part for one in samples], np.int64),
        tuple(_tight_places(timeline, samples, states)),
    )


def next_tight(curve: ClearanceOverTime, seconds: float, forth: int) -> float | None:
    """Return when the next tightest place comes, or the one before (`forth` -1) was; None for no more."""
    times = [tight.seconds for tight in curve.tight]
    if forth > 0:
        return min((time for time in times if time > seconds + 1e-6), default=None)
    return max((time for time in times if time < seconds - 1e-6), default=None)


def curve_of_field(curve: ClearanceOverTime, field: int) -> ClearanceOverTime:
    """Return the part of a curve that is one field of the report, from 0 on. ValueError for one that is not on it."""
    segments = curve.timeline.segments
    place = next((k for k, segment in enumerate(segments) if segment.field == field), None)
    if place is None:
        raise ValueError(f"field = {field} is not on this timeline")
    inside = curve.segment == place
    first = int(np.argmax(inside))
    start_s = segments[place].start_s
    own = replace(
        segments[place],
        start_s=0.0,
        at_s=tuple(seconds - start_s for seconds in segments[place].at_s),
        stop_s=segments[place].stop_s - start_s,
    )
    return ClearanceOverTime(
        Timeline((own,), curve.timeline.assumed),
        curve.seconds[inside] - start_s,
        np.zeros(int(inside.sum()), np.int64),
        curve.gantry_deg[inside],
        curve.couch_deg[inside],
        curve.clearance_mm[inside],
        curve.slack_mm[inside],
        curve.required_mm[inside],
        curve.state[inside],
        curve.machine_part[inside],
        curve.couch_part[inside],
        tuple(
            replace(tight, sample=tight.sample - first, segment=0, seconds=tight.seconds - start_s)
            for tight in curve.tight
            if tight.segment == place
        ),
    )


@dataclass
class _Sample:
    """One sample as it is being made; `place` is what the check says of it, exactly, where it does."""

    segment: int
    seconds: float
    angles: tuple[float, float]
    place: Approach | None = None
    clearance_mm: float = math.nan
    slack_mm: float = math.nan
    machine_part: int = -1
    couch_part: int = -1


def _samples(place: int, segment: Segment) -> list[_Sample]:
    """Return the samples of a segment in the order of time, its ends among them."""
    times = {segment.start_s, segment.stop_s}
    for (start, stop), (one, other) in zip(pairwise(segment.at_s), pairwise(segment.points_deg), strict=True):
        most = max(abs(b - a) for a, b in zip(one, other, strict=True))
        times.update(np.linspace(start, stop, max(math.ceil(most / STEP_DEG - 1e-9), 1) + 1).tolist())
    told = [at for at in (*segment.places, segment.tightest) if at is not None]
    samples = [_Sample(place, seconds, segment.angles_at(seconds)) for seconds in times]
    samples += [_Sample(place, segment.seconds_of(at), (at.gantry_deg, at.couch_deg), at) for at in dict.fromkeys(told)]
    return sorted(samples, key=lambda one: one.seconds)


def _fill(samples: list[_Sample], timeline: Timeline, progress: Progress) -> None:
    """Compute the samples, those of one scene together."""
    by_scene: dict[Scene, list[_Sample]] = {}
    for one in samples:
        segment = timeline.segments[one.segment]
        if one.place is not None:
            at = one.place
            one.clearance_mm, one.slack_mm = at.clearance_mm, at.slack_mm
            one.machine_part, one.couch_part = at.machine_part, at.couch_part
        elif segment.kind == "table":
            one.clearance_mm = segment.bound_mm
        elif _can_be_sampled(segment):
            by_scene.setdefault(segment.scene, []).append(one)
    for done, (scene, wanted) in enumerate(by_scene.items()):
        _fill_scene(scene, wanted, progress)
        progress.report((done + 1) / len(by_scene), "clearance over time")


def _can_be_sampled(segment: Segment) -> bool:
    """Tell whether a pose of the segment's scene says what is near at that time."""
    if segment.kind == "out of reach" or not segment.is_reachable or segment.scene.no_travel:
        return False
    # While an arm or a tilt moves on a way that nobody describes, its end says nothing.
    return segment.kind != "fit" or segment.state is not State.UNPROVED


def _fill_scene(scene: Scene, samples: list[_Sample], progress: Progress) -> None:
    """Sweep row by row, where the gantry turns alone, and what is left column by column."""
    rows: dict[float, list[_Sample]] = {}
    for one in samples:
        rows.setdefault(one.angles[1], []).append(one)
    columns: dict[float, list[_Sample]] = {}
    for couch_deg, row in rows.items():
        if len({one.angles[0] for one in row}) > 1:
            stop_if_cancelled(progress)
            gantry_deg = np.unique([one.angles[0] for one in row])
            found = sweep(scene, gantry_deg, np.array([couch_deg]), threads=1)
            for one in row:
                _take(one, found, 0, int(np.searchsorted(gantry_deg, one.angles[0])))
        else:
            columns.setdefault(row[0].angles[0], []).extend(row)
    for at_gantry, column in columns.items():
        stop_if_cancelled(progress)
        couch_deg_up = np.unique([one.angles[1] for one in column])
        found = sweep(scene, np.array([at_gantry]), couch_deg_up, threads=1)
        for one in column:
            _take(one, found, int(np.searchsorted(couch_deg_up, one.angles[1])), 0)


def _take(one: _Sample, found: ClearanceMap, row: int, column: int) -> None:
    one.clearance_mm, one.slack_mm = float(found.clearance_mm[row, column]), float(found.slack_mm[row, column])
    one.machine_part, one.couch_part = int(found.machine_part[row, column]), int(found.couch_part[row, column])


def _state(segment: Segment, one: _Sample) -> State:
    """Return what is known at a sample; "permitted" takes the proof of the whole segment."""
    if not segment.is_reachable:
        return State.NO_TRAVEL
    if segment.kind == "table":
        return segment.state
    state = exact_state(one.clearance_mm, one.slack_mm)
    if state is State.PERMITTED and segment.state is not State.PERMITTED:
        return State.UNPROVED
    return state


def _required_mm(scene: Scene, one: _Sample) -> float:
    if one.machine_part < 0 or one.couch_part < 0:
        return math.nan
    return scene.required_mm(scene.parts[one.machine_part], scene.parts[one.couch_part])


def _tight_places(timeline: Timeline, samples: list[_Sample], states: list[State]) -> list[TightPlace]:
    found = []
    for k, (one, state) in enumerate(zip(samples, states, strict=True)):
        tightest = timeline.segments[one.segment].tightest
        if tightest is not None and one.place == tightest:
            found.append(TightPlace(k, one.segment, one.seconds, one.clearance_mm, state))
    return found
