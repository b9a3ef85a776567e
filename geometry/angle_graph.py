"""The angle plane as a net of lines, and the quickest way along them that keeps to what is proved."""

from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from geometry.legs import Point
from geometry.machine import Room
from geometry.proof import Proof
from geometry.queries import ProvedTable
from geometry.spans import ANGLE_DEG, Tolerances
from geometry.sweep import grid_deg

Array = NDArray[np.float64]
Indices = NDArray[np.int64]

# Speeds of a room that states none, deg/s. Common practice, no source: a C-arm turns once a minute or somewhat slower.
GANTRY_SPEED = 6.0
COUCH_SPEED = 3.0
# What a change from one axis to the other costs in time, s: long enough that no staircase pays.
CHANGE_S = 2.0
# What crossing an edge that is not proved costs, s, and each degree of it: more than any proved way, so that it is
# crossed only where there is no other, and where it is thinnest.
BLOCKED_S = 1e7
BLOCKED_S_PER_DEG = 1e5


@dataclass(frozen=True)
class Speeds:
    """Speeds of the axes, deg/s; `assumed` names the axes whose speed the room does not state."""

    gantry: float
    couch: float
    assumed: tuple[str, ...]


def speeds_of(room: Room) -> Speeds:
    """Return the room's speeds, with the usual ones for what it does not state."""
    gantry, couch = room.gantry.speed, room.couch.turntable.speed
    assumed = tuple(name for name, speed in (("gantry", gantry), ("couch", couch)) if speed is None)
    return Speeds(gantry or GANTRY_SPEED, couch or COUCH_SPEED, assumed)


@dataclass(frozen=True, eq=False)
class Way:
    """A way along the net's lines by its corners; `blocked` are the steps (from, to) that are not proved."""

    points_deg: tuple[Point, ...]
    blocked: tuple[tuple[Point, Point], ...]


class Reach:
    """The cheapest ways from one node of a net to all others."""

    def __init__(self, cost: Array, before: Indices) -> None:
        self.cost = cost
        self.before = before


class AngleGraph:
    """Lines at multiples of `step_deg`, at the ends of the travels and through `stops`, all readings, unwrapped.

    Each node stands twice: as come to by the gantry and as come to by the couch, so that a change of axis has a cost.
    """

    def __init__(
        self, proof: Proof, tolerances: Tolerances, speeds: Speeds, stops: Sequence[Point], step_deg: float
    ) -> None:
        self._proof = proof
        self._around = tolerances.of_gantry_deg, tolerances.of_couch_deg
        self.gantry_deg = _lines(tolerances.gantry_travel_deg, [stop[0] for stop in stops], step_deg)
        self.couch_deg = _lines(tolerances.couch_travel_deg, [stop[1] for stop in stops], step_deg)
        self._shape = len(self.couch_deg), len(self.gantry_deg)
        table = ProvedTable(proof)
        g, c = self.gantry_deg, self.couch_deg[:, None]
        by_gantry, by_couch = self._around
        self._open_gantry = table.proved(g[:-1] - by_gantry, g[1:] + by_gantry, c - by_couch, c + by_couch)
        self._open_couch = table.proved(g - by_gantry, g + by_gantry, c[:-1] - by_couch, c[1:] + by_couch)
        self._matrix = self._built(speeds)
        self._reaches: dict[int, Reach] = {}

    def node(self, point: Point) -> int:
        """Return the node of a stop. ValueError for a point that is no node."""
        column = int(np.argmin(np.abs(self.gantry_deg - point[0])))
        row = int(np.argmin(np.abs(self.couch_deg - point[1])))
        if max(abs(self.gantry_deg[column] - point[0]), abs(self.couch_deg[row] - point[1])) > 10.0 * ANGLE_DEG:
            raise ValueError(f"angles {point} are not on the net")
        return row * self._shape[1] + column

    def cost_s(self, start: Point, stop: Point) -> float:
        """Return the time of the cheapest way, s, its changes of axis and what is blocked counted in."""
        return float(self._reach(self.node(start)).cost[:, self.node(stop)].min())

    def way(self, start: Point, stop: Point) -> Way:
        """Return the cheapest way from stop to stop by its corners."""
        reach = self._reach(self.node(start))
        size = self._shape[0] * self._shape[1]
        target = self.node(stop)
        at = target if reach.cost[0, target] <= reach.cost[1, target] else target + size
        nodes = [at]
        while (at := int(reach.before[at])) >= 0:
            nodes.append(at)
        points = [self._point(node % size) for node in reversed(nodes)]
        # A change of axis stays at its place.
        points = [point for k, point in enumerate(points) if k == 0 or point != points[k - 1]]
        blocked = tuple(step for step in pairwise(points) if not self._is_open(*step))
        return Way(_corners(points), blocked)

    def in_the_way(self, way: Way) -> tuple[int, int] | None:
        """Return the parts, machine's first, that stand most in the way of a way's blocked steps; None if unknown."""
        counted: Counter[tuple[int, int]] = Counter()
        proof = self._proof
        for (g0, c0), (g1, c1) in way.blocked:
            columns = slice(*proof.gantry.overlapped(min(g0, g1) - self._around[0], max(g0, g1) + self._around[0]))
            rows = slice(*proof.couch.overlapped(min(c0, c1) - self._around[1], max(c0, c1) + self._around[1]))
            # A line on the border of two rows or columns is blocked by the cells on both sides.
            rows = slice(max(rows.start - 1, 0), rows.stop + 1) if rows.stop <= rows.start else rows
            columns = slice(max(columns.start - 1, 0), columns.stop + 1) if columns.stop <= columns.start else columns
            unproved = np.isnan(proof.slack_mm[rows, columns])
            machine = proof.machine_part[rows, columns][unproved]
            other = proof.couch_part[rows, columns][unproved]
            counted.update((int(m), int(o)) for m, o in zip(machine, other, strict=True) if m >= 0 and o >= 0)
        return counted.most_common(1)[0][0] if counted else None

    def _point(self, node: int) -> Point:
        row, column = divmod(node, self._shape[1])
        return float(self.gantry_deg[column]), float(self.couch_deg[row])

    def _is_open(self, start: Point, stop: Point) -> bool:
        one, other = sorted((self.node(start), self.node(stop)))
        row, column = divmod(one, self._shape[1])
        return bool(self._open_gantry[row, column] if other == one + 1 else self._open_couch[row, column])

    def _reach(self, node: int) -> Reach:
        # SciPy's graphs take long to import; nothing else here needs them.
        from scipy.sparse.csgraph import dijkstra  # noqa: PLC0415

        if node not in self._reaches:
            size = self._shape[0] * self._shape[1]
            cost, before, _ = dijkstra(
                self._matrix, indices=[node, node + size], min_only=True, return_predecessors=True
            )
            self._reaches[node] = Reach(cost.reshape(2, size), before)
        return self._reaches[node]

    def _built(self, speeds: Speeds) -> object:
        from scipy.sparse import csr_array  # noqa: PLC0415

        rows, columns = self._shape
        size = rows * columns
        nodes = np.arange(size).reshape(rows, columns)
        along_gantry = np.broadcast_to(np.diff(self.gantry_deg), (rows, columns - 1))
        along_couch = np.broadcast_to(np.diff(self.couch_deg)[:, None], (rows - 1, columns))
        edges = [
            (nodes[:, :-1], nodes[:, 1:], _cost_s(along_gantry, speeds.gantry, self._open_gantry)),
            (size + nodes[:-1], size + nodes[1:], _cost_s(along_couch, speeds.couch, self._open_couch)),
            (nodes, size + nodes, np.full((rows, columns), CHANGE_S)),
        ]
        one = np.concatenate([edge[0].ravel() for edge in edges])
        other = np.concatenate([edge[1].ravel() for edge in edges])
        cost = np.concatenate([edge[2].ravel() for edge in edges])
        both = np.concatenate([one, other]), np.concatenate([other, one])
        return csr_array((np.concatenate([cost, cost]), both), shape=(2 * size, 2 * size))


def _cost_s(along_deg: Array, speed: float, is_open: NDArray[np.bool_]) -> Array:
    cost: Array = along_deg / speed + np.where(is_open, 0.0, BLOCKED_S + BLOCKED_S_PER_DEG * along_deg)
    return cost


def _lines(travel: tuple[float, float], through: Sequence[float], step_deg: float) -> Array:
    """Return the rising angles of the lines across an axis; a multiple of the step that all but meets a stop goes."""
    low, high = travel
    kept = np.unique(np.clip([low, high, *through], low, high))
    kept = kept[np.concatenate([[True], np.diff(kept) > ANGLE_DEG])]
    regular = grid_deg(low, high, step_deg)
    free = np.abs(regular[:, None] - kept).min(axis=1) > ANGLE_DEG
    return np.sort(np.concatenate([kept, regular[free]]))


def _corners(points: Sequence[Point]) -> tuple[Point, ...]:
    """Return the points of a way along the lines without those on the straight between their neighbours."""
    return tuple(
        point
        for k, point in enumerate(points)
        if k in (0, len(points) - 1)
        or not any(points[k - 1][axis] == point[axis] == points[k + 1][axis] for axis in range(2))
    )
