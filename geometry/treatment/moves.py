"""Moves between fields that may differ in more than their angles: turns, table moves, changes of what is fitted.

What a move needs is tried in two orders: first the change and then the turn, or the other way round. The turn goes
the plain way where that is proved (one axis after the other, in the least time there is), else the quickest proved way
round what stands in it.
"""

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from functools import partial
from itertools import pairwise
from typing import Final

from geometry.angle_graph import speeds_of
from geometry.legs import Point
from geometry.paths import Verdict
from geometry.progress import Progress, stop_if_cancelled
from geometry.setup import Setup
from geometry.spans import ANGLE_DEG
from geometry.states import CODE_OF, State
from geometry.table_moves import table_move
from geometry.treatment.data import MoveStep, part_labels
from geometry.treatment.stages import Stage, Stages, arms_of, seconds_of, state_of, table_of, tilt_of

# Of a collimator whose speed the room does not state, deg/s. Common practice, no source.
COLLIMATOR_SPEED: Final = 6.0


@dataclass(frozen=True, eq=False)
class Steps:
    """What a move takes, in order; `reason` says why it is not permitted, `in_the_way` names the parts to blame."""

    steps: tuple[MoveStep, ...] = ()
    reason: str = ""
    in_the_way: tuple[str, str] | None = None

    @property
    def state(self) -> State:
        """The worst of the steps' states."""
        return min((step.state for step in self.steps), key=CODE_OF.__getitem__, default=State.PERMITTED)

    def then(self, other: "Steps") -> "Steps":
        """Return these steps and others after them."""
        reasons = [reason for reason in (self.reason, other.reason) if reason]
        return Steps(self.steps + other.steps, "; ".join(reasons), self.in_the_way or other.in_the_way)


def changes_between(before: Setup, after: Setup) -> bool:
    """Tell whether more than gantry, couch and collimator has to change between two set-ups."""
    return state_of(replace(before, collimator_deg=None)) != state_of(replace(after, collimator_deg=None))


class Mover:
    """Finds moves between fields of one check."""

    def __init__(self, stages: Stages, progress: Progress) -> None:
        self._stages = stages
        self._progress = progress

    def between(self, before: Setup, after: Setup, start: Point, stop: Point) -> Steps:
        """Return the steps from the end of one field to the start of another, angles unwrapped, deg. Raises Cancelled.

        Where no order of steps is permitted, those that fail least.
        """
        if not changes_between(before, after):
            return self._turn(before, after, start, stop)
        if before.collimator_deg != after.collimator_deg:
            # It may turn at any time between the two: what it can sweep is kept clear throughout.
            before, after = (replace(setup, collimator_deg=None) for setup in (before, after))
        return _best(
            lambda: self._change(before, after, start).then(self._turn(after, after, start, stop)),
            lambda: self._turn(before, before, start, stop).then(self._change(before, after, stop)),
        )

    def _turn(self, before: Setup, after: Setup, start: Point, stop: Point) -> Steps:
        """Return the turn of gantry and couch, and of a collimator that differs, in otherwise the same set-up."""
        if before.collimator_deg == after.collimator_deg:
            return self._on_stage(self._stages.of(before), start, stop)
        swept = self._stages.of(replace(before, collimator_deg=None))
        one, other = self._stages.of(before), self._stages.of(after)
        collimator = partial(self._collimator, swept, before, after)
        if len(_distinct((start, stop))) == 1:
            return collimator(start)
        return _best(
            lambda: self._on_stage(swept, start, stop),
            lambda: collimator(start).then(self._on_stage(other, start, stop, plain_only=True)),
            lambda: self._on_stage(one, start, stop, plain_only=True).then(collimator(stop)),
        )

    def _on_stage(self, stage: Stage, start: Point, stop: Point, *, plain_only: bool = False) -> Steps:
        """Return the turn of gantry and couch where nothing else changes."""
        stop_if_cancelled(self._progress)
        plain = [points for points in _plain_ways(start, stop) if len(points) > 1]
        if not plain:
            return Steps()
        found = [(points, stage.verdict(points, self._progress)) for points in plain]
        permitted = [entry for entry in found if entry[1].state is State.PERMITTED]
        if permitted:
            # As quick as each other: the one with more room is taken.
            return self._turned(stage, *max(permitted, key=lambda entry: entry[1].least_clearance_mm))
        ends = [stage.pose(at, self._progress).state for at in (start, stop)]
        if not plain_only and ends == [State.PERMITTED] * 2:
            points = stage.way_round(start, stop, self._progress)
            if points is not None:
                found.append((points, stage.verdict(points, self._progress)))
        return self._turned(stage, *max(reversed(found), key=lambda entry: CODE_OF[entry[1].state]))

    def _turned(self, stage: Stage, points: tuple[Point, ...], verdict: Verdict) -> Steps:
        permitted = verdict.state is State.PERMITTED
        speeds = speeds_of(stage.setup.room)
        seconds = seconds_of(points, speeds.gantry, speeds.couch, together=False) if permitted else math.nan
        text = ", then ".join(_leg(one, other) for one, other in pairwise(points))
        step = MoveStep("turn", text, stage.scene, points, verdict.state, seconds, verdict)
        return _single(step, verdict, "no proved way for the turn")

    def _collimator(self, swept: Stage, before: Setup, after: Setup, at: Point) -> Steps:
        """Return the collimator's turn at one pose."""
        verdict = swept.pose(at, self._progress)
        angles = before.collimator_deg, after.collimator_deg
        text = "collimator from {} to {}".format(*("any angle" if a is None else f"{a:g} deg" for a in angles))
        seconds = math.nan
        if angles[0] is not None and angles[1] is not None and verdict.state is State.PERMITTED:
            change = abs(angles[1] - angles[0]) % 360.0
            seconds = min(change, 360.0 - change) / (after.room.collimator.speed or COLLIMATOR_SPEED)
        step = MoveStep("collimator", text, swept.scene, (at,), verdict.state, seconds, verdict)
        return _single(step, verdict, "no room for the collimator's turn")

    def _change(self, before: Setup, after: Setup, at: Point) -> Steps:
        """Return what else changes at one pose: the table first, then what is fitted or tilted."""
        stop_if_cancelled(self._progress)
        moved = replace(before, isocentre=after.isocentre, on_table=after.on_table, devices=after.devices)
        steps = Steps()
        if table_of(before) != table_of(after):
            steps = self._table(before, moved, at)
        by_hand, unknown = _changed(before, after)
        if by_hand or unknown:
            steps = steps.then(self._fit(after, at, by_hand, unknown))
        return steps

    def _table(self, before: Setup, after: Setup, at: Point) -> Steps:
        stage = self._stages.of(before)
        found = table_move(before, after, *at, stage.tolerances, self._progress)
        shift = self._stages.of(after).scene.couch.T_mm - stage.scene.couch.T_mm
        names = ("lateral", "longitudinal", "vertical")
        parts = [f"{name} {way:+.1f} mm" for name, way in zip(names, shift, strict=True) if abs(way) >= 0.05]
        couch = before.room.couch
        speeds = couch.lateral.speed, couch.longitudinal.speed, couch.vertical.speed
        times = [math.nan if speed is None else abs(way) / speed for speed, way in zip(speeds, shift, strict=True)]
        known = found.state is State.PERMITTED and not any(math.isnan(time) for time in times)
        text = f"table by {', '.join(parts) or 'nothing'}"
        step = MoveStep("table", text, stage.scene, (at,), found.state, max(times) if known else math.nan, table=found)
        if found.state is State.PERMITTED:
            return Steps((step,))
        labels = part_labels(stage.scene, found.first_short) if found.first_short is not None else None
        return Steps((step,), found.reason or _in_words("no proved way for the table", labels), labels)

    def _fit(self, after: Setup, at: Point, by_hand: Sequence[str], unknown: Sequence[str]) -> Steps:
        stage = self._stages.of(after)
        verdict = stage.pose(at, self._progress)
        text = "; ".join((*by_hand, *unknown))
        if unknown and verdict.state is State.PERMITTED:
            step = MoveStep("fit", text, stage.scene, (at,), State.UNPROVED, math.nan, verdict)
            return Steps((step,), f"{'; '.join(unknown)}: nothing tells the way that this takes")
        step = MoveStep("fit", text, stage.scene, (at,), verdict.state, math.nan, verdict)
        return _single(step, verdict, "no room for the change")


def _changed(before: Setup, after: Setup) -> tuple[list[str], list[str]]:
    """Return in words what people change by hand, and what machines move on a way that no room describes."""
    by_hand = [f"take off '{name}'" for name in before.fitted if name not in after.fitted]
    by_hand += [f"fit '{name}'" for name in after.fitted if name not in before.fitted]
    old, new = arms_of(before), arms_of(after)
    unknown = [
        f"arm '{name}' from {_arm_place(old[name])} to {_arm_place(place)}"
        for name, place in new.items()
        if old[name] != place
    ]
    unknown += [
        f"{name} from {one:g} to {other:g} deg"
        for name, one, other in zip(("pitch", "roll", "eccentric"), tilt_of(before), tilt_of(after), strict=True)
        if one != other
    ]
    return by_hand, unknown


def _arm_place(place: str | float) -> str:
    return f"'{place}'" if isinstance(place, str) else f"{place:g} mm"


def _plain_ways(start: Point, stop: Point) -> list[tuple[Point, ...]]:
    """Return the ways that turn each axis once."""
    corners = ((stop[0], start[1]), (start[0], stop[1]))
    ways = [_distinct((start, corner, stop)) for corner in corners]
    return ways if ways[0] != ways[1] else ways[:1]


def _distinct(points: Sequence[Point]) -> tuple[Point, ...]:
    """Return the corners without those that all but repeat the one before."""
    found = [points[0]]
    for point in points[1:]:
        if max(abs(one - other) for one, other in zip(point, found[-1], strict=True)) > ANGLE_DEG:
            found.append(point)
    return tuple(found)


def _best(*ways: Callable[[], Steps]) -> Steps:
    """Return the first way that is permitted, else the one that fails least; later ones are tried only if need be."""
    found = []
    for way in ways:
        found.append(way())
        if found[-1].state is State.PERMITTED:
            return found[-1]
    return max(found, key=lambda steps: CODE_OF[steps.state])


def _leg(one: Point, other: Point) -> str:
    moved = [f"{name} to {b:g} deg" for name, a, b in zip(("gantry", "couch"), one, other, strict=True) if a != b]
    return " and ".join(moved)


def _single(step: MoveStep, verdict: Verdict, words: str) -> Steps:
    """Return one step, with why it is not permitted."""
    if step.state is State.PERMITTED:
        return Steps((step,))
    labels = part_labels(step.scene, verdict.first_short) if verdict.first_short is not None else None
    return Steps((step,), verdict.reason or _in_words(words, labels), labels)


def _in_words(words: str, labels: tuple[str, str] | None) -> str:
    return words if labels is None else f"{words}; in the way: {labels[0]} and {labels[1]}"
