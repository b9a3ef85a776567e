"""Driving the real window: for tests, for the benchmark and for the README's pictures."""

import time
from collections.abc import Callable
from pathlib import Path

from PySide6.QtCore import QSettings
from PySide6.QtGui import QImage
from PySide6.QtWidgets import QApplication

from app.window.main_window import MainWindow
from app.window.settings import WindowSettings

ROOMS = Path(__file__).parents[1] / "sample_rooms"
PATIENCE_S = 120.0


def application() -> QApplication:
    """Return the process's application as the program sets it up."""
    existing = QApplication.instance()
    made = existing if isinstance(existing, QApplication) else QApplication(["wideberth"])
    made.setStyle("Fusion")
    return made


def new_window(folder: Path, theme: str = "light", size: tuple[int, int] = (1366, 768)) -> MainWindow:
    """Return a window that keeps its settings in `folder`, whose cautions were read, on the screen."""
    application()
    settings = WindowSettings(QSettings(str(folder / "window.ini"), QSettings.Format.IniFormat))
    settings.note_cautions_read()
    settings.theme = theme
    window = MainWindow(settings)
    window.resize(*size)
    window.show()
    return window


def wait_for(done: Callable[[], bool], what: str, patience_s: float = PATIENCE_S) -> float:
    """Run the event loop until `done`; return how long that took, s. AssertionError after the patience."""
    start = time.perf_counter()
    while not done():
        QApplication.processEvents()
        time.sleep(0.0005)
        if time.perf_counter() - start > patience_s:
            raise AssertionError(f"waited {patience_s:g} s for {what}")
    return time.perf_counter() - start


def settle(window: MainWindow) -> None:
    """Wait until everything asked for is computed and painted."""
    wait_for(lambda: window.desk.assessment is not None, "the proof")
    wait_for(lambda: not window.jobs.is_busy(), "all jobs")
    wait_for(window.workspace.scene_view.is_settled, "the room's picture")
    # Timers that coalesce requests, and contours that wait for a rest.
    pause(0.5)
    wait_for(lambda: not window.jobs.is_busy(), "all jobs")


def pause(seconds: float) -> None:
    """Run the event loop for a while."""
    end = time.perf_counter() + seconds
    while time.perf_counter() < end:
        QApplication.processEvents()
        time.sleep(0.001)


def picture_of(window: MainWindow) -> QImage:
    """Return what the window shows."""
    return window.grab().toImage()
