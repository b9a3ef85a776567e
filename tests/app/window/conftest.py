"""What every test of the window needs: settings and user folders of its own, and nothing left afterwards."""

import threading
from collections.abc import Iterator
from pathlib import Path

import pytest
from PySide6.QtCore import QTimer
from PySide6.QtWidgets import QDialog, QMessageBox
from pytestqt.qtbot import QtBot

from app.window.main_window import MainWindow
from tests.window_driver import new_window


@pytest.fixture
def own_folders(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """Keep recent files, side files and settings away from the user's."""
    for variable in ("XDG_CONFIG_HOME", "XDG_DATA_HOME", "LOCALAPPDATA", "APPDATA", "HOME"):
        monkeypatch.setenv(variable, str(tmp_path / "user"))
    return tmp_path


@pytest.fixture(autouse=True)
def no_dialog_waits(monkeypatch: pytest.MonkeyPatch) -> None:
    """Fail a test that opens a dialog which nobody will answer; one that means to puts its own answer here."""

    def unanswered(dialog: QDialog) -> int:
        raise AssertionError(f"a dialog waits for an answer: {getattr(dialog, 'text', dialog.windowTitle)()}")

    monkeypatch.setattr(QMessageBox, "exec", unanswered)
    monkeypatch.setattr(QDialog, "exec", unanswered)


@pytest.fixture
def window(own_folders: Path, qtbot: QtBot) -> Iterator[MainWindow]:  # noqa: ARG001 - there has to be an application
    """Return the main window, shown; closed afterwards, with no thread, timer or process left."""
    made = new_window(own_folders)
    yield made
    if made.desk.session is not None:
        made.desk.session.replace_document(made.desk.session.document)
    made.close()
    left = [thread.name for thread in threading.enumerate() if thread.name.startswith("wideberth")]
    assert not left
    going = [
        (type(timer.parent()).__name__, timer.interval()) for timer in made.findChildren(QTimer) if timer.isActive()
    ]
    assert not going
    made.deleteLater()
