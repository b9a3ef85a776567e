"""The clearance over time: columns of pixels, what is painted, and how it is asked for a time."""

from dataclasses import replace

import numpy as np
import pytest
from PySide6.QtCore import QPoint, QPointF, Qt
from PySide6.QtTest import QSignalSpy
from PySide6.QtWidgets import QApplication
from pytestqt.qtbot import QtBot

from app.plan.timeline_clearance import curve_of_field
from app.window.fields.time_columns import columns_of
from app.window.fields.time_curve import TimeCurve
from app.window.theme import DARK, LIGHT
from geometry.states import CODE_OF, State
from tests.app.checked_plans import curve_of


@pytest.fixture
def widget(qtbot: QtBot) -> TimeCurve:
    shown = TimeCurve()
    qtbot.addWidget(shown)
    shown.resize(700, 200)
    shown.show_curve(curve_of("mixed_report"))
    shown.show()
    return shown


def _place(widget: TimeCurve, seconds: float) -> QPoint:
    frame = widget._laid_out(curve_of("mixed_report"))
    return QPointF(frame.across.pixel(seconds), frame.plot.center().y()).toPoint()


@pytest.mark.parametrize("count", [40, 300, 5000])
def test_columns_hide_no_sample(count: int) -> None:
    """Whatever the width, the least clearance and the worst state are in their columns."""
    curve = curve_of("mixed_report")
    end = curve.timeline.seconds
    columns = columns_of(curve, 0.0, end, count)
    assert np.nanmin(columns.clearance_mm) == np.nanmin(curve.clearance_mm)
    column = np.minimum(np.floor(curve.seconds / end * count), count - 1).astype(int)
    known = np.isfinite(curve.clearance_mm)
    assert (columns.clearance_mm[column[known]] <= curve.clearance_mm[known] + 1e-9).all()
    assert (columns.state[column] <= curve.state).all()


def test_columns_between_samples_are_the_worse_of_both() -> None:
    curve = curve_of("mixed_report")
    columns = columns_of(curve, 0.0, curve.timeline.seconds, 5000)
    for seconds, state in zip(columns.seconds, columns.state, strict=True):
        segment = curve.timeline.segments[curve.timeline.segment_at(float(seconds))]
        if segment.state is not State.PERMITTED:
            assert state < CODE_OF[State.PERMITTED]


def test_columns_know_nothing_where_nothing_is_known() -> None:
    curve = curve_of("mixed_report")
    behind = next(one for one in curve.timeline.segments if one.kind == "out of reach")
    columns = columns_of(curve, behind.start_s, behind.stop_s, 30)
    assert np.isnan(columns.clearance_mm[1:-1]).all()
    assert (columns.state == CODE_OF[State.NO_TRAVEL]).all()


def test_a_click_and_a_drag_ask_for_times(widget: TimeCurve, qtbot: QtBot) -> None:
    spy = QSignalSpy(widget.time_wanted)
    qtbot.mousePress(widget, Qt.MouseButton.LeftButton, pos=_place(widget, 10.0))
    qtbot.mouseMove(widget, _place(widget, 30.0))
    qtbot.mouseRelease(widget, Qt.MouseButton.LeftButton, pos=_place(widget, 30.0))
    assert spy.at(0)[0] == pytest.approx(10.0, abs=0.3)
    assert spy.at(spy.count() - 1)[0] == pytest.approx(30.0, abs=0.3)


def test_keys_step_through_time(widget: TimeCurve, qtbot: QtBot) -> None:
    curve = curve_of("mixed_report")
    spy = QSignalSpy(widget.time_wanted)
    widget.set_time(20.0)
    for key, modifier in (
        (Qt.Key.Key_Right, Qt.KeyboardModifier.NoModifier),
        (Qt.Key.Key_Left, Qt.KeyboardModifier.ShiftModifier),
        (Qt.Key.Key_Home, Qt.KeyboardModifier.NoModifier),
        (Qt.Key.Key_End, Qt.KeyboardModifier.NoModifier),
    ):
        qtbot.keyClick(widget, key, modifier)
    assert [spy.at(k)[0] for k in range(4)] == pytest.approx([21.0, 19.9, 0.0, curve.timeline.seconds])
    qtbot.keyClick(widget, Qt.Key.Key_PageDown)
    assert spy.at(4)[0] == min(tight.seconds for tight in curve.tight if tight.seconds > 20.0)


def test_the_line_says_what_is_known(widget: TimeCurve) -> None:
    curve = curve_of("mixed_report")
    tight = next(one for one in curve.tight if curve.timeline.segments[one.segment].text == "Couch arc")
    line = widget.line_at(tight.seconds)[0]
    assert "4 Couch arc" in line
    assert "contact" in line
    assert "portal panel" in line
    behind = next(one for one in curve.timeline.segments if one.text == "Behind the stop")
    assert "out of reach" in widget.line_at(behind.start_s + 1.0)[0]
    lines = widget.line_at(5.0)
    assert [len(line) for line in lines] == sorted((len(line) for line in lines), reverse=True)


def test_a_table_move_says_at_least(qtbot: QtBot) -> None:
    curve = curve_of("shifted_report")
    shown = TimeCurve()
    qtbot.addWidget(shown)
    shown.show_curve(curve)
    table = next(one for one in curve.timeline.segments if one.kind == "table")
    assert "at least" in shown.line_at(table.start_s + 0.01)[0]


def test_the_cursor_stays_in_sight_when_zoomed(widget: TimeCurve) -> None:
    widget._window = widget._window.zoomed(5.0, 0.1)
    widget._repaint_layer()
    last = curve_of("mixed_report").timeline.seconds - 1.0
    assert not widget._window.low <= last <= widget._window.high
    widget.set_time(last)
    assert widget._window.low <= last <= widget._window.high


def test_it_is_painted_in_both_themes_and_faintly_while_stale(widget: TimeCurve) -> None:
    curve = curve_of("mixed_report")
    pictures = []
    for theme, stale in ((LIGHT, False), (DARK, False), (LIGHT, True)):
        widget.set_theme(theme)
        widget.show_curve(curve, stale=stale)
        QApplication.processEvents()
        pictures.append(widget.grab().toImage())
    assert pictures[0] != pictures[1]
    assert pictures[0] != pictures[2]
    assert pictures[1].pixelColor(2, 2).lightness() < 60 < pictures[0].pixelColor(2, 2).lightness()


def test_the_cursor_and_the_state_are_seen(widget: TimeCurve) -> None:
    widget.set_time(10.0)
    before = widget.grab().toImage()
    widget.set_time(11.0)
    assert widget.grab().toImage() != before
    curve = curve_of("mixed_report")
    cleared = replace(curve, state=np.full_like(curve.state, CODE_OF[State.PERMITTED]))
    textured = widget.picture(700, 200)
    widget.show_curve(cleared)
    assert widget.picture(700, 200) != textured


def test_without_a_curve_nothing_is_asked_for(qtbot: QtBot) -> None:
    shown = TimeCurve()
    qtbot.addWidget(shown)
    shown.show()
    spy = QSignalSpy(shown.time_wanted)
    qtbot.mouseClick(shown, Qt.MouseButton.LeftButton, pos=QPoint(60, 60))
    qtbot.keyClick(shown, Qt.Key.Key_Right)
    assert spy.count() == 0
    assert shown.line_at(3.0) == ("Clearance over time: no field is chosen",)


def test_one_field_fills_the_width(widget: TimeCurve) -> None:
    part = curve_of_field(curve_of("mixed_report"), 3)
    widget.show_curve(part)
    frame = widget._laid_out(part)
    assert (frame.across.window.low, frame.across.window.high) == (0.0, part.timeline.seconds)
