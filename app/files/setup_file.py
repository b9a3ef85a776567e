"""Set-up files, `*.setup.toml`. The format is described in sample_rooms/README.md."""

from dataclasses import replace
from functools import partial
from pathlib import Path
from typing import Final

from app.files import values
from app.files.axis_keys import LARGEST_TILT
from app.files.part_keys import devices_of
from app.files.patient_keys import LANDMARKS, Patient, patient_of
from app.files.reading import Reading, Table
from app.files.required_keys import required_of
from app.files.room_file import read_room
from app.files.setup_limits import FROM_HEAD_END_MM, HEIGHT_MM, LATERAL_MM, OFFSET_MM, WHOLE_TURN_DEG
from app.files.toml_source import parsed_toml
from app.files.values import Limits, Problem, Refused
from app.files.wording import MISSING, described, did_you_mean, one_of, printable
from geometry.body import Body
from geometry.machine import Arm, Room
from geometry.scene import patient_solids
from geometry.setup import Isocentre, OnTable, Setup, Surface

SETUP_FORMAT: Final = 1

_FORMS: Final = ("landmark", "dicom_mm", "from_plan")
_OFFSETS: Final = ("left_mm", "head_mm", "front_mm")
_MOST_FITTED: Final = 100


def read_setup(path: str | Path) -> Setup:
    """Return the set-up that a file describes, with its room, meshes and DICOM files.

    Raises BadInput with every fault of the file and of those that it names.
    """
    path = Path(path)
    reading = Reading(path, parsed_toml(path, SETUP_FORMAT))
    return reading.finished(_setup(reading.top))


def _setup(top: Table) -> Setup | None:
    """Return the set-up, None where there is no room or no patient to make it of."""
    room = _room(top)
    patient = patient_of(top)
    isocentre = _isocentre(top, patient)
    name, demonstration, notes = top.text("name"), top.flag("demonstration"), top.note("notes")
    on_table = _on_table(top)
    pitch_deg, roll_deg, eccentric_deg = _couch(top)
    fitted, arm_positions, collimator_deg = _fitted(top, room)
    required = required_of(top, room)
    devices = tuple(devices_of(top, _taken_names(top, room, patient)))
    if room is None or patient.envelope is None:
        return None
    envelope = patient.envelope
    if isinstance(envelope, Surface) and isocentre.dicom_mm in patient.plan_isocentres_mm:
        envelope = replace(envelope, isocentre_mm=isocentre.dicom_mm)
    return Setup(
        name=name,
        room=room,
        patient=envelope,
        patient_position=patient.position,
        on_table=on_table,
        isocentre=isocentre,
        required=required,
        devices=devices,
        pitch_deg=pitch_deg,
        roll_deg=roll_deg,
        eccentric_deg=eccentric_deg,
        collimator_deg=collimator_deg,
        fitted=fitted,
        arm_positions=arm_positions,
        demonstration=demonstration,
        notes=notes,
    )


def _room(top: Table) -> Room | None:
    path = top.file("room")
    return None if path is None else top.attempted(lambda: read_room(path))


def _taken_names(top: Table, room: Room | None, patient: Patient) -> set[str]:
    """Return the names that a device may not have: exports tell parts apart by name, joined pairs too.

    A name that room and patient share is a fault.
    """
    of_room = {part.name for part in room.parts} if room is not None else set()
    of_patient = {name for name, _ in patient_solids(patient.envelope)} if patient.envelope is not None else set()
    for name in sorted(of_room & of_patient):
        top.fault("room", f"a part named '{printable(name)}', as one of the patient's is", "a name of its own")
    return of_room | of_patient


def _on_table(top: Table) -> OnTable:
    table = top.required_table("table")
    return OnTable(
        from_head_end_mm=table.number("from_head_end_mm", FROM_HEAD_END_MM),
        lateral_mm=table.number("lateral_mm", LATERAL_MM, default=0.0),
        height_mm=table.number("height_mm", HEIGHT_MM, default=0.0),
    )


def _couch(top: Table) -> tuple[float, float, float]:
    """Return pitch, roll and eccentric angle in degrees."""
    table = top.table("couch")
    if table is None:
        return 0.0, 0.0, 0.0
    pitch_deg = table.number("pitch_deg", LARGEST_TILT, default=0.0)
    roll_deg = table.number("roll_deg", LARGEST_TILT, default=0.0)
    return pitch_deg, roll_deg, table.number("eccentric_deg", WHOLE_TURN_DEG, default=0.0)


def _isocentre(top: Table, patient: Patient) -> Isocentre:
    table = top.required_table("isocentre")
    forms = [form for form in _FORMS if table.has(form)]
    if len(forms) != 1:
        # Asking makes every key known, so that a misspelt one is told beside this fault.
        for key in _OFFSETS:
            table.has(key)
        table.fault("", " and ".join(forms) or "none of them", f"exactly one of {', '.join(_FORMS)}")
        return Isocentre(None)
    if forms == ["landmark"]:
        return _from_landmark(table, patient)
    if forms == ["from_plan"]:
        return Isocentre(None, dicom_mm=_from_plan(table, patient))
    if isinstance(patient.envelope, Body):
        table.fault("dicom_mm", "DICOM coordinates for a body made from sizes", "a landmark with distances")
    return Isocentre(None, dicom_mm=table.vector("dicom_mm"))


def _from_landmark(table: Table, patient: Patient) -> Isocentre:
    """Return the isocentre at a distance from a landmark; an imported envelope knows those that the file gives it."""
    landmark = table.choice("landmark", LANDMARKS)
    if isinstance(patient.envelope, Surface):
        known = [name for name, _ in patient.envelope.landmarks_mm]
        if landmark not in known:
            table.fault("landmark", f"'{landmark}', not among patient.landmarks", one_of(known))
    offsets = [table.number(key, OFFSET_MM, default=0.0) for key in _OFFSETS]
    left_mm, head_mm, front_mm = offsets
    return Isocentre(landmark, (left_mm, head_mm, front_mm))


def _from_plan(table: Table, patient: Patient) -> tuple[float, float, float] | None:
    """Return the plan's isocentre of that number, counted from 1."""
    number = table.whole("from_plan", 1, 1000)
    isocentres = patient.plan_isocentres_mm
    if patient.envelope is None and not isocentres:
        return None
    if number > len(isocentres):
        allowed = f"1 to {len(isocentres)}" if isocentres else "a plan named under [patient]"
        table.fault("from_plan", f"{number} of {len(isocentres)} isocentres", allowed)
        return None
    return isocentres[number - 1]


def _fitted(top: Table, room: Room | None) -> tuple[tuple[str, ...], tuple[tuple[str, str | float], ...], float | None]:
    """Return fitted accessories and arm positions, in the room's order, and the collimator angle (None: any)."""
    table = top.table("fitted")
    if table is None:
        return (), (), None
    collimator_deg = None
    if table.raw("collimator_deg") not in (MISSING, "any"):
        collimator_deg = table.checked("collimator_deg", _angle, 0.0)
    accessories = table.names("accessories", _MOST_FITTED, default=())
    arms = table.table("arms")
    if room is None:
        if arms is not None:
            arms.ignore_rest()
        return (), (), collimator_deg
    fitted = _accessories(table, accessories, room)
    return fitted, () if arms is None else _arms(arms, room), collimator_deg


def _accessories(table: Table, names: tuple[str, ...], room: Room) -> tuple[str, ...]:
    known = {accessory.name: accessory for accessory in room.accessories}
    in_slot: dict[str, str] = {}
    for name in names:
        if name not in known:
            table.fault("accessories", f"'{printable(name)}', none of the room's", did_you_mean(name, known))
            continue
        slot = known[name].slot
        if slot is not None and slot in in_slot:
            both = f"'{printable(in_slot[slot])}' and '{printable(name)}' in slot '{printable(slot)}'"
            table.fault("accessories", both, "one at most in a slot")
        elif slot is not None:
            in_slot[slot] = name
    return tuple(name for name in known if name in names)


def _arms(table: Table, room: Room) -> tuple[tuple[str, str | float], ...]:
    return tuple(
        (arm.name, table.checked(arm.name, partial(_arm_place, arm), "")) for arm in room.arms if table.has(arm.name)
    )


def _arm_place(arm: Arm, value: object) -> str | float:
    """Return a position of the arm by name, or a slide in mm where it slides."""
    names = [position.name for position in arm.positions]
    if arm.travel_mm is None:
        return values.choice(value, names)
    if not isinstance(value, str):
        return values.number(value, Limits(*arm.travel_mm))
    if value not in names:
        slide = f"a slide in mm, {Limits(*arm.travel_mm)}"
        raise Refused([Problem("", described(value), f"{slide}, or {did_you_mean(value, names)}" if names else slide)])
    return value


def _angle(value: object) -> float:
    if isinstance(value, str):
        raise Refused([Problem("", described(value), "degrees or 'any'")])
    return values.number(value, WHOLE_TURN_DEG)
