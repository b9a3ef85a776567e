from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import pytest
from PySide6.QtCore import QPoint, QPointF, Qt
from PySide6.QtGui import QWheelEvent
from PySide6.QtTest import QTest
from PySide6.QtWidgets import QAbstractSpinBox, QApplication, QComboBox, QLabel, QWidget
from pytestqt.qtbot import QtBot

from app.document.device_edits import move_device, remove_device
from app.document.document import Document, open_document
from app.document.edits import add_component, fit, set_value
from app.document.session import Session
from app.document.setup_fields import IN_DICOM
from app.window.setup.number import number_shown, number_typed, stepped
from app.window.setup.required_bar import shares
from app.window.setup.rows import NumberRow
from app.window.setup.setup_panel import SetupPanel
from app.window.setup.words import ChoiceRow, TextRow
from app.window.theme import DARK, LIGHT, Theme, palette_of
from geometry.setup import Component, Isocentre, Required, Surface
from geometry.solids import Box

SAMPLES = Path("sample_rooms")
BREAST = SAMPLES / "c_arm_close" / "breast.setup.toml"
BOOST = SAMPLES / "c_arm_close" / "electron_boost.setup.toml"
HEAD = SAMPLES / "c_arm_wide" / "head.setup.toml"
SNOUT = SAMPLES / "particle_snout" / "head.setup.toml"
BORE = SAMPLES / "closed_bore" / "prostate.setup.toml"


class Bench:
    """The panel at work on a session, as the window has it."""

    def __init__(self, qtbot: QtBot, document: Document) -> None:
        self.session = Session(document)
        # As a child, since the offscreen platform warns of windows with a least size.
        self.host = QWidget()
        qtbot.addWidget(self.host)
        self.panel = SetupPanel(self.host)
        self.asked: list[tuple[str, str | None]] = []
        self.finished = 0
        self.panel.edit_wanted.connect(self._apply)
        self.panel.edit_finished.connect(self._finish)
        self.panel.set_theme(LIGHT)
        self.panel.show_document(document)
        for group in self.panel.groups:
            group.set_open(True)
        self.panel.resize(320, 768)
        self.host.resize(320, 768)
        with qtbot.waitExposed(self.host):
            self.host.show()
        self.host.activateWindow()
        qtbot.waitUntil(self.host.isActiveWindow)

    def _apply(self, edit: Callable[[Document], Document], text: str, key: str | None) -> None:
        self.asked.append((text, key))
        self.session.apply(edit, text, key)
        self.panel.show_document(self.session.document)

    def _finish(self) -> None:
        self.finished += 1
        self.session.end_merge()

    def show(self, edit: Callable[[Document], Document]) -> None:
        """Change the document from elsewhere."""
        self.session.apply(edit)
        self.panel.show_document(self.session.document)

    @property
    def document(self) -> Document:
        return self.session.document

    def number(self, key: str) -> NumberRow:
        return next(r for r in self._rows() if isinstance(r, NumberRow) and r.key == key)

    def choice(self, key: str) -> ChoiceRow:
        return next(r for r in self._rows() if isinstance(r, ChoiceRow) and r.key == key)

    def text(self, key: str) -> TextRow:
        return next(r for r in self._rows() if isinstance(r, TextRow) and r.key == key)

    def _rows(self) -> list[object]:
        return [*self.panel.rows, *self.panel.fitted.rows]

    def type(self, key: str, text: str) -> NumberRow:
        """Type into a number and press Enter."""
        row = self.number(key)
        row.box.setFocus()
        row.box.selectAll()
        QTest.keyClicks(row.box, text)
        QTest.keyClick(row.box, Qt.Key.Key_Return)
        return row


@pytest.fixture
def breast(qtbot: QtBot) -> Bench:
    return Bench(qtbot, open_document(BREAST))


@pytest.fixture
def snout(qtbot: QtBot) -> Bench:
    return Bench(qtbot, open_document(SNOUT))


def drag(row: NumberRow, pixels: list[int], modifier: Qt.KeyboardModifier = Qt.KeyboardModifier.NoModifier) -> None:
    """Drag the label of a number by so many pixels, one move after the other, and let go."""
    start = QPoint(4, row.label.height() // 2)
    QTest.mousePress(row.label, Qt.MouseButton.LeftButton, modifier, start)
    x = start.x()
    for step in pixels:
        x += step
        event_at = QPoint(x, start.y())
        QTest.mouseEvent(  # type: ignore[attr-defined]
            QTest.MouseAction.MouseMove, row.label, Qt.MouseButton.NoButton, modifier, event_at
        )
    QTest.mouseRelease(row.label, Qt.MouseButton.LeftButton, modifier, QPoint(x, start.y()))


# Numbers


def test_a_number_that_is_typed_changes_the_set_up(breast: Bench) -> None:
    breast.type("isocentre.head_mm", "61,5")
    assert breast.document.setup.isocentre.offset_mm == (80.0, 61.5, -60.0)
    assert breast.asked == [("isocentre, to the head", "isocentre.head_mm")]
    assert breast.number("isocentre.head_mm").box.text() == "61.5"


def test_a_number_out_of_range_says_what_is_allowed_and_changes_nothing(breast: Bench) -> None:
    before = breast.document
    row = breast.type("table.height_mm", "5000")
    assert breast.document is before
    assert breast.asked == []
    assert row.message.isVisible()
    assert row.message.text() == "Allowed: -500 to 1000 mm"
    assert row.box.text() == "5000"
    breast.panel.area.setFocus()
    assert row.box.text() == "20"
    assert row.message.isVisible()
    breast.type("table.height_mm", "25")
    assert not row.message.isVisible()
    assert breast.document.setup.on_table.height_mm == 25.0


def test_what_goes_against_another_value_says_so(breast: Bench) -> None:
    row = breast.type("patient.mass_kg", "6")
    assert "stature_mm = 1640" in row.message.text()
    assert breast.asked == []


def test_what_is_no_number_says_so(breast: Bench) -> None:
    row = breast.type("table.height_mm", "a lot")
    assert row.message.text() == "'a lot' is no number."
    QTest.keyClick(row.box, Qt.Key.Key_Escape)
    assert row.box.text() == "20"
    assert not row.message.isVisible()
    assert breast.asked == []


def test_arrow_keys_step_and_are_one_step_of_undo(breast: Bench) -> None:
    row = breast.number("isocentre.head_mm")
    row.box.setFocus()
    for _ in range(3):
        QTest.keyClick(row.box, Qt.Key.Key_Up)
    assert breast.document.setup.isocentre.offset_mm[1] == 75.0
    breast.number("isocentre.left_mm").box.setFocus()
    breast.session.undo()
    assert breast.document.setup.isocentre.offset_mm[1] == 60.0


def test_keys_and_drags_need_not_wait_for_the_document(breast: Bench) -> None:
    asked: list[Callable[[Document], Document]] = []
    breast.panel.edit_wanted.disconnect()
    breast.panel.edit_wanted.connect(lambda edit, *_: asked.append(edit))
    row = breast.number("isocentre.head_mm")
    row.box.setFocus()
    for _ in range(3):
        QTest.keyClick(row.box, Qt.Key.Key_Up)
    drag(row, [2, 2])
    line = breast.panel.components._lines[0]
    line.sd.setFocus()
    for _ in range(2):
        QTest.keyClick(line.sd, Qt.Key.Key_Up)
    breast.panel.components.add.click()
    document = breast.document
    for edit in asked:
        document = edit(document)
    assert document.setup.isocentre.offset_mm[1] == 79.0
    assert document.setup.required.components[0].sd_mm == 4.0
    breast.panel.show_document(document)
    assert row.box.text() == "79"
    assert breast.panel.components._lines[-1].name.hasFocus()


def test_a_drag_changes_the_value_under_the_hand(breast: Bench) -> None:
    drag(breast.number("isocentre.head_mm"), [3, 4, -2])
    assert breast.document.setup.isocentre.offset_mm[1] == 65.0
    assert len(breast.asked) == 3
    assert breast.finished == 1
    breast.session.undo()
    assert breast.document.setup.isocentre.offset_mm[1] == 60.0


def test_a_drag_with_shift_is_fine(breast: Bench) -> None:
    drag(breast.number("isocentre.head_mm"), [3], Qt.KeyboardModifier.ShiftModifier)
    assert breast.document.setup.isocentre.offset_mm[1] == 60.3


def test_a_drag_stops_at_the_range(breast: Bench) -> None:
    row = breast.number("options.gantry_tolerance_deg")
    drag(row, [-400, -100])
    assert breast.document.options.gantry_tolerance_deg == 0.0
    assert row.message.text() == "Allowed: 0 to 10 °"


def test_a_press_without_a_move_changes_nothing(breast: Bench) -> None:
    drag(breast.number("isocentre.head_mm"), [])
    assert breast.asked == []


def test_the_wheel_scrolls_the_page_unless_the_box_is_in_use(breast: Bench) -> None:
    row = breast.number("isocentre.head_mm")

    def turn() -> bool:
        event = QWheelEvent(
            QPointF(5, 5),
            QPointF(row.box.mapToGlobal(QPoint(5, 5))),
            QPoint(0, 0),
            QPoint(0, 120),
            Qt.MouseButton.NoButton,
            Qt.KeyboardModifier.NoModifier,
            Qt.ScrollPhase.NoScrollPhase,
            False,
        )
        QApplication.sendEvent(row.box, event)
        return event.isAccepted()

    breast.panel.area.setFocus()
    assert not turn()
    assert breast.asked == []
    row.box.setFocus()
    turn()
    assert breast.document.setup.isocentre.offset_mm[1] == 65.0


def test_what_is_being_typed_stays_when_the_document_changes(breast: Bench) -> None:
    row = breast.number("isocentre.head_mm")
    row.box.setFocus()
    row.box.selectAll()
    QTest.keyClicks(row.box, "12")
    QTest.keyClick(row.box, Qt.Key.Key_Left)
    breast.show(set_value("isocentre.head_mm", 33.0))
    breast.show(set_value("table.height_mm", 5.0))
    assert row.box.text() == "12"
    assert row.box.lineEdit().cursorPosition() == 1
    assert row.box.hasFocus()
    assert breast.number("table.height_mm").box.text() == "5"
    breast.panel.commit()
    assert breast.document.setup.isocentre.offset_mm[1] == 12.0


def test_an_empty_mass_is_that_of_the_average(breast: Bench) -> None:
    row = breast.number("patient.mass_kg")
    row.box.setFocus()
    row.box.selectAll()
    QTest.keyClick(row.box, Qt.Key.Key_Delete)
    QTest.keyClick(row.box, Qt.Key.Key_Return)
    assert breast.asked == [("body, mass", "patient.mass_kg")]
    assert row.box.lineEdit().placeholderText().startswith("≈ ")
    QTest.keyClick(row.box, Qt.Key.Key_Up)
    assert "mass_kg=None" not in repr(breast.document.setup.patient)


def test_a_number_that_may_not_be_empty_comes_back(breast: Bench) -> None:
    row = breast.number("table.height_mm")
    row.box.setFocus()
    row.box.selectAll()
    QTest.keyClick(row.box, Qt.Key.Key_Delete)
    QTest.keyClick(row.box, Qt.Key.Key_Return)
    assert row.box.text() == "20"
    assert breast.asked == []


def test_tips_tell_what_is_allowed_and_the_rooms_travel(breast: Bench) -> None:
    tip = breast.number("table.from_head_end_mm").box.toolTip()
    assert "Allowed: -5000 to 5000 mm." in tip
    assert "This room's couch longitudinal travels -500 to 1000 mm." in tip
    assert "collimator travels -165 to 165 °" in breast.number("fitted.collimator_deg").box.toolTip()


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("12", 12.0),
        (" -1,5 ", -1.5),
        ("−3", -3.0),
        ("1e2", 100.0),
        ("nan", None),
        ("inf", None),
        ("", None),
        ("x", None),
    ],
)
def test_numbers_as_they_are_typed(text: str, value: float | None) -> None:
    assert number_typed(text) == value


def test_numbers_as_they_are_shown() -> None:
    assert [number_shown(v) for v in (12.0, -0.5, 1.0 / 3.0, -0.0001, None)] == ["12", "-0.5", "0.333", "0", ""]


@pytest.mark.parametrize(
    ("value", "steps", "step", "expected"),
    [(60.0, 1, 5.0, 65.0), (61.0, 1, 5.0, 65.0), (61.0, -1, 5.0, 60.0), (-61.0, 2, 5.0, -55.0), (0.3, 1, 0.1, 0.4)],
)
def test_steps_go_to_whole_steps(value: float, steps: int, step: float, expected: float) -> None:
    assert stepped(value, steps, step) == expected


# Words and texts


def test_a_word_is_chosen_from_a_list(breast: Bench) -> None:
    row = breast.choice("patient.arm_right")
    assert row.combo.currentText() == "At the side"
    row.combo.setFocus()
    QTest.keyClick(row.combo, Qt.Key.Key_Down)
    assert breast.asked == [("body, right arm", None)]
    assert breast.document.setup.patient != open_document(BREAST).setup.patient


def test_a_word_that_is_not_allowed_goes_back(breast: Bench) -> None:
    row = breast.choice("patient.position")
    row.combo.activated.emit(row.combo.findData("HFP"))
    assert "prone" in row.message.text()
    assert row.combo.currentData() == "HFS"
    assert breast.asked == []


def test_texts_are_taken_when_they_are_left(breast: Bench) -> None:
    row = breast.text("name")
    row.edit.setFocus()
    row.edit.selectAll()
    QTest.keyClicks(row.edit, "Another name")
    assert breast.asked == []
    breast.show(set_value("table.height_mm", 5.0))
    assert row.edit.toPlainText() == "Another name"
    QTest.keyClick(row.edit, Qt.Key.Key_Return)
    assert breast.document.setup.name == "Another name"
    notes = breast.text("notes")
    notes.edit.setFocus()
    QTest.keyClick(notes.edit, Qt.Key.Key_Return)
    QTest.keyClicks(notes.edit, "first")
    breast.panel.area.setFocus()
    assert breast.document.setup.notes.startswith("first") or "\nfirst" in breast.document.setup.notes


def test_an_empty_name_is_refused_beside_it(breast: Bench) -> None:
    row = breast.text("name")
    row.edit.setFocus()
    row.edit.selectAll()
    QTest.keyClick(row.edit, Qt.Key.Key_Delete)
    breast.panel.commit()
    assert row.message.text() == "Allowed: 1 to 200 characters"
    assert breast.asked == []


# What is shown quietly


def test_showing_a_document_asks_for_nothing(qtbot: QtBot) -> None:
    bench = Bench(qtbot, open_document(BREAST))
    for path in (SNOUT, BORE, HEAD, BOOST, BREAST):
        bench.panel.show_document(open_document(path))
    assert bench.asked == []
    assert bench.finished == 0


def test_a_panel_without_a_document_can_be_shown(qtbot: QtBot) -> None:
    host = QWidget()
    qtbot.addWidget(host)
    panel = SetupPanel(host)
    panel.set_theme(DARK)
    host.show()
    panel.commit()
    assert not panel.isEnabled()


def test_only_what_the_couch_has_is_shown(qtbot: QtBot) -> None:
    bench = Bench(qtbot, open_document(BORE))
    assert bench.number("couch.pitch_deg").isHidden()
    bench.show(set_value("couch.pitch_deg", 1.0))
    assert not bench.number("couch.pitch_deg").isHidden()
    assert "does not move" in bench.number("couch.pitch_deg").box.toolTip()
    assert not Bench(qtbot, open_document(SNOUT)).number("couch.pitch_deg").isHidden()


def test_an_imported_envelope_has_its_source_and_no_sizes(qtbot: QtBot) -> None:
    document = open_document(BREAST)
    surface = Surface(Box((400.0, 250.0, 900.0)), "closed surface mesh", (("xiphoid", (0.0, -125.0, 0.0)),))
    setup = replace(document.setup, patient=surface, isocentre=Isocentre(None, dicom_mm=(1.0, 2.0, 3.0)))
    bench = Bench(qtbot, replace(document, setup=setup, source=replace(document.source, setup=setup)))
    assert bench.panel.body.isHidden()
    assert bench.panel.source.text() == "Envelope: closed surface mesh."
    assert bench.number("isocentre.head_mm").isHidden()
    bench.type("isocentre.dicom_mm[1]", "-20")
    assert bench.document.setup.isocentre.dicom_mm == (1.0, -20.0, 3.0)
    origin = bench.choice("isocentre.landmark")
    assert [origin.combo.itemData(i) for i in range(origin.combo.count())] == ["xiphoid", IN_DICOM]
    origin.combo.activated.emit(0)
    assert bench.document.setup.isocentre == Isocentre("xiphoid", (1.0, 3.0, -105.0))
    assert not bench.number("isocentre.head_mm").isHidden()


def test_messages_and_what_the_last_change_did(breast: Bench) -> None:
    breast.panel.set_messages(("couch vertical = 9 mm is 1 mm outside its travel 0 to 8", "second"))
    assert breast.panel.messages.isVisible()
    assert breast.panel.messages.text().startswith("Couch vertical = 9 mm")
    assert breast.panel.messages.text().endswith("\nSecond")
    breast.panel.set_change_note("permitted area 41.2 → 43.0 %")
    assert breast.panel.note.isVisible()
    breast.panel.set_messages(())
    breast.panel.set_change_note("")
    assert not breast.panel.messages.isVisible()
    assert not breast.panel.note.isVisible()


def test_a_folded_group_sums_itself_up(breast: Bench) -> None:
    group = breast.panel.group_named("Isocentre")
    assert group.header.accessibleDescription() == "xiphoid, +80, +60, -60"
    breast.show(set_value("isocentre.head_mm", 61.0))
    assert group.header.accessibleDescription() == "xiphoid, +80, +61, -60"
    group.header.setFocus()
    QTest.keyClick(group.header, Qt.Key.Key_Space)
    assert not group.body.isVisible()
    assert "22.9 and 29.6 mm" in breast.panel.group_named("Required clearance").header.accessibleDescription()


# Devices


def test_a_device_is_shifted_taken_away_and_brought_back(breast: Bench) -> None:
    line = next(line for line in breast.panel.devices.lines if line.name == "hand grip")
    line.toggle.click()
    drag(line.rows[0], [5])
    assert line.rows[0].field.read(breast.document) == 5.0
    assert line.place.text() == "shifted"
    line.remove.click()
    assert "hand grip" not in {device.name for device in breast.document.setup.devices}
    breast.session.undo()
    breast.panel.show_document(breast.document)
    assert "hand grip" in {line.name for line in breast.panel.devices.lines}


def test_an_open_device_stays_open_while_others_go(breast: Bench) -> None:
    breast.panel.devices.lines[-1].toggle.click()
    breast.show(remove_device("leg pad"))
    assert [line.is_open() for line in breast.panel.devices.lines] == [False] * 5 + [True]
    breast.show(move_device("hand grip", (1.0, 0.0, 0.0)))
    assert breast.panel.devices.lines[-1].is_open()


def test_a_box_is_added(breast: Bench) -> None:
    devices = breast.panel.devices
    devices.add.click()
    form = devices.box_form
    form.name.setText("leg pad")
    form.confirm.click()
    assert "taken" in form.message.text()
    form.name.setText("wedge")
    form.sizes[0].setFocus()
    form.sizes[0].selectAll()
    QTest.keyClicks(form.sizes[0], "120")
    form.confirm.click()
    box = breast.document.setup.devices[-1]
    assert box.name == "wedge"
    assert breast.asked[-1] == ("add device wedge", None)
    assert not form.isVisible()
    assert "size_mm=(120.0, 400.0, 50.0)" in repr(box.solid)


def test_nothing_on_the_table_is_said(qtbot: QtBot) -> None:
    document = open_document(BREAST)
    bench = Bench(qtbot, replace(document, setup=replace(document.setup, devices=())))
    assert bench.panel.devices.none.isVisible()


# What is fitted


def test_accessories_of_a_slot_exclude_each_other(qtbot: QtBot) -> None:
    bench = Bench(qtbot, open_document(BOOST))
    row = next(row for row in bench.panel.fitted.rows if row.key.startswith("fitted.accessories"))
    assert isinstance(row, ChoiceRow)
    assert row.combo.currentText() == "Electron applicator 15"
    row.combo.activated.emit(row.combo.findData("cone"))
    assert bench.document.setup.fitted == ("cone",)
    row.combo.activated.emit(0)
    assert bench.document.setup.fitted == ()
    bench.show(fit("cone"))
    assert row.combo.currentText() == "Cone"


def test_arms_have_positions_and_slides(snout: Bench) -> None:
    place = snout.choice("fitted.arms.snout")
    assert place.combo.currentText() == "Slid by hand"
    snout.type("fitted.arms.snout.mm", "100")
    assert dict(snout.document.setup.arm_positions)["snout"] == 100.0
    place.combo.activated.emit(place.combo.findData("half way"))
    assert dict(snout.document.setup.arm_positions)["snout"] == "half way"
    assert snout.number("fitted.arms.snout.mm").box.text() == ""


def test_the_collimator_may_stand_at_any_angle(breast: Bench) -> None:
    row = breast.number("fitted.collimator_deg")
    tick = row.any  # type: ignore[attr-defined]
    assert tick.isChecked()
    tick.click()
    assert breast.document.setup.collimator_deg == 0.0
    breast.type("fitted.collimator_deg", "30")
    assert breast.document.setup.collimator_deg == 30.0
    tick.click()
    assert breast.document.setup.collimator_deg is None
    assert row.box.text() == ""


# Required clearance


def test_components_are_changed_added_and_removed(breast: Bench) -> None:
    editor = breast.panel.components
    first = editor._lines[0]
    first.sd.setFocus()
    QTest.keyClick(first.sd, Qt.Key.Key_Up)
    assert breast.document.setup.required.components[0].sd_mm == 3.5
    first.patient.click()
    assert breast.document.setup.required.components[0].patient_only
    first.name.setFocus()
    first.name.selectAll()
    QTest.keyClicks(first.name, "couch sag")
    QTest.keyClick(first.name, Qt.Key.Key_Return)
    assert "taken" in editor.message.text()
    first.name.selectAll()
    QTest.keyClicks(first.name, "walls")
    QTest.keyClick(first.name, Qt.Key.Key_Return)
    assert breast.document.setup.required.components[0].name == "walls"
    editor.add.click()
    assert breast.document.setup.required.components[-1] == Component("contribution", 2.0)
    assert editor._lines[-1].name.hasFocus()
    assert editor._lines[-1].name.selectedText() == "contribution"
    editor._lines[0].remove.click()
    assert breast.document.setup.required.components[0].name == "couch sag"
    assert len(editor._lines) == 6


def test_a_component_out_of_range_says_what_is_allowed(breast: Bench) -> None:
    line = breast.panel.components._lines[1]
    line.sd.setFocus()
    line.sd.selectAll()
    QTest.keyClicks(line.sd, "300")
    QTest.keyClick(line.sd, Qt.Key.Key_Return)
    assert breast.panel.components.message.isVisible()
    assert "0 to 200 mm" in breast.panel.components.message.text()
    assert breast.asked == []


def test_shares_of_the_required_clearance_add_up() -> None:
    required = Required(
        15.0, "test", 2.0, (Component("a", 3.0), Component("b", 4.0), Component("c", 12.0, patient_only=True))
    )
    machine, patient = (shares(required, with_patient=flag) for flag in (False, True))
    # By hand: 2 · √(9 + 16) = 10 and 2 · √(9 + 16 + 144) = 26.
    assert [(s.name, round(s.length_mm, 9)) for s in machine] == [("fixed part", 15.0), ("b", 6.4), ("a", 3.6)]
    assert [s.name for s in patient] == ["fixed part", "c", "b", "a"]
    assert sum(s.length_mm for s in patient) == pytest.approx(15.0 + 26.0)
    assert patient[1].of_squares == pytest.approx(144.0 / 169.0)


def test_the_bars_say_what_weighs_most(breast: Bench) -> None:
    bar = breast.panel.bar
    assert bar.lines() == (
        "Machine alone: 22.9 mm, most from room model, 59 %",
        "With patient or device: 29.6 mm, most from assumed anatomy, 47 %",
    )
    breast.show(add_component("wind", 20.0))
    assert "wind" in bar.accessibleDescription()
    rects = bar._rects()[1]
    assert "wind: " in bar.told_at(rects[1].center())
    assert "fixed part: 15.0 mm" in bar.told_at(rects[0].center())
    assert bar.told_at(QPointF(1.0, 1.0)) == ""


# How it looks, and for whom


@pytest.mark.parametrize("theme", [LIGHT, DARK])
@pytest.mark.parametrize("path", [HEAD, BREAST, BOOST, SNOUT], ids=lambda path: path.stem)
def test_the_panel_fits_320_pixels(qtbot: QtBot, path: Path, theme: Theme) -> None:
    bench = Bench(qtbot, open_document(path))
    bench.panel.setPalette(palette_of(theme))
    bench.panel.set_theme(theme)
    for line in bench.panel.devices.lines:
        line.toggle.setChecked(True)
    QApplication.processEvents()
    page = bench.panel.area.widget()
    assert page.width() <= bench.panel.width()
    assert page.minimumSizeHint().width() <= page.width()
    for label in page.findChildren(QLabel):
        if label.isVisible() and not label.wordWrap():
            assert label.sizeHint().width() <= label.width(), label.text()
    for combo in page.findChildren(QComboBox):
        if combo.isVisible():
            assert combo.fontMetrics().horizontalAdvance(combo.currentText()) <= combo.width() - 28, combo.currentText()


def test_everything_that_can_be_used_has_a_name(breast: Bench) -> None:
    page = breast.panel.area.widget()
    controls = [
        widget
        for widget in page.findChildren(QWidget)
        if widget.isVisible()
        and widget.focusPolicy() & Qt.FocusPolicy.TabFocus
        and not isinstance(widget.parent(), QAbstractSpinBox | QComboBox)
    ]
    assert len(controls) > 60
    nameless = [widget for widget in controls if not (widget.accessibleName() or getattr(widget, "text", str)())]
    assert nameless == []


def test_tab_goes_down_the_page(breast: Bench) -> None:
    keys = ("isocentre.left_mm", "isocentre.head_mm", "isocentre.front_mm")
    breast.number(keys[0]).box.setFocus()
    for key in keys[1:]:
        QTest.keyClick(QApplication.focusWidget(), Qt.Key.Key_Tab)
        assert breast.number(key).box.hasFocus()
    QTest.keyClick(QApplication.focusWidget(), Qt.Key.Key_Tab)
    assert breast.panel.group_named("Table").header.hasFocus()
    QTest.keyClick(QApplication.focusWidget(), Qt.Key.Key_Tab)
    assert breast.number("table.from_head_end_mm").box.hasFocus()
