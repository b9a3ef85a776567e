import numpy as np
import pytest

from app.window.room import painted_kernel
from app.window.room.meshes import plain_mesh
from app.window.room.painted_renderer import PaintedRenderer
from app.window.room.rendering import DisplayMesh, DrawnSurface
from tests.app.window.scenes import pixels
from tests.app.window.squares import BLUE, CAMERA, GREEN, RED, SIZE, WHITE, flat, frame_of, square


def drawn(*surfaces: DrawnSurface, fine: bool = False, near_mm: float = 10.0) -> np.ndarray:
    renderer = PaintedRenderer()
    picture = pixels(renderer.draw(frame_of(*surfaces, fine=fine, near_mm=near_mm)))
    renderer.close()
    return picture


def test_the_backdrop_runs_from_top_to_bottom() -> None:
    picture = drawn()
    assert picture.shape == (SIZE, SIZE, 3)
    assert picture[0].min() > 250
    assert picture[-1].max() < 5
    assert np.all(np.diff(picture[:, 50, 0]) <= 0)


def test_a_square_covers_the_pixels_that_its_corners_enclose() -> None:
    picture = drawn(flat(square(0.0), RED))
    red = (picture == [255, 0, 0]).all(axis=2)
    assert red[30:70, 30:70].all()
    assert red.sum() == 40 * 40


def test_two_triangles_leave_no_gap_and_draw_no_pixel_twice() -> None:
    picture = drawn(flat(square(0.0), RED, 0.5))
    inside = picture[30:70, 30:70]
    assert len(np.unique(inside[:, 20, 1])) > 10
    # Blended once: half of the backdrop's green is left everywhere in a row.
    assert np.ptp(inside[:, :, 1], axis=1).max() == 0


@pytest.mark.parametrize("order", [1, -1])
def test_the_nearer_surface_hides_the_other(order: int) -> None:
    surfaces = [flat(square(0.0), RED), flat(square(100.0, 40.0), BLUE)][::order]
    picture = drawn(*surfaces)
    assert tuple(picture[50, 50]) == (255, 0, 0)
    assert tuple(picture[50, 25]) == (0, 0, 255)


def test_back_faces_are_not_drawn() -> None:
    assert np.array_equal(drawn(flat(square(0.0, away=True), RED)), drawn())


def test_what_lies_before_the_near_plane_is_cut_away_exactly_there() -> None:
    # A floor 10 mm below the eye, from behind the eye to 500 mm beyond the focus.
    distance = CAMERA.distance_mm
    points = np.array([[-400.0, -2 * distance, -10.0], [400.0, -2 * distance, -10.0], [400.0, 500.0, -10.0]])
    floor = plain_mesh(points, np.array([[0, 1, 2]]))
    far = drawn(flat(floor, GREEN), near_mm=distance)[:, 50]
    near = drawn(flat(floor, GREEN), near_mm=distance / 4.0)[:, 50]
    # At the focus 10 mm are 10 pixels, at a quarter of its distance 40.
    assert np.nonzero((far == [0, 255, 0]).all(axis=1))[0].max() == pytest.approx(59, abs=1)
    assert np.nonzero((near == [0, 255, 0]).all(axis=1))[0].max() == pytest.approx(89, abs=1)


def test_light_falls_from_over_the_left_shoulder() -> None:
    tilted = square(0.0)
    up = DrawnSurface(tilted, np.array(_turn(40.0)), WHITE)
    down = DrawnSurface(tilted, np.array(_turn(-40.0)), WHITE)
    assert drawn(up)[50, 50, 0] > drawn(down)[50, 50, 0] + 30


def _turn(angle_deg: float) -> np.ndarray:
    from geometry.frames import rotation_x, transform

    # A turn about X raises the face's normal when negative: the normal is -Y.
    return transform(rotation_x(-angle_deg), np.zeros(3))


def test_lines_lie_on_their_surface_and_are_hidden_by_others() -> None:
    mesh = square(0.0)
    line = np.array([[[-40.0, 0.0, 0.0], [40.0, 0.0, 0.0]]], np.float32)
    lined = DisplayMesh(mesh.points, mesh.normals, mesh.triangles, line)
    surface = DrawnSurface(lined, np.eye(4), RED, edge_colour=BLUE, light=0.0)
    row = drawn(surface)[49:51].min(axis=0)
    assert ((drawn(surface) == [0, 0, 255]).all(axis=2)).sum() == pytest.approx(80, abs=2)
    assert row.shape == (SIZE, 3)
    hidden = drawn(surface, flat(square(-50.0, 10.0), GREEN))
    assert not (hidden[45:55, 45:55] == [0, 0, 255]).all(axis=2).any()


def test_a_fine_picture_has_soft_edges() -> None:
    slanted = DrawnSurface(square(0.0), np.array(_roll(20.0)), RED, light=0.0)
    coarse, fine = drawn(slanted), drawn(slanted, fine=True)
    assert _between(fine) > 60
    assert _between(coarse) == 0


def _roll(angle_deg: float) -> np.ndarray:
    from geometry.frames import rotation_y, transform

    return transform(rotation_y(angle_deg), np.zeros(3))


def _between(picture: np.ndarray) -> int:
    """Count pixels that are neither red nor grey."""
    spread = picture[:, :, 0] - picture[:, :, 1]
    return int(((spread > 20) & (picture[:, :, 1] > 10)).sum())


def test_kernels_do_uncompiled_what_they_do_compiled() -> None:
    points = np.array([[-30.0, -30.0, 1.0], [-30.0, 30.0, 2.0], [60.0, 10.0, 1.5], [10.0, 5.0, -1.0]], np.float32)
    colours = np.array([[255, 0, 0], [0, 255, 0], [0, 0, 255], [90, 90, 90]], np.float32)
    triangles = np.array([[0, 1, 2], [0, 3, 1], [1, 3, 2], [0, 2, 1]], np.int32)
    pictures = []
    for kernel in (painted_kernel.draw_triangles, painted_kernel.draw_triangles.py_func):  # type: ignore[attr-defined]
        picture, nearness = np.full((40, 50), 0xFF808080, np.uint32), np.full((40, 50), 1e-3, np.float32)
        kernel(points, colours, triangles, 1.0, 0.5, picture, nearness, np.zeros((16, 6), np.float32))
        pictures.append(picture)
    assert len(np.unique(pictures[0])) > 50
    assert np.array_equal(*pictures)
