"""A plan in the real window: verdicts, the field's own room, measured gaps, and the sheet."""

from pathlib import Path

import pypdf
import pytest
from PySide6.QtWidgets import QFileDialog

from app.document.edits import set_value
from app.plan.gaps import MeasuredGap
from app.plan_files.gaps_csv import read_kept_gaps
from app.window.main_window import MainWindow
from geometry.states import State
from tests.window_driver import ROOMS, pause, settle, wait_for

HEADER = "field,gantry_from_deg,gantry_to_deg,direction,couch_from_deg,couch_to_deg,collimator_deg,fitted\n"
PLAN = HEADER + "front,0,,,0,,,\narc,320,40,CW,0,,30,\nblocked,90,,,90,,,\n"


@pytest.fixture
def planned(window: MainWindow, tmp_path: Path) -> MainWindow:
    window.files.open_sample(ROOMS / "cobalt" / "neck.setup.toml")
    settle(window)
    path = tmp_path / "plan.csv"
    path.write_text(PLAN, encoding="utf-8")
    window.open_plan(path)
    settle(window)
    wait_for(lambda: window.fields.checked is not None, "the verdicts")
    settle(window)
    return window


def test_fields_have_their_verdicts_on_panel_and_chart(planned: MainWindow) -> None:
    report = planned.fields.checked.report
    assert [field.state for field in report.fields] == [State.PERMITTED, State.PERMITTED, State.CONTACT]
    assert planned.workspace.left.currentWidget() is planned.workspace.fields
    assert planned.workspace.time_curve.isVisible()


def test_a_field_with_another_collimator_is_shown_as_it_is(planned: MainWindow) -> None:
    assert planned.desk.is_own_scene
    planned.workspace.fields.choose_field(1)
    pause(0.2)
    assert not planned.desk.is_own_scene
    assert planned.desk.scene.setup.collimator_deg == 30.0
    assert planned.desk.pose.scene is planned.desk.scene
    assert planned.workspace.pose_bar.state.text() == "Enough at this pose alone"
    nearest = planned.fields.checked.report.fields[1].place
    assert (planned.desk.gantry_deg, planned.desk.couch_deg) == pytest.approx((nearest.gantry_deg, nearest.couch_deg))
    planned.workspace.chart.pose_wanted.emit(5.0, 5.0)
    pause(0.2)
    assert planned.desk.is_own_scene
    assert planned.workspace.fields.chosen_field() is None


def test_an_edit_ends_the_look_at_a_fields_own_room(planned: MainWindow) -> None:
    planned.workspace.fields.choose_field(1)
    pause(0.2)
    planned.desk.edit(set_value("table.lateral_mm", 10.0), "table")
    assert planned.desk.is_own_scene
    pause(0.05)
    assert planned.workspace.pose_bar.state.text() in {"Proof under way", "Permitted"}
    settle(planned)


def test_verdicts_follow_the_set_up(planned: MainWindow) -> None:
    before = planned.fields.checked.report
    planned.desk.edit(set_value("required.fixed_mm", 200.0), "required")
    settle(planned)
    wait_for(lambda: planned.fields.checked.report is not before, "new verdicts")
    settle(planned)
    assert planned.fields.checked.report.fields[0].state is State.SHORT


def test_a_gap_that_was_typed_is_kept_with_the_set_up_and_stands_on_the_sheet(
    planned: MainWindow, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    setup = tmp_path / "mine.setup.toml"
    monkeypatch.setattr(QFileDialog, "getSaveFileName", lambda *_: (str(setup), ""))
    planned.files.save()
    wait_for(setup.exists, "the set-up")
    settle(planned)
    planned.workspace.fields.gap_typed.emit(MeasuredGap("front", 0.0, 0.0, 87.5, "A. Physicist", None, ""))
    kept = tmp_path / "mine.gaps.csv"
    wait_for(kept.exists, "the gaps")
    assert read_kept_gaps(setup)[0].measured_mm == 87.5
    assert "measured smaller" in planned.workspace.fields.message.text()

    sheet = tmp_path / "sheet.pdf"
    monkeypatch.setattr(QFileDialog, "getSaveFileName", lambda *_: (str(sheet), "Dry-run sheet, Letter (*.pdf)"))
    planned.workspace.fields.sheet_wanted.emit()
    wait_for(sheet.exists, "the sheet")
    settle(planned)
    pages = pypdf.PdfReader(sheet).pages
    text = " ".join(page.extract_text() for page in pages)
    assert "NOT PERMITTED" in text
    assert "87.5" in text
    assert round(float(pages[0].mediabox[3])) == 792


def test_a_plan_without_a_set_up_is_refused_in_words(window: MainWindow, tmp_path: Path) -> None:
    path = tmp_path / "plan.csv"
    path.write_text(PLAN, encoding="utf-8")
    window.open_plan(path)
    assert "set-up first" in window.statusBar().currentMessage()
