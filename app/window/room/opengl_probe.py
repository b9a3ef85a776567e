"""Whether VTK can draw here, found out in another process: where there is no OpenGL at all, VTK ends its process.

`python -m app.window.room.opengl_probe` draws a little picture and tells by its exit status how that went.
"""

import os
import sys
from enum import Enum
from pathlib import Path
from typing import Final

from PySide6.QtCore import QObject, QProcess, QProcessEnvironment, QTimer, Signal

import app

_TIMEOUT_MS: Final = 20_000


class Graphics(Enum):
    """What draws for VTK: the graphics card, the processor in its place, or nothing. Values are exit statuses."""

    CARD = 0
    PROCESSOR = 3
    NONE = 1


class OpenGLProbe(QObject):
    """Asks the other process, without waiting for it. `found` tells the `Graphics`, once."""

    found = Signal(object)

    def __init__(self, parent: QObject | None = None, arguments: tuple[str, ...] = ("-m", __name__)) -> None:
        super().__init__(parent)
        self._process = QProcess(self)
        self._process.setProgram(sys.executable)
        self._process.setArguments(list(arguments))
        self._process.setProcessEnvironment(_environment())
        self._process.setStandardOutputFile(QProcess.nullDevice())
        self._process.setStandardErrorFile(QProcess.nullDevice())
        self._process.finished.connect(self._finished)
        self._process.errorOccurred.connect(self._failed)
        self._patience = QTimer(self)
        self._patience.setSingleShot(True)
        self._patience.timeout.connect(self._process.kill)
        self._asked = False

    def start(self, timeout_ms: int = _TIMEOUT_MS) -> None:
        """Begin; a process that takes longer than `timeout_ms` counts as one that cannot draw."""
        self._asked = True
        self._patience.start(timeout_ms)
        self._process.start()

    def stop(self) -> None:
        """End the process, if it runs, and say nothing more."""
        self._asked = False
        self._patience.stop()
        if self._process.state() is not QProcess.ProcessState.NotRunning:
            self._process.kill()
            self._process.waitForFinished()

    def _finished(self, status: int, how: QProcess.ExitStatus) -> None:
        ended = how is QProcess.ExitStatus.NormalExit
        known = {graphics.value: graphics for graphics in Graphics}
        self._tell(known.get(status, Graphics.NONE) if ended else Graphics.NONE)

    def _failed(self, error: QProcess.ProcessError) -> None:
        # After a crash `finished` follows; a process that never began ends here.
        if error is QProcess.ProcessError.FailedToStart:
            self._tell(Graphics.NONE)

    def _tell(self, graphics: Graphics) -> None:
        self._patience.stop()
        if self._asked:
            self._asked = False
            self.found.emit(graphics)


def _environment() -> QProcessEnvironment:
    environment = QProcessEnvironment.systemEnvironment()
    # The other process finds this program where this one did.
    home = str(Path(app.__file__).resolve().parent.parent)
    known = environment.value("PYTHONPATH")
    environment.insert("PYTHONPATH", os.pathsep.join([home, known]) if known else home)
    return environment


def main() -> int:
    """Draw a small picture and look whether it is there; return the exit status."""
    try:
        # Only this process may load it without having asked.
        from app.window.room.vtk_renderer import VtkRenderer, draws, is_software  # noqa: PLC0415
    except ImportError:
        return int(Graphics.NONE.value)
    renderer = VtkRenderer()
    if not draws(renderer):
        return int(Graphics.NONE.value)
    graphics = Graphics.PROCESSOR if is_software(renderer.hardware()) else Graphics.CARD
    return int(graphics.value)


if __name__ == "__main__":
    sys.exit(main())
