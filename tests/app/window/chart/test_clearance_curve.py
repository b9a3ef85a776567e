"""The curve of a couch that cannot turn, driven as a hand does."""

import numpy as np
import pytest
import shapely
from numpy.typing import NDArray
from PySide6.QtCore import QEvent, QPointF, QRectF, Qt
from PySide6.QtGui import QFontMetricsF, QImage, QMouseEvent
from pytestqt.qtbot import QtBot

from app.clearance_scale import EDGE_COLOURS
from app.window.chart.clearance_curve import ClearanceCurve
from app.window.chart.legend import SAMPLE
from app.window.chart.paint_curve import CurveContent, runs_of
from app.window.theme import DARK, LIGHT
from geometry.machine import Readout
from geometry.spans import Span
from geometry.states import CODE_OF, State
from geometry.sweep import ClearanceMap
from tests.app.files.assessments import REQUIRED, one_couch_angle
from tests.app.window.maps import all_in, flat_map

GANTRY = np.arange(-180.0, 181.0, 10.0)
LEFT = Qt.MouseButton.LeftButton


def line_map(clearance_mm: float | NDArray[np.float64]) -> ClearanceMap:
    return flat_map(lambda gantry, couch: clearance_mm + 0.0 * gantry + 0.0 * couch, gantry_deg=GANTRY, couch_deg=[0.0])


def span(low: float, high: float) -> Span:
    return Span(0.0, low, high, 31.0, 0, 2, 25.0)


@pytest.fixture
def curve(qtbot: QtBot) -> ClearanceCurve:
    widget = ClearanceCurve()
    qtbot.addWidget(widget)
    widget.resize(640, 480)
    widget.set_travel((-180.0, 180.0), (0.0, 0.0))
    widget.set_readouts(Readout(), Readout())
    widget.show()
    return widget


def place_of(curve: ClearanceCurve, gantry_deg: float, clearance_mm: float) -> QPointF:
    frame = curve.frame()
    return QPointF(frame.across.pixel(gantry_deg), frame.upwards.pixel(clearance_mm))


def press(curve: ClearanceCurve, at: QPointF, kind: QEvent.Type = QEvent.Type.MouseButtonPress) -> None:
    event = QMouseEvent(kind, at, curve.mapToGlobal(at), LEFT, LEFT, Qt.KeyboardModifier.NoModifier)
    curve.mousePressEvent(event) if kind == QEvent.Type.MouseButtonPress else curve.mouseMoveEvent(event)


def colour_at(curve: ClearanceCurve, gantry_deg: float, clearance_mm: float, image: QImage | None = None) -> str:
    image = image or curve.picture(640, 480)
    return image.pixelColor(place_of(curve, gantry_deg, clearance_mm).toPoint()).name()


def runs_at(curve: ClearanceCurve, gantry_deg: float, clearance_mm: float) -> bool:
    """Tell whether the line of the curve is painted there."""
    image, at = curve.picture(640, 480), place_of(curve, gantry_deg, clearance_mm).toPoint()
    return min(image.pixelColor(at.x(), at.y() + y).lightness() for y in range(-2, 3)) < 60


def row_of_bar(curve: ClearanceCurve) -> list[bool]:
    """Return where, along the gantry axis, the bar of permitted angles is filled, every 5°."""
    image, top = curve.picture(640, 480), curve.frame().upwards.window.high
    return [colour_at(curve, angle, -0.075 * top, image) == EDGE_COLOURS[7] for angle in np.arange(-177.0, 180.0, 5.0)]


def test_the_scale_ends_above_everything_and_seldom_changes() -> None:
    tops = [CurveContent(found=line_map(clearance)).top_mm for clearance in (0.0, 139.0, 138.0, 139.5, np.inf, np.nan)]
    assert tops == [100.0, 200.0, 150.0, 200.0, 100.0, 100.0]
    assert CurveContent().top_mm == 100.0


def test_what_must_remain_is_that_of_the_set_up() -> None:
    machine, patient = (REQUIRED.of_pair_mm(with_patient=flag) for flag in (False, True))
    assert CurveContent(found=one_couch_angle().map).required_mm == (machine, patient)


def test_under_the_curve_lies_colour_and_above_it_nothing(curve: ClearanceCurve) -> None:
    found = line_map(np.where(GANTRY < 0.0, 60.0, 120.0))
    curve.show_map(found, all_in(State.PERMITTED, found))
    assert colour_at(curve, 90.0, 135.0) == LIGHT.canvas
    assert colour_at(curve, -90.0, 90.0) == LIGHT.canvas
    assert colour_at(curve, 90.0, 90.0) != LIGHT.canvas
    assert colour_at(curve, 90.0, 50.0) != colour_at(curve, -90.0, 50.0)


@pytest.mark.parametrize("state", [State.SHORT, State.UNPROVED, State.CONTACT])
def test_a_state_that_is_not_permitted_has_a_texture_up_to_the_top(curve: ClearanceCurve, state: State) -> None:
    found = line_map(40.0)
    codes = all_in(State.PERMITTED, found)
    codes[0, GANTRY > 0.0] = CODE_OF[state]
    curve.show_map(found, codes)
    image = curve.picture(640, 480)
    x, y = place_of(curve, 90.0, 93.0).toPoint().toTuple()
    textured = {image.pixelColor(x + i, y + j).name() for i in range(9) for j in range(9)}
    x, _ = place_of(curve, -90.0, 93.0).toPoint().toTuple()
    plain = {image.pixelColor(x + i, y + j).name() for i in range(9) for j in range(9)}
    assert plain == {LIGHT.canvas}
    assert len(textured) > 1


def test_without_a_distance_the_curve_is_broken_and_unproved(curve: ClearanceCurve) -> None:
    curve.show_map(line_map(np.where(np.abs(GANTRY) < 45.0, np.nan, 80.0)), None)
    image = curve.picture(640, 480)
    assert [runs_at(curve, angle, 80.0) for angle in (-100.0, -3.0, 3.0, 100.0)] == [True, False, False, True]
    x, y = place_of(curve, 0.0, 90.0).toPoint().toTuple()
    assert len({image.pixelColor(x + i, y + j).name() for i in range(9) for j in range(9)}) > 1


def test_the_bar_shows_the_spans_where_they_are_known_and_else_the_grid_angles(curve: ClearanceCurve) -> None:
    found = line_map(80.0)
    codes = all_in(State.UNPROVED, found)
    codes[0, (GANTRY >= -60.0) & (GANTRY <= 60.0)] = CODE_OF[State.PERMITTED]
    curve.show_map(found, codes)
    angles = np.arange(-177.0, 180.0, 5.0)
    assert row_of_bar(curve) == [abs(angle) < 60.0 for angle in angles]
    curve.show_spans(0.0, (span(-90.0, -30.0), span(20.0, 150.0)), stale=False)
    assert row_of_bar(curve) == [-90.0 < angle < -30.0 or 20.0 < angle < 150.0 for angle in angles]
    curve.show_spans(0.0, (), stale=False)
    assert not any(row_of_bar(curve))


def test_a_bar_of_the_state_before_is_faint(curve: ClearanceCurve) -> None:
    curve.show_map(line_map(80.0), None)
    curve.show_spans(0.0, (span(-90.0, 90.0),), stale=False)
    firm = curve.picture(640, 480)
    curve.show_region(None, stale=True)
    faint = curve.picture(640, 480)
    assert colour_at(curve, 3.0, -7.5, firm) == EDGE_COLOURS[7]
    assert colour_at(curve, 3.0, -7.5, faint) not in {EDGE_COLOURS[7], LIGHT.canvas}


def test_runs_of_a_state() -> None:
    codes = np.array([4, 4, 1, 4, 1, 1], np.int8)
    assert runs_of(codes, np.arange(6.0), State.PERMITTED) == ((0.0, 1.0), (3.0, 3.0))
    assert runs_of(codes, np.arange(6.0), State.SHORT) == ()


def test_a_kept_region_is_shown_where_it_crosses_the_couch_angle(curve: ClearanceCurve) -> None:
    curve.show_map(line_map(80.0), None)
    region = shapely.union_all([shapely.box(-90.0, -5.0, -30.0, 5.0), shapely.box(20.0, 3.0, 150.0, 5.0)])
    curve.show_kept(region)
    assert curve._content.kept == ((-90.0, -30.0),)
    assert [item.label for _, item in curve.frame().legend][3] == "kept"
    curve.show_kept_spans((span(10.0, 20.0),))
    assert curve._content.kept == ((10.0, 20.0),)
    curve.show_kept(shapely.MultiPolygon())
    assert curve._content.kept == ()


def test_a_map_of_several_couch_angles_or_other_states_is_refused(curve: ClearanceCurve) -> None:
    with pytest.raises(ValueError, match="2 couch angles"):
        curve.show_map(flat_map(80.0, couch_deg=[0.0, 1.0]), None)
    with pytest.raises(ValueError, match="state has the shape"):
        curve.show_map(line_map(80.0), np.zeros((1, 2), np.int8))


def test_a_click_turns_the_gantry_alone(curve: ClearanceCurve) -> None:
    curve.show_map(line_map(80.0), None)
    wanted: list[tuple[float, float]] = []
    curve.pose_wanted.connect(lambda gantry, couch: wanted.append((gantry, couch)))
    press(curve, place_of(curve, 40.0, 20.0))
    press(curve, QPointF(3000.0, 10.0), QEvent.Type.MouseMove)
    assert wanted[0] == pytest.approx((40.0, 0.0), abs=0.01)
    assert wanted[-1] == (180.0, 0.0)


def test_arrow_keys_turn_the_gantry(curve: ClearanceCurve, qtbot: QtBot) -> None:
    curve.set_pose(10.0, 0.0)
    wanted: list[tuple[float, float]] = []
    curve.pose_wanted.connect(lambda gantry, couch: wanted.append((gantry, couch)))
    qtbot.keyClick(curve, Qt.Key.Key_Right)
    qtbot.keyClick(curve, Qt.Key.Key_Left, Qt.KeyboardModifier.ShiftModifier)
    qtbot.keyClick(curve, Qt.Key.Key_Up)
    assert wanted == [(11.0, 0.0), (9.9, 0.0), (10.0, 0.0)]


def test_zooming_changes_the_gantry_axis_alone(curve: ClearanceCurve, qtbot: QtBot) -> None:
    curve.show_map(line_map(80.0), None)
    before = curve.frame()
    curve.set_pose(60.0, 0.0)
    qtbot.keyClick(curve, Qt.Key.Key_Plus)
    assert curve.frame().across.window.extent < before.across.window.extent
    assert curve.frame().across.pixel(60.0) == pytest.approx(before.across.pixel(60.0))
    assert curve.frame().upwards == before.upwards


def test_the_pose_is_marked_on_the_curve(curve: ClearanceCurve) -> None:
    curve.show_map(line_map(80.0), None)
    curve.set_pose(30.0, 0.0)
    image = curve.picture(640, 480)
    at = place_of(curve, 30.0, 80.0).toPoint()
    ring = [image.pixelColor(at.x() + x, at.y()).name() for x in range(-9, 10)]
    assert LIGHT.accent in ring


def test_pointing_tells_what_is_known(curve: ClearanceCurve) -> None:
    curve.show_map(line_map(10.0), None)
    told: list[object] = []
    curve.pointed.connect(told.append)
    press(curve, place_of(curve, 33.0, 50.0), QEvent.Type.MouseMove)
    reading = told[0]
    assert (reading.gantry_deg, reading.couch_deg, reading.state) == (30.0, 0.0, State.SHORT)  # type: ignore[attr-defined]


def test_no_travel_wants_nothing_and_shows_no_curve(curve: ClearanceCurve) -> None:
    curve.show_map(line_map(80.0), None)
    curve.set_no_travel(("the couch would have to rise 300 mm beyond its travel",))
    wanted: list[float] = []
    curve.pose_wanted.connect(lambda gantry, _: wanted.append(gantry))
    press(curve, place_of(curve, 40.0, 20.0))
    assert wanted == []
    assert not runs_at(curve, -100.0, 80.0)
    curve.set_no_travel(())
    assert runs_at(curve, -100.0, 80.0)


@pytest.mark.parametrize("size", [(420, 300), (640, 480), (1200, 900)])
def test_nothing_is_cut_off(curve: ClearanceCurve, size: tuple[int, int]) -> None:
    curve.resize(*size)
    curve.set_readouts(Readout(180.0, -1, 0.1), Readout())
    curve.set_theme(DARK)
    curve.show_map(one_couch_angle().map, None)
    curve.show_kept_spans((span(10.0, 20.0),))
    frame, whole = curve.frame(), QRectF(0.0, 0.0, *size)
    metrics = QFontMetricsF(frame.small)
    for at, item in frame.legend:
        width = SAMPLE[0] + 5.0 + metrics.horizontalAdvance(item.label)
        assert whole.contains(QRectF(at.x(), at.y() - metrics.height() / 2.0, width, metrics.height()))
    assert whole.contains(frame.plot)
    assert frame.plot.width() > 0.6 * size[0]
    image = curve.grab().toImage()
    assert image.pixelColor(1, 1).name() == DARK.canvas
