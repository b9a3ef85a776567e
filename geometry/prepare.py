"""Compiling the kernels ahead of the work, or loading what an earlier start compiled, with progress."""

from typing import Final

import numpy as np
from numba.core import event

from geometry.hulls import packed_hulls
from geometry.legs import leg_of, roots_of, straight_runs
from geometry.path_kernel import Least, Line, Open, prove_band, search_line
from geometry.pieces import convex_piece
from geometry.plane_kernel import Pairs
from geometry.planes import Plane
from geometry.progress import Progress, Silent, stop_if_cancelled
from geometry.proof import prove_plane, steps_over
from geometry.sweep import angles_of, sweep_plane
from geometry.tasks import scratch_for

# Compilations of a first start, without and with those of paths. Only the bar's pace hangs on it.
COMPILATIONS: Final = 30
PATH_COMPILATIONS: Final = 34


class _Counter(event.Listener):
    """Reports each compilation that ends."""

    def __init__(self, progress: Progress, expected: int) -> None:
        self.progress = progress
        self.expected = expected
        self.done = 0

    def on_start(self, event: event.Event) -> None:
        """Nothing is known yet."""

    def on_end(self, event: event.Event) -> None:  # noqa: ARG002
        """Report one more."""
        self.done += 1
        self.progress.report(min(self.done / self.expected, 1.0), "preparing for this processor, once")


def prepare_kernels(progress: Progress) -> None:
    """Make sure that sweep and proof can start at once. Takes long only on a new machine. Raises Cancelled."""
    with event.install_listener("numba:compile", _Counter(progress, COMPILATIONS)):
        _prepare_plane(_smallest_plane(), progress)


def prepare_path_kernels(progress: Progress) -> None:
    """Make sure that paths, too, can be searched and proved at once, as a check of a plan does. Raises Cancelled."""
    plane = _smallest_plane()
    with event.install_listener("numba:compile", _Counter(progress, PATH_COMPILATIONS)):
        _prepare_plane(plane, progress)
        stop_if_cancelled(progress)
        (run,) = straight_runs(np.array([[0.0, 0.0], [1.0, 0.0]]))
        leg = leg_of(plane, run, (0.0, 0.0))
        memory, lists = scratch_for(plane.pairs)
        line = Line(*(np.full(1, np.inf) for _ in Line._fields))
        search_line(plane.a, plane.b, plane.pairs, leg, 1, 1, 1, memory, lists, line)
        stop_if_cancelled(progress)
        roots, halvings = roots_of(leg, 1.0)
        clearance, slack = (
            Least(np.full(1, np.inf), np.full(1, np.inf), np.zeros(1), np.zeros(1), np.full(1, -1)) for _ in range(2)
        )
        place = Open(np.full(1, np.inf), np.zeros(1), np.zeros(1), np.full(1, -1))
        prove_band(plane.a, plane.b, plane.pairs, leg, roots, halvings, 1.0, memory, lists, clearance, slack, place)


def _smallest_plane() -> Plane:
    corner = np.array([[0.0, 0.0, 0.0], [9.0, 0.0, 0.0], [0.0, 9.0, 0.0], [0.0, 0.0, 9.0]])
    a = packed_hulls([convex_piece(corner + 100.0)], [0], 1)
    b = packed_hulls([convex_piece(corner)], [0], 2)
    one = np.zeros(1, np.int32)
    return Plane(a, b, Pairs(one, one, np.ones(1)), with_gantry=True, with_couch=True)


def _prepare_plane(plane: Plane, progress: Progress) -> None:
    sweep_plane(plane, angles_of(np.zeros(1)), angles_of(np.zeros(1)), threads=1)
    stop_if_cancelled(progress)
    steps = steps_over((0.0, 0.0), 0.0, 1.0)
    prove_plane(plane, steps, steps, Silent(), None, 1)
