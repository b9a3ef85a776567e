"""Searching how near the other sides come to many points: planes of angles in turn, points in threads."""

import os
import queue
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from functools import cached_property, partial
from typing import Final

import numpy as np
from numpy.typing import NDArray

from geometry.hulls import packed_hulls
from geometry.kernel import Hulls, Memory
from geometry.near.near_kernel import LEVELS, Found, Region, Scratch, Targets, distances_at, nearest
from geometry.pieces import convex_piece
from geometry.plane_kernel import Pairs
from geometry.planes import Plane, is_checked, planes_of
from geometry.progress import Progress, stop_if_cancelled
from geometry.scene import Scene

Array = NDArray[np.float64]
Indices = NDArray[np.int64]

# No distance found is more than this above the true least one at its point, mm.
TOLERANCE_MM: Final = 1.0
# Points of one call into compiled code: a few hundredths of a second over the whole plane.
POINTS_OF_CALL: Final = 48


def prepare_near_kernel() -> None:
    """Compile the kernels, or load what an earlier start compiled, by a trivial case."""
    corner = np.array([[0.0, 0.0, 0.0], [9.0, 0.0, 0.0], [0.0, 9.0, 0.0], [0.0, 0.0, 9.0]])
    hulls = packed_hulls([convex_piece(corner + 100.0)], [0], 1)
    one = np.zeros(1, np.int32)
    memory, scratch = _scratch_for(1)
    nearest(
        _packed_points(np.zeros((1, 3))),
        one,
        np.zeros(1, np.int64),
        hulls,
        Targets(np.array([0, 1], np.int32), one),
        Region(np.zeros((1, 4)), False, True, True),
        False,
        TOLERANCE_MM,
        memory,
        scratch,
        nothing_found(1, 400.0),
    )
    distances_at(hulls, hulls, Pairs(one, one, np.ones(1)), 0.0, 0.0, 1.0, memory, np.zeros(1), np.zeros(1))


@dataclass(frozen=True, eq=False)
class Search:
    """Where to look, and in what: `cells` and `line` as in `Region`; threads None for one a processor."""

    scene: Scene
    cells: Array
    line: bool
    threads: int | None

    @cached_property
    def works(self) -> list[tuple[Plane, bool, Targets]]:
        """Every plane twice: points of body b against the pieces of a and, backward, those of a against b's."""
        # What stands still against each other first: it costs little, and what it finds spares much of the rest.
        planes = sorted(planes_of(self.scene), key=lambda plane: plane.with_gantry + plane.with_couch)
        return [
            (plane, backward, self._targets(plane.b if backward else plane.a))
            for plane in planes
            for backward in (False, True)
        ]

    def run(self, points_mm: Array, of_part: NDArray[np.int32], found: Found, start: int, progress: Progress) -> None:
        """Lower what is known of every point from number `start` on. Raises Cancelled.

        `points_mm` (n, 3) in the systems of their parts, which `of_part` (n,) names by their place in `scene.parts`.
        """
        points = _packed_points(points_mm)
        share = 1.0 / len(self.works)
        for done, (plane, backward, targets) in enumerate(self.works):
            own, hulls = (plane.a, plane.b) if backward else (plane.b, plane.a)
            work = partial(
                nearest,
                points,
                of_part,
                hulls=hulls,
                targets=targets,
                region=Region(self.cells, self.line, plane.with_gantry, plane.with_couch),
                backward=backward,
                tolerance=TOLERANCE_MM,
                found=found,
            )
            rows = start + np.flatnonzero(np.isin(of_part[start:], own.part))
            _run_hands(work, rows, len(hulls.radii), Share(progress, done * share, share), self.threads)

    def _targets(self, hulls: Hulls) -> Targets:
        """Return which pieces of a body each part of the scene is checked against."""
        parts = self.scene.parts
        joined = self.scene.setup.room.joined
        checked = np.array([[is_checked(part, other, joined) for other in parts] for part in parts])
        pieces = [np.flatnonzero(of_part[hulls.part]).astype(np.int32) for of_part in checked]
        first = np.cumsum([0, *(len(one) for one in pieces)])
        return Targets(first.astype(np.int32), np.concatenate(pieces))


class Share:
    """The progress of a work that is a part of another: from `start` on, `span` of the whole."""

    def __init__(self, progress: Progress, start: float, span: float) -> None:
        self._progress = progress
        self._start = start
        self._span = span

    def report(self, fraction: float, message: str) -> None:
        """Report the share of the whole."""
        self._progress.report(self._start + fraction * self._span, message)

    def cancelled(self) -> bool:
        """Ask the whole."""
        return self._progress.cancelled()


def _run_hands(work: Callable[..., None], rows: Indices, pieces: int, progress: Progress, threads: int | None) -> None:
    """Run `work` on all rows, neighbours together, in threads. Raises Cancelled."""
    stop_if_cancelled(progress)
    hands = [rows[k : k + POINTS_OF_CALL] for k in range(0, len(rows), POINTS_OF_CALL)]
    workers = max(min(threads or os.cpu_count() or 1, len(hands)), 1)
    spare: queue.SimpleQueue[tuple[Memory, Scratch]] = queue.SimpleQueue()
    for _ in range(workers):
        spare.put(_scratch_for(pieces))

    def run(hand: Indices) -> None:
        if progress.cancelled():
            return
        memory, scratch = spare.get()
        try:
            work(rows=hand, memory=memory, scratch=scratch)
        finally:
            spare.put((memory, scratch))

    with ThreadPoolExecutor(workers) as pool:
        for done, _ in enumerate(pool.map(run, hands)):
            if not progress.cancelled():
                progress.report((done + 1) / len(hands), "nearest approaches")
    stop_if_cancelled(progress)


def nothing_found(count: int, max_mm: float) -> Found:
    """Return what is known of points before any search."""
    return Found(np.full(count, max_mm), np.full(count, np.nan), np.full(count, np.nan))


def _packed_points(points: Array) -> Hulls:
    """Return points (n, 3) as pieces of one vertex each. Their compass and neighbours are never asked for."""
    count = len(points)
    return Hulls(
        vertices=np.ascontiguousarray(points),
        first=np.arange(count + 1, dtype=np.int32),
        edge_first=np.zeros(count + 1, np.int32),
        neighbours=np.empty(0, np.int32),
        compass=np.empty((count, 0), np.int32),
        part=np.zeros(count, np.int32),
        centres=np.ascontiguousarray(points),
        radii=np.zeros(count),
        reach=np.zeros(count),
    )


def _scratch_for(pieces: int) -> tuple[Memory, Scratch]:
    """Return one worker's memory of the pieces and its lists."""
    memory = Memory(
        np.zeros(pieces, np.int8),
        np.zeros((pieces, 4, 2), np.int32),
        np.zeros((pieces, 4)),
        np.zeros(pieces),
        np.zeros(pieces),
        np.zeros((4, 3)),
    )
    return memory, Scratch(
        np.zeros(LEVELS, np.int64),
        np.zeros((LEVELS, pieces), np.int32),
        np.zeros((LEVELS, pieces, 4)),
        np.zeros((LEVELS + 2, 5)),
    )
