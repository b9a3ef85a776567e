"""Coordinate systems against IEC 61217, DICOM and published tables.

Numbers without a publication follow from the standards' definitions and were computed with SciPy's and pytransform3d's
rotations. Published table: the axes of the eight patient positions, arXiv:1406.0014, table 1.
"""

import numpy as np
import pytest

from geometry.frames import (
    R_dicom_tabletop,
    R_fixed_gantry,
    R_fixed_turntable,
    R_gantry_collimator,
    R_tilt,
    rotation_x,
    rotation_y,
)

# arXiv:1406.0014, table 1: DICOM patient (x, y, z) of the table-top point (X, Y, Z) = (1, 2, 3).
OF_ONE_TWO_THREE = {
    "HFS": (1, -3, 2),
    "HFP": (-1, 3, 2),
    "FFS": (-1, -3, -2),
    "FFP": (1, 3, -2),
    "HFDR": (3, 1, 2),
    "HFDL": (-3, -1, 2),
    "FFDR": (3, -1, -2),
    "FFDL": (-3, 1, -2),
}


@pytest.mark.parametrize(("position", "expected"), OF_ONE_TWO_THREE.items())
def test_patient_axes_are_those_of_the_published_table(position: str, expected: tuple[int, int, int]) -> None:
    # Source: arXiv:1406.0014, table 1.
    assert np.array_equal(R_dicom_tabletop(position) @ [1.0, 2.0, 3.0], expected)


@pytest.mark.parametrize("position", OF_ONE_TWO_THREE)
def test_patient_axes_are_turns_and_no_mirrors(position: str) -> None:
    # DICOM PS3.3 C.7.6.2.1.1: the patient system is right-handed in every position, as IEC 61217's systems are.
    assert np.linalg.det(R_dicom_tabletop(position)) == pytest.approx(1.0, abs=1e-15)


@pytest.mark.parametrize(
    ("position", "up", "towards_gantry"),
    [
        # DICOM PS3.3 C.7.3.1.1.2 says what the letters mean; x grows to the left hand, y to the back, z to the head
        # (C.7.6.2.1.1). Which of them points up (table-top Z), and which towards the gantry (table-top Y)?
        ("HFS", (0, -1, 0), (0, 0, 1)),
        ("HFP", (0, 1, 0), (0, 0, 1)),
        ("FFS", (0, -1, 0), (0, 0, -1)),
        ("FFP", (0, 1, 0), (0, 0, -1)),
        # Lying on the right side: the left side is up.
        ("HFDR", (1, 0, 0), (0, 0, 1)),
        ("HFDL", (-1, 0, 0), (0, 0, 1)),
        ("FFDR", (1, 0, 0), (0, 0, -1)),
        ("FFDL", (-1, 0, 0), (0, 0, -1)),
    ],
)
def test_patient_positions_mean_what_their_letters_say(
    position: str, up: tuple[int, int, int], towards_gantry: tuple[int, int, int]
) -> None:
    assert np.array_equal(R_dicom_tabletop(position) @ [0.0, 0.0, 1.0], up)
    assert np.array_equal(R_dicom_tabletop(position) @ [0.0, 1.0, 0.0], towards_gantry)


def test_beam_limiting_device_at_gantry_30_collimator_10() -> None:
    # IEC 61217: r_f = Ry(30) Rz(10) r_b; computed with SciPy and pytransform3d.
    x_axis = R_fixed_gantry(30.0) @ R_gantry_collimator(10.0) @ [1.0, 0.0, 0.0]
    assert x_axis == pytest.approx([0.852869, 0.173648, -0.492404], abs=5e-7)


def test_couch_30_carries_the_foot_end_to_the_left_of_one_who_looks_at_the_gantry() -> None:
    # IEC 61217: counter-clockwise seen from above.
    assert R_fixed_turntable(30.0) @ [0.0, 1000.0, 0.0] == pytest.approx([-500.0, 866.025, 0.0], abs=5e-4)


def test_detector_at_gantry_40() -> None:
    # IEC 61217; the detector lies 500 mm beyond the axis: 1500 mm from the source at 1000 mm source-axis distance.
    assert R_fixed_gantry(40.0) @ [0.0, 0.0, -500.0] == pytest.approx([-321.394, 0.0, -383.022], abs=5e-4)


def test_gantry_90_brings_the_head_to_the_right_of_one_who_looks_at_the_gantry() -> None:
    # IEC 61217: clockwise for one at the isocentre who looks towards the gantry; +X is to his right.
    assert R_fixed_gantry(90.0) @ [0.0, 0.0, 1.0] == pytest.approx([1.0, 0.0, 0.0], abs=1e-15)


def test_pitch_of_10_lifts_the_head_end() -> None:
    # IEC 61217 and DICOM PS3.3 C.8.8.25: positive about X. From the definition, since a note in C.8.8.14.12 can be read
    # both ways.
    assert R_tilt(10.0, 0.0) @ [0.0, 100.0, 0.0] == pytest.approx([0.0, 98.481, 17.365], abs=5e-4)


def test_roll_of_10_lowers_the_right_of_the_table() -> None:
    # IEC 61217: positive about Y, so that +X goes to -Z. From the definition.
    assert R_tilt(0.0, 10.0) @ [100.0, 0.0, 0.0] == pytest.approx([98.481, 0.0, -17.365], abs=5e-4)


def test_pitch_comes_before_roll() -> None:
    # Ry Rx in place of Rx Ry moves this point by 1.86 mm at 3 deg pitch and 2 deg roll (computed with SciPy).
    point = np.array([200.0, 1000.0, 100.0])
    wrong_way = rotation_y(2.0) @ rotation_x(3.0) @ point
    assert np.linalg.norm(R_tilt(3.0, 2.0) @ point - wrong_way) == pytest.approx(1.86, abs=0.005)
    assert np.array_equal(R_tilt(3.0, 2.0) @ point, rotation_x(3.0) @ rotation_y(2.0) @ point)
