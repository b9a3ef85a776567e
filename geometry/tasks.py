"""Running the kernel over many tiles of the angle plane, in threads, with progress and cancel."""

import os
import queue
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor

import numpy as np
from numpy.typing import NDArray

from geometry.kernel import Memory
from geometry.plane_kernel import DEPTH, Lists, Pairs
from geometry.progress import Progress, stop_if_cancelled

Tiles = NDArray[np.int64]

# Calls into compiled code of one run, as a rule: each costs about 0.3 ms to unpack its arguments, and has to wait for
# its turn with the interpreter where another thread, such as a window's, keeps that busy.
CALLS = 24


def run_tiles(
    work: Callable[[Tiles, Memory, Lists], None],
    tiles: Tiles,
    pairs: Pairs,
    progress: Progress,
    message: str,
    threads: int | None = None,
    calls: int = CALLS,
) -> None:
    """Run `work` on all tiles, shape (n, 4), in threads, in that many calls. Raises Cancelled.

    Cancel waits for a call in each thread: what takes longer wants more of them.
    """
    workers = min(threads or os.cpu_count() or 1, len(tiles))
    # Rows dealt out like cards: neighbours share the hard places. Contiguous: numba compiles for each layout anew.
    count = min(calls, len(tiles))
    hands = [np.ascontiguousarray(tiles[k::count]) for k in range(count)]
    scratch: queue.SimpleQueue[tuple[Memory, Lists]] = queue.SimpleQueue()
    for _ in range(workers):
        scratch.put(scratch_for(pairs))

    def run(hand: Tiles) -> None:
        if progress.cancelled():
            return
        memory, lists = scratch.get()
        try:
            work(hand, memory, lists)
        finally:
            scratch.put((memory, lists))

    if workers == 1:
        for done, hand in enumerate(hands):
            run(hand)
            _report(progress, (done + 1) / len(hands), message)
    else:
        with ThreadPoolExecutor(workers) as pool:
            for done, _ in enumerate(pool.map(run, hands)):
                _report(progress, (done + 1) / len(hands), message)
    stop_if_cancelled(progress)


def _report(progress: Progress, fraction: float, message: str) -> None:
    # What was stopped is not done, though the calls that are left return at once.
    if not progress.cancelled():
        progress.report(fraction, message)


def scratch_for(pairs: Pairs) -> tuple[Memory, Lists]:
    """Return one worker's memory of the pairs and its lists."""
    count = len(pairs.i)
    memory = Memory(
        np.zeros(count, np.int8),
        np.zeros((count, 4, 2), np.int32),
        np.zeros((count, 4)),
        np.zeros(count),
        np.zeros(count),
        np.zeros((4, 3)),
    )
    lists = Lists(
        np.zeros(DEPTH, np.int64),
        np.zeros((DEPTH, count), np.int32),
        np.zeros((DEPTH, count)),
        np.zeros((DEPTH, count)),
        np.zeros((DEPTH, count)),
        np.zeros((DEPTH, count)),
        np.zeros((DEPTH, count)),
        np.zeros(count),
        np.zeros((4 * DEPTH, 5), np.int64),
    )
    return memory, lists
