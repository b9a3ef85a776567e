"""Directions from the isocentre to the source.

Source: computed with SciPy's and pytransform3d's rotations from the definitions of IEC 61217, the fixed part with the
package itk-rtk too; for the positions of the patient with the axes of arXiv:1406.0014, table 1.
"""

import math

import numpy as np
import pytest

from geometry.frames import source_direction_dicom, source_direction_fixed

Vector = tuple[float, float, float]

# gantry, couch, fixed system, DICOM patient axes of a patient head-first supine; printed to four digits
DIRECTIONS: list[tuple[float, float, Vector, Vector]] = [
    (0, 0, (0, 0, 1), (0, -1, 0)),
    (90, 0, (1, 0, 0), (1, 0, 0)),
    (45, 0, (0.7071, 0, 0.7071), (0.7071, -0.7071, 0)),
    # From the vertex, both ways to get there.
    (90, 270, (1, 0, 0), (0, 0, 1)),
    (270, 90, (-1, 0, 0), (0, 0, 1)),
    # From the feet.
    (90, 90, (1, 0, 0), (0, 0, -1)),
    (60, 330, (0.8660, 0, 0.5), (0.75, -0.5, 0.4330)),
    (300, 30, (-0.8660, 0, 0.5), (-0.75, -0.5, 0.4330)),
    (30, 45, (0.5, 0, 0.8660), (0.3536, -0.8660, -0.3536)),
    (120, 315, (0.8660, 0, -0.5), (0.6124, 0.5, 0.6124)),
]


@pytest.mark.parametrize(("gantry_deg", "couch_deg", "fixed", "dicom"), DIRECTIONS)
def test_published_directions(gantry_deg: float, couch_deg: float, fixed: Vector, dicom: Vector) -> None:
    assert source_direction_fixed(gantry_deg) == pytest.approx(fixed, abs=5e-5)
    assert source_direction_dicom(gantry_deg, couch_deg) == pytest.approx(dicom, abs=5e-5)


@pytest.mark.parametrize("gantry_deg", range(-180, 181, 36))
@pytest.mark.parametrize("couch_deg", range(-90, 91, 30))
def test_closed_form_for_head_first_supine(gantry_deg: float, couch_deg: float) -> None:
    # (sin g cos c, -cos g, -sin g sin c), from the definitions.
    g, c = math.radians(gantry_deg), math.radians(couch_deg)
    expected = (math.sin(g) * math.cos(c), -math.cos(g), -math.sin(g) * math.sin(c))
    assert source_direction_dicom(gantry_deg, couch_deg) == pytest.approx(expected, abs=1e-12)


@pytest.mark.parametrize(
    ("position", "expected"),
    [
        # Gantry 0, couch 0: the source is above, so the beam enters from what lies up. Common practice, no source.
        ("HFS", (0, -1, 0)),
        ("FFS", (0, -1, 0)),
        ("HFP", (0, 1, 0)),
        ("FFP", (0, 1, 0)),
        ("HFDR", (1, 0, 0)),
        ("FFDL", (-1, 0, 0)),
    ],
)
def test_the_vertical_beam_enters_where_the_patient_faces_up(position: str, expected: Vector) -> None:
    assert np.array_equal(source_direction_dicom(0.0, 0.0, position), expected)


@pytest.mark.parametrize(("position", "side"), [("HFS", 1), ("FFS", -1), ("HFP", -1), ("FFP", 1)])
def test_gantry_90_enters_from_the_left_of_a_patient_head_first_supine(position: str, side: int) -> None:
    # Common practice, no source: 90 is left lateral head-first supine, right lateral feet-first or prone.
    assert source_direction_dicom(90.0, 0.0, position) == pytest.approx([side, 0, 0], abs=1e-15)
