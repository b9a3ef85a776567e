"""The real window, driven as a person would: open, drag, undo, export, close."""

from pathlib import Path

import numpy as np
import openpyxl
import pytest
from PySide6.QtCore import QMimeData, QPoint, QPointF, Qt, QUrl
from PySide6.QtGui import QDropEvent
from PySide6.QtTest import QTest
from PySide6.QtWidgets import QFileDialog, QMessageBox, QPushButton

from app.document.edits import set_value
from app.files.setup_file import read_setup
from app.live import Stage
from app.window.main_window import MainWindow
from geometry.assess import assess
from geometry.states import State
from tests.window_driver import ROOMS, pause, settle, wait_for

HEAD = ROOMS / "particle_snout" / "head.setup.toml"


def opened(window: MainWindow, path: Path = HEAD) -> MainWindow:
    window.files.open_sample(path)
    settle(window)
    return window


def dragged(window: MainWindow, key: str, values: list[float]) -> None:
    for value in values:
        window.desk.edit(set_value(key, value), "isocentre", key)
        pause(0.02)
    window.desk.end_edit()


def test_open_drag_undo_export_close(window: MainWindow, tmp_path: Path) -> None:
    opened(window)
    before = window.desk.document
    first = window.desk.assessment
    assert first is not None
    stages: list[Stage] = []
    window.desk.staged.connect(stages.append)

    dragged(window, "isocentre.left_mm", [2.0, 5.0, 9.0, 14.0, 20.0])
    settle(window)
    assert window.desk.document.setup.isocentre.offset_mm[0] == 20.0
    assert stages, "no chart while the hand moved"
    assert window.isWindowModified()
    changed = window.desk.assessment
    assert changed is not None
    assert not np.array_equal(changed.map.clearance_mm, first.map.clearance_mm)
    # The window says what the command line would.
    assert np.array_equal(changed.state, assess(window.desk.document.setup, window.desk.document.options).state)
    assert "→" in window.workspace.setup_panel.note.text()

    window.menus.undo.trigger()
    settle(window)
    assert window.desk.document == before
    assert not window.isWindowModified()
    assert np.array_equal(window.desk.assessment.state, first.state)
    assert not window.menus.undo.isEnabled()
    window.menus.redo.trigger()
    assert window.desk.document.setup.isocentre.offset_mm[0] == 20.0
    window.menus.undo.trigger()
    settle(window)

    target = tmp_path / "permitted.xlsx"
    window.exports.write_map_to(target)
    wait_for(target.exists, "the workbook")
    wait_for(lambda: not window.jobs.is_busy(), "the export")
    assert len(openpyxl.load_workbook(target).sheetnames) >= 3

    window.close()
    assert not window.isVisible()
    assert not window.jobs.is_busy()


def test_a_click_on_the_chart_turns_the_room(window: MainWindow) -> None:
    opened(window)
    chart = window.workspace.chart
    view = window.workspace.scene_view
    before = view.grab().toImage()
    QTest.mouseClick(chart, Qt.MouseButton.LeftButton, pos=QPoint(chart.width() // 2, chart.height() // 3))
    settle(window)
    pose = window.desk.pose
    assert pose is not None
    assert (pose.gantry_deg, pose.couch_deg) != (0.0, 0.0)
    assert window.workspace.pose_bar.gantry.value() == pytest.approx(window.desk.gantry_deg, abs=0.01)
    assert view.grab().toImage() != before


def test_keys_step_the_pose(window: MainWindow) -> None:
    opened(window)
    window.workspace.chart.setFocus()
    QTest.keyClick(window.workspace.chart, Qt.Key.Key_Right)
    QTest.keyClick(window.workspace.chart, Qt.Key.Key_Up, Qt.KeyboardModifier.ShiftModifier)
    pause(0.1)
    assert (window.desk.gantry_deg, window.desk.couch_deg) == pytest.approx((1.0, 0.1))


def test_a_remedy_opens_a_blocked_pose_and_undo_takes_it_back(window: MainWindow) -> None:
    opened(window, ROOMS / "c_arm_close" / "breast.setup.toml")
    window.desk.go_to(95.0, 40.0)
    settle(window)
    wait_for(lambda: window.desk.pose.state is not State.PERMITTED, "the pose")
    wait_for(lambda: bool(window.workspace.remedies.remedies()), "a remedy")
    settle(window)
    remedies = window.workspace.remedies.remedies()
    window.workspace.remedies.apply_wanted.emit(remedies[0])
    settle(window)
    assert window.desk.pose.state is State.PERMITTED


def test_a_dropped_set_up_opens(window: MainWindow) -> None:
    copy = ROOMS / "cobalt" / "neck.setup.toml"
    content = QMimeData()
    content.setUrls([QUrl.fromLocalFile(str(copy))])
    event = QDropEvent(
        QPointF(50, 50),
        Qt.DropAction.CopyAction,
        content,
        Qt.MouseButton.LeftButton,
        Qt.KeyboardModifier.NoModifier,
    )
    window.dropEvent(event)
    wait_for(lambda: window.desk.document is not None, "the document")
    assert window.desk.document.setup.name == read_setup(copy).name
    settle(window)


def test_what_cannot_be_read_leaves_the_open_document(
    window: MainWindow, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    opened(window)
    before = window.desk.document
    shown: list[str] = []
    monkeypatch.setattr(QMessageBox, "exec", lambda box: shown.append(box.informativeText()) or 0)
    broken = tmp_path / "broken.setup.toml"
    broken.write_text("format = 1\nname = 3\n")
    window.files.open(broken)
    wait_for(lambda: bool(shown), "the message")
    assert "name" in shown[0]
    assert window.desk.document is before


def test_unsaved_changes_are_asked_about_and_saved(
    window: MainWindow, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    opened(window)
    window.desk.edit(set_value("isocentre.left_mm", 12.0), "isocentre")
    target = tmp_path / "mine.setup.toml"
    monkeypatch.setattr(QMessageBox, "exec", lambda _: QMessageBox.StandardButton.Save)
    monkeypatch.setattr(QFileDialog, "getSaveFileName", lambda *_: (str(target), ""))
    left: list[bool] = []
    window.files.leave(lambda: left.append(True))
    wait_for(lambda: bool(left), "the file")
    assert read_setup(target).isocentre.offset_mm[0] == 12.0
    assert not window.desk.session.dirty


def test_a_cancelled_question_keeps_the_window_open(window: MainWindow, monkeypatch: pytest.MonkeyPatch) -> None:
    opened(window)
    window.desk.edit(set_value("isocentre.left_mm", 12.0), "isocentre")
    monkeypatch.setattr(QMessageBox, "exec", lambda _: QMessageBox.StandardButton.Cancel)
    window.close()
    assert window.isVisible()
    monkeypatch.setattr(QMessageBox, "exec", lambda _: QMessageBox.StandardButton.Discard)


def test_the_start_screen_leads_to_a_sample_in_one_click(window: MainWindow) -> None:
    buttons = window.start_screen.findChildren(QPushButton)
    button = next(button for button in buttons if button.text().startswith("Head, snout"))
    QTest.mouseClick(button, Qt.MouseButton.LeftButton)
    settle(window)
    assert window.desk.document.setup.name == "Head, snout near the patient"
    assert window.desk.document.path is None
    assert window.workspace.banner.isVisible()


def test_a_click_on_a_span_shows_its_ends_in_the_room(window: MainWindow) -> None:
    opened(window)
    view = window.workspace.scene_view
    before = view.grab().toImage()
    span = window.desk.assessment.spans[0]
    window.workspace.spans.span_clicked.emit(span)
    pause(0.1)
    ends = [float(text.removesuffix("°")) for text in view.overlay().arc.texts]
    assert ends == pytest.approx([span.gantry_from_deg % 360.0, span.gantry_to_deg % 360.0])
    assert view.grab().toImage() != before
    window.desk.go_to(0.0, 10.0)
    pause(0.1)
    assert view.overlay().arc is None


def test_nothing_is_called_permitted_between_an_edit_and_its_proof(window: MainWindow) -> None:
    opened(window)
    assert window.workspace.pose_bar.state.text() == "Permitted"
    window.desk.edit(set_value("required.fixed_mm", 20.0), "required")
    pause(0.01)
    assert window.desk.assessment is None
    assert window.workspace.pose_bar.state.text() != "Permitted"
    settle(window)
    assert window.workspace.pose_bar.state.text() == "Permitted"


@pytest.mark.parametrize("name", ["c_arm_close/breast", "c_arm_wide/tall_heavy"])
def test_directions_are_shown_of_every_kind_of_region(window: MainWindow, name: str) -> None:
    opened(window, ROOMS / f"{name}.setup.toml")
    window.workspace.right_tabs.setCurrentWidget(window.workspace.discs)
    settle(window)
    image = window.workspace.discs.grab().toImage()
    colours = {image.pixelColor(x, image.height() // 2).name() for x in range(0, image.width(), 3)}
    assert len(colours) > 10


def test_a_preview_shows_its_own_nearest_places(window: MainWindow) -> None:
    opened(window, ROOMS / "c_arm_close" / "breast.setup.toml")
    window.desk.go_to(95.0, 40.0)
    settle(window)
    remedy = window.workspace.remedies.remedies()[0]
    assert window.desk.pose.state is State.CONTACT
    window.workspace.remedies.preview_wanted.emit(remedy)
    assert window.workspace.scene_view.overlay().witness.text.startswith("Preview: ")
    assert not window.workspace.scene_view.overlay().marked
    window.workspace.remedies.preview_wanted.emit(None)
    assert "contact" in window.workspace.scene_view.overlay().witness.text
