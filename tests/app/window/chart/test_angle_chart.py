"""The angle chart, driven as a hand does."""

import numpy as np
import pytest
import shapely
from hypothesis import given
from hypothesis import strategies as st
from numpy.typing import NDArray
from PySide6.QtCore import QEvent, QPoint, QPointF, QRectF, QSizeF, Qt
from PySide6.QtGui import QColor, QFontMetricsF, QMouseEvent, QWheelEvent
from pytestqt.qtbot import QtBot

from app.clearance_scale import EDGE_COLOURS
from app.window.chart import angle_chart as module
from app.window.chart.angle_chart import AngleChart, ChartField
from app.window.chart.card import card_box
from app.window.chart.legend import SAMPLE
from app.window.theme import DARK, LIGHT, Theme
from geometry.machine import Readout
from geometry.states import State
from tests.app.window.maps import COUCH_TRAVEL, REQUIRED_MM, TRAVEL, all_in, flat_map

Array = NDArray[np.float64]

NO_BUTTON, LEFT, MIDDLE = Qt.MouseButton.NoButton, Qt.MouseButton.LeftButton, Qt.MouseButton.MiddleButton
NO_KEY = Qt.KeyboardModifier.NoModifier
WHOLE = shapely.box(TRAVEL[0], COUCH_TRAVEL[0], TRAVEL[1], COUCH_TRAVEL[1])
OWN = Readout(180.0, -1, 0.1)


@pytest.fixture
def chart(qtbot: QtBot) -> AngleChart:
    widget = AngleChart()
    qtbot.addWidget(widget)
    widget.resize(640, 480)
    widget.set_travel(TRAVEL, COUCH_TRAVEL)
    widget.set_readouts(Readout(), Readout())
    widget.set_part_names(["gantry/head", "gantry/drum", "couch/table top"])
    widget.show()
    return widget


def place_of(chart: AngleChart, gantry_deg: float, couch_deg: float) -> QPointF:
    frame = chart.frame()
    return QPointF(frame.across.pixel(gantry_deg), frame.upwards.pixel(couch_deg))


def mouse(chart: AngleChart, kind: QEvent.Type, at: QPointF, button: Qt.MouseButton, buttons: Qt.MouseButton) -> None:
    event = QMouseEvent(kind, at, chart.mapToGlobal(at), button, buttons, NO_KEY)
    {
        QEvent.Type.MouseButtonPress: chart.mousePressEvent,
        QEvent.Type.MouseMove: chart.mouseMoveEvent,
        QEvent.Type.MouseButtonRelease: chart.mouseReleaseEvent,
        QEvent.Type.MouseButtonDblClick: chart.mouseDoubleClickEvent,
    }[kind](event)


def drag(chart: AngleChart, start: QPointF, stop: QPointF, button: Qt.MouseButton = LEFT) -> None:
    mouse(chart, QEvent.Type.MouseButtonPress, start, button, button)
    mouse(chart, QEvent.Type.MouseMove, stop, NO_BUTTON, button)
    mouse(chart, QEvent.Type.MouseButtonRelease, stop, button, NO_BUTTON)


def wheel(chart: AngleChart, at: QPointF, notches: int) -> None:
    chart.wheelEvent(
        QWheelEvent(
            at, chart.mapToGlobal(at), QPoint(), QPoint(0, 120 * notches), NO_BUTTON, NO_KEY,
            Qt.ScrollPhase.NoScrollPhase, False,
        )
    )  # fmt: skip


def poses_of(chart: AngleChart) -> list[tuple[float, float]]:
    wanted: list[tuple[float, float]] = []
    chart.pose_wanted.connect(lambda gantry, couch: wanted.append((gantry, couch)))
    return wanted


def colours_around(chart: AngleChart, gantry_deg: float, couch_deg: float, half: int = 6) -> set[str]:
    """Return the colours of a square of pixels of the chart's picture."""
    image = chart.picture(chart.width(), chart.height())
    at = place_of(chart, gantry_deg, couch_deg).toPoint()
    return {
        image.pixelColor(at.x() + x, at.y() + y).name() for x in range(-half, half + 1) for y in range(-half, half + 1)
    }


# What is painted.


def test_a_permitted_pair_has_the_colour_of_its_clearance_and_nothing_on_it(chart: AngleChart) -> None:
    found = flat_map(100.0)
    chart.show_map(found, all_in(State.PERMITTED, found))
    chart.show_region(WHOLE, stale=False)
    assert colours_around(chart, 47.0, 30.0) == {EDGE_COLOURS[7]}


@pytest.mark.parametrize("state", [State.SHORT, State.UNPROVED, State.CONTACT])
@pytest.mark.parametrize("theme", [LIGHT, DARK])
def test_what_is_not_permitted_has_a_texture(chart: AngleChart, state: State, theme: Theme) -> None:
    chart.set_theme(theme)
    found = flat_map(0.0 if state is State.CONTACT else 40.0)
    chart.show_map(found, all_in(state, found))
    assert len(colours_around(chart, 47.0, 30.0)) > 1


def test_textures_of_states_differ(chart: AngleChart) -> None:
    seen = []
    for state, clearance in ((State.SHORT, 40.0), (State.UNPROVED, 40.0), (State.CONTACT, 0.0)):
        found = flat_map(clearance)
        chart.show_map(found, all_in(state, found))
        image = chart.picture(640, 480)
        at = place_of(chart, 47.0, 30.0).toPoint()
        seen.append(tuple(image.pixelColor(at.x() + i, at.y()).name() for i in range(16)))
    assert len(set(seen)) == 3


def test_the_permitted_region_itself_is_clean_to_its_very_edge(chart: AngleChart) -> None:
    # The cell around gantry 0 is unproved at its grid angle; the region reaches into it.
    found = flat_map(100.0)
    chart.show_map(found, all_in(State.UNPROVED, found))
    chart.show_region(shapely.box(-60.0, -60.0, 60.0, 60.0), stale=False)
    assert colours_around(chart, 0.0, 30.0) == {EDGE_COLOURS[7]}
    assert len(colours_around(chart, 120.0, 30.0)) > 1


def test_a_stale_region_cleans_nothing(chart: AngleChart) -> None:
    found = flat_map(100.0)
    chart.show_map(found, all_in(State.UNPROVED, found))
    chart.show_region(shapely.box(-60.0, -60.0, 60.0, 60.0), stale=True)
    assert len(colours_around(chart, 0.0, 30.0)) > 1


def test_without_states_exact_distances_speak(chart: AngleChart) -> None:
    chart.show_map(flat_map(lambda gantry, couch: np.where(gantry < 0.0, 10.0, 100.0) + 0.0 * couch), None)
    assert len(colours_around(chart, -100.0, 30.0)) > 1
    assert colours_around(chart, 100.0, 30.0) == {EDGE_COLOURS[7]}


def test_cells_reach_half_way_to_the_next_grid_angle(chart: AngleChart) -> None:
    found = flat_map(lambda gantry, couch: np.where(gantry >= 4.0, 300.0, 100.0) + 0.0 * couch, 4.0)
    chart.show_map(found, None)
    image = chart.picture(640, 480)
    y = int(place_of(chart, 0.0, 31.0).y())
    row = [image.pixelColor(x, y).name() for x in range(640)]
    border = row.index(EDGE_COLOURS[10])
    assert chart.frame().across.angle_deg(border) == pytest.approx(2.0, abs=0.8)


def test_beyond_the_gantry_s_travel_there_is_no_travel(chart: AngleChart) -> None:
    chart.set_travel((-90.0, 90.0), COUCH_TRAVEL)
    found = flat_map(100.0, gantry_deg=np.arange(-90.0, 91.0, 10.0))
    chart.show_map(found, all_in(State.PERMITTED, found))
    assert chart.frame().across.window.low == -180.0
    around = colours_around(chart, 130.0, 30.0)
    assert EDGE_COLOURS[7] not in around
    assert len(around) > 1


def test_no_travel_says_why_and_wants_nothing(chart: AngleChart, qtbot: QtBot) -> None:
    chart.show_map(flat_map(100.0), None)
    chart.set_pose(0.0, 0.0)
    chart.set_no_travel(("the couch would have to slide 300 mm beyond its travel",))
    wanted = poses_of(chart)
    drag(chart, place_of(chart, 0.0, 0.0), place_of(chart, 20.0, 0.0))
    qtbot.keyClick(chart, Qt.Key.Key_Left)
    assert wanted == []
    centre, image = chart.frame().plot.center().toPoint(), chart.grab().toImage()
    note = {image.pixelColor(centre.x() + x, centre.y() + y).name() for x in range(-60, 60) for y in range(-15, 15)}
    assert {LIGHT.panel, LIGHT.ink} <= note
    assert EDGE_COLOURS[7] not in colours_around(chart, 100.0, 60.0)
    chart.set_no_travel(())
    assert EDGE_COLOURS[7] in colours_around(chart, 100.0, 60.0)


def test_regions_and_fields_are_drawn(chart: AngleChart) -> None:
    found = flat_map(100.0)
    chart.show_map(found, all_in(State.PERMITTED, found))
    plain = chart.picture(640, 480)
    chart.show_kept(shapely.box(-60.0, -60.0, 60.0, 60.0))
    kept = chart.picture(640, 480)
    assert kept != plain
    chart.show_fields([
        ChartField("Field 1", ((30.0, 10.0),), State.PERMITTED),
        ChartField("Arc 2", ((-120.0, -40.0), (60.0, -40.0)), State.SHORT),
        ChartField("nothing", (), None),
    ])  # fmt: skip
    with_fields = chart.picture(640, 480)
    at = place_of(chart, 30.0, 10.0).toPoint()
    assert with_fields.pixelColor(at).name() == LIGHT.accent
    x, y = place_of(chart, 60.0, -40.0).toPoint().toTuple()
    assert LIGHT.marked in {with_fields.pixelColor(x + i, y + i).name() for i in range(-3, 4)}


def test_the_pose_is_marked_at_its_place(chart: AngleChart) -> None:
    chart.show_map(flat_map(100.0), None)
    before = chart.grab().toImage()
    chart.set_pose(30.0, -20.0)
    after = chart.grab().toImage()
    at = place_of(chart, 30.0, -20.0).toPoint()
    ring = [after.pixelColor(at.x() + x, at.y()).name() for x in range(-9, 10)]
    assert LIGHT.accent in ring
    assert before.pixelColor(at.x() + 6, at.y()) != after.pixelColor(at.x() + 6, at.y())


def test_a_move_of_the_pose_paints_no_map_again(chart: AngleChart, monkeypatch: pytest.MonkeyPatch) -> None:
    chart.show_map(flat_map(100.0), None)
    chart.grab()
    painted = []
    monkeypatch.setattr(module, "paint_plot", lambda *_: painted.append("plot"))
    monkeypatch.setattr(module, "paint_surround", lambda *_: painted.append("surround"))
    for gantry in range(5):
        chart.set_pose(float(gantry), 0.0)
        chart.grab()
    assert painted == []
    chart.show_map(flat_map(90.0), None)
    chart.grab()
    assert painted == ["plot"]


def test_contours_of_a_large_map_wait_for_rest(chart: AngleChart, qtbot: QtBot) -> None:
    def slope(gantry: Array, couch: Array) -> Array:
        return np.asarray(120.0 + 0.5 * gantry + 0.2 * couch)

    chart.show_map(flat_map(slope, 1.0), None)
    assert chart._content.contours.levels == ()
    qtbot.waitUntil(lambda: chart._content.contours.levels != ())
    levels = dict(chart._content.contours.levels)
    for level, lines in levels.items():
        for line in lines:
            assert np.allclose(slope(line[:, 0], line[:, 1]), level, atol=0.2)
    assert levels[100.0]
    for line in chart._content.contours.required:
        assert np.allclose(slope(line[:, 0], line[:, 1]), REQUIRED_MM, atol=0.2)
    assert chart._content.contours.required
    found = flat_map(slope, 2.0)
    chart.show_map(found, None)
    qtbot.waitUntil(lambda: chart._content.contours.levels != ())
    at_rest = chart._content.contours
    # Proved states change no clearance, so the lines stay.
    chart.show_map(found, all_in(State.PERMITTED, found))
    assert chart._content.contours is at_rest


def test_a_coarse_map_has_no_contours(chart: AngleChart) -> None:
    chart.show_map(flat_map(lambda gantry, couch: 150.0 + gantry + couch, 4.0), None)
    assert chart._content.contours.levels == ()
    assert not chart._rest.isActive()


def test_states_of_another_shape_are_refused(chart: AngleChart) -> None:
    with pytest.raises(ValueError, match=r"state has the shape \(1, 2\)"):
        chart.show_map(flat_map(100.0), np.zeros((1, 2), np.int8))


# Where things are.


@pytest.mark.parametrize("size", [(420, 300), (640, 480), (1200, 900), (360, 260)])
@pytest.mark.parametrize("own", [Readout(), OWN])
def test_nothing_is_cut_off(chart: AngleChart, size: tuple[int, int], own: Readout) -> None:
    chart.resize(*size)
    chart.set_readouts(own, own)
    chart.show_kept(WHOLE)
    frame = chart.frame()
    metrics = QFontMetricsF(frame.small)
    whole = QRectF(0.0, 0.0, *size)
    boxes = [
        QRectF(at.x(), at.y() - metrics.height() / 2.0, SAMPLE[0] + 5.0 + metrics.horizontalAdvance(item.label), 12.0)
        for at, item in frame.legend
    ]
    assert [item.label.split(",")[0].split(" ")[0] for _, item in frame.legend] == [
        "permitted", "clearance", "kept", "short", "unproved", "contact", "no",
    ]  # fmt: skip
    assert all(whole.contains(box) for box in boxes)
    assert not any(a.intersects(b) for i, a in enumerate(boxes) for b in boxes[i + 1 :])
    assert min(box.top() for box in boxes) >= frame.plot.bottom() + 2.0 * metrics.height()
    assert whole.contains(frame.plot)
    assert frame.plot.width() > 0.5 * size[0]
    assert frame.plot.height() > 0.4 * size[1]
    words = metrics.horizontalAdvance("≥ 300") + metrics.height() + 7.0
    assert frame.scale.right() + words <= size[0]


def test_the_gantry_s_place_is_told(chart: AngleChart, qtbot: QtBot) -> None:
    with qtbot.waitSignal(chart.axis_moved) as caught:
        chart.resize(700, 500)
        chart.grab()
    plot = chart.frame().plot
    assert caught.args == [plot.left(), plot.right(), -185.0, 185.0]


def test_a_picture_has_the_size_and_theme_asked_for(chart: AngleChart) -> None:
    chart.show_map(flat_map(100.0), None)
    image = chart.picture(1800, 1240, DARK)
    assert (image.width(), image.height()) == (1800, 1240)
    assert image.devicePixelRatio() == 2.0
    assert image.pixelColor(2, 2) == QColor(DARK.canvas)
    assert chart.picture(400, 300).pixelColor(2, 2) == QColor(LIGHT.canvas)


# What a hand does.


def test_a_click_wants_its_pose_to_a_tenth_of_a_degree(chart: AngleChart) -> None:
    wanted = poses_of(chart)
    drag(chart, place_of(chart, 40.02, -30.01), place_of(chart, 40.02, -30.01))
    assert wanted[0] == pytest.approx((40.0, -30.0), abs=0.01)


def test_a_drag_is_held_to_the_travel(chart: AngleChart) -> None:
    wanted = poses_of(chart)
    drag(chart, place_of(chart, 0.0, 0.0), QPointF(2000.0, -500.0))
    assert wanted[0] == (0.0, 0.0)
    assert wanted[-1] == (185.0, 95.0)


def test_a_press_beside_the_plot_wants_nothing(chart: AngleChart) -> None:
    wanted = poses_of(chart)
    drag(chart, QPointF(3.0, 3.0), place_of(chart, 0.0, 0.0))
    assert wanted == []


@pytest.mark.parametrize(
    ("key", "shift", "expected"),
    [
        (Qt.Key.Key_Left, False, (9.0, 20.0)),
        (Qt.Key.Key_Right, False, (11.0, 20.0)),
        (Qt.Key.Key_Up, False, (10.0, 21.0)),
        (Qt.Key.Key_Down, True, (10.0, 19.9)),
        (Qt.Key.Key_Right, True, (10.1, 20.0)),
    ],
)
def test_arrow_keys_step(
    chart: AngleChart, qtbot: QtBot, key: Qt.Key, shift: bool, expected: tuple[float, float]
) -> None:
    chart.set_pose(10.0, 20.0)
    wanted = poses_of(chart)
    qtbot.keyClick(chart, key, Qt.KeyboardModifier.ShiftModifier if shift else NO_KEY)
    assert wanted == [expected]


def test_arrow_keys_end_with_the_travel(chart: AngleChart, qtbot: QtBot) -> None:
    chart.set_pose(184.5, -95.0)
    wanted = poses_of(chart)
    qtbot.keyClick(chart, Qt.Key.Key_Right)
    qtbot.keyClick(chart, Qt.Key.Key_Down)
    assert wanted == [(185.0, -95.0), (184.5, -95.0)]


def test_the_wheel_zooms_about_the_pointer_and_a_double_click_resets(chart: AngleChart) -> None:
    at = place_of(chart, 60.0, 30.0)
    wheel(chart, at, 5)
    frame = chart.frame()
    assert frame.across.window.extent < 200.0
    assert frame.across.angle_deg(at.x()) == pytest.approx(60.0)
    assert frame.upwards.angle_deg(at.y()) == pytest.approx(30.0)
    wheel(chart, at, 60)
    assert chart.frame().across.window.extent == pytest.approx(4.0)
    mouse(chart, QEvent.Type.MouseButtonDblClick, at, LEFT, LEFT)
    assert chart.frame().across.window.is_whole
    assert chart.frame().upwards.window.is_whole


def test_keys_zoom_about_the_pose(chart: AngleChart, qtbot: QtBot) -> None:
    chart.set_pose(60.0, 30.0)
    before = place_of(chart, 60.0, 30.0)
    for _ in range(4):
        qtbot.keyClick(chart, Qt.Key.Key_Plus)
    assert not chart.frame().across.window.is_whole
    after = place_of(chart, 60.0, 30.0)
    assert (after.x(), after.y()) == pytest.approx((before.x(), before.y()))
    qtbot.keyClick(chart, Qt.Key.Key_Minus)
    qtbot.keyClick(chart, Qt.Key.Key_Home)
    assert chart.frame().across.window.is_whole


@pytest.mark.parametrize("with_space", [False, True])
def test_panning_takes_the_plane_along_and_wants_no_pose(chart: AngleChart, qtbot: QtBot, with_space: bool) -> None:
    wanted = poses_of(chart)
    wheel(chart, place_of(chart, 0.0, 0.0), 6)
    start = place_of(chart, 5.0, 5.0)
    stop = start + QPointF(40.0, 25.0)
    if with_space:
        qtbot.keyPress(chart, Qt.Key.Key_Space)
    drag(chart, start, stop, LEFT if with_space else MIDDLE)
    if with_space:
        qtbot.keyRelease(chart, Qt.Key.Key_Space)
    frame = chart.frame()
    assert (frame.across.angle_deg(stop.x()), frame.upwards.angle_deg(stop.y())) == pytest.approx((5.0, 5.0))
    assert wanted == []


def test_pointing_tells_what_is_known_and_leaving_ends_it(chart: AngleChart) -> None:
    chart.show_map(flat_map(10.0), None)
    told = []
    chart.pointed.connect(told.append)
    mouse(chart, QEvent.Type.MouseMove, place_of(chart, 33.0, 21.0), NO_BUTTON, NO_BUTTON)
    assert (told[0].gantry_deg, told[0].couch_deg, told[0].state) == (30.0, 20.0, State.SHORT)
    assert told[0].machine_part == "gantry/head"
    with_card = chart.grab().toImage()
    chart.leaveEvent(QEvent(QEvent.Type.Leave))
    assert told[-1] is None
    assert chart.grab().toImage() != with_card


def test_parts_without_names_of_the_owner_have_those_of_the_scene(chart: AngleChart) -> None:
    chart.set_part_names(())
    chart.show_map(flat_map(10.0), None)
    told = []
    chart.pointed.connect(told.append)
    mouse(chart, QEvent.Type.MouseMove, place_of(chart, 33.0, 21.0), NO_BUTTON, NO_BUTTON)
    assert told[0].machine_part == chart._content.found.scene.parts[0].label


def test_pointing_beside_the_plot_or_without_a_map_tells_nothing(chart: AngleChart) -> None:
    told = []
    chart.pointed.connect(told.append)
    mouse(chart, QEvent.Type.MouseMove, place_of(chart, 33.0, 21.0), NO_BUTTON, NO_BUTTON)
    chart.show_map(flat_map(10.0), None)
    mouse(chart, QEvent.Type.MouseMove, QPointF(2.0, 2.0), NO_BUTTON, NO_BUTTON)
    assert told == [None, None]


@given(x=st.floats(60.0, 560.0), y=st.floats(20.0, 400.0), before=st.sampled_from([None, 0, 1, 2, 3]))
def test_the_card_never_hides_what_is_pointed_at(x: float, y: float, before: int | None) -> None:
    plot, size = QRectF(60.0, 20.0, 500.0, 380.0), QSizeF(240.0, 110.0)
    corners = [QRectF(QPointF(cx, cy), size) for cx in (68.0, 312.0) for cy in (28.0, 282.0)]
    box = card_box(size, plot, QPointF(x, y), None if before is None else corners[before])
    assert plot.contains(box)
    assert not box.adjusted(-5.0, -5.0, 5.0, 5.0).contains(QPointF(x, y))


def test_it_says_what_it_is_and_what_keys_do(chart: AngleChart) -> None:
    assert chart.accessibleName() == "Angle chart"
    assert "Arrow keys" in chart.accessibleDescription()
    assert chart.focusPolicy() & Qt.FocusPolicy.TabFocus
