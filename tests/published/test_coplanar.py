"""Clearances that a sheet of paper gives, as whole set-ups through the sweep and through a single pose.

Coplanar closed form (plane geometry): a head whose face lies at distance F, and the corner of a table at (a, -h) across
the gantry's axis, are d = F - (a sin g - h cos g) apart, least F - sqrt(a² + h²) at g = atan2(a, -h). Inside a bore of
radius B, a point at distance r from the axis has B - r left.
"""

import math

import numpy as np
import pytest

from geometry.assess import assess_pose
from geometry.machine import Axis, Couch, Mount, Part, Room
from geometry.scene import build_scene
from geometry.setup import Isocentre, OnTable, Required, Setup, Surface
from geometry.solids import Box, Cylinder, Ring, Solid
from geometry.states import State
from geometry.sweep import sweep

FACE_MM, HALF_WIDTH_MM, BELOW_MM = 415.0, 265.0, 200.0
EXCESS_MM = 0.5
TABLE_THICKNESS_MM = 60.0

BOX_HEAD = Box((900.0, 900.0, 300.0), (0.0, 0.0, FACE_MM + 150.0))
ROUND_HEAD = Cylinder(420.0, (0.0, 0.0, FACE_MM), (0.0, 0.0, FACE_MM + 300.0))
BORE = Ring(400.0, 900.0, (0.0, -500.0, 0.0), (0.0, 500.0, 0.0))


def set_up(machine: Part, corner: str = "lower") -> Setup:
    """Return a table whose lower (or upper) edges lie 265 to the sides of and 200 below the isocentre."""
    free = Axis(-3000.0, 3000.0)
    couch = Couch(Axis(-90.0, 90.0), Axis(0.0, 0.0), free, free, free, Axis(0.0, 0.0), Axis(0.0, 0.0))
    thickness = TABLE_THICKNESS_MM if corner == "lower" else 0.0
    table = Part("table", Mount.COUCH, Box((2 * HALF_WIDTH_MM, 1200.0, 60.0), (0.0, 0.0, -30.0)))
    room = Room(
        "plane", True, None, 1000.0, Axis(-185.0, 185.0), free, couch, (machine, table), max_excess_mm=EXCESS_MM
    )
    # A small box about the isocentre, which lies in its middle.
    patient = Surface(Box((40.0, 40.0, 40.0)), "a box")
    above_table = BELOW_MM - thickness
    return Setup(
        "plane",
        room,
        patient,
        "HFS",
        OnTable(0.0, height_mm=above_table - 20.0),
        Isocentre(None, dicom_mm=(0.0, 0.0, 0.0)),
        Required(20.0, "plane geometry"),
    )


def clearance_mm(setup: Setup, gantry_deg: float, couch_deg: float = 0.0) -> float:
    """Return what the sweep and the single pose both say."""
    pose = assess_pose(setup, gantry_deg, couch_deg)
    swept = sweep(build_scene(setup), np.array([gantry_deg]), np.array([couch_deg]))
    assert swept.clearance_mm[0, 0] == pose.clearance_mm
    return pose.clearance_mm


def head(solid: Solid) -> Part:
    return Part("head", Mount.GANTRY, solid)


@pytest.mark.parametrize(
    ("gantry_deg", "corner", "expected"),
    [
        # Up to 90 deg it is the upper edge of a table that is nearer, from there the lower one.
        (60.0, "upper", 285.5033),
        (90.0, "upper", 150.0),
        (90.0, "lower", 150.0),
        (127.04, "lower", 82.998),
        (150.0, "lower", 109.2949),
        (180.0, "lower", 215.0),
        # The other edge on the other side.
        (-127.04, "lower", 82.998),
        (-150.0, "lower", 109.2949),
    ],
)
@pytest.mark.parametrize("solid", [BOX_HEAD, ROUND_HEAD], ids=["box", "round"])
def test_head_plane_against_a_table_corner(gantry_deg: float, corner: str, expected: float, solid: Solid) -> None:
    # The face is flat and the corners are true: no facet stands out where it matters. Printed to 4 digits.
    found = clearance_mm(set_up(head(solid), corner), gantry_deg)
    assert found == pytest.approx(expected, abs=6e-4)


def test_the_least_clearance_of_a_turn_is_where_the_closed_form_has_it() -> None:
    setup = set_up(head(BOX_HEAD))
    gantry = np.arange(90.0, 180.001, 0.01)
    found = sweep(build_scene(setup), gantry, np.zeros(1)).clearance_mm[0]
    radius = math.hypot(HALF_WIDTH_MM, BELOW_MM)
    assert found.min() == pytest.approx(FACE_MM - radius, abs=1e-5)
    assert found.min() == pytest.approx(82.998, abs=5e-4)
    assert gantry[np.argmin(found)] == pytest.approx(math.degrees(math.atan2(HALF_WIDTH_MM, -BELOW_MM)), abs=0.01)
    assert gantry[np.argmin(found)] == pytest.approx(127.04, abs=0.01)
    closed = FACE_MM - (HALF_WIDTH_MM * np.sin(np.radians(gantry)) - BELOW_MM * np.cos(np.radians(gantry)))
    assert found == pytest.approx(closed, abs=1e-6)


def test_a_round_head_seen_from_its_side_is_near_within_its_excess() -> None:
    # An upright barrel of radius R, its axis at X = 900, beside a table whose edge lies at X = 265: 900 - R - 265.
    radius = 420.0
    barrel = Cylinder(radius, (900.0, 0.0, -400.0), (900.0, 0.0, 400.0))
    found = clearance_mm(set_up(head(barrel)), 0.0)
    true = 900.0 - radius - HALF_WIDTH_MM
    assert true - EXCESS_MM <= found <= true


@pytest.mark.parametrize("gantry_deg", [0.0, 33.0])
def test_a_table_in_a_bore(gantry_deg: float) -> None:
    setup = set_up(Part("bore", Mount.FIXED, BORE))
    true = 400.0 - math.hypot(HALF_WIDTH_MM, BELOW_MM)
    found = clearance_mm(setup, gantry_deg)
    assert true - EXCESS_MM <= found <= true


def test_the_couch_turn_brings_the_corner_out() -> None:
    # A wall at X = 800 is 800 - x away, x the greatest of the turned corners'. (Plane geometry.)
    wall = Part("wall", Mount.FIXED, Box((100.0, 4000.0, 4000.0), (850.0, 0.0, 0.0)))
    setup = set_up(wall)
    # The isocentre lies 20 from the head end of the patient's box, whose head side is at the head end of the table.
    head_end, foot_end = 600.0 + 20.0, -600.0 + 20.0
    for couch_deg in (-60.0, -20.0, 0.0, 30.0, 66.17, 90.0):
        c = math.radians(couch_deg)
        corners = [(x, y) for x in (-HALF_WIDTH_MM, HALF_WIDTH_MM) for y in (head_end, foot_end)]
        reach = max(x * math.cos(c) - y * math.sin(c) for x, y in corners)
        assert clearance_mm(setup, 0.0, couch_deg) == pytest.approx(800.0 - reach, abs=1e-6)


def test_states_of_the_closed_form() -> None:
    # 82.998 mm with 20 required is enough, with 90 it is short; a face at 300 would run into the table.
    setup = set_up(head(BOX_HEAD))
    assert assess_pose(setup, 127.04, 0.0).state is State.PERMITTED
    near = set_up(head(Box((900.0, 900.0, 300.0), (0.0, 0.0, 300.0 + 150.0))))
    contact = assess_pose(near, 127.04, 0.0)
    assert contact.state is State.CONTACT
    assert contact.clearance_mm == 0.0
    short = set_up(head(Box((900.0, 900.0, 300.0), (0.0, 0.0, 340.0 + 150.0))))
    pose = assess_pose(short, 127.04, 0.0)
    assert pose.state is State.SHORT
    assert pose.clearance_mm == pytest.approx(340.0 - math.hypot(HALF_WIDTH_MM, BELOW_MM), abs=1e-4)
    assert pose.slack_mm == pytest.approx(pose.clearance_mm - 20.0, abs=1e-9)
