"""What stands in the way of a pose, and the smallest single changes that would make it permitted.

Nothing is offered that was not computed: each change is judged like any other pose, proof and tolerances included.
"""

import math
from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace
from enum import StrEnum
from typing import Final

from geometry.assess import Assessment, Options, Pose, assess_pose
from geometry.frames import normalised_deg, unwrapped_deg
from geometry.machine import Arm, Mount
from geometry.planes import planes_of
from geometry.progress import Progress, Silent, stop_if_cancelled
from geometry.remedies.angles import clamped_deg, nearest_couch, nearest_gantry, nearest_of_both, other_pair
from geometry.remedies.obstacles import Obstacle, obstacles_at
from geometry.remedies.shift import all_shifts
from geometry.remedies.trials import Trial, least_slack_mm, smallest
from geometry.scene import build_scene
from geometry.setup import Setup
from geometry.spans import ANGLE_DEG
from geometry.states import State

__all__ = ["Obstacle", "Remedy", "RemedyKind", "find_remedies", "obstacles_at"]

# Collimator angles that are tried, deg.
COLLIMATOR_STEP_DEG: Final = 15.0
# Pairs with less slack than this are in the way where only the proof fails, mm.
NEARLY_MM: Final = 10.0


class RemedyKind(StrEnum):
    """What is changed."""

    OTHER_PAIR = "other pair"
    DEVICE = "device"
    ARM = "arm"
    ACCESSORY = "accessory"
    COLLIMATOR = "collimator"
    ANGLES = "angles"
    SHIFT = "shift"


@dataclass(frozen=True, eq=False)
class Remedy:
    """A single change after which the pose is permitted.

    `setup` is the set-up after it, the same object where only angles change; `gantry_deg` and `couch_deg` (unwrapped)
    the pose to go to. `clearance_mm` and `slack_mm` are exact there. `size` sorts within a kind: mm or deg.
    """

    kind: RemedyKind
    text: str
    setup: Setup
    gantry_deg: float
    couch_deg: float
    clearance_mm: float
    slack_mm: float
    size: float
    state: State = State.PERMITTED


def find_remedies(
    setup: Setup,
    gantry_deg: float,
    couch_deg: float,
    options: Options | None = None,
    assessment: Assessment | None = None,
    progress: Progress | None = None,
) -> Iterator[Remedy]:
    """Yield, as they are found, the changes that make a pose (any finite angles, deg) permitted; none if it is.

    `assessment`, if it is that of the set-up, spares work. GeometryError for a set-up that cannot be built, Cancelled.
    """
    options = options or Options()
    progress = progress or Silent()
    room = setup.room
    known = assessment if assessment is not None and assessment.scene.setup is setup else None
    at = clamped_deg(room.gantry, gantry_deg), clamped_deg(room.couch.turntable, couch_deg)
    trial = Trial(setup, *at, options, progress)
    if assess_pose(setup, gantry_deg, couch_deg, options).state is State.PERMITTED:
        return
    within = all(
        abs(math.remainder(found - asked, 360.0)) < ANGLE_DEG
        for found, asked in zip(at, (gantry_deg, couch_deg), strict=True)
    )
    yield from _Finder(trial, known).found(angles_only=not within)


class _Finder:
    """Tries the kinds of changes in turn, the quickest first."""

    def __init__(self, trial: Trial, assessment: Assessment | None) -> None:
        self._trial = trial
        self._assessment = assessment
        self._obstacles = _obstacles_about(trial)
        self._names = {part.name for o in self._obstacles for part in (o.machine_part, o.couch_part)}

    def found(self, *, angles_only: bool) -> Iterator[Remedy]:
        """Yield what helps; for angles beyond their travel only others do. Raises Cancelled."""
        kinds: tuple[Callable[[], Iterator[Remedy]], ...] = (
            self._other_pair,
            self._without_device,
            self._arms,
            self._without_accessory,
            self._collimator,
            self._angles,
            self._shifts,
        )
        kinds = (self._nearest_within,) if angles_only else kinds
        for done, kind in enumerate(kinds):
            self._trial.progress.report(done / len(kinds), "remedies")
            yield from kind()
        stop_if_cancelled(self._trial.progress)
        self._trial.progress.report(1.0, "remedies")

    def _other_pair(self) -> Iterator[Remedy]:
        pose = other_pair(self._trial)
        if pose is not None:
            angles = f"gantry {_shown(pose.gantry_deg)}, couch {_shown(pose.couch_deg)}"
            yield self._remedy(RemedyKind.OTHER_PAIR, f"Same direction by {angles}", self._trial.setup, pose, 0.0)

    def _without_device(self) -> Iterator[Remedy]:
        setup = self._trial.setup
        for device in setup.devices:
            if device.name in self._names:
                kept = tuple(other for other in setup.devices if other is not device)
                yield from self._changed(RemedyKind.DEVICE, f"Without {device.name}", replace(setup, devices=kept))

    def _arms(self) -> Iterator[Remedy]:
        room = self._trial.setup.room
        involved = {part.arm for part in room.parts if part.arm is not None and part.name in self._names}
        for arm in room.arms:
            if arm.name in involved:
                yield from self._arm_positions(arm)
                yield from self._arm_slides(arm)

    def _arm_positions(self, arm: Arm) -> Iterator[Remedy]:
        setup = self._trial.setup
        chosen = dict(setup.arm_positions).get(arm.name, arm.positions[0].name if arm.positions else None)
        for position in arm.positions:
            if position.name != chosen:
                text = f"{_capital(arm.name)} {position.name}"
                yield from self._changed(RemedyKind.ARM, text, _with_arm(setup, arm, position.name))

    def _arm_slides(self, arm: Arm) -> Iterator[Remedy]:
        """Slide an arm that is somewhere on its free travel, as little as will do."""
        setup, trial = self._trial.setup, self._trial
        chosen = dict(setup.arm_positions).get(arm.name)
        if arm.travel_mm is None or isinstance(chosen, str) or (chosen is None and arm.positions):
            return
        low, high = arm.travel_mm
        start = float(low if chosen is None else chosen)
        for sense, most_mm in ((-1.0, start - low), (1.0, high - start)):

            def moved(size_mm: float, sense: float = sense) -> Setup:
                return _with_arm(setup, arm, start + sense * size_mm)

            def slack_mm(size_mm: float, sense: float = sense) -> float:
                stop_if_cancelled(trial.progress)
                return least_slack_mm(planes_of(build_scene(moved(size_mm, sense))), *trial.around())

            def tried(size_mm: float, sense: float = sense) -> Pose | None:
                return replace(trial, setup=moved(size_mm, sense)).permitted()

            found = smallest(slack_mm, tried, most_mm)
            if found is not None:
                size_mm, pose = found
                text = f"{_capital(arm.name)} by {sense * size_mm:+g} mm, to {start + sense * size_mm:g} mm"
                yield self._remedy(RemedyKind.ARM, _with_minus(text), moved(size_mm), pose, size_mm)

    def _without_accessory(self) -> Iterator[Remedy]:
        setup = self._trial.setup
        parts = setup.room.parts
        involved = {part.accessory for part in parts if part.accessory is not None and part.name in self._names}
        for name in setup.fitted:
            if name in involved:
                kept = tuple(other for other in setup.fitted if other != name)
                yield from self._changed(RemedyKind.ACCESSORY, f"{_capital(name)} off", replace(setup, fitted=kept))

    def _collimator(self) -> Iterator[Remedy]:
        """Turn the collimator by steps, where something that it carries is in the way."""
        setup = self._trial.setup
        if not any(part.mount is Mount.COLLIMATOR and part.name in self._names for part in setup.room.parts):
            return
        travel = setup.room.collimator.low, setup.room.collimator.high
        here = unwrapped_deg(setup.collimator_deg or 0.0, travel) or (0.0,)
        steps = range(math.ceil(travel[0] / COLLIMATOR_STEP_DEG), math.floor(travel[1] / COLLIMATOR_STEP_DEG) + 1)
        turns = sorted((abs(step * COLLIMATOR_STEP_DEG - here[0]), step * COLLIMATOR_STEP_DEG) for step in steps)
        for turn_deg, angle_deg in turns:
            if turn_deg == 0.0 and setup.collimator_deg is not None:
                continue
            after = replace(setup, collimator_deg=normalised_deg(angle_deg))
            pose = replace(self._trial, setup=after).permitted()
            if pose is not None:
                text = f"Collimator at {_shown(angle_deg)}"
                text += ", not any angle" if setup.collimator_deg is None else f", {turn_deg:g}° from now"
                yield self._remedy(RemedyKind.COLLIMATOR, text, after, pose, turn_deg)
                return

    def _angles(self) -> Iterator[Remedy]:
        trial = self._trial
        alone = nearest_gantry(trial), nearest_couch(trial)
        for pose in alone:
            if pose is not None:
                yield self._turned(pose)
        pose = nearest_of_both(trial, self._assessment)
        if pose is not None and pose.gantry_deg != trial.gantry_deg and pose.couch_deg != trial.couch_deg:
            yield self._turned(pose)

    def _nearest_within(self) -> Iterator[Remedy]:
        """Go to the nearest permitted angles of the travel, its end among them."""
        trial = self._trial
        here = trial.permitted()
        pose = (
            replace(here, gantry_deg=trial.gantry_deg, couch_deg=trial.couch_deg)
            if here is not None
            else nearest_of_both(trial, self._assessment)
        )
        if pose is not None:
            text = f"Gantry {_shown(pose.gantry_deg)}, couch {_shown(pose.couch_deg)}, within the travel"
            yield self._remedy(RemedyKind.ANGLES, text, trial.setup, pose, 0.0)

    def _turned(self, pose: Pose) -> Remedy:
        turns = pose.gantry_deg - self._trial.gantry_deg, pose.couch_deg - self._trial.couch_deg
        words = [
            f"{name} by {turn:+.4g}°, to {_shown(angle)}"
            for name, turn, angle in zip(("gantry", "couch"), turns, (pose.gantry_deg, pose.couch_deg), strict=True)
            if turn != 0.0
        ]
        text = _with_minus(_capital("; ".join(words)))
        return self._remedy(RemedyKind.ANGLES, text, self._trial.setup, pose, math.hypot(*turns))

    def _shifts(self) -> Iterator[Remedy]:
        for shift, size_mm, pose in all_shifts(self._trial, self._obstacles):
            text = f"Patient {size_mm:g} mm {shift.words}"
            if self._trial.setup.devices:
                text += ", devices stay"
            yield self._remedy(RemedyKind.SHIFT, text, shift.of(self._trial.setup, size_mm), pose, size_mm)

    def _changed(self, kind: RemedyKind, text: str, setup: Setup) -> Iterator[Remedy]:
        pose = replace(self._trial, setup=setup).permitted()
        if pose is not None:
            yield self._remedy(kind, text, setup, pose, 0.0)

    def _remedy(self, kind: RemedyKind, text: str, setup: Setup, pose: Pose, size: float) -> Remedy:
        angles = self._trial.gantry_deg, self._trial.couch_deg
        if kind in {RemedyKind.ANGLES, RemedyKind.OTHER_PAIR}:
            angles = pose.gantry_deg, pose.couch_deg
        return Remedy(kind, text, setup, *angles, pose.clearance_mm, pose.slack_mm, size, pose.state)


def _obstacles_about(trial: Trial) -> tuple[Obstacle, ...]:
    """Return what is short at the pose or at the ends of its tolerances; what nearly is where nothing is."""
    scene = build_scene(trial.setup)
    gantry, couch = trial.around()
    for margin_mm in (0.0, NEARLY_MM):
        found = {
            (o.machine_part.label, o.couch_part.label): o
            for g in gantry
            for c in couch
            for o in obstacles_at(scene, float(g), float(c), margin_mm)
        }
        if found:
            return tuple(found.values())
    return ()


def _with_arm(setup: Setup, arm: Arm, place: str | float) -> Setup:
    """Return the set-up with an arm elsewhere."""
    chosen = dict(setup.arm_positions) | {arm.name: place}
    return replace(setup, arm_positions=tuple(chosen.items()))


def _shown(angle_deg: float) -> str:
    return f"{normalised_deg(round(angle_deg, 4)):g}°"


def _capital(text: str) -> str:
    return text[:1].upper() + text[1:]


def _with_minus(text: str) -> str:
    return text.replace("-", "−")
