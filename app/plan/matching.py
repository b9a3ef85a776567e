"""From a set-up and one field of a plan to the set-up that the field asks for, and what differs from the one given."""

from dataclasses import replace
from functools import lru_cache
from typing import Final, Literal

import numpy as np
from numpy.typing import NDArray

from app.files.wording import one_of
from app.plan.fitting import Fitted, accessory_named, with_accessory, with_fitted
from geometry.frames import R_tilt, normalised_deg, unwrapped_deg
from geometry.machine import Part
from geometry.paths import with_collimator
from geometry.scene import build_scene
from geometry.setup import Setup
from geometry.solids import Placed
from geometry.treatment.check import Planned
from geometry.treatment.data import PlanField

Array = NDArray[np.float64]
Point = tuple[float, float, float]
World = Literal["setup", "plan", "devices along"]

# Differences of the table's place below this are not told, mm.
TABLE_MM: Final = 0.1
# Differences below this are not told, mm and deg; those of the table's place are.
_SAME_MM: Final = 0.01
_SAME_DEG: Final = 0.01
# Source-axis distances that differ by more are those of two machines.
_OTHER_MACHINE_MM: Final = 10.0
_STAGES: Final = ("lateral", "longitudinal", "vertical")
_DEVICES: Final = (
    "the patient lies elsewhere on the table than in the set-up: with the devices where they were on the table, and "
    "moved along with the patient, the worse is told"
)


class Match:
    """Makes one field's set-up. `said`: what a person says is fitted, None for nothing said."""

    def __init__(self, setup: Setup, field: PlanField, said: Fitted | None, first: Point | None) -> None:
        self._field = field
        self._given = setup
        self._notes: list[str] = list(field.notes)
        self._doubts: list[str] = list(field.doubts)
        setup = self._with_tilt(setup)
        setup = self._with_isocentre(setup, first)
        setup = self._with_collimator(setup)
        self._setup = self._with_arms(self._with_accessories(setup, said), said)
        self._look_at_the_machine()

    def planned(self, world: World) -> Planned:
        """Return the field with its set-up, the table where the plan has it or where the set-up has it.

        The devices stay on the table top, or move along with a patient whom the plan has elsewhere on it.
        """
        field = self._field
        wanted = field.patient_position
        blocked = ""
        if wanted is not None and wanted != self._given.patient_position:
            blocked = f"the plan has the patient {wanted}, the set-up {self._given.patient_position}"
        setup, notes = self._with_table(self._setup, world)
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

    def _with_accessories(self, setup: Setup, said: Fitted | None) -> Setup:
        """Fit what is said or, where nothing is said of accessories, what the plan names."""
        if said is None or (said.accessories is None and said.arms):
            return self._with_applicator(setup)
        fitted = with_fitted(setup, Fitted(said.accessories, ()))
        told = f"{one_of(fitted.fitted)} was said to be fitted"
        for words in self._named():
            if accessory_named(words, setup.room) not in fitted.fitted:
                self._notes.append(f"the plan names the applicator '{words}'; {told}")
        self._notes += [f"{doubt}; {told}" for doubt in self._field.fit_doubts]
        return fitted

    def _with_arms(self, setup: Setup, said: Fitted | None) -> Setup:
        """Put the arms where they are said to stand; a snout that the plan has somewhere has to be among them."""
        arms = () if said is None else said.arms
        snouts = {arm.name for arm in setup.room.arms if "snout" in arm.name.casefold()}
        told = [name for name, _ in arms if name in snouts or not snouts]
        for doubt in self._field.arm_doubts:
            if told:
                stands = ", ".join(f"'{name}' at {_arm_place(place)}" for name, place in arms if name in told)
                self._notes.append(f"{doubt}; {stands} was said")
            else:
                self._doubts.append(f"{doubt}: say where its arm stands")
        return with_fitted(setup, Fitted(None, arms))

    def _named(self) -> list[str]:
        """Return the applicators that the plan names."""
        return [words.strip() for words in self._field.applicator.split(";") if words.strip()]

    def _with_applicator(self, setup: Setup) -> Setup:
        """Fit what the plan names, where the room has it by that name; otherwise it is a doubt."""
        self._doubts += self._field.fit_doubts
        named = self._named()
        known = [accessory.name for accessory in setup.room.accessories]
        for words in named:
            accessory = accessory_named(words, setup.room)
            if accessory is None:
                self._doubts.append(
                    f"the plan names the applicator '{words}', "
                    + (
                        f"which is none of the room's accessories: {one_of(known)}"
                        if known
                        else "and the room has none"
                    )
                    + "; say which is fitted"
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

    def _with_table(self, setup: Setup, world: World) -> tuple[Setup, list[str]]:
        """Return the set-up with the table where the plan has it; and what differs.

        What the plan does not state is the set-up's. The isocentre stays in its place in the patient, so the patient
        lies elsewhere on the table.
        """
        stated = self._field.table_mm
        if all(value is None for value in stated):
            return setup, []
        T = build_scene(setup).couch.T_mm
        off = np.array([0.0 if value is None else value - held for value, held in zip(stated, T, strict=True)])
        if np.abs(off).max() <= TABLE_MM:
            return setup, []
        full = all(value is not None for value in stated)
        told = [f"{name} {way:+.1f} mm" for name, way in zip(_STAGES, off, strict=True) if abs(way) > TABLE_MM]
        note = f"table position in the plan against the set-up's: {', '.join(told)}"
        if not full:
            note += "; not stated in full: the rest is the set-up's"
        if world == "setup":
            return setup, [note]
        notes = [note, *([_DEVICES] if setup.devices else [])]
        x, y, z = (float(value) for value in -R_tilt(setup.pitch_deg, setup.roll_deg).T @ off)
        where = setup.on_table
        moved = replace(
            where,
            lateral_mm=where.lateral_mm + x,
            from_head_end_mm=where.from_head_end_mm - y,
            height_mm=where.height_mm + z,
        )
        devices = setup.devices
        if world == "devices along":
            devices = _moved_along(devices, (x, y, z))
        return replace(setup, on_table=moved, devices=devices), notes


@lru_cache(maxsize=256)
def _moved_along(devices: tuple[Part, ...], shift: Point) -> tuple[Part, ...]:
    """Return devices moved on the table top, mm; remembered, so that fields with the same ones share them."""
    T = np.eye(4)
    T[:3, 3] = shift
    return tuple(replace(device, solid=Placed(device.solid, T)) for device in devices)


def _arm_place(place: str | float) -> str:
    return f"'{place}'" if isinstance(place, str) else f"{place:g} mm"


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
