"""A real plan states how far each beam's source is from the skin; the imported surface has to agree.

Source: the plan and structure set of dicompyler-core 0.5.6 (`tests.open_data`). The plan states for each beam its
Source to Surface Distance (300A,0130), its source-axis distance, its isocentre and its angles; the skin is the
structure BODY of type EXTERNAL. None of it was made by this project. A gantry angle of the wrong sign is off by 17 mm
or more (found here), so that 5 mm tell the signs.
"""

from dataclasses import dataclass
from functools import cache
from pathlib import Path

import numpy as np
import pydicom
import pytest
from scipy.spatial import ConvexHull

from app.files.dicom import read_external_contour, read_plan_isocentres, read_plan_patient_position
from geometry.decompose import Faceted
from geometry.frames import Array, source_direction_dicom
from geometry.imported import ContourStack
from tests.open_data import open_data_folder

pytestmark = pytest.mark.download

# Name, gantry angle (deg) and stated distance (mm) as the plan has them, so that a changed file is noticed.
STATED = {"RAO": (327.0, 927.0), "AP": (0.0, 944.0), "LAO": (56.0, 937.05), "LPO": (150.0, 895.05)}
AGREEMENT_MM = 5.0


@dataclass(frozen=True)
class Beam:
    gantry_deg: float
    couch_deg: float
    source_axis_mm: float
    source_skin_mm: float


@cache
def folder() -> Path:
    return open_data_folder()


@cache
def beams() -> dict[str, Beam]:
    plan = pydicom.dcmread(folder() / "rtplan.dcm")
    found = {}
    for beam in plan.BeamSequence:
        first = beam.ControlPointSequence[0]
        # The names are "3 RAO" and the like.
        found[str(beam.BeamName).split()[-1]] = Beam(
            float(first.GantryAngle),
            float(first.PatientSupportAngle),
            float(beam.SourceAxisDistance),
            float(first.SourceToSurfaceDistance),
        )
    return found


@cache
def skin() -> ContourStack:
    return read_external_contour(folder() / "rtss.dcm")


@cache
def pieces() -> Faceted:
    return skin().faceted(0.5)


def source_mm(beam: Beam) -> Array:
    (isocentre,) = read_plan_isocentres(folder() / "rtplan.dcm")
    return np.array(isocentre) + beam.source_axis_mm * source_direction_dicom(beam.gantry_deg, beam.couch_deg)


def distance_to_pieces_mm(source: Array, direction: Array) -> float:
    """Return how far along a ray the first convex piece begins: the plainest clipping against each piece's planes."""
    nearest = np.inf
    for piece in pieces().pieces:
        planes = ConvexHull(piece).equations
        towards, apart = planes[:, :3] @ direction, planes[:, :3] @ source + planes[:, 3]
        enters = np.max(-apart[towards < 0.0] / towards[towards < 0.0], initial=0.0)
        leaves = np.min(-apart[towards > 0.0] / towards[towards > 0.0], initial=np.inf)
        if enters <= leaves and np.all(apart[towards == 0.0] <= 0.0):
            nearest = min(nearest, float(enters))
    return nearest


def test_the_plan_is_the_one_that_is_meant() -> None:
    assert read_plan_patient_position(folder() / "rtplan.dcm") == "HFS"
    assert len(read_plan_isocentres(folder() / "rtplan.dcm")) == 1
    assert set(beams()) == set(STATED)
    for name, (gantry_deg, distance_mm) in STATED.items():
        assert beams()[name].gantry_deg == gantry_deg
        assert beams()[name].source_skin_mm == pytest.approx(distance_mm, abs=0.01)


def test_the_structure_is_as_large_as_published() -> None:
    """141 contours on 98 slices 3 mm apart, 474 x 310 x 291 mm: measured from the file with pydicom alone."""
    points = np.vstack([np.column_stack([outline, np.full(len(outline), z)]) for z, outline in skin().contours])
    assert len(skin().contours) == 141
    assert len({z for z, _ in skin().contours}) == 98
    np.testing.assert_allclose(np.ptp(points, axis=0), [474.0, 310.0, 291.0], atol=0.5)


@pytest.mark.parametrize("name", STATED)
def test_the_ray_from_the_source_meets_the_skin_where_the_plan_says(name: str) -> None:
    beam = beams()[name]
    direction = -source_direction_dicom(beam.gantry_deg, beam.couch_deg)
    found_mm = distance_to_pieces_mm(source_mm(beam), direction)
    print(f"{name}: stated {beam.source_skin_mm:.2f}, found {found_mm:.2f}, {found_mm - beam.source_skin_mm:+.2f} mm")
    assert abs(found_mm - beam.source_skin_mm) <= AGREEMENT_MM


@pytest.mark.parametrize("name", STATED)
def test_the_true_solid_begins_where_the_plan_says(name: str) -> None:
    """Without the pieces: walk along the ray in steps of 0.1 mm. The plan was computed on the voxels of an image."""
    beam = beams()[name]
    along_mm = np.arange(700.0, 1000.0, 0.1)
    direction = -source_direction_dicom(beam.gantry_deg, beam.couch_deg)
    inside = skin().contains(source_mm(beam) + along_mm[:, None] * direction)
    assert abs(along_mm[np.argmax(inside)] - beam.source_skin_mm) <= 1.5


@pytest.mark.parametrize("name", ["RAO", "LAO", "LPO"])
def test_a_gantry_that_turned_the_wrong_way_would_be_noticed(name: str) -> None:
    beam = beams()[name]
    wrong = Beam(-beam.gantry_deg, beam.couch_deg, beam.source_axis_mm, beam.source_skin_mm)
    direction = -source_direction_dicom(wrong.gantry_deg, wrong.couch_deg)
    assert abs(distance_to_pieces_mm(source_mm(wrong), direction) - beam.source_skin_mm) > 2.0 * AGREEMENT_MM


def test_the_points_of_the_real_contours_lie_in_the_pieces() -> None:
    planes = [ConvexHull(piece).equations for piece in pieces().pieces]
    for z, outline in skin().contours:
        points = np.column_stack([outline, np.full(len(outline), z)])[::5]
        outside = np.min([(points @ p[:, :3].T + p[:, 3]).max(axis=1) for p in planes], axis=0)
        assert outside.max() <= 1e-6


def test_the_real_surface_takes_few_pieces() -> None:
    print(f"{len(pieces().pieces)} pieces, excess at most {pieces().excess_mm:.1f} mm")
    assert len(pieces().pieces) <= 200
    assert pieces().excess_mm <= 15.0
