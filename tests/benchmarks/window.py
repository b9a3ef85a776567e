"""The window under a moving hand: `python -m tests.benchmarks.window` prints one line of JSON.

The C-arm with the tall heavy patient, drawn off-screen. Beside every figure stands what the plain sweep, or the plain
proof, takes in the same run. `--first` also opens the window where nothing was compiled before, in a process of its
own; `--start` times the program's start, likewise.
"""

import argparse
import os
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

import numpy as np
from PySide6.QtCore import QEvent, QObject, Qt, QTimer
from PySide6.QtWidgets import QWidget

from app.document.edits import set_value
from app.kernel_cache import choose_kernel_cache
from app.live import Stage
from app.window.main_window import MainWindow
from geometry.assess import Options, assess_map, exact_map
from tests.benchmarks.timing import TALL_HEAVY, best_of, line_of
from tests.window_driver import new_window, pause, settle, wait_for

ROOT = Path(__file__).resolve().parents[2]
SECONDS = 4.0
VIEW = (900, 700)


class Heart(QObject):
    """Beats every millisecond on the GUI's thread and knows the longest pause, ms."""

    def __init__(self) -> None:
        super().__init__()
        self._last = time.perf_counter()
        self.longest_ms = 0.0
        self._timer = QTimer(self, interval=1, timerType=Qt.TimerType.PreciseTimer)
        self._timer.timeout.connect(self._beat)
        self._timer.start()

    def fresh(self) -> None:
        """Forget what was."""
        self._last = time.perf_counter()
        self.longest_ms = 0.0

    def _beat(self) -> None:
        now = time.perf_counter()
        self.longest_ms = max(self.longest_ms, 1e3 * (now - self._last))
        self._last = now


class Paints(QObject):
    """Counts the paint events of a widget that show another thing than the one before."""

    def __init__(self, widget: QWidget, shown: Callable[[], object]) -> None:
        super().__init__()
        self._shown = shown
        self._last: object = None
        self.count = 0
        widget.installEventFilter(self)

    def eventFilter(self, _: QObject, event: QEvent) -> bool:
        if event.type() == QEvent.Type.Paint and self._shown() is not self._last:
            self._last = self._shown()
            self.count += 1
        return False


def drag_isocentre(window: MainWindow, heart: Heart) -> dict[str, float]:
    """Drag a value of the isocentre to and fro, then rest."""
    desk = window.desk
    steps: list[float] = []
    reached: dict[str, float] = {}

    def note(stage: Stage) -> None:
        if stage.map is not None and stage.assessment is None:
            steps.append(float(np.diff(stage.map.gantry_deg).max()))
        if stage.setup is desk.document.setup:
            if stage.is_exact:
                reached.setdefault("exact", time.perf_counter())
            if stage.assessment is not None:
                reached.setdefault("proved", time.perf_counter())

    desk.staged.connect(note)
    paints = Paints(window.workspace.chart, lambda: desk.stage.map if desk.stage is not None else None)
    middle = desk.document.setup.isocentre.offset_mm[0]
    heart.fresh()
    start = time.perf_counter()
    k = 0
    while time.perf_counter() - start < SECONDS:
        k += 1
        value = middle + 15.0 * np.sin(k / 40.0)
        desk.edit(set_value("isocentre.left_mm", float(value)), "isocentre", "isocentre.left_mm")
        pause(0.008)
    rested = time.perf_counter()
    reached.clear()
    redraws = paints.count / (rested - start)
    desk.end_edit()
    wait_for(lambda: "proved" in reached, "the proof")
    return {
        "chart_redraws_per_s": redraws,
        "coarsest_step_deg": max(steps),
        "rest_to_exact_s": reached["exact"] - rested,
        "rest_to_proof_s": reached["proved"] - rested,
        "longest_block_ms": heart.longest_ms,
    }


def drag_gantry(window: MainWindow, heart: Heart) -> dict[str, float]:
    """Turn the gantry to and fro as fast as the window follows."""
    view = window.workspace.scene_view
    view.setFixedSize(*VIEW)
    settle(window)
    frames = 0

    def count() -> None:
        nonlocal frames
        frames += 1

    view.frame_painted.connect(count)
    heart.fresh()
    start = time.perf_counter()
    k = 0
    while time.perf_counter() - start < SECONDS:
        k += 1
        window.desk.go_to(float(90.0 * np.sin(k / 60.0)), 0.0)
        pause(0.004)
    return {"frames_per_s": frames / (time.perf_counter() - start), "longest_block_ms": heart.longest_ms}


def plain(window: MainWindow) -> dict[str, float]:
    """Return what the sweep and the proof take by themselves."""
    scene, options = window.desk.stage.scene, Options()
    exact = exact_map(scene, options)
    return {
        "sweep_s": best_of(3, lambda: exact_map(scene, options)).wall_s,
        "proof_s": best_of(3, lambda: assess_map(exact, options)).wall_s,
    }


def live(folder: Path) -> dict[str, object]:
    """Return all figures of a window that has been open for a while."""
    window = new_window(folder, size=(1600, 1000))
    heart = Heart()
    window.files.open_sample(TALL_HEAVY)
    settle(window)
    figures: dict[str, object] = {"opening_block_ms": heart.longest_ms, "plain": plain(window)}
    figures["isocentre"] = drag_isocentre(window, heart)
    figures["gantry"] = drag_gantry(window, heart)
    window.desk.session.replace_document(window.desk.document)
    window.close()
    return figures


def first(folder: Path) -> dict[str, object]:
    """Return the longest block while the window opens and compiles what it needs."""
    window = new_window(folder)
    pause(0.2)
    heart = Heart()
    start = time.perf_counter()
    window.files.open_sample(TALL_HEAVY)
    settle(window)
    figures = {"to_proof_s": time.perf_counter() - start, "longest_block_ms": heart.longest_ms}
    window.close()
    return figures


def in_fresh_process(mode: str) -> str:
    """Run this file once more, with nothing compiled before, and return what it prints."""
    with tempfile.TemporaryDirectory() as cache:
        environment = {**os.environ, "NUMBA_CACHE_DIR": cache}
        command = [sys.executable, "-m", "tests.benchmarks.window", mode]
        run = subprocess.run(command, cwd=ROOT, env=environment, check=True, capture_output=True, text=True)
    return run.stdout.strip()


START = """
import sys, time
begin = time.perf_counter()
import os
os.environ.setdefault("QT_QPA_PLATFORM", "offscreen")
from app.kernel_cache import choose_kernel_cache
choose_kernel_cache()
import app.cli
from pathlib import Path
from PySide6.QtWidgets import QApplication
from PySide6.QtCore import QTimer
import app.window.opening as opening
import app.window.start as start
shown = opening.Opening.show_now
def show_now(self):
    shown(self)
    print("screen", time.perf_counter() - begin, flush=True)
opening.Opening.show_now = show_now
def watch():
    window = next((w for w in QApplication.topLevelWidgets() if type(w).__name__ == "MainWindow"), None)
    if window and window.desk.stage and window.desk.stage.map is not None and window.workspace.scene_view.is_ready():
        print("picture", time.perf_counter() - begin, flush=True)
        window.close()
        QApplication.quit()
class Watched(start.Opening):
    def __init__(self):
        super().__init__()
        self.timer = QTimer(QApplication.instance(), interval=5)
        self.timer.timeout.connect(watch)
        self.timer.start()
start.Opening = Watched
sys.exit(start.run_window(Path(sys.argv[1])))
"""


def start_times(runs: int) -> dict[str, list[float]]:
    """Return seconds from the process's start to something on the screen, and to the first picture, warm."""
    found: dict[str, list[float]] = {"screen": [], "picture": []}
    with tempfile.TemporaryDirectory() as home:
        environment = {**os.environ, "XDG_CONFIG_HOME": home, "XDG_DATA_HOME": home}
        settings = Path(home) / "wideberth" / "window.ini"
        settings.parent.mkdir()
        settings.write_text("[General]\ncautions_read=yes\n")
        for _ in range(runs):
            command = [sys.executable, "-c", START, str(TALL_HEAVY)]
            run = subprocess.run(command, cwd=ROOT, env=environment, check=True, capture_output=True, text=True)
            for line in run.stdout.splitlines():
                name, seconds = line.split()
                found[name].append(round(float(seconds), 3))
    return found


def main() -> None:
    """Print the figures."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--first", action="store_true", help="in a process with nothing compiled")
    parser.add_argument("--start", action="store_true", help="time the program's start")
    parser.add_argument("--alone", action="store_true", help=argparse.SUPPRESS)
    chosen = parser.parse_args()
    os.environ.setdefault("QT_QPA_PLATFORM", "offscreen")
    choose_kernel_cache()
    with tempfile.TemporaryDirectory() as folder:
        if chosen.alone:
            print(line_of(first(Path(folder))))
        elif chosen.first:
            print(in_fresh_process("--alone"))
        elif chosen.start:
            print(line_of(start_times(5)))
        else:
            print(line_of(live(Path(folder))))


if __name__ == "__main__":
    main()
