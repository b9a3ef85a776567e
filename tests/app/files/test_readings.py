"""Angles as people write them."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from app.files.readings import (
    distinct_readings,
    finite,
    number_text,
    own_scales,
    reading_deg,
    rounded_down,
    shown_deg,
)
from geometry.machine import Readout
from tests.app.files.assessments import OWN_GANTRY, ROOM, room_with


@pytest.mark.parametrize(
    ("angle_deg", "reading"),
    [
        (-185.0, 175.0),
        (185.0, 185.0),
        (-30.1, 329.9),
        (0.0, 0.0),
        (-1e-17, 0.0),
        (360.0, 0.0),
        (-1e-12, 0.0),
        (720.5, 0.5),
    ],
)
def test_readings_are_below_360_and_free_of_noise(angle_deg: float, reading: float) -> None:
    assert reading_deg(angle_deg) == reading


@given(st.floats(-1e6, 1e6))
def test_a_reading_is_the_same_angle_in_0_to_360(angle_deg: float) -> None:
    reading = reading_deg(angle_deg)
    assert 0.0 <= reading < 360.0
    assert math.cos(math.radians(reading - angle_deg)) == pytest.approx(1.0)


def test_shown_angles_follow_zero_and_sense() -> None:
    assert [shown_deg(Readout(180.0, -1), angle) for angle in (0.0, 90.0, -90.0, 180.0, -185.0)] == [180, 90, 270, 0, 5]


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (175.0, "175"),
        (0.0, "0"),
        (-0.0, "0"),
        (347.5, "347.5"),
        (0.25, "0.25"),
        (1e-12, "0"),
        (-3.25, "-3.25"),
        (100.0, "100"),
    ],
)
def test_numbers_have_as_many_decimals_as_they_need(value: float, text: str) -> None:
    assert number_text(value) == text


@given(st.floats(0.0, 1e4), st.integers(0, 6))
def test_a_bound_rounded_down_stays_a_bound(value: float, digits: int) -> None:
    rounded = rounded_down(value, digits)
    assert rounded is not None
    assert value - 10.0**-digits <= rounded <= value + 1e-5 * 10.0**-digits


def test_a_bound_keeps_a_digit_that_it_has() -> None:
    assert [rounded_down(value, 2) for value in (29.59, 0.29, 1.1, 22.8102)] == [29.59, 0.29, 1.1, 22.81]


@pytest.mark.parametrize("missing", [math.nan, math.inf, -math.inf])
def test_what_is_no_number_is_none(missing: float) -> None:
    assert finite(missing) is None
    assert rounded_down(missing, 2) is None
    assert finite(1.5) == 1.5


def test_both_ends_of_a_long_travel_are_one_reading() -> None:
    assert distinct_readings([-185.0, -180.0, 0.0, 175.0, 180.0]) == {175.0: [0, 3], 180.0: [1, 4], 0.0: [2]}


def test_only_scales_that_differ_are_the_rooms_own() -> None:
    assert (own_scales(ROOM).gantry, own_scales(ROOM).couch) == (None, None)
    scales = own_scales(room_with(gantry=OWN_GANTRY))
    assert (scales.gantry, scales.couch) == (OWN_GANTRY.readout, None)
