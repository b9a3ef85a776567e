"""Angles of control points as paths: what is expected follows from the definitions of the two senses."""

import pytest

from app.plan_files.turns import snapped_deg, turned


@pytest.mark.parametrize(
    ("given", "expected"),
    [(5e-9, 0.0), (-5e-9, 0.0), (359.99999999, 0.0), (-90.0, 270.0), (720.0, 0.0), (327.1, 327.1)],
)
def test_noise_is_snapped(given: float, expected: float) -> None:
    assert snapped_deg(given) == expected


@pytest.mark.parametrize(
    ("angles", "sense", "expected"),
    [
        ((181.0, 179.0), 1, 539.0),
        ((181.0, 179.0), -1, 179.0),
        ((179.0, 181.0), -1, -179.0),
        ((350.0, 10.0), 1, 370.0),
        ((10.0, 350.0), -1, -10.0),
    ],
)
def test_a_stated_sense_decides_which_way_is_gone(angles: tuple[float, float], sense: int, expected: float) -> None:
    found = turned("gantry", angles, (sense, 0))
    assert found.angles_deg == (angles[0], expected)
    assert found.doubts == ()


def test_many_control_points_add_up_to_one_arc() -> None:
    angles = [(181.0 + 2.0 * k) % 360.0 for k in range(180)]
    found = turned("gantry", angles, [1] * 179 + [0])
    assert found.angles_deg[0] == 181.0
    assert found.angles_deg[-1] == 181.0 + 358.0
    assert found.doubts == ()


def test_rounding_against_the_sense_is_no_whole_turn() -> None:
    found = turned("gantry", (10.0, 20.0, 19.995, 30.0), (1, 1, 1, 0))
    assert found.angles_deg == (10.0, 20.0, 19.995, 30.0)
    assert found.doubts == ()


def test_a_turn_without_a_sense_is_a_doubt() -> None:
    found = turned("couch", (350.0, 20.0), (0, 0))
    assert found.angles_deg == (350.0, 380.0)
    (doubt,) = found.doubts
    assert "couch" in doubt
    assert "which way" in doubt
    assert turned("couch", (0.0, 0.04), (0, 0)).doubts == ()


def test_a_sense_without_a_turn_is_a_doubt() -> None:
    (doubt,) = turned("gantry", (180.0, 180.0), (1, 0)).doubts
    assert "a whole turn, or none" in doubt
    (doubt,) = turned("gantry", (180.0, 179.995), (1, 0)).doubts
    assert "a whole turn, or none" in doubt
    # At the last control point a sense means nothing.
    assert turned("gantry", (180.0, 180.0), (0, 1)).doubts == ()
