import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from app.files.readings import OwnScales, clearance_text, required_text, rounded_up
from app.plan.dry_run_words import angle_text, leg_texts, point_text, turn_of
from geometry.machine import Readout

IEC = OwnScales(None, None)
OWN = OwnScales(Readout(180.0, -1), None)


@pytest.mark.parametrize(
    ("angle_deg", "digits", "text"),
    [(-179.0, 2, "181°"), (359.999, 2, "0°"), (0.004, 2, "0°"), (12.346, 2, "12.35°"), (330.0147, 1, "330°")],
)
def test_an_angle_is_written_in_a_turn(angle_deg: float, digits: int, text: str) -> None:
    assert angle_text(angle_deg, digits) == text


def test_a_turn_tells_its_ends_its_sense_and_where_it_turns_back() -> None:
    assert turn_of([-179.0, 0.0, 179.0], "gantry", None).iec == "181° → 179°"
    assert turn_of([-179.0, 179.0], "gantry", None).sense == "CW"
    assert turn_of([179.0, -179.0], "gantry", None).sense == "CC"
    back = turn_of([0.0, 10.0, 20.0, 15.0, 5.0], "gantry", Readout(180.0, -1))
    assert (back.iec, back.own, back.sense) == ("0° → 20° → 5°", "180° → 160° → 175°", "there and back")
    still = turn_of([30.0, 30.0], "couch", None)
    assert (still.iec, still.own, still.sense) == ("30°", None, "")
    # IEC 61217: the couch's angle rises counter-clockwise, seen from above.
    assert turn_of([0.0, 30.0], "couch", None).sense == "counter-clockwise from above"


def test_places_name_the_axes_that_are_asked_for_on_both_scales() -> None:
    assert point_text((163.0, -10.0), IEC) == "gantry 163°, couch 350°"
    assert point_text((163.0, -10.0), OWN) == "gantry 163° (machine 17°), couch 350°"
    assert point_text((163.0, -10.0), OWN, ("couch",)) == "couch 350°"


def test_legs_say_which_axis_goes_first_and_which_way() -> None:
    assert leg_texts([(0.0, 0.0), (0.0, 30.0), (-50.0, 30.0)], OWN) == (
        "couch to 30°",
        "gantry to 310° CC (machine 230°)",
    )


def test_clearances_are_rounded_down_and_what_is_required_up() -> None:
    assert clearance_text(51.59) == "51.5 mm"
    assert clearance_text(0.3 * 10) == "3.0 mm"
    assert clearance_text(math.nan) == "unknown"
    assert clearance_text(math.inf) == "nothing near"
    assert required_text(22.8102) == "22.9 mm"
    assert required_text(24.0) == "24.0 mm"
    assert required_text(None) == ""


@given(st.floats(0.0, 5000.0))
def test_paper_never_claims_more_room_nor_asks_for_less(value_mm: float) -> None:
    assert float(clearance_text(value_mm).removesuffix(" mm")) <= value_mm + 1e-6
    assert rounded_up(value_mm) >= value_mm - 1e-6
    assert rounded_up(value_mm) - value_mm < 0.1 + 1e-6
