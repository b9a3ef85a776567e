import subprocess
import sys
import time

import pytest
from PySide6.QtCore import QProcess
from pytestqt.qtbot import QtBot

from app.window.room.opengl_probe import Graphics, OpenGLProbe
from tests.app.window.scenes import graphics_here


def told(qtbot: QtBot, code: str, timeout_ms: int = 10_000) -> Graphics:
    probe = OpenGLProbe(arguments=("-c", code))
    with qtbot.waitSignal(probe.found, timeout=20_000) as signal:
        probe.start(timeout_ms)
    probe.stop()
    return signal.args[0]


@pytest.mark.parametrize(
    ("code", "graphics"),
    [
        ("", Graphics.CARD),
        ("import sys; sys.exit(3)", Graphics.PROCESSOR),
        ("import sys; sys.exit(1)", Graphics.NONE),
        ("import sys; sys.exit(77)", Graphics.NONE),
        ("import os; os.abort()", Graphics.NONE),
    ],
)
def test_the_exit_status_tells(qtbot: QtBot, code: str, graphics: Graphics) -> None:
    assert told(qtbot, code) is graphics


def test_one_that_hangs_is_ended_and_cannot_draw(qtbot: QtBot) -> None:
    before = time.monotonic()
    assert told(qtbot, "import time; time.sleep(60)", timeout_ms=300) is Graphics.NONE
    assert time.monotonic() - before < 15.0


def test_a_program_that_is_not_there_cannot_draw(qtbot: QtBot, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(sys, "executable", "/nowhere/python")
    probe = OpenGLProbe()
    with qtbot.waitSignal(probe.found, timeout=10_000) as signal:
        probe.start()
    assert signal.args[0] is Graphics.NONE
    probe.stop()


def test_stopping_ends_the_process_and_nothing_is_told(qtbot: QtBot) -> None:
    probe = OpenGLProbe(arguments=("-c", "import time; time.sleep(60)"))
    heard = []
    probe.found.connect(heard.append)
    probe.start()
    qtbot.waitUntil(lambda: probe._process.state() is QProcess.ProcessState.Running)
    probe.stop()
    assert probe._process.state() is QProcess.ProcessState.NotRunning
    assert not probe._patience.isActive()
    qtbot.wait(20)
    assert heard == []


def test_the_real_one_finds_what_is_here(qtbot: QtBot) -> None:
    probe = OpenGLProbe()
    with qtbot.waitSignal(probe.found, timeout=30_000) as signal:
        probe.start()
    assert signal.args[0] is graphics_here()
    probe.stop()


@pytest.mark.skipif(sys.platform != "linux", reason="these variables are Mesa's and libglvnd's")
def test_without_opengl_the_other_process_does_not_say_that_it_can_draw() -> None:
    import os

    gone = {"LIBGL_DRIVERS_PATH": "/nowhere", "__EGL_VENDOR_LIBRARY_DIRS": "/nowhere"}
    run = subprocess.run(
        [sys.executable, "-m", "app.window.room.opengl_probe"],
        env={**os.environ, **gone},
        capture_output=True,
        check=False,
    )
    assert run.returncode not in {Graphics.CARD.value, Graphics.PROCESSOR.value}
