"""Where to stop and look before a tight place, and on which side of the room that place is. No drawing, no files."""

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise
from typing import Final

import numpy as np

from app.plan.dry_run_words import PLACE_DIGITS
from geometry.assess import Pose, exact_pose
from geometry.frames import Array, R_fixed_turntable, moved
from geometry.legs import Point
from geometry.machine import EVERY_STAGE
from geometry.paths import Approach
from geometry.scene import Scene, ScenePart, Side, patient_placement

# How far before the tightest place people stop and look, deg along the delivery.
BEFORE_DEG: Final = 10.0
# Nearer to each other two places of a path are one, deg.
SAME_DEG: Final = 0.05
# Within this of the isocentre's planes a place is neither left nor right, mm; likewise about the table's surface.
_MIDDLE_MM: Final = 50.0
_TABLE_MM: Final = 30.0


@dataclass(frozen=True)
class Place:
    """A pair of angles, unwrapped, deg, with its exact clearance, mm (NaN for none), and what is nearest there.

    `parts`: labels, the machine's first, None where none are known. `side`: in which direction to look, in words.
    `required_mm`: of that pair; None where no parts are known.
    """

    gantry_deg: float
    couch_deg: float
    clearance_mm: float
    parts: tuple[str, str] | None
    required_mm: float | None
    side: str


def place_of(scene: Scene, approach: Approach) -> Place:
    """Return the place of an exact approach, with its parts' side of the room."""
    pose = exact_pose(scene, approach.gantry_deg, approach.couch_deg)
    machine, other = approach.machine_part, approach.couch_part
    pair = (scene.parts[machine], scene.parts[other]) if machine >= 0 and other >= 0 else None
    return _place(pose, (approach.gantry_deg, approach.couch_deg), approach.clearance_mm, pair)


def place_at(scene: Scene, at: Point) -> Place:
    """Return what is nearest at a pair of true angles, deg, exactly."""
    pose = exact_pose(scene, *at)
    return _place(pose, at, pose.clearance_mm, _pair(pose))


def stop_before(points_deg: Sequence[Point], place: Approach, before_deg: float = BEFORE_DEG) -> Point:
    """Return the pair of angles, deg, some degrees before a place of a path, not before the path's start.

    Where one axis turns alone, the stop is put on the last whole degree before it: people read and set it by hand.
    """
    at = (place.gantry_deg, place.couch_deg)
    way = [*points_deg[: max(place.segment, 0) + 1], at]
    left = before_deg
    for one, other in pairwise(reversed(way)):
        length = _apart(one, other)
        if length > left:
            share = left / length
            stop = tuple(a + share * (b - a) for a, b in zip(one, other, strict=True))
            return _whole((stop[0], stop[1]), other)
        left -= length
    return way[0]


def is_same(one: Point, other: Point) -> bool:
    """Tell whether two pairs of angles are one to anybody who reads a scale."""
    return _apart(one, other) <= SAME_DEG


def side_words(pose: Pose) -> str:
    """Return where the nearest parts face each other, from the isocentre and facing the gantry; empty for unknown."""
    pair = _pair(pose)
    points = [p for p in (pose.machine_point_mm, pose.couch_point_mm) if p is not None and np.isfinite(p).all()]
    if not points or pair is None:
        return ""
    p_fixed: Array = np.mean(points, axis=0)
    ways = (("right", "left"), ("above", "below"), ("towards gantry", "towards foot end"))
    x, z, y = (_way(float(p_fixed[k]), *way) for k, way in zip((0, 2, 1), ways, strict=True))
    words = ", ".join(word for word in (x or "centre", z, y) if word)
    if all(part.side is not Side.COUCH for part in pair):
        return words
    return f"{words}; {_beside_table(pose, p_fixed, pair)}"


def _place(pose: Pose, at: Point, clearance_mm: float, pair: tuple[ScenePart, ScenePart] | None) -> Place:
    return Place(
        *at,
        clearance_mm,
        None if pair is None else (pair[0].label, pair[1].label),
        None if pair is None else pose.scene.required_mm(*pair),
        side_words(pose),
    )


def _pair(pose: Pose) -> tuple[ScenePart, ScenePart] | None:
    if pose.machine_part is None or pose.couch_part is None:
        return None
    return pose.machine_part, pose.couch_part


def _beside_table(pose: Pose, p_fixed: Array, pair: tuple[ScenePart, ScenePart]) -> str:
    """Return where a point is against the table top, and on which side of the patient where the patient is meant."""
    T_fixed_tabletop = np.eye(4)
    T_fixed_tabletop[:3, :3] = R_fixed_turntable(pose.couch_deg)
    T_fixed_tabletop = T_fixed_tabletop @ pose.scene.couch.T_support_part(EVERY_STAGE)
    T_tabletop_fixed: Array = np.linalg.inv(T_fixed_tabletop).astype(np.float64)
    p_tabletop = moved(T_tabletop_fixed, p_fixed)
    height = float(p_tabletop[2])
    words = (
        "at table-top height" if abs(height) <= _TABLE_MM else "above table top" if height > 0.0 else "below table top"
    )
    if all(part.kind != "patient" for part in pair):
        return words
    T_patient_tabletop: Array = np.linalg.inv(patient_placement(pose.scene.setup)).astype(np.float64)
    left = float(moved(T_patient_tabletop, p_tabletop)[0])
    if abs(left) <= _MIDDLE_MM:
        return words
    return f"{words}, patient's {'left' if left > 0.0 else 'right'}"


def _way(value_mm: float, forth: str, back: str) -> str:
    """Return a distance from the isocentre in a direction; empty for next to nothing."""
    if abs(value_mm) <= _MIDDLE_MM:
        return ""
    return f"{abs(value_mm) / 1000.0:.2f} m {forth if value_mm > 0.0 else back}"


def _apart(one: Point, other: Point) -> float:
    return max(abs(a - b) for a, b in zip(one, other, strict=True))


def _whole(stop: Point, start: Point) -> Point:
    """Return the stop on the whole degree next towards the start of its leg, where one axis turns alone."""
    turning = [k for k in (0, 1) if abs(stop[k] - start[k]) > SAME_DEG]
    if len(turning) != 1:
        # As finely as it is printed; that leaves the path by less than anybody reads.
        return round(stop[0], PLACE_DIGITS), round(stop[1], PLACE_DIGITS)
    k = turning[0]
    if stop[k] > start[k]:
        whole = max(float(np.floor(stop[k] + 1e-6)), start[k])
    else:
        whole = min(float(np.ceil(stop[k] - 1e-6)), start[k])
    return (whole, stop[1]) if k == 0 else (stop[0], whole)
