"""From a set-up and the fields of a plan to a report: each field's own set-up, and what differs from the one given.

A plan knows isocentres in DICOM coordinates, table positions, tilt, collimator and applicators. Where that leaves a
doubt, the field is not permitted until somebody resolves it.
"""

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Final, Literal

import numpy as np
from numpy.typing import NDArray

from app.files.wording import did_you_mean, one_of, printable
from app.plan.fitting import Fitted, Unfit, accessory_named, fitted_from, with_accessory, with_fitted
from geometry.assess import Options
from geometry.errors import BadInput, Fault
from geometry.frames import R_tilt, normalised_deg, unwrapped_deg
from geometry.paths import with_collimator
from geometry.progress import Progress
from geometry.scene import build_scene
from geometry.setup import Setup
from geometry.treatment.check import Planned, check_fields, worse_of
from geometry.treatment.data import CheckReport, PlanField

Array = NDArray[np.float64]
Point = tuple[float, float, float]
TableFrom = Literal["both", "plan", "setup"]

# Of every field, in the place of a field's name.
EVERY: Final = "all"
# Differences below this are not told, mm and deg; those of the table's place are.
_SAME_MM: Final = 0.01
_SAME_DEG: Final = 0.01
_TABLE_MM: Final = 0.1
# Source-axis distances that differ by more are those of two machines.
_OTHER_MACHINE_MM: Final = 10.0
_STAGES: Final = ("lateral", "longitudinal", "vertical")
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
    set-up has it. `table`: whose table positions count where a plan states them in full and they differ
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
    said = _said(fields, choices.fits or {}, setup, source)
    makers = [_Match(setup, field, said.get(k), _first_isocentre(fields)) for k, field in enumerate(fields)]
    notes = _notes(setup, fields)
    as_setup = [maker.planned(by_plan=False) for maker in makers]
    if choices.table == "setup":
        return check_fields(setup, as_setup, options, progress, notes)
    as_plan = [maker.planned(by_plan=True) for maker in makers]
    notes += _inconsistent(as_setup, as_plan)
    if choices.table == "plan" or all(a.setup == b.setup for a, b in zip(as_setup, as_plan, strict=True)):
        return check_fields(setup, as_plan, options, progress, notes)
    notes += (_BOTH_TABLES,)
    halves = (None, None) if progress is None else (_Half(progress, 0.0), _Half(progress, 0.5))
    return worse_of(
        check_fields(setup, as_setup, options, halves[0], notes),
        check_fields(setup, as_plan, options, halves[1], notes),
    )


class _Half:
    """The progress of half the work, from `start` on."""

    def __init__(self, progress: Progress, start: float) -> None:
        self._progress = progress
        self._start = start

    def report(self, fraction: float, message: str) -> None:
        """Pass it on, as half."""
        self._progress.report(self._start + 0.5 * fraction, message)

    def cancelled(self) -> bool:
        """Tell whether the user wants the work stopped."""
        return self._progress.cancelled()


class _Match:
    """Makes one field's set-up. `said`: what a person says is fitted, None for nothing said."""

    def __init__(self, setup: Setup, field: PlanField, said: Fitted | None, first: Point | None) -> None:
        self._field = field
        self._given = setup
        self._notes: list[str] = list(field.notes)
        self._doubts: list[str] = list(field.doubts)
        setup = self._with_tilt(setup)
        setup = self._with_isocentre(setup, first)
        setup = self._with_collimator(setup)
        self._setup = with_fitted(setup, said) if said is not None else self._with_applicator(setup)
        self._look_at_the_machine()

    def planned(self, *, by_plan: bool) -> Planned:
        """Return the field with its set-up, the table where the plan has it or where the set-up has it."""
        field = self._field
        wanted = field.patient_position
        blocked = ""
        if wanted is not None and wanted != self._given.patient_position:
            blocked = f"the plan has the patient {wanted}, the set-up {self._given.patient_position}"
        setup, notes = self._with_table(self._setup, by_plan=by_plan)
        return Planned(field, setup, tuple(self._doubts), blocked, tuple(dict.fromkeys((*self._notes, *notes))))

    def _with_tilt(self, setup: Setup) -> Setup:
        stated = {
            "pitch": (self._field.pitch_deg, setup.pitch_deg),
            "roll": (self._field.roll_deg, setup.roll_deg),
            "eccentric": (self._field.eccentric_deg, setup.eccentric_deg),
        }
        taken = {}
        for name, (planned_deg, given_deg) in stated.items():
            taken[name] = given_deg
            if planned_deg is None:
                if given_deg:
                    self._notes.append(f"{name}: none in the plan, {given_deg:g} deg in the set-up, which is taken")
                continue
            taken[name] = planned_deg
            if name == "eccentric":
                travel = setup.room.couch.eccentric
                taken[name] = next(iter(unwrapped_deg(planned_deg, (travel.low, travel.high))), planned_deg)
            if _turn_deg(planned_deg, given_deg) > _SAME_DEG:
                told = f"{planned_deg:g} deg in the plan, which is taken, {given_deg:g} in the set-up"
                self._notes.append(f"{name}: {told}")
        return replace(setup, pitch_deg=taken["pitch"], roll_deg=taken["roll"], eccentric_deg=taken["eccentric"])

    def _with_isocentre(self, setup: Setup, first: Point | None) -> Setup:
        wanted, given = self._field.isocentre_mm, setup.isocentre
        if wanted is None or first is None:
            return setup
        if given.landmark is None and given.dicom_mm is not None:
            shift = np.array(wanted) - given.dicom_mm
            if np.linalg.norm(shift) <= _SAME_MM:
                return setup
            self._notes.append(f"isocentre {_shift_in_words(shift)} from the set-up's")
            return replace(setup, isocentre=replace(given, dicom_mm=wanted))
        shift = np.array(wanted) - first
        if np.linalg.norm(shift) <= _SAME_MM:
            return setup
        self._notes.append(f"isocentre {_shift_in_words(shift)} from the first field's")
        x, y, z = (float(value) for value in shift)
        left, head, front = given.offset_mm
        return replace(setup, isocentre=replace(given, offset_mm=(left + x, head + z, front - y)))

    def _with_collimator(self, setup: Setup) -> Setup:
        stated = self._field.collimator_deg
        if not stated:
            return setup
        given = setup.collimator_deg
        if given is not None and any(_turn_deg(angle, given) > _SAME_DEG for angle in stated):
            shown = " to ".join(f"{angle:g}" for angle in dict.fromkeys((stated[0], stated[-1])))
            self._notes.append(f"collimator: {shown} deg in the plan, which is taken, {given:g} in the set-up")
        return with_collimator(setup, stated)

    def _with_applicator(self, setup: Setup) -> Setup:
        """Fit what the plan names, where the room has it by that name; otherwise it is a doubt."""
        self._doubts += self._field.fit_doubts
        named = [words.strip() for words in self._field.applicator.split(";") if words.strip()]
        known = [accessory.name for accessory in setup.room.accessories]
        for words in named:
            accessory = accessory_named(words, setup.room)
            if accessory is None:
                self._doubts.append(
                    f"the plan names the applicator '{words}', which is none of the room's accessories: "
                    f"{one_of(known)}; say which is fitted"
                )
            else:
                setup = with_accessory(setup, accessory)
        if not named and setup.fitted:
            self._notes.append(f"the set-up has {one_of(setup.fitted)} fitted, the plan names nothing")
        elif named and setup.fitted != self._given.fitted:
            self._notes.append(f"fitted: {one_of(setup.fitted)}, in the set-up {one_of(self._given.fitted)}")
        if self._field.is_setup and setup.room.arms:
            self._notes.append("a set-up field, with the arms where the set-up has them")
        return setup

    def _look_at_the_machine(self) -> None:
        planned_mm, given_mm = self._field.source_axis_distance_mm, self._given.room.source_axis_distance_mm
        if planned_mm is None or abs(planned_mm - given_mm) <= 1.0:
            return
        told = f"source-axis distance: {planned_mm:g} mm in the plan, {given_mm:g} in the room"
        if abs(planned_mm - given_mm) > _OTHER_MACHINE_MM:
            self._doubts.append(f"{told}: a plan for another machine")
        else:
            self._notes.append(told)

    def _with_table(self, setup: Setup, *, by_plan: bool) -> tuple[Setup, list[str]]:
        """Return the set-up with the table where the plan has it, where it states that in full; and what differs.

        The isocentre stays in its place in the patient, so the patient lies elsewhere on the table.
        """
        stated = self._field.table_mm
        if all(value is None for value in stated):
            return setup, []
        T = build_scene(setup).couch.T_mm
        off = np.array([0.0 if value is None else value - held for value, held in zip(stated, T, strict=True)])
        if np.abs(off).max() <= _TABLE_MM:
            return setup, []
        full = all(value is not None for value in stated)
        told = [f"{name} {way:+.1f} mm" for name, way in zip(_STAGES, off, strict=True) if abs(way) > _TABLE_MM]
        note = f"table position in the plan against the set-up's: {', '.join(told)}"
        if not full:
            return setup, [f"{note}; not stated in full, so the set-up's is taken"]
        if not by_plan:
            return setup, [note]
        x, y, z = (float(value) for value in -R_tilt(setup.pitch_deg, setup.roll_deg).T @ off)
        where = setup.on_table
        moved = replace(
            where,
            lateral_mm=where.lateral_mm + x,
            from_head_end_mm=where.from_head_end_mm - y,
            height_mm=where.height_mm + z,
        )
        return replace(setup, on_table=moved), [note]


def _said(
    fields: Sequence[PlanField], fits: Mapping[str, tuple[str, ...]], setup: Setup, source: str
) -> dict[int, Fitted]:
    """Return what is said to be fitted, by field; what is said to the program counts over what a list says."""
    found: dict[int, Fitted] = {}
    faults: list[Fault] = []
    as_given = Fitted(None, ())
    for k, field in enumerate(fields):
        words = field.fitted
        place, file = f"{field.place}, fitted", source
        for name in (EVERY, str(k + 1), field.name):
            if name in fits:
                words, place, file = fits[name], f"--fit {name}", "command line"
        if words is None:
            continue
        try:
            found[k] = fitted_from(words, setup.room) if words else as_given
        except Unfit as error:
            faults.append(Fault(file, place, error.found, error.allowed))
    known = {EVERY, *(str(k + 1) for k in range(len(fields))), *(field.name for field in fields)}
    for name in fits:
        if name not in known:
            allowed = did_you_mean(name, [field.name for field in fields][:50])
            faults.append(Fault("command line", "--fit", f"no field '{printable(name)}'", allowed))
    if faults:
        raise BadInput(list(dict.fromkeys(faults))[:20])
    return found


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
        if planned.setup != given.setup or all(value is not None for value in planned.field.table_mm)
    }
    points = [(at.lateral_mm, at.from_head_end_mm, at.height_mm) for at in places.values()]
    apart = max((math.dist(one, points[0]) for one in points), default=0.0)
    if apart <= 2.0 * _TABLE_MM:
        return ()
    return (f"The plan's table positions do not follow its isocentres: they differ by up to {apart:.1f} mm.",)


def _shift_in_words(shift: Array) -> str:
    """Return a shift in DICOM patient axes, (3,), mm, as people say it."""
    words = [
        f"{abs(way):.1f} mm {forth if way > 0.0 else back}"
        for way, forth, back in zip(
            shift, ("left", "to the back", "to the head"), ("right", "to the front", "to the feet"), strict=True
        )
        if abs(way) >= _SAME_MM
    ]
    return ", ".join(words)


def _turn_deg(one: float, other: float) -> float:
    apart = normalised_deg(one - other)
    return min(apart, 360.0 - apart)
