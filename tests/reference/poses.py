"""Where every piece of a set-up stands in the fixed system: forward kinematics by SciPy's rotations, one line a stage.

Shares the lists of parts and their facets with the program, none of its matrices. Capital letters in
`Rotation.from_euler` mean intrinsic turns: "XY" is Rx @ Ry (SciPy's manual). Fixed system of IEC 61217, mm, degrees.
"""

import math
from dataclasses import dataclass
from functools import lru_cache
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
Carrier = Literal["gantry", "couch", "nothing"]

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
    carrier: Carrier
    pieces: tuple[Array, ...]

    @property
    def label(self) -> str:
        """The name that exports use."""
        return f"{self.side}/{self.name}"

    def at(self, gantry_deg: float, couch_deg: float) -> list[Array]:
        """Return the pieces at a pair of angles, fixed system."""
        turn = turns(gantry_deg, couch_deg)[self.carrier]
        return [turn.apply(piece) for piece in self.pieces]


def turns(gantry_deg: float, couch_deg: float) -> dict[Carrier, Rotation]:
    """Return how a pair of angles turns what is carried away from where it stands (IEC 61217: about Y, about Z)."""
    return {
        "gantry": Rotation.from_euler("Y", gantry_deg, degrees=True),
        "couch": Rotation.from_euler("Z", couch_deg, degrees=True),
        "nothing": Rotation.identity(),
    }


@dataclass(frozen=True, eq=False)
class Placement:
    """Where a set-up puts table top and patient: the turns and shifts of `standing_parts`, mm.

    `table` is T, where the stages hold the table-top origin so that the isocentre, `isocentre` on the table, stays put:
    r_f = Rz(couch) [E + Rz(eccentric) (T + Rx(pitch) Ry(roll) p)] = 0.
    """

    to_table: Array
    lying: Array
    isocentre: Array
    eccentric: Rotation
    tilt: Rotation
    table: Array

    def patient_on_table(self, points_dicom: Array) -> Array:
        """Return points, (..., 3), of the patient in table-top coordinates."""
        on_table: Array = points_dicom @ self.to_table.T + self.lying
        return on_table


def placement_of(setup: Setup) -> Placement:
    """Return where a set-up puts table top and patient."""
    to_table = axes_of(setup.patient_position).T
    facets = [piece for _, solid in patient_solids(setup.patient) for piece in _facets(solid, setup)]
    points = np.vstack(facets) @ to_table.T
    where, couch = setup.on_table, setup.room.couch
    lying = np.array(
        [
            where.lateral_mm,
            couch.head_end_mm - where.from_head_end_mm - points[:, 1].max(),
            where.height_mm - points[:, 2].min(),
        ]
    )
    isocentre = _isocentre_dicom(setup) @ to_table.T + lying
    eccentric = Rotation.from_euler("Z", setup.eccentric_deg, degrees=True)
    tilt = Rotation.from_euler("XY", [setup.pitch_deg, setup.roll_deg], degrees=True)
    table = eccentric.inv().apply(-np.array(couch.eccentric_offset_mm)) - tilt.apply(isocentre)
    return Placement(to_table, lying, isocentre, eccentric, tilt, table)


def standing_parts(setup: Setup) -> tuple[Standing, ...]:
    """Return every part of a set-up, in the order machine, patient, devices."""
    room = setup.room
    placement = placement_of(setup)
    parts = [
        _machine_part(part, setup, placement)
        for part in room.parts
        if part.accessory is None or part.accessory in setup.fitted
    ]
    every = frozenset(Stage)
    for name, solid in patient_solids(setup.patient):
        on_table = [placement.patient_on_table(piece) for piece in _facets(solid, setup)]
        parts.append(_on_couch(name, "patient", on_table, every, setup, placement))
    parts.extend(
        _on_couch(device.name, "device", _facets(device.solid, setup), every, setup, placement)
        for device in setup.devices
    )
    return tuple(parts)


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
    return rule.fixed_mm + rule.k * math.hypot(
        *(c.sd_mm for c in rule.components if with_patient or not c.patient_only)
    )


def axes_of(patient_position: str) -> Array:
    """Return the matrix, shape (3, 3), from table-top axes to DICOM patient axes, read off the printed table."""
    unit = dict(zip("XYZ", np.eye(3), strict=True))
    return np.array([-unit[a[1]] if a[0] == "-" else unit[a] for a in PATIENT_AXES[patient_position].split()])


@lru_cache(maxsize=512)
def _faceted(solid: Solid, max_excess_mm: float) -> tuple[Array, ...]:
    return solid.faceted(max_excess_mm).pieces


def _facets(solid: Solid, setup: Setup) -> list[Array]:
    return list(_faceted(solid, setup.room.max_excess_mm))


def _isocentre_dicom(setup: Setup) -> Array:
    """Return the isocentre in DICOM patient axes, shape (3,), mm."""
    stated = setup.isocentre
    if stated.landmark is None:
        return np.array(stated.dicom_mm)
    left, head, front = stated.offset_mm
    # DICOM PS3.3 C.7.6.2.1.1: x grows to the patient's left, y to the back, z to the head.
    return landmarks_patient(setup.patient)[stated.landmark] + np.array([left, -front, head])


def _machine_part(part: Part, setup: Setup, placement: Placement) -> Standing:
    drawn = [_moved_by_arm(part, setup, piece) for piece in _facets(part.solid, setup)]
    if part.mount is Mount.COUCH:
        return _on_couch(part.name, part.kind, drawn, part.follows, setup, placement)
    if part.mount is Mount.FIXED:
        return Standing(part.name, "room", part.kind, "nothing", tuple(drawn))
    if part.mount is Mount.COLLIMATOR and setup.collimator_deg is None:
        drawn = list(revolved(drawn, setup.room.max_excess_mm).pieces)
    elif part.mount is Mount.COLLIMATOR:
        turn = Rotation.from_euler("Z", setup.collimator_deg, degrees=True)
        drawn = [turn.apply(piece) for piece in drawn]
    return Standing(part.name, "gantry", part.kind, "gantry", tuple(drawn))


def _on_couch(
    name: str, kind: str, pieces: list[Array], follows: frozenset[Stage], setup: Setup, placement: Placement
) -> Standing:
    """Return a couch part as it stands at couch 0, each stage that it does not follow left at zero."""
    slides = [stage in follows for stage in (Stage.LATERAL, Stage.LONGITUDINAL, Stage.VERTICAL)]
    if Stage.PITCH_ROLL in follows:
        pieces = [placement.tilt.apply(piece) for piece in pieces]
    pieces = [piece + placement.table * slides for piece in pieces]
    if Stage.ECCENTRIC in follows:
        offset = np.array(setup.room.couch.eccentric_offset_mm)
        pieces = [placement.eccentric.apply(piece) + offset for piece in pieces]
    return Standing(name, "couch", kind, "couch" if Stage.TURNTABLE in follows else "nothing", tuple(pieces))


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
