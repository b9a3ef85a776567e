"""Follows the latest set-up through the stages of `app.live`, off the GUI's thread."""

import threading
from collections.abc import Callable
from functools import partial

from PySide6.QtCore import QObject, Signal

from app.jobs import Job, Jobs, Publish
from app.live import Coarseness, Stage, exact_stage, first_stage, proved_stage
from geometry.assess import Options
from geometry.prepare import prepare_kernels
from geometry.progress import Progress
from geometry.scene import Scene
from geometry.setup import Setup

LANE = "clearance"


class Follower(QObject):
    """Looks through set-ups, the latest first.

    `staged` (Stage) comes for a coarse map, the exact one and the proof. While set-ups arrive faster than coarse maps
    can be made, each map that is begun is finished and shown, and the next one is that of the latest set-up.
    `failed` (the error) comes where a set-up cannot be built.
    """

    staged = Signal(object)
    failed = Signal(object)

    def __init__(self, jobs: Jobs, parent: QObject | None = None) -> None:
        super().__init__(parent)
        # Called with each scene on the worker's thread, before anybody is told of it.
        self.ahead: Callable[[Scene], None] = lambda _: None
        self._jobs = jobs
        self._coarseness = Coarseness()
        self._wanted: tuple[Setup, Options] | None = None
        self._before_first = False
        self._newer = threading.Event()
        self._prepared = threading.Event()

    def follow(self, setup: Setup, options: Options) -> None:
        """Look through a set-up in place of the one before."""
        self._wanted = setup, options
        if self._before_first:
            self._newer.set()
        else:
            self._start()

    def forget(self) -> None:
        """Stop looking at anything."""
        self._wanted = None
        self._before_first = False
        self._jobs.cancel(LANE)

    def _start(self) -> None:
        if self._wanted is None:
            return
        setup, options = self._wanted
        self._wanted = None
        self._before_first = True
        self._newer = threading.Event()
        work = partial(_stages, setup, options, self._coarseness, self._newer, self._prepared, self.ahead)
        self._jobs.start_instead(Job(LANE, work, self._done, self._part, self._failed))

    def _part(self, stage: Stage) -> None:
        """Pass a stage on; after the first one a waiting set-up gets its turn."""
        self._before_first = False
        self.staged.emit(stage)
        self._start()

    def _done(self, _: object) -> None:
        self._before_first = False
        self._start()

    def _failed(self, error: Exception) -> None:
        self._before_first = False
        if self._wanted is None:
            self.failed.emit(error)
        self._start()


def _stages(
    setup: Setup,
    options: Options,
    coarseness: Coarseness,
    newer: threading.Event,
    prepared: threading.Event,
    ahead: Callable[[Scene], None],
    progress: Progress,
    publish: Publish,
) -> None:
    """Publish the stages of a set-up, the later ones only while no newer one waits. GeometryError, Cancelled."""
    if not prepared.is_set():
        prepare_kernels(progress)
        prepared.set()
    first = first_stage(setup, coarseness)
    ahead(first.scene)
    publish(first)
    if newer.is_set():
        return
    exact = exact_stage(first, options, progress)
    publish(exact)
    publish(proved_stage(exact, options, progress))
