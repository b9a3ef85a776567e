"""What is proved of the angle plane: every point of a cell, not samples of it."""

import math
import queue
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from geometry.errors import GeometryError
from geometry.kernel import Memory
from geometry.plane_kernel import Lists
from geometry.planes import Plane, planes_of
from geometry.progress import Progress, Silent
from geometry.proof_kernel import Proved, Strip, prove_tiles
from geometry.scene import Scene
from geometry.tasks import CALLS, Tiles, run_tiles

Bounds = NDArray[np.float32]
Indices = NDArray[np.int32]
Interval = tuple[float, float]

# Cells of the first division are at most this wide, deg. Wider ones would have to be halved nearly everywhere.
FIRST_CELL_DEG = 8.0
# Finer edges would need more halvings than the kernels keep lists for.
EDGE_DEG = (0.02, 45.0)
LARGEST_TOLERANCE_DEG = 45.0
# First cells each way that are proved one after the other, with what was learnt from one to the next.
TILE = 4
# Smallest cells of one call into compiled code, some hundredths of a second.
CELLS_OF_CALL = 40_000
# Angles nearer than this to the border of a step count as on it.
_ON_BORDER = 1e-7


@dataclass(frozen=True)
class Steps:
    """An axis cut into `count` steps of `step_deg` from `start_deg`, of which [low_deg, high_deg] is proved."""

    start_deg: float
    step_deg: float
    low_deg: float
    high_deg: float
    count: int

    def overlapped(self, low_deg: float, high_deg: float) -> tuple[int, int]:
        """Return the half-open range of steps that [low_deg, high_deg] overlaps with more than a border."""
        first = math.floor((low_deg - self.start_deg) / self.step_deg + _ON_BORDER)
        last = math.ceil((high_deg - self.start_deg) / self.step_deg - _ON_BORDER)
        return max(first, 0), min(last, self.count)

    def span_deg(self, first: int, last: int) -> Interval:
        """Return the proved interval that the steps [first, last) cover."""
        low = max(self.start_deg + first * self.step_deg, self.low_deg)
        return low, min(self.start_deg + last * self.step_deg, self.high_deg)


@dataclass(frozen=True, eq=False)
class Proof:
    """Lower bounds for the smallest cells, each array (couch steps, gantry steps); true angles, no tolerance.

    `slack_mm`, `clearance_mm`: valid at every point of the cell; NaN where unproved. `machine_part`, `couch_part`:
    indices into `Scene.parts` of the pair with that clearance or, unproved, of the pair in the way. `depth`: halvings.
    `evaluations` counts the cells that were looked at.
    """

    gantry: Steps
    couch: Steps
    slack_mm: Bounds
    clearance_mm: Bounds
    machine_part: Indices
    couch_part: Indices
    depth: NDArray[np.int8]
    evaluations: int

    def over_couch(self, low_deg: float, high_deg: float) -> "Band":
        """Return what holds, gantry step by gantry step, at every couch angle of [low_deg, high_deg]."""
        first, last = self.couch.overlapped(low_deg, high_deg)
        if last > first:
            return self._least(slice(first, last))
        # A single couch angle on the border of two rows of cells: either row proves it.
        above = min(first, self.couch.count - 1)
        below = max(first - 1, 0)
        one, other = self._least(slice(above, above + 1)), self._least(slice(below, below + 1))
        better = np.where(np.isnan(one.clearance_mm), True, other.clearance_mm > one.clearance_mm)
        return Band(*(np.where(better, o, s) for o, s in zip(other.arrays(), one.arrays(), strict=True)))

    def _least(self, rows: slice) -> "Band":
        clearance = self.clearance_mm[rows]
        # NaN sorts below everything: an unproved cell decides its column.
        worst = np.argmin(np.where(np.isnan(clearance), -np.inf, clearance), axis=0)
        columns = np.arange(clearance.shape[1])
        return Band(
            clearance[worst, columns], self.machine_part[rows][worst, columns], self.couch_part[rows][worst, columns]
        )


@dataclass(frozen=True, eq=False)
class Band:
    """The least of a band of couch angles for each gantry step, each (gantry steps,): see `Proof`."""

    clearance_mm: Bounds
    machine_part: Indices
    couch_part: Indices

    def arrays(self) -> tuple[Bounds, Indices, Indices]:
        """Return the three arrays."""
        return self.clearance_mm, self.machine_part, self.couch_part

    def runs(self) -> list[tuple[int, int]]:
        """Return the half-open ranges of neighbouring proved steps."""
        proved = np.concatenate([[False], ~np.isnan(self.clearance_mm), [False]])
        edges = np.flatnonzero(np.diff(proved.astype(np.int8)))
        return [(int(first), int(last)) for first, last in edges.reshape(-1, 2)]


def tolerance_on(travel: Interval, tolerance_deg: float) -> float:
    """Return the readout tolerance of an axis: an axis that cannot turn has none."""
    return tolerance_deg if travel[1] > travel[0] else 0.0


def steps_over(travel: Interval, tolerance_deg: float, edge_deg: float) -> Steps:
    """Cut a travel, widened by the readout tolerance, into steps at multiples of `edge_deg`.

    Where the tolerance rectangle of a reading passes a travel end, distances are proved there too. GeometryError for an
    edge or a tolerance out of range.
    """
    if not EDGE_DEG[0] <= edge_deg <= EDGE_DEG[1]:
        raise GeometryError(f"edge_deg = {edge_deg:g} is outside the range {EDGE_DEG[0]:g} to {EDGE_DEG[1]:g}")
    if not 0.0 <= tolerance_deg <= LARGEST_TOLERANCE_DEG:
        raise GeometryError(f"tolerance_deg = {tolerance_deg:g} is outside the range 0 to {LARGEST_TOLERANCE_DEG:g}")
    low = travel[0] - tolerance_on(travel, tolerance_deg)
    high = travel[1] + tolerance_on(travel, tolerance_deg)
    start = math.floor(low / edge_deg + _ON_BORDER) * edge_deg
    count = max(math.ceil((high - start) / edge_deg - _ON_BORDER), 1)
    return Steps(start, edge_deg, low, high, count)


def prove(
    scene: Scene,
    gantry: Steps,
    couch: Steps,
    progress: Progress | None = None,
    window: tuple[Interval, Interval] | None = None,
    threads: int | None = None,
) -> Proof:
    """Prove the plane; with `window` (gantry, couch intervals, deg) only the tiles that touch it.

    Each tile is proved from nothing, so that a window gives the same as the whole. Raises Cancelled.
    """
    progress = progress or Silent()
    shape = (couch.count, gantry.count)
    result = Proof(
        gantry,
        couch,
        np.full(shape, np.inf, np.float32),
        np.full(shape, np.inf, np.float32),
        np.full(shape, -1, np.int32),
        np.full(shape, -1, np.int32),
        np.zeros(shape, np.int8),
        0,
    )
    evaluations = 0
    for plane in planes_of(scene):
        proved, evaluated = prove_plane(plane, gantry, couch, progress, window, threads)
        evaluations += evaluated
        _merge(result, plane, proved)
    return replace(result, evaluations=evaluations)


def prove_plane(
    plane: Plane,
    gantry: Steps,
    couch: Steps,
    progress: Progress,
    window: tuple[Interval, Interval] | None,
    threads: int | None,
) -> tuple[Proved, int]:
    """Prove one plane; see `prove`. Returns what is proved and the number of cells evaluated."""
    columns = gantry.count if plane.with_gantry else 1
    rows = couch.count if plane.with_couch else 1
    proved = Proved(
        np.full((rows, columns), np.nan, np.float32),
        np.full((rows, columns), np.nan, np.float32),
        np.full((rows, columns), -1, np.int32),
        np.zeros((rows, columns), np.int8),
    )
    strip_a = _strip(gantry) if plane.with_gantry else Strip(0.0, 1.0, 0.0, 0.0)
    strip_b = _strip(couch) if plane.with_couch else Strip(0.0, 1.0, 0.0, 0.0)
    first = (_first_cell(gantry) if plane.with_gantry else 1, _first_cell(couch) if plane.with_couch else 1)
    tiles = np.array(
        [
            (*across, *along)
            for along in (_tiles(couch, first[1], window and window[1]) if plane.with_couch else [(0, 1)])
            for across in (_tiles(gantry, first[0], window and window[0]) if plane.with_gantry else [(0, 1)])
        ]
    ).reshape(-1, 4)
    evaluated = queue.SimpleQueue[int]()

    def work(hand: Tiles, memory: Memory, lists: Lists) -> None:
        evaluated.put(prove_tiles(plane.a, plane.b, plane.pairs, strip_a, strip_b, hand, first, memory, lists, proved))

    run_tiles(work, tiles, plane.pairs, progress, "proof", threads, max(rows * columns // CELLS_OF_CALL, CALLS))
    return proved, sum(evaluated.get() for _ in range(evaluated.qsize()))


def _first_cell(steps: Steps) -> int:
    """Return the number of steps, a power of two, of the cells that an axis is divided into at first."""
    size = 1
    while 2 * size * steps.step_deg <= FIRST_CELL_DEG and size < steps.count:
        size *= 2
    return size


def _tiles(steps: Steps, first: int, window: Interval | None) -> list[tuple[int, int]]:
    """Return the ranges of steps that an axis is proved in, one after the other; those that touch the window."""
    size = first * TILE
    ranges = [(k, min(k + size, steps.count)) for k in range(0, steps.count, size)]
    if window is None:
        return ranges
    # A window that ends on a border needs the cells on both sides of it.
    low = (window[0] - steps.start_deg) / steps.step_deg - _ON_BORDER
    high = (window[1] - steps.start_deg) / steps.step_deg + _ON_BORDER
    return [(start, stop) for start, stop in ranges if start <= high and stop >= low]


def _strip(steps: Steps) -> Strip:
    return Strip(*(math.radians(x) for x in (steps.start_deg, steps.step_deg, steps.low_deg, steps.high_deg)))


def _merge(result: Proof, plane: Plane, proved: Proved) -> None:
    """Keep the lesser bound, cell by cell; what one plane leaves unproved is unproved."""
    shape = result.slack_mm.shape
    clearance = np.broadcast_to(proved.clearance, shape)
    pair = np.broadcast_to(proved.pair, shape)
    known = ~np.isnan(result.clearance_mm)
    lesser = known & (np.isnan(clearance) | (clearance < result.clearance_mm)) & (pair >= 0)
    result.machine_part[lesser] = plane.a.part[plane.pairs.i[pair[lesser]]]
    result.couch_part[lesser] = plane.b.part[plane.pairs.j[pair[lesser]]]
    np.minimum(result.clearance_mm, clearance, out=result.clearance_mm)
    np.minimum(result.slack_mm, proved.slack, out=result.slack_mm)
    np.maximum(result.depth, proved.depth, out=result.depth)
