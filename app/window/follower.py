"""Follows the latest set-up through the stages of `app.live`, off the GUI's thread."""

import threading
from collections.abc import Callable
from functools import partial

from PySide6.QtCore import QObject, Signal

from app.jobs import Job, Jobs, Publish
from app.live import LiveMaps, Stage, proved_stage
from geometry.assess import Options
from geometry.carried import prepare_carry_kernel
from geometry.prepare import prepare_kernels
from geometry.progress import Progress
from geometry.scene import Scene
from geometry.setup import Setup

LANE = "clearance"
ANCHOR_LANE = "following"


class Follower(QObject):
    """Looks through set-ups, the latest first.

    `staged` (Stage) comes for a first map, the exact one and the proof. While set-ups arrive faster than first maps
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
        self._maps = LiveMaps()
        self._wanted: tuple[Setup, Options] | None = None
        self._options = Options()
        self._scene: Scene | None = None
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
        self._scene = None
        self._before_first = False
        self._jobs.cancel(LANE)
        self._jobs.cancel(ANCHOR_LANE)

    def _start(self) -> None:
        if self._wanted is None:
            return
        setup, self._options = self._wanted
        self._wanted = None
        self._before_first = True
        self._newer = threading.Event()
        work = partial(_stages, self._maps, setup, self._options, self._newer, self._prepared, self.ahead)
        self._jobs.start_instead(Job(LANE, work, self._done, self._part, self._failed))

    def _part(self, stage: Stage) -> None:
        """Pass a stage on; after the first one a waiting set-up gets its turn."""
        self._before_first = False
        before, self._scene = self._scene, stage.scene
        at_rest = stage.assessment is not None
        if at_rest or (not stage.is_exact and not stage.is_carried and self._maps.wants_anchor(before, stage.scene)):
            self._anchor(stage)
        self.staged.emit(stage)
        self._start()

    def _anchor(self, stage: Stage) -> None:
        """Have the maps to come follow from this one, unless another one is being prepared for that."""
        if self._jobs.is_busy(ANCHOR_LANE):
            return
        exact = stage.map if stage.is_exact else None

        def work(progress: Progress, _publish: Publish) -> None:
            # Its first compilation takes seconds, in which nobody should wait for it.
            prepare_carry_kernel()
            self._maps.anchor_at(exact, stage.scene, self._options, progress)

        self._jobs.start(Job(ANCHOR_LANE, work))

    def _done(self, _: object) -> None:
        self._before_first = False
        self._start()

    def _failed(self, error: Exception) -> None:
        self._before_first = False
        if self._wanted is None:
            self.failed.emit(error)
        self._start()


def _stages(
    maps: LiveMaps,
    setup: Setup,
    options: Options,
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
    first = maps.first_stage(setup, options)
    ahead(first.scene)
    publish(first)
    if newer.is_set():
        return
    exact = maps.exact_stage(first, progress)
    publish(exact)
    publish(proved_stage(exact, progress))
