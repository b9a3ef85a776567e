"""Where every piece of a set-up stands in the fixed system: forward kinematics by SciPy's rotations, one line a stage.

Shares the lists of parts and their facets with the program, none of its matrices. Capital letters in
`Rotation.from_euler` mean intrinsic turns: "XY" is Rx @ Ry (SciPy's manual). Fixed system of IEC 61217, mm, degrees.
"""

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray
from scipy.spatial.transform import Rotation

from geometry.decompose import revolved
from geometry.machine import Arm, Mount, Part, Stage
from geometry.scene import landmarks_patient, patient_solids
from geometry.setup import Setup
from geometry.solids import Solid

Array = NDArray[np.float64]
SideName = Literal["gantry", "couch", "room"]

# DICOM patient (x, y, z) in terms of table-top axes: arXiv:1406.0014, table 1, as printed there.
PATIENT_AXES = {
    "HFS": "X -Z Y",
    "HFP": "-X Z Y",
    "FFS": "-X -Z -Y",
    "FFP": "X Z -Y",
    "HFDR": "Z X Y",
    "HFDL": "-Z -X Y",
    "FFDR": "Z -X -Y",
    "FFDL": "-Z X -Y",
}


@dataclass(frozen=True, eq=False)
class Standing:
    """A part as it stands at gantry 0 and couch 0; its `pieces` are vertices, (n, 3) each, mm, fixed system."""

    name: str
    side: SideName
    kind: str
    turns_with: Literal["gantry", "couch", "nothing"]
    pieces: tuple[Array, ...]

    @property
    def label(self) -> str:
        """The name that exports use."""
        return f"{self.side}/{self.name}"

    def turn(self, gantry_deg: float, couch_deg: float) -> Rotation:
        """Return how a pair of angles turns the part away from where it stands."""
        if self.turns_with == "gantry":
            return Rotation.from_euler("Y", gantry_deg, degrees=True)
        if self.turns_with == "couch":
            return Rotation.from_euler("Z", couch_deg, degrees=True)
        return Rotation.identity()

    def at(self, gantry_deg: float, couch_deg: float) -> list[Array]:
        """Return the pieces at a pair of angles, fixed system."""
        turn = self.turn(gantry_deg, couch_deg)
        return [turn.apply(piece) for piece in self.pieces]


def standing_parts(setup: Setup) -> tuple[Standing, ...]:
    """Return every part of a set-up, in the order machine, patient, devices."""
    room = setup.room
    parts = [
        _machine_part(part, setup) for part in room.parts if part.accessory is None or part.accessory in setup.fitted
    ]
    for name, solid in patient_solids(setup.patient):
        on_table = [_patient_on_table(setup, piece) for piece in _facets(solid, setup)]
        parts.append(_on_couch(name, "patient", on_table, frozenset(Stage), setup))
    for device in setup.devices:
        parts.append(_on_couch(device.name, "device", _facets(device.solid, setup), frozenset(Stage), setup))
    return tuple(parts)


def table_position(setup: Setup) -> Array:
    """Return T, shape (3,), mm: where the stages hold the table-top origin so that the isocentre stays put.

    From r_f = Rz(couch) [E + Rz(eccentric) (T + Rx(pitch) Ry(roll) p)] = 0.
    """
    eccentric, tilt = _couch_turns(setup)
    E = np.array(setup.room.couch.eccentric_offset_mm)
    return eccentric.inv().apply(-E) - tilt.apply(isocentre_on_table(setup))


def isocentre_on_table(setup: Setup) -> Array:
    """Return the isocentre in table-top coordinates, shape (3,), mm."""
    stated = setup.isocentre
    if stated.landmark is None:
        return _patient_on_table(setup, np.array(stated.dicom_mm))
    left, head, front = stated.offset_mm
    # DICOM PS3.3 C.7.6.2.1.1: x grows to the patient's left, y to the back, z to the head.
    return _patient_on_table(setup, landmarks_patient(setup.patient)[stated.landmark] + np.array([left, -front, head]))


def asked(first: Standing, second: Standing, setup: Setup) -> bool:
    """Tell whether the clearance of two parts is asked: different sides, and not joined where joining counts."""
    if first.side == second.side:
        return False
    joinable = "room" in (first.side, second.side) and first.kind == second.kind == "machine"
    return not (joinable and any({j.first, j.second} == {first.name, second.name} for j in setup.room.joined))


def required_mm(first: Standing, second: Standing, setup: Setup) -> float:
    """Return fixed + k * sqrt(sum of squares); components for patients only where one of the two is no machine."""
    with_patient = not first.kind == second.kind == "machine"
    rule = setup.required
    return rule.fixed_mm + rule.k * math.hypot(*(c.sd_mm for c in rule.components if with_patient or not c.patient_only))


def axes_of(patient_position: str) -> Array:
    """Return the matrix, shape (3, 3), from table-top axes to DICOM patient axes, read off the printed table."""
    unit = dict(zip("XYZ", np.eye(3), strict=True))
    return np.array([-unit[a[1]] if a[0] == "-" else unit[a] for a in PATIENT_AXES[patient_position].split()])


def _facets(solid: Solid, setup: Setup) -> list[Array]:
    return list(solid.faceted(setup.room.max_excess_mm).pieces)


def _machine_part(part: Part, setup: Setup) -> Standing:
    drawn = [_moved_by_arm(part, setup, piece) for piece in _facets(part.solid, setup)]
    if part.mount is Mount.COUCH:
        return _on_couch(part.name, part.kind, drawn, part.follows, setup)
    if part.mount is Mount.FIXED:
        return Standing(part.name, "room", part.kind, "nothing", tuple(drawn))
    if part.mount is Mount.COLLIMATOR and setup.collimator_deg is None:
        drawn = list(revolved(drawn, setup.room.max_excess_mm).pieces)
    elif part.mount is Mount.COLLIMATOR:
        turn = Rotation.from_euler("Z", setup.collimator_deg, degrees=True)
        drawn = [turn.apply(piece) for piece in drawn]
    return Standing(part.name, "gantry", part.kind, "gantry", tuple(drawn))


def _on_couch(name: str, kind: str, pieces: list[Array], follows: frozenset[Stage], setup: Setup) -> Standing:
    """Return a couch part as it stands at couch 0, each stage that it does not follow left at zero."""
    eccentric, tilt = _couch_turns(setup)
    T = table_position(setup)
    for axis, stage in enumerate((Stage.LATERAL, Stage.LONGITUDINAL, Stage.VERTICAL)):
        T[axis] *= stage in follows
    if Stage.PITCH_ROLL in follows:
        pieces = [tilt.apply(piece) for piece in pieces]
    pieces = [piece + T for piece in pieces]
    if Stage.ECCENTRIC in follows:
        pieces = [eccentric.apply(piece) + np.array(setup.room.couch.eccentric_offset_mm) for piece in pieces]
    return Standing(name, "couch", kind, "couch" if Stage.TURNTABLE in follows else "nothing", tuple(pieces))


def _couch_turns(setup: Setup) -> tuple[Rotation, Rotation]:
    """Return the eccentric turn, and pitch about X with roll about the pitched Y."""
    tilt = Rotation.from_euler("XY", [setup.pitch_deg, setup.roll_deg], degrees=True)
    return Rotation.from_euler("Z", setup.eccentric_deg, degrees=True), tilt


def _patient_on_table(setup: Setup, points_dicom: Array) -> Array:
    """Return points, (..., 3), of the patient in table-top coordinates: lying where the tape measure says."""
    to_table = axes_of(setup.patient_position).T
    pieces = [piece for _, solid in patient_solids(setup.patient) for piece in _facets(solid, setup)]
    lying = np.vstack(pieces) @ to_table.T
    where = setup.on_table
    head_end = setup.room.couch.head_end_mm
    shift = [where.lateral_mm, head_end - where.from_head_end_mm - lying[:, 1].max(), where.height_mm - lying[:, 2].min()]
    return points_dicom @ to_table.T + np.array(shift)


def _moved_by_arm(part: Part, setup: Setup, points: Array) -> Array:
    """Return the points with the part's arm where the set-up has it."""
    if part.arm is None:
        return points
    arm = next(arm for arm in setup.room.arms if arm.name == part.arm)
    chosen = dict(setup.arm_positions).get(arm.name)
    if isinstance(chosen, float | int):
        return points + _slide(arm, float(chosen))
    if chosen is None and not arm.positions:
        return points + _slide(arm, arm.travel_mm[0] if arm.travel_mm else 0.0)
    position = next(p for p in arm.positions if chosen in (None, p.name))
    turn = Rotation.from_euler(position.turn_axis, position.turn_deg, degrees=True)
    pivot = np.array(position.turn_about_mm)
    return turn.apply(points - pivot) + pivot + np.array(position.shift_mm)


def _slide(arm: Arm, by_mm: float) -> Array:
    direction = np.array(arm.direction or (0.0, 0.0, 1.0))
    return by_mm * direction / math.sqrt(float(direction @ direction))
