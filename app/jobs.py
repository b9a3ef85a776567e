"""Work off the GUI's thread, a thread for each kind; progress, parts, results and errors come back by one road.

Workers never touch Qt. They put messages into a queue that a timer of the GUI's thread empties; the timer runs only
while something is under way.
"""

import queue
import sys
import threading
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any, Final

from PySide6.QtCore import QObject, QTimer, Signal

from geometry.errors import Cancelled
from geometry.progress import Progress

Publish = Callable[[Any], None]
Work = Callable[[Progress, Publish], Any]
Receive = Callable[[Any], object]

# In place of a fraction, where a job has yet to tell how far it is.
UNKNOWN: Final = -1.0
_POLL_MS: Final = 5
_SWITCH_S: Final = 0.0005


def _ignore(_: object) -> None:
    """Take what nobody asked for."""


@dataclass(eq=False)
class Job:
    """One piece of work, as the GUI's thread sees it.

    `lane` is its kind: jobs of a lane never run side by side. `to_the_end`: what a person asked to be written is
    written even if the program is closed meanwhile.
    """

    lane: str
    work: Work
    on_done: Receive = _ignore
    on_part: Receive = _ignore
    on_error: Receive = _ignore
    label: str = ""
    to_the_end: bool = False
    stop: threading.Event = field(default_factory=threading.Event)


class _JobProgress:
    """The progress that a worker reports to; what is in between two polls is not worth a message."""

    def __init__(self, job: Job, latest: dict[Job, tuple[float, str]]) -> None:
        self._job = job
        self._latest = latest

    def report(self, fraction: float, message: str) -> None:
        self._latest[self._job] = fraction, message

    def cancelled(self) -> bool:
        return self._job.stop.is_set()


class _Lane:
    """A thread that runs the jobs of one kind, and ends when told."""

    def __init__(self, name: str, messages: "queue.SimpleQueue[tuple[Job, str, Any]]") -> None:
        self._messages = messages
        self.latest: dict[Job, tuple[float, str]] = {}
        self.waiting: queue.SimpleQueue[Job | None] = queue.SimpleQueue()
        self.thread = threading.Thread(target=self._run, name=f"wideberth {name}")
        self.thread.start()

    def _run(self) -> None:
        while (job := self.waiting.get()) is not None:
            self._messages.put((job, *self._outcome(job)))

    def _outcome(self, job: Job) -> tuple[str, Any]:
        if job.stop.is_set():
            return "cancelled", None
        try:
            return "done", job.work(
                _JobProgress(job, self.latest), lambda part: self._messages.put((job, "part", part))
            )
        except Cancelled:
            return "cancelled", None
        except Exception as error:  # noqa: BLE001 - whatever it is, the GUI's thread tells it; it must not vanish here
            return "error", error


class Jobs(QObject):
    """Starts, supersedes and stops jobs. All methods and callbacks belong to the GUI's thread.

    `progressed` (lane, fraction 0 to 1 or `UNKNOWN`, message) and `finished` (lane) tell what is under way. A job that
    was cancelled or superseded calls back no more.
    """

    progressed = Signal(str, float, str)
    finished = Signal(str)

    def __init__(self, parent: QObject | None = None) -> None:
        super().__init__(parent)
        # The GUI's thread paints in Python; work that returns from compiled code should not wait 5 ms for its turn.
        sys.setswitchinterval(_SWITCH_S)
        self._messages: queue.SimpleQueue[tuple[Job, str, Any]] = queue.SimpleQueue()
        self._lanes: dict[str, _Lane] = {}
        self._active: dict[str, list[Job]] = {}
        self._timer = QTimer(self)
        self._timer.setInterval(_POLL_MS)
        self._timer.timeout.connect(self._poll)

    def start(self, job: Job) -> Job:
        """Queue a job behind those of its lane."""
        lane = self._lanes.get(job.lane)
        if lane is None:
            lane = self._lanes[job.lane] = _Lane(job.lane, self._messages)
        self._active.setdefault(job.lane, []).append(job)
        lane.waiting.put(job)
        self._timer.start()
        if job.label:
            self.progressed.emit(job.lane, UNKNOWN, job.label)
        return job

    def start_instead(self, job: Job) -> Job:
        """Queue a job, and stop all others of its lane: only the latest counts."""
        self.cancel(job.lane)
        return self.start(job)

    def cancel(self, lane: str) -> None:
        """Ask every job of a lane to stop; none of them calls back any more."""
        for job in self._active.get(lane, ()):
            job.stop.set()

    def is_busy(self, lane: str | None = None) -> bool:
        """Tell whether anything of a lane, or of any, is waiting or running."""
        return bool(self._active.get(lane)) if lane is not None else any(self._active.values())

    def shutdown(self) -> None:
        """Stop everything but what is to be written, and wait for the threads: none is left afterwards."""
        for jobs in self._active.values():
            for job in jobs:
                if not job.to_the_end:
                    job.stop.set()
        for started in self._lanes.values():
            started.waiting.put(None)
        for started in self._lanes.values():
            started.thread.join()
        self._timer.stop()
        self._lanes.clear()
        self._active.clear()

    def _poll(self) -> None:
        self._tell_progress()
        while True:
            try:
                job, kind, content = self._messages.get_nowait()
            except queue.Empty:
                break
            self._receive(job, kind, content)
        if not self.is_busy():
            self._timer.stop()

    def _tell_progress(self) -> None:
        for name, lane in self._lanes.items():
            for job in list(lane.latest):
                fraction, message = lane.latest.pop(job)
                if not job.stop.is_set():
                    self.progressed.emit(name, fraction, job.label or message)

    def _receive(self, job: Job, kind: str, content: object) -> None:
        stopped = job.stop.is_set()
        if kind == "part":
            if not stopped:
                job.on_part(content)
            return
        jobs = self._active.get(job.lane, [])
        if job in jobs:
            jobs.remove(job)
        if not jobs:
            self.finished.emit(job.lane)
        if not stopped and kind == "done":
            job.on_done(content)
        elif not stopped and kind == "error":
            job.on_error(content)
