"""What the plan's desk has computed off the GUI's thread, and small things about it. No Qt."""

import math
from dataclasses import dataclass, field, replace
from itertools import pairwise
from pathlib import Path
from typing import Final

import numpy as np
from numpy.typing import NDArray

from app.check_command import read_fields
from app.files.fingerprint import fingerprint
from app.jobs import Publish
from app.plan.check import Choices, check_plan
from app.plan.dry_run import DryRun, dry_run
from app.plan.gaps import GapPlace, MeasuredGap, places_to_measure
from app.plan.timeline import timeline_of
from app.plan.timeline_clearance import ClearanceOverTime, clearance_along
from geometry.assess import Options
from geometry.directions.axes import axes_of, directions_patient
from geometry.prepare import prepare_path_kernels
from geometry.progress import Progress
from geometry.setup import Setup
from geometry.treatment.data import CheckReport, FieldCheck, PlanField

# How far apart directions of an arc are at most, deg of either axis: a straight line between them shows no corner.
_STEP_DEG: Final = 2.0


@dataclass(frozen=True)
class Asked:
    """A plan to check: its file, its fields once they are read, and what a person says to resolve doubts."""

    path: Path
    fields: tuple[PlanField, ...] | None = None
    choices: Choices = field(default_factory=Choices)


@dataclass(frozen=True, eq=False)
class Checked:
    """A plan as it was checked: what was asked, with its fields, the report, the sheet's rows, where to measure."""

    asked: Asked
    report: CheckReport
    rows: DryRun
    places: tuple[GapPlace, ...]
    fingerprint: str


def check_file(asked: Asked, setup: Setup, options: Options, progress: Progress, _publish: Publish) -> Checked:
    """Check a plan, read from its file where its fields are not known. Raises BadInput, GeometryError, Cancelled."""
    read = read_fields(asked.path) if asked.fields is None else asked.fields
    prepare_path_kernels(progress)
    report = check_plan(setup, read, options, asked.choices, str(asked.path), progress)
    rows = dry_run(report)
    return Checked(replace(asked, fields=read), report, rows, places_to_measure(rows), fingerprint(setup))


def curve_of_report(
    report: CheckReport,
    better: bool,
    progress: Progress,
    _publish: Publish,
) -> ClearanceOverTime:
    """Return the clearance over the whole plan, in its own order or in the better one. Raises Cancelled."""
    return clearance_along(timeline_of(report, better=better), progress)


def directions_of(check: FieldCheck) -> NDArray[np.float64]:
    """Return from where a field's beam comes, (n, 3), DICOM patient axes."""
    gantry, couch = [check.points_deg[0][0]], [check.points_deg[0][1]]
    for one, other in pairwise(check.points_deg):
        count = max(math.ceil(max(abs(b - a) for a, b in zip(one, other, strict=True)) / _STEP_DEG), 1)
        gantry += np.linspace(one[0], other[0], count + 1)[1:].tolist()
        couch += np.linspace(one[1], other[1], count + 1)[1:].tolist()
    return directions_patient(gantry, couch, axes_of(check.scene.setup))


def is_same_place(one: MeasuredGap, other: MeasuredGap) -> bool:
    """Tell whether two gaps are of one place in one set-up; one measured for another set-up stays as a record."""
    return (one.field, one.gantry_deg, one.couch_deg, one.fingerprint) == (
        other.field,
        other.gantry_deg,
        other.couch_deg,
        other.fingerprint,
    )
