import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from app.window.room.camera import Camera
from app.window.room.picking import nearest_hit
from app.window.room.views import beams_eye
from geometry.frames import R_fixed_gantry, transform
from tests.app.window.squares import square

ANGLES = st.floats(-400.0, 400.0)
STEEP = st.floats(-89.0, 89.0)


@given(ANGLES, STEEP, ANGLES)
def test_axes_are_right_handed_and_upright(azimuth: float, elevation: float, roll: float) -> None:
    axes = Camera(np.zeros(3), 100.0, azimuth, elevation, roll).axes()
    assert axes @ axes.T == pytest.approx(np.eye(3), abs=1e-12)
    assert np.linalg.det(axes) == pytest.approx(1.0)
    assert Camera(np.zeros(3), 100.0, azimuth, elevation).axes()[1, 2] > 0.0


def test_from_the_foot_end_x_is_right_and_z_is_up() -> None:
    camera = Camera(np.zeros(3), 1000.0, 0.0, 0.0)
    assert camera.eye() == pytest.approx([0.0, -1000.0, 0.0])
    assert camera.projected(np.array([10.0, 0.0, 0.0]), 200, 100)[0] > 100.0
    assert camera.projected(np.array([0.0, 0.0, 10.0]), 200, 100)[1] < 50.0


@given(ANGLES, STEEP, ANGLES, st.floats(5.0, 195.0), st.floats(5.0, 95.0))
def test_a_ray_passes_through_what_its_pixel_shows(
    azimuth: float, elevation: float, roll: float, x: float, y: float
) -> None:
    camera = Camera(np.array([10.0, -20.0, 30.0]), 1500.0, azimuth, elevation, roll)
    point = camera.eye() + 800.0 * camera.ray(x, y, 200, 100)
    assert camera.projected(point, 200, 100)[:2] == pytest.approx([x, y], abs=1e-6)


def test_what_is_behind_the_eye_has_no_place() -> None:
    camera = Camera(np.zeros(3), 1000.0, 0.0, 0.0)
    assert np.isnan(camera.projected(np.array([0.0, -2000.0, 0.0]), 200, 100)[:2]).all()


@given(ANGLES, STEEP, st.floats(0.3, 3.0), st.integers(0, 1000))
def test_fitting_touches_the_margins_and_leaves_nothing_out(
    azimuth: float, elevation: float, aspect: float, seed: int
) -> None:
    points = np.random.default_rng(seed).uniform(-900.0, 700.0, (60, 3))
    width, height = round(400 * aspect), 400
    camera = Camera(np.array([5.0, 5.0, 5.0]), 50.0, azimuth, elevation).fitted(points, width, height)
    flat = camera.projected(points, width, height)[:, :2] / [width, height]
    assert flat.min() > 0.0
    assert flat.max() < 1.0
    assert min(flat.min(), 1.0 - flat.max()) == pytest.approx(0.03, abs=0.004)


def test_a_rolled_view_comes_upright_as_it_is_turned() -> None:
    camera = beams_eye(130.0, 1000.0)
    turned = camera
    rolls = []
    for _ in range(120):
        turned = turned.orbited(1.0, 0.0)
        rolls.append(abs(turned.roll_deg))
    assert rolls == sorted(rolls, reverse=True)
    assert turned.roll_deg == 0.0
    assert abs(turned.elevation_deg) <= 90.0


@given(st.floats(-185.0, 185.0))
def test_turning_by_nothing_keeps_the_beams_eye(gantry: float) -> None:
    camera = beams_eye(gantry, 1000.0)
    plain = camera.orbited(0.0, 0.0)
    assert plain.axes() == pytest.approx(camera.axes(), abs=0.01)
    size = math.tan(math.radians(camera.view_angle_deg / 2.0)) * camera.distance_mm
    assert math.tan(math.radians(plain.view_angle_deg / 2.0)) * plain.distance_mm == pytest.approx(size)


@given(st.floats(-185.0, 185.0))
def test_the_beams_eye_is_at_the_source_with_the_gantrys_y_up(gantry: float) -> None:
    camera = beams_eye(gantry, 1000.0)
    assert camera.eye() == pytest.approx(R_fixed_gantry(gantry) @ [0.0, 0.0, 1000.0], abs=1e-9)
    assert camera.axes()[1] == pytest.approx([0.0, 1.0, 0.0], abs=1e-12)


def test_the_ray_meets_the_nearest_face_that_looks_at_the_eye() -> None:
    eye, along = np.array([0.0, -1000.0, 0.0]), np.array([0.0, 1.0, 0.0])
    at_300 = transform(np.eye(3), np.array([0.0, 300.0, 0.0]))
    surfaces = [
        ("far", square(0.0), at_300),
        ("near", square(0.0), np.eye(4)),
        ("turned away", square(-100.0, away=True), np.eye(4)),
        ("beside", square(-200.0), transform(np.eye(3), np.array([50.0, 0.0, 0.0]))),
    ]
    hit = nearest_hit(surfaces, eye, along)
    assert hit is not None
    assert hit.label == "near"
    assert hit.point == pytest.approx([0.0, 0.0, 0.0])
    beyond = nearest_hit(surfaces, eye, along, near_mm=1100.0)
    assert beyond is not None
    assert beyond.label == "far"
    assert beyond.distance_mm == pytest.approx(1300.0)
    assert nearest_hit(surfaces, eye, -along) is None
