"""Lambert's projection: there and back, areas, and what lies where."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from geometry.directions.discs import BACK, FEET, FRONT, HEAD, Hemisphere, Pairing, pixel_places

ALL = (FRONT, BACK, HEAD, FEET)


def spread(count: int, seed: int = 1) -> np.ndarray:
    vectors = np.random.default_rng(seed).normal(size=(count, 3))
    return vectors / np.linalg.norm(vectors, axis=1, keepdims=True)


@pytest.mark.parametrize("half", ALL)
def test_there_and_back(half: Hemisphere) -> None:
    directions = spread(500)
    held = directions[half.holds(directions)]
    places = half.places(held)
    assert np.hypot(*places.T).max() <= 1.0
    assert half.directions(places) == pytest.approx(held, abs=1e-12)


@pytest.mark.parametrize("half", ALL)
def test_axes_are_a_right_handed_view_from_outside(half: Hemisphere) -> None:
    # Who looks along -centre has right = (-centre) x up.
    assert np.cross(np.negative(half.centre), half.up) == pytest.approx(half.right)


@pytest.mark.parametrize(
    ("half", "right", "up"),
    [
        # Who faces a patient has the patient's left at the right hand, as on an axial picture seen from the feet.
        (FRONT, "L", "H"),
        (BACK, "R", "H"),
        (HEAD, "R", "A"),
        (FEET, "L", "A"),
    ],
)
def test_what_lies_to_the_right_and_on_top(half: Hemisphere, right: str, up: str) -> None:
    axes = {"L": (1, 0, 0), "R": (-1, 0, 0), "A": (0, -1, 0), "H": (0, 0, 1)}
    assert half.places(np.array(axes[right], float)) == pytest.approx([1.0, 0.0])
    assert half.places(np.array(axes[up], float)) == pytest.approx([0.0, 1.0])
    assert half.places(np.array(half.centre)) == pytest.approx([0.0, 0.0])


@pytest.mark.parametrize("cap_deg", [10.0, 30.0, 60.0, 90.0])
def test_areas_are_solid_angles(cap_deg: float) -> None:
    # A cap of half-angle t is (1 - cos t) / 2 of the sphere, and half the sphere is the whole disc.
    rim = math.radians(cap_deg)
    edge = math.cos(rim) * np.array(FRONT.centre) + math.sin(rim) * np.array(FRONT.right)
    radius = float(np.hypot(*FRONT.places(edge)))
    assert radius**2 == pytest.approx(1.0 - math.cos(rim), abs=1e-12)


@pytest.mark.parametrize("pairing", list(Pairing))
def test_two_discs_hold_every_direction(pairing: Pairing) -> None:
    first, second = pairing.hemispheres
    directions = spread(1000)
    assert np.array_equal(first.holds(directions), ~second.holds(directions))
    rim = np.array(first.right)
    assert first.holds(rim)
    assert second.holds(rim)


def test_beyond_the_rim_lines_go_on_and_directions_do_not() -> None:
    behind = np.array([math.cos(math.radians(10.0)), math.sin(math.radians(10.0)), 0.0])
    assert 1.0 < FRONT.places(behind)[0] < 1.2
    assert np.isnan(FRONT.places(np.array(BACK.centre))).all()
    assert np.isnan(FRONT.directions(np.array([0.8, 0.8]))).all()


def test_pixels_fill_the_square_from_the_top_left() -> None:
    places = pixel_places(4)
    assert places.shape == (4, 4, 2)
    assert places[0, 0].tolist() == [-0.75, 0.75]
    assert places[3, 3].tolist() == [0.75, -0.75]


@given(st.sampled_from(ALL), st.integers(0, 499), st.floats(-10.0, 10.0), st.floats(-10.0, 10.0))
def test_steps_are_small_and_stay_on_the_sphere(half: Hemisphere, which: int, right: float, up: float) -> None:
    directions = spread(500)
    start = directions[which] if half.holds(directions[which]) else -directions[which]
    found = half.stepped(start, right, up)
    assert np.linalg.norm(found) == pytest.approx(1.0)
    # At the rim a step inwards is sqrt(2) times, and one along it 1 / sqrt(2) times, as long as at the centre.
    # By the tangent: an arc cosine loses half its digits near 1.
    turned = math.degrees(math.atan2(float(np.linalg.norm(np.cross(found, start))), float(found @ start)))
    assert turned <= 1.5 * math.hypot(right, up) + 1e-9


def test_a_step_over_the_rim_ends_on_the_other_disc() -> None:
    left = np.array(FRONT.right)
    found = FRONT.stepped(left, 5.0, 0.0)
    assert BACK.holds(found)
    assert not FRONT.holds(found)
    # On the other disc the same way leads on, inwards.
    assert BACK.places(found)[0] > -1.0
    assert BACK.holds(BACK.stepped(found, 5.0, 0.0))
    assert FRONT.stepped(np.array(FRONT.centre), 2.0, 0.0) @ np.array(FRONT.right) == pytest.approx(
        math.sin(math.radians(2.0)), rel=1e-3
    )
