import numpy as np
import pytest
import shapely

from app.plan_files.sheet_page import Pages
from app.plan_files.sheet_picture import VIEWS, View, add_picture, silhouette
from geometry.scene import ScenePart
from tests.app.files.reports import small_report

FRONT, SIDE, ABOVE = VIEWS


def part(name: str) -> ScenePart:
    return next(part for part in small_report().scene.parts if part.name == name)


@pytest.mark.parametrize(
    ("view", "area_mm2"),
    # The table top is a box of 530 × 2200 × 70 mm.
    [(FRONT, 530.0 * 70.0), (SIDE, 2200.0 * 70.0), (ABOVE, 530.0 * 2200.0)],
)
def test_a_box_is_seen_as_its_face(view: View, area_mm2: float) -> None:
    shape, _ = silhouette(part("table top"), view, 0.0, 0.0)
    # Half a millimetre is added all round.
    assert shape.area == pytest.approx(area_mm2 + 0.5 * shape.length, rel=1e-3)


def test_the_couch_turns_counter_clockwise_seen_from_above_and_the_gantry_clockwise_seen_facing_it() -> None:
    # From above the page's right is Y and its up is −X. At 90° the table's foot end, at −Y before, lies at +X: down.
    shape, _ = silhouette(part("table top"), ABOVE, 0.0, 90.0)
    assert shape.centroid.y < -300.0
    # The head, above the isocentre at 0°, is on the right at 90°.
    shape, _ = silhouette(part("head"), FRONT, 90.0, 0.0)
    assert shape.centroid.x > 300.0
    assert abs(shape.centroid.y) < 5.0


def test_what_is_nearer_to_the_viewer_has_the_greater_depth() -> None:
    depth = {name: silhouette(part(name), ABOVE, 0.0, 0.0)[1] for name in ("head", "patient", "table top", "floor")}
    assert sorted(depth, key=lambda name: depth[name]) == ["floor", "table top", "patient", "head"]
    assert silhouette(part("patient"), FRONT, 0.0, 0.0)[1] > silhouette(part("stand"), FRONT, 0.0, 0.0)[1]


@pytest.mark.parametrize("view", VIEWS)
def test_a_silhouette_holds_every_corner_of_the_part(view: View) -> None:
    patient = part("patient")
    shape, _ = silhouette(patient, view, 30.0, 40.0)
    angle = np.radians(40.0)
    turn = np.array([[np.cos(angle), -np.sin(angle), 0.0], [np.sin(angle), np.cos(angle), 0.0], [0.0, 0.0, 1.0]])
    for piece in patient.pieces:
        seen = piece.vertices @ turn.T @ np.array([view.right, view.up]).T
        assert shapely.contains_xy(shape, *seen.T).all()


def test_the_three_views_stand_side_by_side_to_one_scale() -> None:
    pages = Pages("A4")
    top = pages.y
    add_picture(pages, small_report().scene, 0.0, 0.0)
    views = pages.page.figure.axes[1:]
    assert len(views) == 3
    width, _ = pages.page.figure.get_size_inches()
    scales = [axes.get_position().width * width / np.ptp(axes.get_xlim()) for axes in views]
    assert scales == pytest.approx([scales[0]] * 3)
    assert [views[k].get_position().x1 < views[k + 1].get_position().x0 for k in (0, 1)] == [True, True]
    assert pages.y > top + 40.0
