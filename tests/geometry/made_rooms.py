"""Rooms of a few blocks and planes of a few cells, made up so that what must come out can be worked out on paper."""

from functools import cache

import numpy as np
from numpy.typing import NDArray
from scipy.spatial.transform import Rotation

from geometry.machine import EVERY_STAGE, Axis, Couch, Mount, Part, Room, Stage
from geometry.proof import Proof, Steps
from geometry.scene import Scene, build_scene
from geometry.setup import Isocentre, OnTable, Required, Setup, Surface
from geometry.solids import Box, Placed

Array = NDArray[np.float64]
Flags = NDArray[np.bool_]
Interval = tuple[float, float]
Vector = tuple[float, float, float]

# The patient is a bean of this size about the isocentre, out of everything's way.
BEAN_MM = 8.0
# Where the isocentre is in table-top coordinates: the bean lies on the table, at its head end.
ISOCENTRE_TABLETOP = np.array([0.0, -BEAN_MM / 2.0, BEAN_MM / 2.0])


def made_setup(
    *parts: Part,
    gantry: Interval = (-180.0, 180.0),
    couch: Interval = (-90.0, 90.0),
    required_mm: float = 5.0,
    pitch_deg: float = 0.0,
    roll_deg: float = 0.0,
    eccentric_deg: float = 0.0,
) -> Setup:
    """Return a set-up of these parts; every pair that is not of one side is checked."""
    wide = Axis(-5000.0, 5000.0)
    room = Room(
        name="made up",
        demonstration=True,
        survey=None,
        source_axis_distance_mm=1000.0,
        gantry=Axis(*gantry),
        collimator=Axis(-180.0, 180.0),
        couch=Couch(
            turntable=Axis(*couch),
            eccentric=Axis(-90.0, 90.0),
            lateral=wide,
            longitudinal=wide,
            vertical=wide,
            pitch=Axis(-5.0, 5.0),
            roll=Axis(-5.0, 5.0),
            eccentric_offset_mm=(120.0, -70.0, 30.0),
        ),
        parts=parts,
    )
    return Setup(
        name="made up",
        room=room,
        patient=Surface(Box((BEAN_MM, BEAN_MM, BEAN_MM)), "made up"),
        patient_position="HFS",
        on_table=OnTable(0.0),
        isocentre=Isocentre(None, dicom_mm=(0.0, 0.0, 0.0)),
        required=Required(required_mm, "made up"),
        pitch_deg=pitch_deg,
        roll_deg=roll_deg,
        eccentric_deg=eccentric_deg,
        demonstration=True,
    )


def block(size_mm: Vector, centre_mm: Vector, turn: Rotation | None = None) -> Placed:
    """Return a box, turned about its centre."""
    matrix = np.eye(4)
    matrix[:3, :3] = (turn or Rotation.identity()).as_matrix()
    matrix[:3, 3] = centre_mm
    return Placed(Box(size_mm), matrix)


def on_gantry(solid: Placed) -> Part:
    """Return a gantry part as it stands at gantry 0."""
    return Part("mover", Mount.GANTRY, solid)


def in_room(solid: Placed) -> Part:
    """Return a part that stands still."""
    return Part("post", Mount.FIXED, solid)


def on_still_couch(solid: Placed) -> Part:
    """Return a couch part that follows no stage."""
    return Part("pedestal", Mount.COUCH, solid, frozenset())


def on_turntable(solid: Placed) -> Part:
    """Return a couch part that follows the turntable alone, as it stands at couch 0."""
    return Part("column", Mount.COUCH, solid, frozenset({Stage.TURNTABLE}))


def on_table(solid: Placed, *, pitch_deg: float = 0.0, roll_deg: float = 0.0, eccentric_deg: float = 0.0) -> Part:
    """Return a table part that stands as `solid` says once all stages are set, at couch 0.

    The isocentre p stays put, so that r = Rz(eccentric) Rx(pitch) Ry(roll) (r_t - p) in the fixed system (IEC 61217).
    """
    stages = Rotation.from_euler("Z", eccentric_deg, degrees=True) * Rotation.from_euler(
        "XY", [pitch_deg, roll_deg], degrees=True
    )
    back = np.eye(4)
    back[:3, :3] = stages.inv().as_matrix()
    back[:3, 3] = ISOCENTRE_TABLETOP
    return Part("table", Mount.COUCH, Placed(solid.solid, back @ solid.matrix), EVERY_STAGE)


@cache
def plain_scene() -> Scene:
    """Return a scene of three parts, the patient the last."""
    return build_scene(made_setup(on_gantry(block((9.0,) * 3, (0, 0, 500))), in_room(block((9.0,) * 3, (0, 900, 0)))))


def made_proof(proved: Flags, gantry: Steps, couch: Steps) -> Proof:
    """Return a proof of the given cells, each with a clearance of its own."""
    clearance = np.where(proved, 10.0 + np.arange(proved.size).reshape(proved.shape), np.nan).astype(np.float32)
    machine = np.where(proved, 0, 1).astype(np.int32)
    other = np.full(proved.shape, 2, np.int32)
    return Proof(gantry, couch, clearance - 5.0, clearance, machine, other, np.zeros(proved.shape, np.int8), 0)
