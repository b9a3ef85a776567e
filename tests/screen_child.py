"""A process of its own that opens the window on a real screen and saves what the screen shows."""

import sys
import tempfile
from pathlib import Path

from app.kernel_cache import choose_kernel_cache


def main(setup: Path, target: Path) -> int:
    """Open `setup`, wait until everything is painted, write the screen to `target`; where things are goes to stdout."""
    choose_kernel_cache()
    from PySide6.QtCore import QPoint, QRect
    from PySide6.QtWidgets import QApplication, QWidget

    from tests.window_driver import new_window, pause, settle

    with tempfile.TemporaryDirectory() as folder:
        window = new_window(Path(folder), size=(1280, 800))
        window.move(0, 0)
        window.files.open_sample(setup)
        settle(window)
        pause(0.5)
        screen = QApplication.primaryScreen()
        if not screen.grabWindow(0).save(str(target)):
            return 1

        def place(widget: QWidget) -> str:
            area = QRect(widget.mapToGlobal(QPoint(0, 0)), widget.size())
            return f"{area.x()} {area.y()} {area.width()} {area.height()}"

        view, chart = window.workspace.scene_view, window.workspace.chart
        print("platform", QApplication.platformName())
        print("painted", view.draws_without_opengl())
        print("view", place(view))
        print("chart", place(chart))
        window.desk.session.replace_document(window.desk.document)
        window.close()
    return 0


if __name__ == "__main__":
    sys.exit(main(Path(sys.argv[1]), Path(sys.argv[2])))
