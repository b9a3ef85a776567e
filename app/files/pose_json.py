"""One pose as a JSON object, for `pose --json`."""

import json

from app.files.readings import finite, reading_deg
from geometry.assess import Pose
from geometry.frames import Array


def pose_json(pose: Pose) -> str:
    """Return the pose as JSON text on one line; points in the fixed system, mm; null where there is no value."""
    return json.dumps(pose_values(pose), ensure_ascii=False, allow_nan=False)


def pose_values(pose: Pose) -> dict[str, object]:
    """Return the pose as plain values for JSON."""
    return {
        "gantry_deg": reading_deg(pose.gantry_deg),
        "couch_deg": reading_deg(pose.couch_deg),
        "clearance_mm": finite(pose.clearance_mm),
        "slack_mm": finite(pose.slack_mm),
        "state": pose.state.value,
        "machine_part": None if pose.machine_part is None else pose.machine_part.label,
        "couch_part": None if pose.couch_part is None else pose.couch_part.label,
        "machine_point_mm": _point(pose.machine_point_mm),
        "couch_point_mm": _point(pose.couch_point_mm),
    }


def _point(point_mm: Array | None) -> list[float | None] | None:
    """Return a point's coordinates. In deep contact there may be a pair without a witness: then there is no point."""
    if point_mm is None:
        return None
    coordinates = [finite(float(value)) for value in point_mm]
    return None if None in coordinates else [*coordinates]
