"""A set-up as pieces on the three bodies that move: the gantry, what turns with the couch, and what stands still."""

from collections.abc import Hashable
from dataclasses import dataclass, replace
from enum import StrEnum
from functools import lru_cache
from typing import cast

import numpy as np
from numpy.typing import NDArray

from geometry.body import Body, body_landmarks, body_parts
from geometry.decompose import revolved
from geometry.errors import GeometryError
from geometry.frames import R_dicom_tabletop, R_gantry_collimator, moved, transform, unwrapped_deg
from geometry.kinematics import CouchPose, couch_pose
from geometry.landmarks import Landmark
from geometry.machine import EVERY_STAGE, Axis, Mount, Part, PartKind, Room, Stage
from geometry.pieces import ConvexPiece, convex_piece
from geometry.setup import Setup, Surface
from geometry.solids import Solid

Array = NDArray[np.float64]


class Side(StrEnum):
    """Between which sides clearance is asked."""

    GANTRY = "gantry"
    COUCH = "couch"
    ROOM = "room"


class Motion(StrEnum):
    """The rigid body that a part belongs to once the set-up is fixed."""

    GANTRY = "gantry"
    TURNTABLE = "turntable"
    STILL = "still"


@dataclass(frozen=True, eq=False)
class ScenePart:
    """A part as the convex pieces that are computed and drawn.

    `pieces` are in the system of the part's motion: the gantry system, the patient support system, or the fixed one.
    `excess_mm` is how far they may stand out beyond the true part.
    """

    name: str
    side: Side
    motion: Motion
    kind: PartKind
    pieces: tuple[ConvexPiece, ...]
    excess_mm: float
    colour: str | None

    @property
    def label(self) -> str:
        """The name that exports and messages use."""
        return f"{self.side}/{self.name}"


@dataclass(frozen=True, eq=False)
class Scene:
    """Everything that the sweep needs of a set-up. `p_isocentre_tabletop` (3,), mm.

    `no_travel` says, in words, which stages would have to leave their travel: with any, no angle pair can be reached.
    """

    setup: Setup
    parts: tuple[ScenePart, ...]
    couch: CouchPose
    p_isocentre_tabletop: Array
    no_travel: tuple[str, ...]

    def required_mm(self, first: ScenePart, second: ScenePart) -> float:
        """Return the required clearance of a pair of parts, mm."""
        with_patient = first.kind != "machine" or second.kind != "machine"
        return self.setup.required.of_pair_mm(with_patient)


def build_scene(setup: Setup) -> Scene:
    """Place every part of a set-up. GeometryError for a solid that cannot be built or a name that is not there."""
    room = setup.room
    T_tabletop_patient = patient_placement(setup)
    p_isocentre = moved(T_tabletop_patient, _isocentre_patient(setup))
    couch = couch_pose(room.couch, p_isocentre, setup.pitch_deg, setup.roll_deg, setup.eccentric_deg)
    parts = [
        _machine_part(part, setup, couch)
        for part in room.parts
        if part.accessory is None or part.accessory in setup.fitted
    ]
    T_support_tabletop = couch.T_support_part(EVERY_STAGE)
    excess = room.max_excess_mm
    for name, solid in patient_solids(setup.patient):
        part = Part(name, Mount.COUCH, solid, kind="patient")
        parts.append(_placed(part, Side.COUCH, Motion.TURNTABLE, T_support_tabletop @ T_tabletop_patient, excess))
    parts += [_placed(device, Side.COUCH, Motion.TURNTABLE, T_support_tabletop, excess) for device in setup.devices]
    return Scene(setup, tuple(parts), couch, p_isocentre, _beyond_travel(room, setup, couch))


@lru_cache(maxsize=16)
def patient_solids(patient: Body | Surface) -> tuple[tuple[str, Solid], ...]:
    """Return the named solids of the envelope, in DICOM patient axes, mm."""
    return body_parts(patient) if isinstance(patient, Body) else (("patient", patient.solid),)


def patient_placement(setup: Setup) -> Array:
    """Return T_tabletop_patient, shape (4, 4): from DICOM patient axes to the table top.

    The envelope's lowest point lies `height_mm` above the table, its nearest point along the table
    `from_head_end_mm` from the head end, its mid-line (patient x = 0) at `lateral_mm`.
    """
    farthest, lowest = _extent_on_table(setup.patient, setup.patient_position, setup.room.max_excess_mm)
    where = setup.on_table
    shift = np.array(
        [
            where.lateral_mm,
            setup.room.couch.head_end_mm - where.from_head_end_mm - farthest,
            where.height_mm - lowest,
        ]
    )
    return transform(R_dicom_tabletop(setup.patient_position).T, shift)


@lru_cache(maxsize=16)
def _extent_on_table(patient: Body | Surface, position: str, max_excess_mm: float) -> tuple[float, float]:
    """Return the greatest table-top Y and the least Z of an envelope whose origin lies at the table top's, mm."""
    pieces = [piece for _, solid in patient_solids(patient) for piece in faceted_pieces(solid, max_excess_mm)[0]]
    points = np.concatenate([piece.vertices for piece in pieces]) @ R_dicom_tabletop(position)
    return float(points[:, 1].max()), float(points[:, 2].min())


def faceted_pieces(solid: Solid, max_excess_mm: float) -> tuple[tuple[ConvexPiece, ...], float]:
    """Return a solid's pieces and their stated excess, mm; remembered, since a set-up is posed again and again."""
    return _faceted_pieces(cast(Hashable, solid), max_excess_mm)


@lru_cache(maxsize=1024)
def _faceted_pieces(hashable: Hashable, max_excess_mm: float) -> tuple[tuple[ConvexPiece, ...], float]:
    # Every solid is a frozen dataclass, hashed by value or by identity.
    solid = cast(Solid, hashable)
    faceted = solid.faceted(max_excess_mm)
    return tuple(convex_piece(points) for points in faceted.pieces), faceted.excess_mm


@lru_cache(maxsize=256)
def _revolved_pieces(
    hashable: Hashable, max_excess_mm: float, arm_matrix: tuple[float, ...]
) -> tuple[tuple[ConvexPiece, ...], float]:
    """Return the pieces that hold the solid, moved by its arm, through a whole turn of the collimator."""
    T_arm = np.array(arm_matrix).reshape(4, 4)
    pieces, excess = faceted_pieces(cast(Solid, hashable), max_excess_mm)
    swept = revolved(tuple(piece.placed(T_arm).vertices for piece in pieces), max_excess_mm)
    return tuple(convex_piece(points) for points in swept.pieces), excess + swept.excess_mm


def _machine_part(part: Part, setup: Setup, couch: CouchPose) -> ScenePart:
    T_arm = _arm_matrix(part, setup)
    excess = setup.room.max_excess_mm
    if part.mount is Mount.COUCH:
        motion = Motion.TURNTABLE if Stage.TURNTABLE in part.follows else Motion.STILL
        return _placed(part, Side.COUCH, motion, couch.T_support_part(part.follows) @ T_arm, excess)
    if part.mount is Mount.FIXED:
        return _placed(part, Side.ROOM, Motion.STILL, T_arm, excess)
    if part.mount is Mount.COLLIMATOR and setup.collimator_deg is None:
        pieces, stated = _revolved_pieces(cast(Hashable, part.solid), excess, tuple(T_arm.ravel()))
        return ScenePart(part.name, Side.GANTRY, Motion.GANTRY, part.kind, pieces, stated, part.colour)
    turned = np.eye(4)
    if part.mount is Mount.COLLIMATOR and setup.collimator_deg is not None:
        turned[:3, :3] = R_gantry_collimator(setup.collimator_deg)
    return _placed(part, Side.GANTRY, Motion.GANTRY, turned @ T_arm, excess)


def _placed(part: Part, side: Side, motion: Motion, matrix: Array, max_excess_mm: float) -> ScenePart:
    pieces, excess = _placed_pieces(cast(Hashable, part.solid), max_excess_mm, tuple(matrix.ravel()))
    return ScenePart(part.name, side, motion, part.kind, pieces, excess, part.colour)


@lru_cache(maxsize=1024)
def _placed_pieces(
    hashable: Hashable, max_excess_mm: float, matrix: tuple[float, ...]
) -> tuple[tuple[ConvexPiece, ...], float]:
    """Return a solid's pieces, moved; the same objects while what they are part of stays where it is."""
    pieces, excess = faceted_pieces(cast(Solid, hashable), max_excess_mm)
    T = np.array(matrix).reshape(4, 4)
    return tuple(piece.placed(T) for piece in pieces), excess


def _arm_matrix(part: Part, setup: Setup) -> Array:
    """Return the homogeneous matrix of the position in which the set-up has the part's arm."""
    if part.arm is None:
        return np.eye(4)
    arm = setup.room.arm_named(part.arm)
    chosen = dict(setup.arm_positions).get(arm.name)
    if isinstance(chosen, float | int):
        if arm.direction is None or arm.travel_mm is None:
            raise GeometryError(f"arm {arm.name!r} = {chosen} mm; allowed: one of its named positions")
        low, high = arm.travel_mm
        if not low <= chosen <= high:
            raise GeometryError(f"arm {arm.name!r} = {chosen} mm is outside its travel {low} to {high}")
        direction = np.array(arm.direction) / np.linalg.norm(arm.direction)
        return transform(np.eye(3), float(chosen) * direction)
    named = {position.name: position for position in arm.positions}
    if chosen is None:
        if arm.positions:
            return arm.positions[0].matrix()
        low = arm.travel_mm[0] if arm.travel_mm else 0.0
        direction = np.array(arm.direction or (0.0, 0.0, 1.0))
        return transform(np.eye(3), low * direction / np.linalg.norm(direction))
    if chosen not in named:
        raise GeometryError(f"arm {arm.name!r} = {chosen!r}; allowed: {', '.join(map(repr, named))}")
    return named[chosen].matrix()


def landmarks_patient(patient: Body | Surface) -> dict[Landmark, Array]:
    """Return the known landmarks of an envelope, DICOM patient axes, mm."""
    if isinstance(patient, Body):
        return body_landmarks(patient)
    return {name: np.array(point) for name, point in patient.landmarks_mm}


def _isocentre_patient(setup: Setup) -> Array:
    """Return the isocentre in DICOM patient axes, mm, shape (3,)."""
    isocentre = setup.isocentre
    if isocentre.landmark is None:
        if isocentre.dicom_mm is None:
            raise GeometryError("isocentre: neither a landmark nor DICOM coordinates; allowed: one of them")
        return np.array(isocentre.dicom_mm, dtype=np.float64)
    known = landmarks_patient(setup.patient)
    if isocentre.landmark not in known:
        raise GeometryError(f"isocentre.landmark = {isocentre.landmark!r}; allowed: {', '.join(known) or 'none known'}")
    left, head, front = isocentre.offset_mm
    point: Array = known[isocentre.landmark] + np.array([left, -front, head])
    return point


def _beyond_travel(room: Room, setup: Setup, couch: CouchPose) -> tuple[str, ...]:
    """Name every stage, and the collimator, that would have to leave its travel, with the excess."""
    stages: tuple[tuple[str, Axis, float, str], ...] = (
        ("eccentric", room.couch.eccentric, setup.eccentric_deg, "deg"),
        ("lateral", room.couch.lateral, float(couch.T_mm[0]), "mm"),
        ("longitudinal", room.couch.longitudinal, float(couch.T_mm[1]), "mm"),
        ("vertical", room.couch.vertical, float(couch.T_mm[2]), "mm"),
        ("pitch", room.couch.pitch, setup.pitch_deg, "deg"),
        ("roll", room.couch.roll, setup.roll_deg, "deg"),
    )
    found = []
    for name, axis, value, unit in stages:
        excess = max(axis.low - value, value - axis.high)
        # Rounding in T must not turn a set-up at the very end of its travel away.
        if excess > 1e-6:
            found.append(
                f"couch {name} = {value:.1f} {unit} is {excess:.1f} {unit} outside its travel "
                f"{axis.low:g} to {axis.high:g}"
            )
    turning = (room.collimator.low, room.collimator.high)
    if setup.collimator_deg is not None and not unwrapped_deg(setup.collimator_deg, turning):
        wanted = f"collimator = {setup.collimator_deg:g} deg"
        found.append(f"{wanted} is outside its travel {turning[0]:g} to {turning[1]:g}")
    return tuple(found)


def with_required(setup: Setup, required_mm: float, reason: str) -> Setup:
    """Return the set-up with one required clearance for every pair."""
    required = replace(setup.required, fixed_mm=required_mm, reason=reason, components=())
    return replace(setup, required=required)
