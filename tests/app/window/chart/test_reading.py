"""What is said of the pair of angles that is pointed at."""

import numpy as np
import pytest

from app.window.chart.reading import angle_words, label_of, reading_at
from geometry.machine import Readout
from geometry.states import State
from tests.app.window.maps import all_in, flat_map

LABELS = ("gantry/head", "gantry/drum", "couch/table top")


def test_angles_are_those_of_the_grid_and_not_between_them() -> None:
    reading = reading_at(flat_map(87.69, 4.0), None, LABELS, 13.9, -21.7)
    assert (reading.gantry_deg, reading.couch_deg) == (12.0, -20.0)
    assert reading.grid_words == "at the nearest computed angles, 4° apart"
    assert (reading.machine_part, reading.couch_part) == ("gantry/head", "couch/table top")


def test_a_clearance_is_rounded_down_and_a_lack_up() -> None:
    enough = reading_at(flat_map(87.69), None, LABELS, 0.0, 0.0)
    assert (enough.clearance_words, enough.slack_words) == ("87.6 mm", "62.6 mm more than required")
    short = reading_at(flat_map(24.96), None, LABELS, 0.0, 0.0)
    assert (short.clearance_words, short.slack_words) == ("24.9 mm", "0.1 mm less than required")
    barely = reading_at(flat_map(25.0 - 1e-9), None, LABELS, 0.0, 0.0)
    assert (barely.state, barely.slack_words) == (State.SHORT, "0.1 mm less than required")


@pytest.mark.parametrize(
    ("clearance_mm", "state", "words"),
    [
        (0.0, State.CONTACT, "contact"),
        (10.0, State.SHORT, "short"),
        (np.nan, State.UNPROVED, "unproved"),
        (80.0, None, "not proved yet"),
        (np.inf, None, "not proved yet"),
    ],
)
def test_while_nothing_is_proved_nothing_is_permitted(clearance_mm: float, state: State, words: str) -> None:
    reading = reading_at(flat_map(clearance_mm), None, LABELS, 5.0, 5.0)
    assert (reading.state, reading.state_words) == (state, words)


def test_a_proved_state_is_taken_as_it_is() -> None:
    found = flat_map(80.0)
    for state in (State.PERMITTED, State.UNPROVED):
        assert reading_at(found, all_in(state, found), LABELS, 0.0, 0.0).state is state


def test_words_in_place_of_a_clearance() -> None:
    assert reading_at(flat_map(np.nan), None, LABELS, 0.0, 0.0).clearance_words == "no distance"
    assert reading_at(flat_map(np.inf), None, LABELS, 0.0, 0.0).clearance_words == "nothing near"
    contact = reading_at(flat_map(0.0), None, LABELS, 0.0, 0.0)
    assert (contact.clearance_words, contact.slack_words) == ("0 mm", "")


def test_beyond_the_grid_there_is_no_travel() -> None:
    reading = reading_at(flat_map(80.0), None, LABELS, 186.0, 0.0)
    assert reading.state is State.NO_TRAVEL
    assert reading.line == "Gantry 186°, couch 0°: no travel"
    assert reading.grid_words == ""


def test_the_line_says_all_of_it() -> None:
    reading = reading_at(flat_map(10.0), None, LABELS, -90.0, 10.0)
    assert reading.line == (
        "Gantry 270°, couch 10°: 10.0 mm, short, 15.0 mm less than required, gantry/head – couch/table top"
    )


def test_grid_words_name_two_different_steps_and_no_missing_one() -> None:
    found = flat_map(80.0, gantry_deg=[-4.0, 0.0, 4.0], couch_deg=[-1.0, 0.0, 1.0])
    assert reading_at(found, None, LABELS, 0.0, 0.0).grid_words == "at the nearest computed angles, 4° and 1° apart"
    one = flat_map(80.0, gantry_deg=[-4.0, 0.0, 4.0], couch_deg=[0.0])
    assert reading_at(one, None, LABELS, 0.0, 0.0).grid_words == "at the nearest computed angles, 4° apart"


def test_angles_in_words() -> None:
    assert angle_words(-90.0) == "270°"
    assert angle_words(-0.04, digits=1) == "0.0°"
    assert angle_words(359.97, digits=1) == "0.0°"
    assert angle_words(-90.0, Readout(180.0, -1, 0.1)) == "270°"
    assert angle_words(30.0, Readout(180.0, -1, 0.1)) == "150°"
    assert angle_words(12.5) == "12.5°"


def test_an_index_without_a_part_has_no_label() -> None:
    assert [label_of(LABELS, index) for index in (-1, 0, 3)] == ["", "gantry/head", ""]
