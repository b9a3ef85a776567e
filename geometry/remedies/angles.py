"""The nearest permitted angles, and the other pair of angles that a beam comes from the same direction at."""

import math
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from geometry.assess import Assessment, Pose, tolerances_of
from geometry.frames import unwrapped_deg
from geometry.machine import Axis
from geometry.remedies.trials import MOST_PROOFS, Trial, with_ends
from geometry.scene import build_scene
from geometry.states import CODE_OF, State
from geometry.sweep import grid_deg, sweep

Array = NDArray[np.float64]
Flags = NDArray[np.bool_]

# Angles that are offered, deg: whole ones along an axis, as coarse as this over the plane where it is not assessed.
STEP_DEG = 1.0
PLANE_STEP_DEG = 2.0
# Axes are the same direction's up to this, deg.
_SAME_DEG = 1e-6


def other_pair(trial: Trial) -> Pose | None:
    """Return the permitted pose at (-gantry, couch +- 180), the nearest within the travel; None if there is none."""
    room = trial.setup.room
    gantry = unwrapped_deg(-trial.gantry_deg, (room.gantry.low, room.gantry.high))
    couch = unwrapped_deg(trial.couch_deg + 180.0, (room.couch.turntable.low, room.couch.turntable.high))
    for g, c in _by_distance(trial, [(g, c) for g in gantry for c in couch]):
        pose = replace(trial, gantry_deg=g, couch_deg=c).permitted()
        if pose is not None:
            return _at(pose, g, c)
    return None


def nearest_gantry(trial: Trial) -> Pose | None:
    """Return the nearest permitted pose at the same couch angle and a whole gantry angle; None if there is none."""
    axis = trial.setup.room.gantry
    tolerances = tolerances_of(trial.setup.room, trial.options)
    grid = grid_deg(axis.low, axis.high, STEP_DEG)
    found = sweep(build_scene(trial.setup), grid, with_ends(trial.couch_deg, tolerances.of_couch_deg), trial.progress)
    clear = _eroded(found.slack_mm.min(axis=0) >= 0.0, grid, tolerances.of_gantry_deg)
    return _nearest(trial, [(float(g), trial.couch_deg) for g in grid[clear]])


def nearest_couch(trial: Trial) -> Pose | None:
    """Return the nearest permitted pose at the same gantry angle and a whole couch angle; None if there is none."""
    axis = trial.setup.room.couch.turntable
    tolerances = tolerances_of(trial.setup.room, trial.options)
    grid = grid_deg(axis.low, axis.high, STEP_DEG)
    found = sweep(build_scene(trial.setup), with_ends(trial.gantry_deg, tolerances.of_gantry_deg), grid, trial.progress)
    clear = _eroded(found.slack_mm.min(axis=1) >= 0.0, grid, tolerances.of_couch_deg)
    return _nearest(trial, [(trial.gantry_deg, float(c)) for c in grid[clear]])


def nearest_of_both(trial: Trial, assessment: Assessment | None) -> Pose | None:
    """Return the nearest permitted pose anywhere, by the length of the way on the plane of angles, deg."""
    if assessment is not None:
        gantry, couch = assessment.map.gantry_deg, assessment.map.couch_deg
        clear = assessment.state == CODE_OF[State.PERMITTED]
    else:
        room = trial.setup.room
        gantry = grid_deg(room.gantry.low, room.gantry.high, PLANE_STEP_DEG)
        couch = grid_deg(room.couch.turntable.low, room.couch.turntable.high, PLANE_STEP_DEG)
        tolerances = tolerances_of(room, trial.options)
        clear = sweep(build_scene(trial.setup), gantry, couch, trial.progress).slack_mm >= 0.0
        clear = np.array([_eroded(row, gantry, tolerances.of_gantry_deg) for row in clear])
        clear = np.array([_eroded(column, couch, tolerances.of_couch_deg) for column in clear.T]).T
    rows, columns = np.nonzero(clear)
    return _nearest(trial, list(zip(gantry[columns].tolist(), couch[rows].tolist(), strict=True)))


def clamped_deg(axis: Axis, angle_deg: float) -> float:
    """Return the place of an angle on the travel, deg: itself, else what equals it, else the nearest end."""
    if axis.low <= angle_deg <= axis.high:
        return angle_deg
    same = unwrapped_deg(angle_deg, (axis.low, axis.high))
    if same:
        return min(same, key=lambda angle: abs(angle - angle_deg))
    ends = sorted((axis.low, axis.high), key=lambda end: abs(math.remainder(end - angle_deg, 360.0)))
    return ends[0]


def _nearest(trial: Trial, candidates: list[tuple[float, float]]) -> Pose | None:
    for g, c in _by_distance(trial, candidates)[:MOST_PROOFS]:
        pose = replace(trial, gantry_deg=g, couch_deg=c).permitted()
        if pose is not None:
            return _at(pose, g, c)
    return None


def _by_distance(trial: Trial, candidates: list[tuple[float, float]]) -> list[tuple[float, float]]:
    """Return the candidates, nearest first, without the pose itself."""

    def way_deg(angles: tuple[float, float]) -> float:
        return math.hypot(angles[0] - trial.gantry_deg, angles[1] - trial.couch_deg)

    def is_other(angles: tuple[float, float]) -> bool:
        turns = angles[0] - trial.gantry_deg, angles[1] - trial.couch_deg
        return any(abs(math.remainder(turn, 360.0)) > _SAME_DEG for turn in turns)

    return sorted(filter(is_other, candidates), key=way_deg)


def _eroded(clear: Flags, grid: Array, tolerance_deg: float) -> Flags:
    """Tell where all angles of a rising grid within the tolerance are clear."""
    first = np.searchsorted(grid, grid - tolerance_deg - _SAME_DEG)
    last = np.searchsorted(grid, grid + tolerance_deg + _SAME_DEG)
    short = np.concatenate([[0], np.cumsum(~clear)])
    eroded: Flags = short[last] == short[first]
    return eroded


def _at(pose: Pose, gantry_deg: float, couch_deg: float) -> Pose:
    """Return the pose with its angles as they are on the travel."""
    return replace(pose, gantry_deg=gantry_deg, couch_deg=couch_deg)
