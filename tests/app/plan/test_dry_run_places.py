import numpy as np
import pytest

from app.plan.dry_run_places import place_at, stop_before
from geometry.assess import exact_pose
from geometry.frames import R_fixed_turntable
from geometry.legs import Point
from geometry.paths import Approach
from tests.app.files.reports import small_report


def approach(segment: int, gantry_deg: float, couch_deg: float) -> Approach:
    return Approach(segment, gantry_deg, couch_deg, 50.0, 30.0, 0, 1)


@pytest.mark.parametrize(
    ("points", "place", "stop"),
    [
        (((0.0, 0.0), (100.0, 0.0)), approach(0, 50.4, 0.0), (40.0, 0.0)),
        (((100.0, 0.0), (0.0, 0.0)), approach(0, 50.4, 0.0), (61.0, 0.0)),
        (((0.0, 0.0), (100.0, 0.0)), approach(0, 50.0, 0.0), (40.0, 0.0)),
        # Not before the start, nor beyond it for the sake of a whole degree.
        (((45.5, 0.0), (100.0, 0.0)), approach(0, 50.0, 0.0), (45.5, 0.0)),
        (((39.7, 0.0), (100.0, 0.0)), approach(0, 50.0, 0.0), (40.0, 0.0)),
        (((39.7, 0.0), (100.0, 0.0)), approach(0, 49.8, 0.0), (39.7, 0.0)),
        (((-30.0, 5.0), (-30.0, 60.0)), approach(0, -30.0, 20.5), (-30.0, 10.0)),
        # Back over a control point at which the sense changes.
        (((0.0, 0.0), (20.0, 0.0), (10.0, 0.0)), approach(1, 16.0, 0.0), (14.0, 0.0)),
        # Both axes: the farther one tells how far.
        (((0.0, 0.0), (40.0, 20.0)), approach(0, 30.0, 15.0), (20.0, 10.0)),
        (((0.0, 0.0), (40.0, 0.0)), approach(0, 0.0, 0.0), (0.0, 0.0)),
        (((7.0, 3.0),), approach(0, 7.0, 3.0), (7.0, 3.0)),
    ],
)
def test_the_stop_is_ten_degrees_before_the_place_along_the_delivery(
    points: tuple[Point, ...], place: Approach, stop: Point
) -> None:
    assert stop_before(points, place) == pytest.approx(stop)


@pytest.mark.parametrize("couch_deg", [0.0, 12.0, -15.0])
@pytest.mark.parametrize("gantry_deg", [0.0, 60.0, 120.0, 260.0, -45.0])
def test_the_side_agrees_with_the_witness_points(gantry_deg: float, couch_deg: float) -> None:
    scene = small_report().scene
    pose = exact_pose(scene, gantry_deg, couch_deg)
    assert pose.clearance_mm > 0.0
    x, _, z = np.mean([pose.machine_point_mm, pose.couch_point_mm], axis=0)
    words = place_at(scene, (gantry_deg, couch_deg)).side
    assert ("m right" in words) == (x > 50.0)
    assert ("m left" in words) == (x < -50.0)
    assert ("m below" in words) == (z < -50.0)
    # The table's surface lies level under the isocentre, by what the vertical stage says.
    above_table_mm = z - scene.couch.T_mm[2]
    assert ("above table top" in words) == (above_table_mm > 30.0)
    assert ("below table top" in words) == (above_table_mm < -30.0)


def test_left_and_right_of_the_patient_turn_with_the_couch() -> None:
    scene = small_report().scene
    for gantry_deg, couch_deg, side in ((300.0, 0.0, "right"), (60.0, 0.0, "left")):
        place = place_at(scene, (gantry_deg, couch_deg))
        assert place.parts == ("gantry/head", "couch/patient")
        # Head first and on the back, the patient's left is where x rises.
        assert place.side.endswith(f"patient's {side}")
    pose = exact_pose(scene, 30.0, 80.0)
    assert pose.couch_part is not None
    assert pose.couch_part.kind == "patient"
    in_table = R_fixed_turntable(80.0).T @ np.mean([pose.machine_point_mm, pose.couch_point_mm], axis=0)
    words = place_at(scene, (30.0, 80.0)).side
    assert ("patient's left" in words) == (in_table[0] > 50.0)
    assert ("patient's right" in words) == (in_table[0] < -50.0)


def test_a_place_in_contact_or_far_from_everything_has_no_words_that_are_wrong() -> None:
    scene = small_report().scene
    place = place_at(scene, (120.0, 40.0))
    assert place.clearance_mm == 0.0
    assert place.parts == ("gantry/head", "couch/table top")
