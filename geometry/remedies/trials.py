"""Trying a change of set-up or angles: a quick look at exact distances first, then all that `assess_pose` asks."""

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from geometry.assess import Options, Pose, assess_pose, tolerances_of
from geometry.planes import Plane, planes_of
from geometry.progress import Progress, stop_if_cancelled
from geometry.scene import build_scene
from geometry.setup import Setup
from geometry.states import State
from geometry.sweep import angles_of, sweep_plane

Array = NDArray[np.float64]

# A shift is found to within this, mm.
STEP_MM = 1.0
# Proofs that are tried for one kind of change before it is given up.
MOST_PROOFS = 12


@dataclass(frozen=True)
class Trial:
    """A pose (unwrapped angles, deg) of a set-up, and how it is to be judged."""

    setup: Setup
    gantry_deg: float
    couch_deg: float
    options: Options
    progress: Progress

    def permitted(self) -> Pose | None:
        """Return the pose if it is permitted, None if not. Raises Cancelled."""
        stop_if_cancelled(self.progress)
        scene = build_scene(self.setup)
        if scene.no_travel or not least_slack_mm(planes_of(scene), *self.around()) >= 0.0:
            return None
        stop_if_cancelled(self.progress)
        pose = assess_pose(self.setup, self.gantry_deg, self.couch_deg, self.options)
        return pose if pose.state is State.PERMITTED else None

    def around(self) -> tuple[Array, Array]:
        """Return the middle, ends and corners of the readout tolerances, as gantry and couch angles, deg, rising."""
        tolerances = tolerances_of(self.setup.room, self.options)
        return with_ends(self.gantry_deg, tolerances.of_gantry_deg), with_ends(self.couch_deg, tolerances.of_couch_deg)


def with_ends(angle_deg: float, tolerance_deg: float) -> Array:
    """Return the angle and the ends of its tolerance, deg, rising, each once."""
    return np.unique([angle_deg - tolerance_deg, angle_deg, angle_deg + tolerance_deg])


def least_slack_mm(planes: tuple[Plane, ...], gantry_deg: Array, couch_deg: Array) -> float:
    """Return the least exact slack over some angles, mm; NaN where a distance is missing."""
    found = []
    for plane in planes:
        gantry = angles_of(gantry_deg if plane.with_gantry else np.zeros(1))
        couch = angles_of(couch_deg if plane.with_couch else np.zeros(1))
        found.append(float(sweep_plane(plane, gantry, couch, threads=1).slack.min()))
    # Unlike min, this one keeps what is not a number.
    return float(np.min(found))


def smallest(
    slack_mm: Callable[[float], float], tried: Callable[[float], Pose | None], most_mm: float
) -> tuple[float, Pose] | None:
    """Return the smallest whole number of mm, up to `most_mm`, for which a change is permitted, and the pose.

    A change of 1 mm must not change a slack by more than 1 mm: where `slack_mm` is negative by m, no change smaller by
    less than m can do. Where the slack would do and the proof does not, a larger change is tried, and what lies between
    is halved.
    """
    size, proofs, step = STEP_MM, 0, STEP_MM
    refused = 0.0
    while size <= most_mm and proofs < MOST_PROOFS:
        slack = slack_mm(size)
        if not slack >= 0.0:
            size += max(STEP_MM, 0.0 if math.isnan(slack) else math.floor(-slack))
            refused, step = size - STEP_MM, STEP_MM
            continue
        proofs += 1
        pose = tried(size)
        if pose is not None:
            return _between(tried, refused, size, pose)
        refused = size
        size += step
        step *= 2.0
    return None


def _between(tried: Callable[[float], Pose | None], low: float, high: float, pose: Pose) -> tuple[float, Pose]:
    """Halve what lies between a change that is not permitted and one that is, down to 1 mm."""
    while high - low > STEP_MM:
        middle = math.floor(0.5 * (low + high))
        found = tried(middle)
        if found is None:
            low = middle
        else:
            high, pose = middle, found
    return high, pose
