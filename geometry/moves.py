"""Moves between the fields of a plan: proved ways through the angle plane, one axis at a time, the quickest first."""

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from itertools import pairwise

from geometry.angle_graph import AngleGraph, Speeds, speeds_of
from geometry.field_order import quickest_order
from geometry.frames import unwrapped_deg
from geometry.legs import Point, checked_points
from geometry.paths import PathProver, Verdict
from geometry.progress import Progress, Silent, stop_if_cancelled
from geometry.proof import Interval, Proof
from geometry.scene import Scene
from geometry.spans import Tolerances
from geometry.states import State

# Distance of the net's lines, deg; where no way is found, the finer one is tried.
STEP_DEG = 1.0
FINE_STEP_DEG = 0.5


@dataclass(frozen=True)
class Field:
    """A field's control points (gantry, couch), deg: one for a static beam, more for an arc, in the order of delivery.

    An arc's angles go on without a jump of 360; which whole turns are added to reach the machine's travel is open.
    """

    name: str
    points_deg: tuple[Point, ...]


@dataclass(frozen=True)
class Move:
    """The change from the end of one field to the start of the next, of which `points_deg` are the corners.

    Angles unwrapped, deg; no points where a field cannot be reached at all. `seconds` is the machine's time for it,
    one axis after the other; NaN without a permitted way. `in_the_way`: the parts, machine's first, indices into
    `Scene.parts`, that block the cheapest way there would be; None where it is permitted or no pair is to blame.
    """

    before: int
    after: int
    points_deg: tuple[Point, ...]
    seconds: float
    verdict: Verdict
    in_the_way: tuple[int, int] | None = None


@dataclass(frozen=True)
class MovePlan:
    """The moves of an order of fields. `points_deg` are each field's control points on the branch chosen for it.

    None in `points_deg` where a field cannot be reached within the travel.
    """

    points_deg: tuple[tuple[Point, ...] | None, ...]
    moves: tuple[Move, ...]
    speeds: Speeds

    @property
    def seconds(self) -> float:
        """The time of all moves, s; NaN if one has no permitted way."""
        return math.fsum(move.seconds for move in self.moves)

    @property
    def permitted(self) -> bool:
        """Tell whether every move is permitted."""
        return all(move.verdict.state is State.PERMITTED for move in self.moves)


@dataclass(frozen=True)
class Order:
    """An order of fields, as indices, and the time of its moves, s; NaN where one of them has no permitted way.

    `exact`: no order is quicker; otherwise a good one was found.
    """

    fields: tuple[int, ...]
    seconds: float
    exact: bool


def branches_of(field: Field, gantry_travel_deg: Interval, couch_travel_deg: Interval) -> tuple[tuple[Point, ...], ...]:
    """Return the field's control points with whole turns added, each way that stays within both travels.

    Raises ValueError for control points that are no path.
    """
    checked_points(field.points_deg)
    gantries = _shifted([point[0] for point in field.points_deg], gantry_travel_deg)
    couches = _shifted([point[1] for point in field.points_deg], couch_travel_deg)
    return tuple(tuple(zip(gantry, couch, strict=True)) for gantry in gantries for couch in couches)


class MovePlanner:
    """Plans moves on one proof of a scene."""

    def __init__(self, scene: Scene, proof: Proof, tolerances: Tolerances) -> None:
        self._scene = scene
        self._proof = proof
        self._tolerances = tolerances
        self._prover = PathProver(scene, tolerances)
        self.speeds = speeds_of(scene.setup.room)

    def plan(self, fields: Sequence[Field], progress: Progress | None = None) -> MovePlan:
        """Return the moves of the fields in their order, on the branches that make them quickest. Raises Cancelled."""
        progress = progress or Silent()
        branches = [self._branches(field) for field in fields]
        graph = self._graph(branches, STEP_DEG)
        chosen = _quickest_branches(branches, graph.cost_s)
        moves = []
        for after in range(1, len(fields)):
            stop_if_cancelled(progress)
            moves.append(self._move(fields, chosen, after, graph))
            progress.report(after / (len(fields) - 1), "moves")
        return MovePlan(tuple(chosen), tuple(moves), self.speeds)

    def suggest_order(
        self, fields: Sequence[Field], first: int | None = None, progress: Progress | None = None
    ) -> Order:
        """Return an order that shortens the moves, starting with field `first` if one is given. Raises Cancelled.

        The quickest of all for up to 8 fields. Fields that cannot be reached come last, in their order.
        """
        progress = progress or Silent()
        branches = [self._branches(field) for field in fields]
        reached = [k for k, found in enumerate(branches) if found]
        graph = self._graph(branches, STEP_DEG)

        def cost_s(before: tuple[int, int], after: tuple[int, int]) -> float:
            stop_if_cancelled(progress)
            return graph.cost_s(branches[reached[before[0]]][before[1]][-1], branches[reached[after[0]]][after[1]][0])

        start = reached.index(first) if first in reached else None
        found, exact = quickest_order([len(branches[k]) for k in reached], cost_s, start)
        order = tuple(reached[k] for k in found) + tuple(k for k in range(len(fields)) if k not in reached)
        return Order(order, self.plan([fields[k] for k in order], progress).seconds, exact)

    def _branches(self, field: Field) -> tuple[tuple[Point, ...], ...]:
        if self._scene.no_travel:
            return ()
        return branches_of(field, self._tolerances.gantry_travel_deg, self._tolerances.couch_travel_deg)

    def _graph(self, branches: Sequence[Sequence[tuple[Point, ...]]], step_deg: float) -> AngleGraph:
        stops = [end for field in branches for points in field for end in (points[0], points[-1])]
        return AngleGraph(self._proof, self._tolerances, self.speeds, stops, step_deg)

    def _move(
        self, fields: Sequence[Field], chosen: Sequence[tuple[Point, ...] | None], after: int, graph: AngleGraph
    ) -> Move:
        leaves, arrives = chosen[after - 1], chosen[after]
        if leaves is None or arrives is None:
            lost = fields[after - 1] if leaves is None else fields[after]
            reason = "; ".join(self._scene.no_travel) or f"field {lost.name!r} is outside the travel of gantry or couch"
            return Move(after - 1, after, (), math.nan, Verdict(State.NO_TRAVEL, reason=reason))
        start, stop = leaves[-1], arrives[0]
        way = graph.way(start, stop)
        if way.blocked:
            finer = AngleGraph(self._proof, self._tolerances, self.speeds, (start, stop), FINE_STEP_DEG)
            graph, way = finer, finer.way(start, stop)
        candidates = [way.points_deg]
        if way.blocked:
            # The plane's proof is coarse: what the net refuses may yet be proved along it or along a plain way.
            candidates += [(start, (stop[0], start[1]), stop), (start, (start[0], stop[1]), stop)]
        verdicts = {points: self._prover.verdict(points) for points in candidates}
        for points in sorted(verdicts, key=self._seconds):
            if verdicts[points].state is State.PERMITTED:
                return Move(after - 1, after, _distinct(points), self._seconds(points), verdicts[points])
        verdict = verdicts[way.points_deg]
        blame = graph.in_the_way(way) or _blocking(verdict)
        reason = f"no proved way from {fields[after - 1].name!r} to {fields[after].name!r}"
        if blame is not None:
            reason += "; in the way: " + " and ".join(self._scene.parts[part].label for part in blame)
        return Move(after - 1, after, candidates[0], math.nan, replace(verdict, reason=reason), blame)

    def _seconds(self, points: Sequence[Point]) -> float:
        return math.fsum(
            abs(other[0] - one[0]) / self.speeds.gantry + abs(other[1] - one[1]) / self.speeds.couch
            for one, other in pairwise(points)
        )


def _blocking(verdict: Verdict) -> tuple[int, int] | None:
    """Return the parts that a verdict names where a path first fails."""
    place = verdict.first_short
    return (place.machine_part, place.couch_part) if place is not None and place.machine_part >= 0 else None


def _distinct(points: Sequence[Point]) -> tuple[Point, ...]:
    """Return the corners without those that repeat the one before; one at least."""
    return tuple(point for k, point in enumerate(points) if k == 0 or point != points[k - 1])


def _shifted(angles_deg: Sequence[float], travel_deg: Interval) -> list[tuple[float, ...]]:
    """Return the angles with whole turns added, once for each number of turns that keeps all of them in the travel."""
    low, high = min(angles_deg), max(angles_deg)
    found = []
    for start in unwrapped_deg(low, travel_deg):
        shifted = tuple(min(start + (angle - low), travel_deg[1]) for angle in angles_deg)
        if start + (high - low) <= travel_deg[1] + 1e-9:
            found.append(shifted)
    return found


def _quickest_branches(
    branches: Sequence[Sequence[tuple[Point, ...]]], cost_s: Callable[[Point, Point], float]
) -> list[tuple[Point, ...] | None]:
    """Return for each field the branch on which all moves together are quickest; None for a field without any."""
    best: list[tuple[float, list[tuple[Point, ...] | None]]] = [(0.0, [])]
    for found in branches:
        if not found:
            least = min(best, key=lambda entry: entry[0])
            best = [(least[0], [*least[1], None])]
            continue
        best = [
            min(
                (
                    (cost + (cost_s(last, points[0]) if (last := _end(chosen)) is not None else 0.0), [*chosen, points])
                    for cost, chosen in best
                ),
                key=lambda entry: entry[0],
            )
            for points in found
        ]
    return min(best, key=lambda entry: entry[0])[1]


def _end(chosen: Sequence[tuple[Point, ...] | None]) -> Point | None:
    return chosen[-1][-1] if chosen and chosen[-1] is not None else None
