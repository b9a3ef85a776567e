"""Gaps that people measured in the room, held against the computed ones. No files."""

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Final

from app.files.readings import reading_deg, required_text
from app.files.wording import printable
from app.plan.dry_run import DryRun
from geometry.assess import Pose, exact_pose
from geometry.scene import Scene
from geometry.states import State
from geometry.treatment.data import CheckReport

# What a ruler tells: a difference below it says nothing, whatever the components of the required clearance.
RULER_MM: Final = 1.0
# So many digits of a fingerprint tell set-ups apart: those that are printed.
_PRINTED_DIGITS: Final = 16


@dataclass(frozen=True)
class MeasuredGap:
    """A gap between machine and couch or patient that somebody measured.

    `field`: the plan's field, or what else people call the place. Angles in IEC 61217 in [0, 360). `by`, `on`: who
    measured, and the day (ISO 8601), as stated, may be empty. `fingerprint`: of the set-up that it was measured for,
    in full or as printed, empty where nobody stated it.
    """

    field: str
    gantry_deg: float
    couch_deg: float
    measured_mm: float
    by: str = ""
    on: str = ""
    fingerprint: str = ""


@dataclass(frozen=True)
class GapRow:
    """A measured gap beside the computed one.

    `computed_mm`: the exact clearance at the stated angles, None where there is none; `difference_mm`: measured minus
    computed. `parts`: labels of those that are nearest there, the machine's first. `is_current`: whether it was
    measured for the set-up as it is now, None where nobody stated for which. `words`: what people must know of it,
    empty where the two agree; `is_flagged` where measured is so much less than computed, or than required, that
    somebody must find out why.
    """

    gap: MeasuredGap
    computed_mm: float | None
    difference_mm: float | None
    parts: tuple[str, str] | None
    is_current: bool | None
    is_flagged: bool
    words: str


@dataclass(frozen=True)
class GapPlace:
    """A place at which a gap is to be measured, with the exact clearance there, for a list to fill in."""

    field: str
    gantry_deg: float
    couch_deg: float
    computed_mm: float
    parts: tuple[str, str] | None


def places_to_measure(rows: DryRun) -> tuple[GapPlace, ...]:
    """Return where a dry run's sheet asks for gaps: at the stop and at the tightest place of each permitted field."""
    return tuple(
        GapPlace(row.name, reading_deg(place.gantry_deg), reading_deg(place.couch_deg), place.clearance_mm, place.parts)
        for row in rows.fields
        if row.permitted
        for place in (row.stop, row.tightest)
        if place is not None and math.isfinite(place.clearance_mm)
    )


def compare_gaps(
    gaps: Iterable[MeasuredGap], computed: CheckReport | Scene, fingerprint: str = ""
) -> tuple[GapRow, ...]:
    """Return measured gaps beside the computed ones.

    With a report, each is held against its field's own set-up (accessories, table); with a scene, against that.
    `fingerprint`: the full one of the set-up as it is now.
    """
    if isinstance(computed, Scene):
        return tuple(_row(gap, computed, fingerprint, ()) for gap in gaps)
    scenes = {printable(check.field.name): check.scene for check in computed.fields}
    rows = []
    for gap in gaps:
        scene = scenes.get(printable(gap.field))
        doubts = () if scene is not None else ("no field of this name in the plan: held against the set-up as stated",)
        rows.append(_row(gap, scene or computed.scene, fingerprint, doubts))
    return tuple(rows)


def _row(gap: MeasuredGap, scene: Scene, fingerprint: str, doubts: Sequence[str]) -> GapRow:
    is_current = _is_current(gap.fingerprint, fingerprint)
    words = list(doubts)
    if is_current is None:
        words.append("nobody stated for which set-up it was measured")
    elif not is_current:
        words.append("measured for another state of the set-up or room")
    pose = exact_pose(scene, gap.gantry_deg, gap.couch_deg)
    if pose.state is State.NO_TRAVEL or not math.isfinite(pose.clearance_mm):
        words.append("beyond the travel" if pose.state is State.NO_TRAVEL else "nothing computed at these angles")
        return GapRow(gap, None, None, None, is_current, is_flagged=True, words="; ".join(words))
    flags = _flags(gap, pose, scene)
    parts = None
    if pose.machine_part is not None and pose.couch_part is not None:
        parts = pose.machine_part.label, pose.couch_part.label
    difference_mm = gap.measured_mm - pose.clearance_mm
    text = "; ".join([*flags, *words])
    return GapRow(gap, pose.clearance_mm, difference_mm, parts, is_current, is_flagged=bool(flags), words=text)


def _flags(gap: MeasuredGap, pose: Pose, scene: Scene) -> list[str]:
    """Return in words what must not be passed over: far less measured than computed, or less than required."""
    if pose.machine_part is None or pose.couch_part is None:
        return []
    required_mm = scene.required_mm(pose.machine_part, pose.couch_part)
    allowed_mm = max(required_mm - scene.setup.required.fixed_mm, RULER_MM)
    missing_mm = pose.clearance_mm - gap.measured_mm
    flags = []
    if missing_mm > allowed_mm:
        flags.append(
            f"{missing_mm:.1f} mm less than computed, and the stated uncertainties explain {allowed_mm:.1f} mm: "
            "find out why before anything is treated"
        )
    if gap.measured_mm < required_mm:
        flags.append(f"less than the required {required_text(required_mm)}")
    return flags


def _is_current(stated: str, fingerprint: str) -> bool | None:
    if not stated or not fingerprint:
        return None
    return len(stated) >= _PRINTED_DIGITS and fingerprint.startswith(stated.casefold())
