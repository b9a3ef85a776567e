"""Compiling the kernels ahead of the work, or loading what an earlier start compiled, with progress."""

from typing import Final

import numpy as np
from numba.core import event

from geometry.hulls import packed_hulls
from geometry.pieces import convex_piece
from geometry.plane_kernel import Pairs
from geometry.planes import Plane
from geometry.progress import Progress, Silent, stop_if_cancelled
from geometry.proof import prove_plane, steps_over
from geometry.sweep import angles_of, sweep_plane

# Compilations of a first start. Only the bar's pace hangs on it.
COMPILATIONS: Final = 30


class _Counter(event.Listener):
    """Reports each compilation that ends."""

    def __init__(self, progress: Progress) -> None:
        self.progress = progress
        self.done = 0

    def on_start(self, event: event.Event) -> None:
        """Nothing is known yet."""

    def on_end(self, event: event.Event) -> None:  # noqa: ARG002
        """Report one more."""
        self.done += 1
        self.progress.report(min(self.done / COMPILATIONS, 1.0), "preparing for this processor, once")


def prepare_kernels(progress: Progress) -> None:
    """Make sure that sweep and proof can start at once. Takes long only on a new machine. Raises Cancelled."""
    corner = np.array([[0.0, 0.0, 0.0], [9.0, 0.0, 0.0], [0.0, 9.0, 0.0], [0.0, 0.0, 9.0]])
    a = packed_hulls([convex_piece(corner + 100.0)], [0], 1)
    b = packed_hulls([convex_piece(corner)], [0], 2)
    one = np.zeros(1, np.int32)
    plane = Plane(a, b, Pairs(one, one, np.ones(1)), with_gantry=True, with_couch=True)
    with event.install_listener("numba:compile", _Counter(progress)):
        sweep_plane(plane, angles_of(np.zeros(1)), angles_of(np.zeros(1)), threads=1)
        stop_if_cancelled(progress)
        steps = steps_over((0.0, 0.0), 0.0, 1.0)
        prove_plane(plane, steps, steps, Silent(), None, 1)
