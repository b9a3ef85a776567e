"""Shares of the sphere in closed form, and directions by pytransform3d.

Sources: areas of caps, lunes and zones of a sphere (Archimedes, "On the Sphere and Cylinder", book 1); the solid angle
of a gantry-couch cell, |sin g| dg dc, from the definitions of IEC 61217; positions of the patient from arXiv:1406.0014,
table 1; the rings of candidate directions: their count is that of the data set zenodo.7236751.
"""

import math

import numpy as np
import pytest
import shapely
from pytransform3d.rotations import active_matrix_from_angle

from geometry.directions.axes import PatientAxes, directions_patient, directions_tabletop
from geometry.directions.discs import Pairing, pixel_places
from geometry.directions.regions import SPHERE_SR, folded, solid_angle_sr
from geometry.frames import PATIENT_POSITIONS

# (X, Y, Z) of the table top to (x, y, z) of the patient, as the table prints it.
POSITIONS = {
    "HFS": lambda X, Y, Z: (X, -Z, Y),
    "HFP": lambda X, Y, Z: (-X, Z, Y),
    "FFS": lambda X, Y, Z: (-X, -Z, -Y),
    "FFP": lambda X, Y, Z: (X, Z, -Y),
    "HFDR": lambda X, Y, Z: (Z, X, Y),
    "HFDL": lambda X, Y, Z: (-Z, -X, Y),
    "FFDR": lambda X, Y, Z: (Z, -X, -Y),
    "FFDL": lambda X, Y, Z: (-Z, X, -Y),
}


def share(*boxes: tuple[float, float, float, float]) -> float:
    """Return the share of the sphere of rectangles (gantry, couch, gantry, couch)."""
    return solid_angle_sr(folded(shapely.union_all([shapely.box(*box) for box in boxes]))) / SPHERE_SR


@pytest.mark.parametrize("half_angle_deg", [30.0, 60.0, 150.0])
def test_a_cap(half_angle_deg: float) -> None:
    expected = {30.0: 0.066987, 60.0: 0.25, 150.0: 0.933013}[half_angle_deg]
    assert share((-half_angle_deg, -90, half_angle_deg, 90)) == pytest.approx(expected, abs=5e-7)
    assert share((-half_angle_deg, -90, half_angle_deg, 90)) == pytest.approx(
        (1.0 - math.cos(math.radians(half_angle_deg))) / 2.0, abs=1e-12
    )


@pytest.mark.parametrize("width_deg", [7.5, 60.0, 180.0])
def test_a_lune(width_deg: float) -> None:
    assert share((0, 10, 180, 10 + width_deg)) == pytest.approx(width_deg / 360.0, abs=1e-12)


def test_a_zone() -> None:
    assert share((60, -90, 120, 90), (-120, -90, -60, 90)) == pytest.approx(0.5, abs=1e-12)


def test_gantry_all_round_and_couch_to_90_cover_the_sphere_once() -> None:
    assert share((0, -90, 360, 90)) == pytest.approx(1.0, abs=1e-12)
    cells = sum(share((g, c, g + 30, c + 30)) for g in range(0, 360, 30) for c in range(-90, 90, 30))
    assert cells == pytest.approx(1.0, abs=1e-12)


def test_what_is_reached_twice_counts_once() -> None:
    assert share((-185, -95, 185, 95)) == pytest.approx(1.0, abs=1e-12)
    # Gantry 170 to 190, that is a cap of 10 deg, over both ends of an unwrapped travel.
    assert share((170, -90, 190, 90), (-190, -90, -170, 90)) == pytest.approx(
        (1.0 - math.cos(math.radians(10.0))) / 2.0, abs=1e-12
    )


def test_published_remainders() -> None:
    assert share((-150, -90, 150, 90)) == pytest.approx(0.9330, abs=5e-5)
    assert share((0, -30, 360, 30)) == pytest.approx(1.0 / 3.0, abs=1e-12)
    assert share((-30, -90, 30, 90)) == pytest.approx(0.0670, abs=5e-5)


@pytest.mark.parametrize("pairing", list(Pairing))
def test_equal_areas_by_1162_directions(pairing: Pairing) -> None:
    # Rings at latitudes +-3, +-9, ... +-87 deg with ceil(60 cos latitude) directions each: 1162 of nearly equal share.
    rings = [(lat, math.ceil(60.0 * math.cos(math.radians(lat)))) for lat in range(-87, 90, 6)]
    assert sum(count for _, count in rings) == 1162
    directions = np.array(
        [
            (
                math.cos(math.radians(lat)) * math.cos(2.0 * math.pi * (k + 0.5) / count),
                math.cos(math.radians(lat)) * math.sin(2.0 * math.pi * (k + 0.5) / count),
                math.sin(math.radians(lat)),
            )
            for lat, count in rings
            for k in range(count)
        ]
    )
    for half in pairing.hemispheres:
        places = half.places(directions[half.holds(directions)])
        # A quarter of the area lies within half the radius.
        inner = np.mean(np.hypot(*places.T) < 0.5)
        assert inner == pytest.approx(0.25, abs=0.02)


def test_pixels_have_equal_solid_angles() -> None:
    # The pixels of both discs, each 2 sr / pixel area, add up to the sphere.
    size = 400
    held = [
        np.isfinite(half.directions(pixel_places(size))[..., 0]).sum() for half in Pairing.HEAD_AND_FEET.hemispheres
    ]
    assert sum(held) * 2.0 * (2.0 / size) ** 2 == pytest.approx(SPHERE_SR, rel=1e-3)


@pytest.mark.parametrize("position", PATIENT_POSITIONS)
def test_directions_by_pytransform3d(position: str) -> None:
    rng = np.random.default_rng(7)
    for gantry, couch, pitch, roll, eccentric in rng.uniform(
        (-185, -95, -6, -6, -40), (185, 95, 6, 6, 40), size=(40, 5)
    ):
        turns = [
            active_matrix_from_angle(axis, math.radians(angle))
            for axis, angle in ((2, couch), (2, eccentric), (0, pitch), (1, roll))
        ]
        source = active_matrix_from_angle(1, math.radians(gantry)) @ [0.0, 0.0, 1.0]
        expected = np.linalg.multi_dot(turns).T @ source
        axes = PatientAxes(position, pitch, roll, eccentric)
        assert directions_tabletop(gantry, couch, axes) == pytest.approx(expected, abs=1e-12)
        assert directions_patient(gantry, couch, axes) == pytest.approx(POSITIONS[position](*expected), abs=1e-12)
