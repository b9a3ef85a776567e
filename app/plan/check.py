"""From a set-up and the fields of a plan to a report.

A plan knows isocentres in DICOM coordinates, table positions, tilt, collimator and applicators. Where that leaves a
doubt, the field is not permitted until somebody resolves it.
"""

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Final, Literal

from app.plan.matching import TABLE_MM, Match, Point
from app.plan.said import said_of
from geometry.assess import Options
from geometry.progress import Progress
from geometry.setup import Setup
from geometry.treatment.check import Planned, check_fields
from geometry.treatment.data import CheckReport, PlanField
from geometry.treatment.worse import told_as, worse_of

TableFrom = Literal["both", "plan", "setup"]

# Where table and devices may be, in words.
_AS_SETUP: Final = "the table where the set-up has it"
_AS_PLAN: Final = "the table where the plan has it"
_DEVICES_ALONG: Final = "the table where the plan has it, the devices moved along with the patient"
_NO_FRAME: Final = (
    "The set-up does not tell where its isocentre is in DICOM coordinates: the plan's first isocentre is taken for it, "
    "others by their distance from the first."
)
_BOTH_TABLES: Final = (
    "Table positions of plan and set-up differ: checked with the table where the plan has it and where the set-up has "
    "it, and the worse is told."
)


@dataclass(frozen=True)
class Choices:
    """What a person says to resolve doubts.

    `fits`: by field name, by number in the plan from 1, or `EVERY`, what is fitted, see `fitted_from`; no words: as the
    set-up has it. `table`: whose table positions count where a plan states some and they differ
    from the set-up's; with "both" each field is checked with both.
    """

    fits: Mapping[str, tuple[str, ...]] | None = None
    table: TableFrom = "both"


def check_plan(
    setup: Setup,
    fields: Sequence[PlanField],
    options: Options,
    choices: Choices | None = None,
    source: str = "",
    progress: Progress | None = None,
) -> CheckReport:
    """Return the verdicts on a plan's fields and moves; `source` names the plan's file in faults.

    Raises BadInput for what is said to be fitted and is not in the room, GeometryError, Cancelled.
    """
    choices = choices or Choices()
    said = said_of(fields, choices.fits or {}, setup, source)
    makers = [Match(setup, field, said.get(k), _first_isocentre(fields)) for k, field in enumerate(fields)]
    notes = _notes(setup, fields)
    as_setup = [maker.planned("setup") for maker in makers]
    if choices.table == "setup":
        return check_fields(setup, as_setup, options, progress, notes)
    as_plan = [maker.planned("plan") for maker in makers]
    notes += _inconsistent(as_setup, as_plan)
    if all(a.setup == b.setup for a, b in zip(as_setup, as_plan, strict=True)):
        return check_fields(setup, as_plan, options, progress, notes)
    worlds = {_AS_PLAN: as_plan}
    if choices.table == "both":
        notes += (_BOTH_TABLES,)
        worlds = {_AS_SETUP: as_setup, **worlds}
    if setup.devices:
        worlds[_DEVICES_ALONG] = [maker.planned("devices along") for maker in makers]
    return _worst(setup, worlds, options, progress, notes)


def _worst(
    setup: Setup,
    worlds: Mapping[str, Sequence[Planned]],
    options: Options,
    progress: Progress | None,
    notes: tuple[str, ...],
) -> CheckReport:
    """Check the fields with each place of table and devices throughout, and return the worse, row by row."""
    worst: CheckReport | None = None
    for k, (words, planned) in enumerate(worlds.items()):
        share = None if progress is None else _Share(progress, k, len(worlds))
        found = check_fields(setup, planned, options, share, notes, worst)
        found = found if len(worlds) == 1 else told_as(found, words)
        worst = found if worst is None else worse_of(worst, found)
    if worst is None:
        raise ValueError("no place of the table; allowed: 1 or more")
    told = [
        replace(field, notes=(*field.notes, f"its figures are for {field.table_as}")) if field.table_as else field
        for field in worst.fields
    ]
    return replace(worst, fields=tuple(told))


class _Share:
    """The progress of one part of the work, `number` of `count` from 0."""

    def __init__(self, progress: Progress, number: int, count: int) -> None:
        self._progress = progress
        self._number = number
        self._count = count

    def report(self, fraction: float, message: str) -> None:
        """Pass it on, as a share."""
        self._progress.report((self._number + fraction) / self._count, message)

    def cancelled(self) -> bool:
        """Tell whether the user wants the work stopped."""
        return self._progress.cancelled()


def _first_isocentre(fields: Sequence[PlanField]) -> Point | None:
    return next((field.isocentre_mm for field in fields if field.isocentre_mm is not None), None)


def _notes(setup: Setup, fields: Sequence[PlanField]) -> tuple[str, ...]:
    """Return what concerns all fields."""
    if setup.isocentre.landmark is not None and _first_isocentre(fields) is not None:
        return (_NO_FRAME,)
    return ()


def _inconsistent(as_setup: Sequence[Planned], as_plan: Sequence[Planned]) -> tuple[str, ...]:
    """Tell where the plan's table positions put one patient in several places on the table."""
    places = {
        planned.field.name: planned.setup.on_table
        for planned, given in zip(as_plan, as_setup, strict=True)
        if planned.setup != given.setup or any(value is not None for value in planned.field.table_mm)
    }
    points = [(at.lateral_mm, at.from_head_end_mm, at.height_mm) for at in places.values()]
    apart = max((math.dist(one, points[0]) for one in points), default=0.0)
    if apart <= 2.0 * TABLE_MM:
        return ()
    return (f"The plan's table positions do not follow its isocentres: they differ by up to {apart:.1f} mm.",)
