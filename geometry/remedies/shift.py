"""How far the patient must be moved on the table for a pose to be permitted.

The isocentre stays in the patient, so that the couch goes the other way by as much: seen from the isocentre the patient
stays, and the table with everything on it moves.
"""

import math
from collections.abc import Iterator
from dataclasses import dataclass, replace
from typing import Final

import numpy as np
from numpy.typing import NDArray

from geometry.assess import Pose
from geometry.frames import R_dicom_tabletop
from geometry.plane_kernel import Pairs
from geometry.planes import Plane, planes_of
from geometry.remedies.obstacles import Obstacle
from geometry.remedies.trials import Trial, least_slack_mm, smallest
from geometry.scene import Scene, build_scene
from geometry.setup import Setup

Array = NDArray[np.float64]

MOST_MM: Final = 150.0
# What a patient's own axes are called, DICOM: x to the left, y to the back, z to the head.
_OWN: Final = (("left", "right"), ("back", "front"), ("head", "feet"))


@dataclass(frozen=True)
class Shift:
    """A shift of the patient on the table: a field of `OnTable`, which way it changes, and the words for it."""

    field: str
    sense: float
    words: str

    def of(self, setup: Setup, size_mm: float) -> Setup:
        """Return the set-up after the shift."""
        value = getattr(setup.on_table, self.field) + self.sense * size_mm
        return replace(setup, on_table=replace(setup.on_table, **{self.field: value}))


def shifts_of(setup: Setup) -> tuple[Shift, ...]:
    """Return the six shifts, in words for how the patient lies."""
    across = R_dicom_tabletop(setup.patient_position)[:, 0]
    axis = int(np.argmax(np.abs(across)))
    plus, minus = _OWN[axis] if across[axis] > 0.0 else _OWN[axis][::-1]
    return (
        Shift("lateral_mm", 1.0, f"to the patient's {plus} (table-top +X)"),
        Shift("lateral_mm", -1.0, f"to the patient's {minus} (table-top −X)"),
        Shift("from_head_end_mm", -1.0, "towards the table's head end"),
        Shift("from_head_end_mm", 1.0, "away from the table's head end"),
        Shift("height_mm", 1.0, "higher above the table"),
        Shift("height_mm", -1.0, "lower on the table"),
    )


def smallest_shift(trial: Trial, shift: Shift, obstacles: tuple[Obstacle, ...]) -> tuple[float, Pose] | None:
    """Return the smallest shift, mm, up to 150, that makes the trial's pose permitted, with the pose; None for none.

    `obstacles` are the pairs that are short about the pose: a pair that the shift leaves as it is rules it out.
    """
    most_mm = MOST_MM
    if shift.field == "height_mm" and shift.sense < 0.0:
        most_mm = min(most_mm, math.floor(trial.setup.on_table.height_mm))
    if most_mm < 1.0:
        return None
    moving = _Moving(build_scene(trial.setup), build_scene(shift.of(trial.setup, 1.0)))
    if any(moving.leaves(obstacle) for obstacle in obstacles):
        return None
    around = trial.around()

    def slack_mm(size_mm: float) -> float:
        excess = moving.beyond_travel_mm(size_mm)
        return -excess if excess > 0.0 else least_slack_mm(moving.planes(size_mm), *around)

    def tried(size_mm: float) -> Pose | None:
        return replace(trial, setup=shift.of(trial.setup, size_mm)).permitted()

    return smallest(slack_mm, tried, most_mm)


class _Moving:
    """A scene's parts as they move with a shift: without building each scene anew."""

    def __init__(self, scene: Scene, after_1_mm: Scene) -> None:
        self._scene = scene
        # Nothing but places changes: every part's first vertex tells how far all of it went.
        self._shift = np.array(
            [
                other.pieces[0].vertices[0] - part.pieces[0].vertices[0]
                for part, other in zip(scene.parts, after_1_mm.parts, strict=True)
            ]
        )
        self._stages = after_1_mm.couch.T_mm - scene.couch.T_mm
        self._planes = planes_of(scene)

    def leaves(self, obstacle: Obstacle) -> bool:
        """Tell whether the obstacle's parts stay as they are to each other."""
        labels = [part.label for part in self._scene.parts]
        return not np.abs(self._shift[labels.index(obstacle.couch_part.label)]).max() > 1e-9

    def beyond_travel_mm(self, size_mm: float) -> float:
        """Return how far the couch's slides would be beyond their travel; 0 for within."""
        couch = self._scene.setup.room.couch
        T = self._scene.couch.T_mm + size_mm * self._stages
        axes = (couch.lateral, couch.longitudinal, couch.vertical)
        excess = max(max(axis.low - value, value - axis.high) for axis, value in zip(axes, T, strict=True))
        return excess if excess > 1e-6 else 0.0

    def planes(self, size_mm: float) -> tuple[Plane, ...]:
        """Return the planes after the shift."""
        return tuple(self._moved(plane, size_mm) for plane in self._planes)

    def _moved(self, plane: Plane, size_mm: float) -> Plane:
        # The couch's parts are always body b's.
        hulls = plane.b
        shift = size_mm * self._shift[hulls.part]
        vertices = hulls.vertices + np.repeat(shift, np.diff(hulls.first), axis=0)
        reach = hulls.reach
        if plane.with_couch:
            reach = np.maximum.reduceat(np.hypot(vertices[:, 0], vertices[:, 1]), hulls.first[:-1])
        moved = hulls._replace(vertices=vertices, centres=hulls.centres + shift, reach=reach)
        pairs = Pairs(plane.pairs.i, plane.pairs.j, plane.pairs.required)
        return Plane(plane.a, moved, pairs, plane.with_gantry, plane.with_couch)


def all_shifts(trial: Trial, obstacles: tuple[Obstacle, ...]) -> Iterator[tuple[Shift, float, Pose]]:
    """Yield each of the six shifts that can make the trial's pose permitted, with its size, mm, and the pose."""
    for shift in shifts_of(trial.setup):
        found = smallest_shift(trial, shift, obstacles)
        if found is not None:
            yield shift, *found
