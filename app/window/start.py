"""The window as a program: from the command line to the event loop."""

import sys
from pathlib import Path

from PySide6.QtWidgets import QApplication

from app.window.opening import Opening


def run_window(path: Path | None = None) -> int:
    """Open the window, on a set-up file where one is given, and return the exit status once it is closed."""
    application = QApplication.instance() or QApplication(sys.argv[:1])
    if not isinstance(application, QApplication):
        raise TypeError("another kind of Qt application is running already")
    application.setApplicationName("Wideberth")
    application.setApplicationDisplayName("Wideberth")
    application.setStyle("Fusion")
    opening = Opening()
    opening.show_now()
    # A second and more of imports, with something on the screen.
    from app.window.main_window import MainWindow  # noqa: PLC0415

    window = MainWindow()
    window.show()
    opening.close()
    if path is not None:
        window.files.open(path)
    return application.exec()
