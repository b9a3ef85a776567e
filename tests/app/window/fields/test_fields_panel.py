"""The list of fields and moves, its details, its buttons and the measured gaps."""

import math
from dataclasses import replace

import pytest
from PySide6.QtCore import Qt
from PySide6.QtTest import QSignalSpy
from PySide6.QtWidgets import QApplication, QWidget
from pytestqt.qtbot import QtBot

from app.files.readings import own_scales
from app.plan.dry_run import dry_run
from app.plan.gaps import GapPlace, MeasuredGap, compare_gaps, places_to_measure
from app.window.fields.fields_panel import FieldsPanel
from app.window.fields.words import better_words, field_row, rows_of, summary_words
from app.window.theme import DARK
from geometry.states import State
from tests.app.checked_plans import fitted_report, mixed_report, zigzag_report

ARC, COUCH_ARC, CLOSE, BOOST, BEHIND = 1, 3, 4, 5, 6


@pytest.fixture
def host(qtbot: QtBot) -> QWidget:
    # As a child, since the offscreen platform warns of windows with a least size.
    shown = QWidget()
    qtbot.addWidget(shown)
    shown.resize(320, 760)
    shown.show()
    return shown


@pytest.fixture
def panel(host: QWidget) -> FieldsPanel:
    shown = FieldsPanel(host)
    shown.resize(320, 760)
    shown.show_report(mixed_report(), "mixed.dcm")
    shown.show()
    return shown


def test_the_summary_counts() -> None:
    report = mixed_report()
    assert [check.state for check in report.fields] == [
        State.PERMITTED,
        State.PERMITTED,
        State.PERMITTED,
        State.CONTACT,
        State.SHORT,
        State.UNPROVED,
        State.NO_TRAVEL,
    ]
    refused = sum(move.state is not State.PERMITTED for move in report.moves)
    words = "3 of 7 fields permitted, 1 no travel, 1 contact, 1 short, 1 unproved"
    assert summary_words(report) == f"{words}; {refused} of 6 moves not permitted"
    assert summary_words(zigzag_report()) == "All 4 fields permitted; all 3 moves permitted"
    one = replace(zigzag_report(), fields=zigzag_report().fields[:1], moves=())
    assert summary_words(one) == "The field permitted"
    assert summary_words(replace(one, fields=())) == "The plan has no fields"


def test_rows_are_in_the_order_that_is_shown() -> None:
    report = zigzag_report()
    assert report.better is not None
    plain, better = rows_of(report, better=False), rows_of(report, better=True)
    assert [row.kind for row in plain] == ["field", "move"] * 3 + ["field"]
    assert [row.place for row in plain if row.kind == "field"] == [0, 1, 2, 3]
    assert [row.place for row in better if row.kind == "field"] == list(report.better.fields)
    assert better_words(report.better, report) == f"Better order: {report.better.seconds_saved:.0f} s less"


def test_rows_say_angles_clearance_and_parts() -> None:
    report = mixed_report()
    scales = own_scales(report.setup.room)
    arc = field_row(ARC, report.fields[ARC], scales)
    assert arc.lines[0] == "Gantry 330° → 40° CW, couch 0°"
    # The room shows 180 less the gantry angle, and 180 more than the couch angle.
    assert arc.lines[1] == "Reads gantry 210° → 140°, couch 180°"
    bound = math.floor(report.fields[ARC].verdict.least_clearance_mm * 10.0) / 10.0
    assert arc.lines[2].startswith(f"At least {bound:.1f}\u00a0mm, ")
    close = report.fields[CLOSE]
    missing = math.ceil(close.shortfall_mm * 10.0) / 10.0
    assert f"{missing:.1f}\u00a0mm short at gantry 47°, couch 30°" in field_row(CLOSE, close, scales).lines[2]
    assert "set-up field" in field_row(2, report.fields[2], scales).title
    assert "cone 9" in field_row(BOOST, report.fields[BOOST], scales).lines[2]
    assert "outside its travel" in field_row(BEHIND, report.fields[BEHIND], scales).lines[2]


def test_choosing_a_field_tells_it(panel: FieldsPanel, qtbot: QtBot) -> None:
    fields, moves = QSignalSpy(panel.field_chosen), QSignalSpy(panel.move_chosen)
    panel.choose_field(COUCH_ARC)
    assert fields.at(0)[0] is mixed_report().fields[COUCH_ARC]
    assert moves.at(0)[0] is None
    assert "contact" in panel.detail.title.text()
    qtbot.keyClick(panel.list, Qt.Key.Key_Down)
    assert fields.at(1)[0] is None
    assert moves.at(1)[0] is mixed_report().moves[COUCH_ARC]
    qtbot.keyClick(panel.list, Qt.Key.Key_Escape)
    assert panel.chosen_field() is None


def test_enter_and_a_double_click_go_to_the_place(panel: FieldsPanel, qtbot: QtBot) -> None:
    place = mixed_report().fields[COUCH_ARC].place
    assert place is not None
    spy, with_scene = QSignalSpy(panel.pose_wanted), QSignalSpy(panel.scene_pose_wanted)
    panel.choose_field(COUCH_ARC)
    qtbot.keyClick(panel.list, Qt.Key.Key_Return)
    assert spy.at(0) == [place.gantry_deg, place.couch_deg]
    assert with_scene.at(0)[0] is mixed_report().fields[COUCH_ARC].scene
    rect = panel.list.visualRect(panel.list.currentIndex())
    qtbot.mouseClick(panel.list.viewport(), Qt.MouseButton.LeftButton, pos=rect.center())
    qtbot.mouseDClick(panel.list.viewport(), Qt.MouseButton.LeftButton, pos=rect.center())
    assert spy.count() == 2


def test_nothing_goes_to_where_the_machine_cannot(panel: FieldsPanel, qtbot: QtBot) -> None:
    spy = QSignalSpy(panel.pose_wanted)
    panel.choose_field(BEHIND)
    qtbot.keyClick(panel.list, Qt.Key.Key_Return)
    assert spy.count() == 0
    assert panel.detail.go.isHidden()


def test_a_move_goes_to_where_it_fails(panel: FieldsPanel, qtbot: QtBot) -> None:
    report = mixed_report()
    failing = next(k for k, move in enumerate(report.moves) if move.state is State.CONTACT)
    step = next(step for step in report.moves[failing].steps if step.state is State.CONTACT)
    assert step.verdict is not None
    assert step.verdict.first_short is not None
    spy = QSignalSpy(panel.pose_wanted)
    panel.list.choose("move", failing)
    qtbot.keyClick(panel.list, Qt.Key.Key_Return)
    assert spy.at(0) == [step.verdict.first_short.gantry_deg, step.verdict.first_short.couch_deg]
    assert "in the way" in panel.detail.text.text()


def test_remedies_are_offered_for_what_is_not_permitted(panel: FieldsPanel, qtbot: QtBot) -> None:
    panel.choose_field(ARC)
    assert panel.detail.remedies.isHidden()
    panel.choose_field(CLOSE)
    spy, gone = QSignalSpy(panel.remedies_wanted), QSignalSpy(panel.pose_wanted)
    qtbot.mouseClick(panel.detail.remedies, Qt.MouseButton.LeftButton)
    assert spy.at(0)[0] is mixed_report().fields[CLOSE]
    assert gone.count() == 1


def test_somebody_says_what_is_fitted(panel: FieldsPanel) -> None:
    spy = QSignalSpy(panel.fit_said)
    panel.choose_field(ARC)
    assert panel.detail.fit_row.isHidden()
    panel.choose_field(BOOST)
    assert not panel.detail.fit_row.isHidden()
    # Nothing is taken for granted while it is in doubt.
    assert panel.detail.fit.currentIndex() == -1
    panel.detail.fit.activated.emit(panel.detail.fit.findText("cone"))
    assert spy.at(0) == [BOOST, "cone"]
    panel.show_report(fitted_report(), "mixed.dcm")
    assert panel.detail.fit.currentText() == "cone"


def test_the_better_order_is_offered_where_there_is_one(panel: FieldsPanel) -> None:
    assert panel.better.isHidden()
    panel.show_report(zigzag_report(), "zigzag.csv")
    assert not panel.better.isHidden()
    spy = QSignalSpy(panel.order_wanted)
    panel.better.setChecked(True)
    assert spy.at(0) == [True]
    panel.list.choose("move", 0)
    assert "Move from field 1 to 3" in panel.detail.title.text()
    panel.show_report(mixed_report(), "mixed.dcm")
    assert not panel.better.isChecked()


def test_buttons_ask(panel: FieldsPanel, qtbot: QtBot) -> None:
    for button, signal in (
        (panel.open, panel.open_wanted),
        (panel.again, panel.check_wanted),
        (panel.sheet, panel.sheet_wanted),
    ):
        spy = QSignalSpy(signal)
        qtbot.mouseClick(button, Qt.MouseButton.LeftButton)
        assert spy.count() == 1


def test_stale_verdicts_say_so_and_make_no_sheet(panel: FieldsPanel) -> None:
    fresh = panel.list.grab().toImage()
    panel.set_stale(True)
    assert "has changed" in panel.message.text()
    assert not panel.sheet.isEnabled()
    assert panel.list.grab().toImage() != fresh
    panel.set_stale(False)
    assert panel.sheet.isEnabled()
    assert panel.message.isHidden()


def test_a_new_report_keeps_what_is_chosen_and_tells_nobody(panel: FieldsPanel) -> None:
    panel.choose_field(CLOSE)
    spy = QSignalSpy(panel.field_chosen)
    panel.show_report(fitted_report(), "mixed.dcm")
    assert panel.chosen_field() == CLOSE
    assert spy.count() == 0


def test_without_a_plan_it_says_what_to_do(host: QWidget) -> None:
    shown = FieldsPanel(host)
    shown.show()
    assert "Open a treatment plan" in shown.summary.text()
    assert shown.open.isEnabled()
    assert not shown.sheet.isEnabled()
    assert not shown.list.isVisible()
    assert not shown.play.isVisible()


def test_no_words_are_cut_off_at_its_least_width(panel: FieldsPanel) -> None:
    """Every row is as high as its wrapped words, and the labels of the detail are too."""
    QApplication.processEvents()
    for row in range(panel.list.model().rowCount()):
        index = panel.list.model().index(row, 0)
        rect = panel.list.visualRect(index)
        assert rect.width() <= panel.list.viewport().width()
        assert rect.height() >= panel.list.itemDelegate().sizeHint(None, index).height()
    panel.choose_field(BOOST)
    QApplication.processEvents()
    for label in (panel.detail.title, panel.detail.text, panel.detail.notes):
        if label.isVisible():
            assert label.height() >= label.heightForWidth(label.width())
    content = panel.detail.widget()
    assert content is not None
    assert content.width() <= panel.detail.viewport().width()
    assert panel.minimumSizeHint().width() <= 320


def test_dark_is_dark(panel: FieldsPanel) -> None:
    panel.set_theme(DARK)
    panel.choose_field(ARC)
    QApplication.processEvents()
    picture = panel.list.grab().toImage()
    middle = picture.pixelColor(picture.width() - 30, picture.height() - 12)
    assert middle.lightness() < 110


def test_playing_is_asked_for_and_shown(panel: FieldsPanel, qtbot: QtBot) -> None:
    bar = panel.play
    assert not bar.isEnabled()
    long, short = "gantry 3°, couch 0°, 99.9 mm, permitted " * 9, "99.9 mm, permitted"
    bar.show_time(3.0, 75.0, (long, short))
    assert bar.time.text() == "0:03 of 1:15"
    assert bar.now.text() == short
    spy = QSignalSpy(bar.play_wanted)
    qtbot.mouseClick(bar.play, Qt.MouseButton.LeftButton)
    bar.show_playing(True)
    assert bar.play.accessibleName() == "Pause"
    qtbot.mouseClick(bar.play, Qt.MouseButton.LeftButton)
    assert [spy.at(k)[0] for k in range(2)] == [True, False]
    speeds, steps, whole = QSignalSpy(bar.speed_wanted), QSignalSpy(bar.step_wanted), QSignalSpy(bar.whole_wanted)
    bar.speed.activated.emit(2)
    bar.what.activated.emit(1)
    qtbot.mouseClick(bar.after, Qt.MouseButton.LeftButton)
    qtbot.mouseClick(bar.before, Qt.MouseButton.LeftButton)
    assert speeds.at(0) == [10]
    assert whole.at(0) == [True]
    assert [steps.at(k)[0] for k in range(2)] == [1, -1]


# Measured gaps.


def _places() -> tuple[GapPlace, ...]:
    return places_to_measure(dry_run(mixed_report()))


def test_gaps_of_the_chosen_field_are_typed(panel: FieldsPanel, qtbot: QtBot) -> None:
    places = _places()
    panel.show_gaps(places, ())
    panel.choose_field(ARC)
    own = [place for place in places if place.field == "Anterior arc"]
    cells = panel.detail.gaps._cells
    assert [cell.key for cell in cells] == [(place.field, place.gantry_deg, place.couch_deg) for place in own]
    spy = QSignalSpy(panel.gap_typed)
    panel.detail.gaps.by.setText("AB")
    cells[0].box.setFocus()
    cells[0].box.lineEdit().selectAll()
    qtbot.keyClicks(cells[0].box, "201.5")
    qtbot.keyClick(cells[0].box, Qt.Key.Key_Return)
    gap = spy.at(0)[0]
    assert (gap.field, gap.measured_mm, gap.by) == ("Anterior arc", 201.5, "AB")
    assert len(gap.on) == len("2026-01-31")


def test_gaps_are_shown_against_the_computed_ones(panel: FieldsPanel) -> None:
    places = _places()
    first = next(place for place in places if place.field == "Anterior arc")
    much_less = MeasuredGap(
        first.field, first.gantry_deg, first.couch_deg, first.computed_mm - 60.0, "AB", "2026-02-03"
    )
    elsewhere = MeasuredGap("Anterior arc", 1.0, 0.0, 240.0)
    panel.choose_field(ARC)
    panel.show_gaps(places, compare_gaps((much_less, elsewhere), mixed_report()))
    cells = panel.detail.gaps._cells
    assert cells[0]._difference.text() == "−60.0 mm against the computed; by AB, 2026-02-03"
    assert "less than computed" in cells[0]._said.text()
    assert cells[-1].key == ("Anterior arc", 1.0, 0.0)
    panel.choose_field(CLOSE)
    assert panel.detail.gaps.isHidden()


def test_a_gap_is_no_negative_number_and_can_be_taken_back(panel: FieldsPanel, qtbot: QtBot) -> None:
    places = _places()
    first = next(place for place in places if place.field == "Anterior arc")
    gap = MeasuredGap(first.field, first.gantry_deg, first.couch_deg, 150.0)
    panel.choose_field(ARC)
    panel.show_gaps(places, compare_gaps((gap,), mixed_report()))
    typed, removed = QSignalSpy(panel.gap_typed), QSignalSpy(panel.gap_removed)
    box = panel.detail.gaps._cells[0].box
    box.setFocus()
    box.lineEdit().selectAll()
    qtbot.keyClicks(box, "-3")
    qtbot.keyClick(box, Qt.Key.Key_Return)
    assert typed.count() == 0
    assert "0 or more" in panel.detail.gaps._message.text()
    box.lineEdit().selectAll()
    qtbot.keyClick(box, Qt.Key.Key_Delete)
    qtbot.keyClick(box, Qt.Key.Key_Return)
    assert removed.at(0)[0] == gap
