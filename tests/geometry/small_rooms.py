"""Invented rooms so small that what is short in them follows from a formula.

The gantry carries a box, the head, whose corners farthest from the axis stand at `CORNER_MM` and at +-`CORNER_DEG`
about the beam. A post is a fixed cube too small to matter, so that the distance to a corner is that of two points.
"""

import math
from collections.abc import Sequence
from dataclasses import replace

from geometry.frames import rotation_y
from geometry.machine import Axis, Couch, Mount, Part, Room
from geometry.setup import Isocentre, OnTable, Required, Setup, Surface
from geometry.solids import Box

HEAD = Part("head", Mount.GANTRY, Box((100.0, 100.0, 100.0), (0.0, 0.0, 500.0)))
CORNER_MM = math.hypot(550.0, 50.0)
CORNER_DEG = math.degrees(math.atan2(50.0, 550.0))
REQUIRED_MM = 10.0
GANTRY = Axis(-185.0, 185.0)
TURNTABLE = Axis(-95.0, 95.0)
# At this distance from the axis a corner of the head is short of a post for 0.3 deg.
GRAZED_MM = CORNER_MM + math.sqrt(REQUIRED_MM**2 - 1.46**2)


def setup_with(
    parts: Sequence[Part] = (),
    devices: Sequence[Part] = (),
    gantry: Axis = GANTRY,
    turntable: Axis = TURNTABLE,
) -> Setup:
    """Return a set-up of a small box of a patient about the isocentre, the head, and what is given."""
    far = Axis(-4000.0, 4000.0)
    couch = Couch(turntable, Axis(-90.0, 90.0), far, far, far, Axis(-3.0, 3.0), Axis(-3.0, 3.0))
    room = Room(
        name="invented",
        demonstration=True,
        survey=None,
        source_axis_distance_mm=1000.0,
        gantry=gantry,
        collimator=Axis(-185.0, 185.0),
        couch=couch,
        parts=(HEAD, *parts),
    )
    return Setup(
        name="invented",
        room=room,
        patient=Surface(Box((100.0, 100.0, 100.0)), "invented"),
        patient_position="HFS",
        on_table=OnTable(0.0),
        isocentre=Isocentre(None, dicom_mm=(0.0, 0.0, 0.0)),
        required=Required(REQUIRED_MM, "invented"),
        devices=tuple(devices),
        collimator_deg=0.0,
        demonstration=True,
    )


def moved_isocentre(setup: Setup, dicom_mm: tuple[float, float, float]) -> Setup:
    """Return the set-up with its isocentre elsewhere in the patient."""
    return replace(setup, isocentre=Isocentre(None, dicom_mm=dicom_mm))


def post(name: str, at_deg: float, radius_mm: float, size_mm: float = 1e-3) -> Part:
    """Return a fixed cube whose middle stands at a gantry angle and a distance from the gantry's axis."""
    x, y, z = rotation_y(at_deg) @ (0.0, 0.0, radius_mm)
    return Part(name, Mount.FIXED, Box((size_mm, size_mm, size_mm), (x, y, z)))


def half_width_deg(radius_mm: float) -> float:
    """Return up to which angle from a post a corner of the head is nearer than required: the law of cosines."""
    cos = (CORNER_MM**2 + radius_mm**2 - REQUIRED_MM**2) / (2.0 * CORNER_MM * radius_mm)
    return math.degrees(math.acos(cos))


def narrow_pass(gap_deg: float) -> tuple[Setup, float]:
    """Return a set-up whose gantry angles between two posts are free for a gap, and the gap's middle, deg."""
    half = half_width_deg(GRAZED_MM)
    low = 20.07 + CORNER_DEG + half
    high = low + gap_deg
    parts = [post("low post", 20.07, GRAZED_MM), post("high post", high + CORNER_DEG + half, GRAZED_MM)]
    return setup_with(parts), 0.5 * (low + high)
