"""Running the kernel over many tiles of the angle plane, in threads, with progress and cancel."""

import os
import queue
from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor
from typing import TypeVar

import numpy as np

from geometry.kernel import Memory
from geometry.plane_kernel import DEPTH, Lists, Pairs
from geometry.progress import Progress, stop_if_cancelled

Tile = TypeVar("Tile")


def run_tiles(
    work: Callable[[Tile, Memory, Lists], None],
    tiles: Sequence[Tile],
    pairs: Pairs,
    progress: Progress,
    message: str,
    threads: int | None = None,
) -> None:
    """Run `work` on every tile, in threads, each with scratch of its own. Raises Cancelled."""
    workers = min(threads or os.cpu_count() or 1, len(tiles))
    scratch: queue.SimpleQueue[tuple[Memory, Lists]] = queue.SimpleQueue()
    for _ in range(workers):
        scratch.put(scratch_for(pairs))

    def run(tile: Tile) -> None:
        if progress.cancelled():
            return
        memory, lists = scratch.get()
        try:
            work(tile, memory, lists)
        finally:
            scratch.put((memory, lists))

    if workers == 1:
        for done, tile in enumerate(tiles):
            run(tile)
            progress.report((done + 1) / len(tiles), message)
    else:
        with ThreadPoolExecutor(workers) as pool:
            for done, _ in enumerate(pool.map(run, tiles)):
                progress.report((done + 1) / len(tiles), message)
    stop_if_cancelled(progress)


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
        *(np.zeros((DEPTH, count)) for _ in range(5)),
        np.zeros(count),
        np.zeros((4 * DEPTH, 5), np.int64),
    )
    return memory, lists
