import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.typing import NDArray
from pytransform3d.rotations import active_matrix_from_angle
from scipy.spatial.transform import Rotation

from geometry.frames import (
    PATIENT_POSITIONS,
    R_dicom_tabletop,
    R_fixed_gantry,
    R_fixed_turntable,
    R_gantry_collimator,
    R_tilt,
    cos_sin,
    moved,
    normalised_deg,
    rotation_x,
    rotation_y,
    rotation_z,
    source_direction_dicom,
    source_direction_fixed,
    transform,
    unwrapped_deg,
)
from tests.reference.poses import PATIENT_AXES, axes_of

Array = NDArray[np.float64]

angles = st.floats(-1e4, 1e4)


@given(angles)
def test_turns_about_each_axis_are_those_of_scipy_and_pytransform3d(angle_deg: float) -> None:
    # Outside: scipy.spatial.transform.Rotation, pytransform3d.rotations.active_matrix_from_angle.
    turns = (rotation_x(angle_deg), rotation_y(angle_deg), rotation_z(angle_deg))
    for basis, (name, turn) in enumerate(zip("XYZ", turns, strict=True)):
        assert turn == pytest.approx(Rotation.from_euler(name, angle_deg, degrees=True).as_matrix(), abs=1e-11)
        assert turn == pytest.approx(active_matrix_from_angle(basis, math.radians(angle_deg)), abs=1e-11)


@given(angles, angles)
def test_compound_turns_are_those_of_scipy(first_deg: float, second_deg: float) -> None:
    # Outside: SciPy's capitals are intrinsic turns, child to mother, as IEC 61217 chains its systems.
    both = [first_deg, second_deg]
    on_gantry = R_fixed_gantry(first_deg) @ R_gantry_collimator(second_deg)
    assert on_gantry == pytest.approx(Rotation.from_euler("YZ", both, degrees=True).as_matrix(), abs=1e-11)
    assert R_tilt(*both) == pytest.approx(Rotation.from_euler("XY", both, degrees=True).as_matrix(), abs=1e-11)


@given(angles, angles)
def test_source_directions_are_those_of_scipy(gantry_deg: float, couch_deg: float) -> None:
    fixed = Rotation.from_euler("Y", gantry_deg, degrees=True).apply([0.0, 0.0, 1.0])
    assert source_direction_fixed(gantry_deg) == pytest.approx(fixed, abs=1e-11)
    on_table = Rotation.from_euler("Z", couch_deg, degrees=True).inv().apply(fixed)
    for position in PATIENT_POSITIONS:
        found = source_direction_dicom(gantry_deg, couch_deg, position)
        assert found == pytest.approx(axes_of(position) @ on_table, abs=1e-11)


def test_there_are_eight_patient_positions() -> None:
    assert sorted(PATIENT_POSITIONS) == sorted(PATIENT_AXES)
    for position in PATIENT_POSITIONS:
        assert np.array_equal(R_dicom_tabletop(position), axes_of(position))
    with pytest.raises(KeyError):
        R_dicom_tabletop("SITTING")


@pytest.mark.parametrize("quarter", range(-9, 10))
def test_right_angles_are_exact(quarter: int) -> None:
    # Cosines and sines of multiples of 90 deg are 0 and ±1, with no 6e-17 in place of 0.
    pair = cos_sin(90.0 * quarter)
    assert pair == ((1, 0), (0, 1), (-1, 0), (0, -1))[quarter % 4]
    turned = R_fixed_turntable(90.0 * quarter) @ [3.0, 5.0, 7.0]
    assert set(np.abs(turned)) == {3.0, 5.0, 7.0}


@given(angles)
def test_cosine_and_sine_are_those_of_the_language(angle_deg: float) -> None:
    angle = math.radians(angle_deg)
    assert cos_sin(angle_deg) == pytest.approx((math.cos(angle), math.sin(angle)), abs=1e-11)


@pytest.mark.parametrize(
    ("angle_deg", "expected"),
    [
        (0.0, 0.0),
        (-0.0, 0.0),
        (360.0, 0.0),
        (-360.0, 0.0),
        (720.5, 0.5),
        (-90.0, 270.0),
        (359.999, 359.999),
        (-185.0, 175.0),
    ],
)
def test_angles_are_normalised_to_a_turn(angle_deg: float, expected: float) -> None:
    assert normalised_deg(angle_deg) == pytest.approx(expected, abs=1e-12)


@pytest.mark.parametrize("tiny", [-1e-17, -5e-324, -1e-14, math.nextafter(0.0, -1.0)])
def test_an_angle_just_below_zero_is_never_shown_as_360(tiny: float) -> None:
    # -1e-17 % 360 is 360.0 in Python.
    assert 0.0 <= normalised_deg(tiny) < 360.0


@given(st.floats(allow_nan=False, allow_infinity=False, min_value=-1e12, max_value=1e12))
def test_normalised_angles_lie_in_the_half_open_turn(angle_deg: float) -> None:
    found = normalised_deg(angle_deg)
    assert 0.0 <= found < 360.0
    whole_turns = (angle_deg - found) / 360.0
    assert whole_turns == pytest.approx(round(whole_turns), abs=1e-9 + abs(angle_deg) * 1e-15)


@pytest.mark.parametrize("angle_deg", [math.nan, math.inf, -math.inf])
def test_an_angle_that_is_not_finite_is_refused(angle_deg: float) -> None:
    with pytest.raises(ValueError, match="not finite"):
        normalised_deg(angle_deg)


@pytest.mark.parametrize(
    ("angle_deg", "travel_deg", "expected"),
    [
        (0.0, (-185.0, 185.0), (0.0,)),
        (360.0, (-185.0, 185.0), (0.0,)),
        # 175 to 185 can be reached from both sides.
        (180.0, (-185.0, 185.0), (-180.0, 180.0)),
        (175.0, (-185.0, 185.0), (-185.0, 175.0)),
        (185.0, (-185.0, 185.0), (-175.0, 185.0)),
        (174.9, (-185.0, 185.0), (174.9,)),
        (-185.0, (-185.0, 185.0), (-185.0, 175.0)),
        # Ends belong to the travel; within rounding of an end is the end.
        (180.0, (-180.0, 180.0), (-180.0, 180.0)),
        (180.0 + 5e-10, (-180.0, 180.0), (-180.0, 180.0)),
        (180.0 - 5e-10, (-180.0, 180.0), (-180.0, 180.0 - 5e-10)),
        (270.0, (-95.0, 95.0), (-90.0,)),
        (180.0, (-95.0, 95.0), ()),
        (95.1, (-95.0, 95.0), ()),
        (0.0, (0.0, 0.0), (0.0,)),
        (10.0, (0.0, 0.0), ()),
        (-350.0, (0.0, 725.0), (10.0, 370.0)),
        (4.0, (0.0, 725.0), (4.0, 364.0, 724.0)),
    ],
)
def test_unwrapped_angles(angle_deg: float, travel_deg: tuple[float, float], expected: tuple[float, ...]) -> None:
    found = unwrapped_deg(angle_deg, travel_deg)
    assert found == pytest.approx(expected, abs=1e-9)
    assert all(travel_deg[0] <= angle <= travel_deg[1] for angle in found)


@given(angles, st.floats(-400, 0), st.floats(0, 400))
def test_unwrapped_angles_are_all_there_are(angle_deg: float, low: float, high: float) -> None:
    found = unwrapped_deg(angle_deg, (low, high))
    turns = range(-40, 41)
    well_inside = [a for a in (angle_deg + 360.0 * k for k in turns) if low + 1e-6 < a < high - 1e-6]
    near = [a for a in (angle_deg + 360.0 * k for k in turns) if low - 1e-6 < a < high + 1e-6]
    assert len(well_inside) <= len(found) <= len(near)
    assert list(found) == sorted(found)


def test_homogeneous_matrices_turn_then_shift() -> None:
    matrix = transform(rotation_z(90.0), np.array([10.0, 20.0, 30.0]))
    assert np.array_equal(moved(matrix, np.array([[1.0, 0.0, 0.0]])), [[10.0, 21.0, 30.0]])
    points = np.arange(24.0).reshape(2, 4, 3)
    homogeneous = np.concatenate([points, np.ones((2, 4, 1))], axis=-1)
    assert moved(matrix, points) == pytest.approx((homogeneous @ matrix.T)[..., :3])
