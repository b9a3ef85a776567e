"""Directions against SciPy's rotations, and the angles that give a direction, put back into the angles."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.typing import NDArray
from scipy.spatial.transform import Rotation

from geometry.directions.axes import (
    AnglePair,
    PatientAxes,
    angle_pairs,
    axes_of,
    direction_words,
    directions_patient,
    directions_support,
    directions_tabletop,
    folded_deg,
)
from geometry.frames import PATIENT_POSITIONS, R_dicom_tabletop, source_direction_dicom, source_direction_fixed
from tests.geometry.small_rooms import setup_with

Array = NDArray[np.float64]

ANGLES = st.floats(-400.0, 400.0)
GANTRY = (-185.0, 185.0)
COUCH = (-95.0, 95.0)


@st.composite
def patient_axes(draw: st.DrawFn) -> PatientAxes:
    tilts = st.floats(-10.0, 10.0)
    return PatientAxes(draw(st.sampled_from(PATIENT_POSITIONS)), draw(tilts), draw(tilts), draw(st.floats(-90.0, 90.0)))


def by_scipy(gantry_deg: float, couch_deg: float, axes: PatientAxes) -> tuple[Array, Array]:
    """Return the source's direction in table-top and patient axes (IEC 61217, capitals are turns of moved axes)."""
    fixed = Rotation.from_euler("Y", gantry_deg, degrees=True).apply([0.0, 0.0, 1.0])
    tabletop = (
        Rotation.from_euler("Z", couch_deg, degrees=True)
        * Rotation.from_euler("Z", axes.eccentric_deg, degrees=True)
        * Rotation.from_euler("XY", [axes.pitch_deg, axes.roll_deg], degrees=True)
    )
    on_top = tabletop.inv().apply(fixed)
    return on_top, R_dicom_tabletop(axes.position) @ on_top


@given(ANGLES, ANGLES, patient_axes())
def test_directions_are_those_of_scipy(gantry_deg: float, couch_deg: float, axes: PatientAxes) -> None:
    on_top, patient = by_scipy(gantry_deg, couch_deg, axes)
    assert directions_tabletop(gantry_deg, couch_deg, axes) == pytest.approx(on_top, abs=1e-12)
    assert directions_patient(gantry_deg, couch_deg, axes) == pytest.approx(patient, abs=1e-12)


@given(ANGLES, ANGLES, st.sampled_from(PATIENT_POSITIONS))
def test_directions_are_those_of_one_angle_at_a_time(gantry_deg: float, couch_deg: float, position: str) -> None:
    several = directions_patient([gantry_deg, 0.0], couch_deg, PatientAxes(position))
    assert several.shape == (2, 3)
    assert several[0] == pytest.approx(source_direction_dicom(gantry_deg, couch_deg, position), abs=1e-12)
    assert directions_support(gantry_deg, 0.0) == pytest.approx(source_direction_fixed(gantry_deg), abs=1e-12)


@given(st.floats(-185.0, 185.0), st.floats(-95.0, 95.0), patient_axes())
def test_every_pair_found_gives_the_direction_and_the_first_one_is_among_them(
    gantry_deg: float, couch_deg: float, axes: PatientAxes
) -> None:
    direction = directions_patient(gantry_deg, couch_deg, axes)
    found = angle_pairs(direction, axes, GANTRY, COUCH)
    for pair in found:
        assert GANTRY[0] <= pair.gantry_deg <= GANTRY[1]
        assert COUCH[0] <= pair.couch_deg <= COUCH[1]
        # At the ends of the travel, angles beyond by less than 1e-9 deg count as the end.
        assert directions_patient(pair.gantry_deg, pair.couch_deg, axes) == pytest.approx(direction, abs=1e-8)
    inner = abs(gantry_deg) < 184.9 and abs(couch_deg) < 94.9
    if inner and min(abs(gantry_deg - pole) for pole in (-180.0, 0.0, 180.0)) > 0.01:
        assert any(
            (pair.gantry_deg, pair.couch_deg) == pytest.approx((gantry_deg, couch_deg), abs=1e-6) for pair in found
        )


@pytest.mark.parametrize(
    ("direction", "pairs"),
    [
        # Head-first supine; by hand from (sin g cos c, -cos g, -sin g sin c).
        ((1.0, 0.0, 0.0), [(90.0, 0.0)]),
        ((0.0, 0.0, 1.0), [(-90.0, 90.0), (90.0, -90.0)]),
        ((0.0, 0.0, -1.0), [(-90.0, -90.0), (90.0, 90.0)]),
        # 5 deg from below, at the couch's end: reached on both sides of 180.
        ((0.0, np.cos(np.radians(3.0)), -np.sin(np.radians(3.0))), [(-183, 90), (-177, -90), (177, 90), (183, -90)]),
    ],
)
def test_pairs_of_known_directions(direction: tuple[float, ...], pairs: list[tuple[float, float]]) -> None:
    found = sorted((p.gantry_deg, p.couch_deg) for p in angle_pairs(direction, PatientAxes(), GANTRY, COUCH))
    assert found == [pytest.approx(pair, abs=1e-9) for pair in pairs]


def test_at_a_pole_any_couch_angle_will_do() -> None:
    above, below = (0.0, -1.0, 0.0), (0.0, 1.0, 0.0)
    assert angle_pairs(above, PatientAxes(), GANTRY, COUCH) == (AnglePair(0.0, 0.0, any_couch=True),)
    both = (AnglePair(-180.0, 20.0, any_couch=True), AnglePair(180.0, 20.0, any_couch=True))
    assert angle_pairs(below, PatientAxes(), GANTRY, (20.0, 95.0)) == both
    assert angle_pairs(below, PatientAxes(), (-170.0, 170.0), COUCH) == ()


def test_nothing_outside_the_travel() -> None:
    vertex = (0.0, 0.0, 1.0)
    assert angle_pairs(vertex, PatientAxes(), GANTRY, (-89.9, 89.9)) == ()
    assert angle_pairs(vertex, PatientAxes(), (-45.0, 185.0), (-90.0, 90.0)) == (AnglePair(90.0, -90.0),)


def test_with_pitch_the_pole_is_not_where_the_patient_faces() -> None:
    axes = PatientAxes(pitch_deg=3.0)
    (found,) = angle_pairs((0.0, -1.0, 0.0), axes, GANTRY, (-95.0, 80.0))
    # The front leans to where the couch points, by the pitch; seen from above that lies at couch 90 from gantry + 3.
    assert not found.any_couch
    assert (abs(found.gantry_deg), abs(found.couch_deg)) == pytest.approx((3.0, 90.0))
    assert directions_patient(found.gantry_deg, found.couch_deg, axes) == pytest.approx([0.0, -1.0, 0.0])


@pytest.mark.parametrize("direction", [(0.0, 0.0, 0.0), (np.nan, 0.0, 1.0), (np.inf, 0.0, 1.0), (1.0, 0.0)])
def test_what_is_no_direction_is_refused(direction: tuple[float, ...]) -> None:
    with pytest.raises(ValueError, match="3 finite numbers"):
        angle_pairs(direction, PatientAxes(), GANTRY, COUCH)


def test_folded_angles_stand_for_the_direction() -> None:
    gantry, couch = np.meshgrid(np.arange(-184.5, 185.0, 7.0), np.arange(-94.5, 95.0, 9.0))
    once, turned = folded_deg(directions_support(gantry, couch))
    assert once.min() >= 0.0
    assert once.max() <= 180.0
    assert np.abs(turned).max() <= 180.0
    assert directions_support(once, turned) == pytest.approx(directions_support(gantry, couch), abs=1e-12)


@pytest.mark.parametrize(
    ("direction", "words"),
    [
        ((1.0, 0.0, 0.0), "from the left"),
        ((0.0, 0.0, 1.0), "from the head"),
        ((0.0, 1.0, 0.0), "from the back"),
        ((0.75, -0.5, 0.4330), "from the left, 34° to the front, 26° to the head"),
        ((-0.3536, -0.8660, -0.3536), "from the front, 22° to the right, 21° to the feet"),
        ((0.0, -0.5, -0.8660), "from the feet, 30° to the front"),
        ((2.0, 0.0, 1e-20), "from the left"),
    ],
)
def test_words(direction: tuple[float, float, float], words: str) -> None:
    assert direction_words(direction) == words


def test_words_tell_the_direction() -> None:
    # 30 deg in the transverse plane, then 20 deg out of it.
    azimuth, elevation = np.radians([30.0, 20.0])
    direction = [np.cos(elevation) * np.cos(azimuth), -np.cos(elevation) * np.sin(azimuth), np.sin(elevation)]
    assert direction_words(direction) == "from the left, 30° to the front, 20° to the head"


def test_axes_of_a_setup() -> None:
    assert axes_of(setup_with()) == PatientAxes("HFS", 0.0, 0.0, 0.0)
