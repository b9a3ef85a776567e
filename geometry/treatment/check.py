"""A check of planned fields against a set-up: a verdict for each, the moves between them, a better order."""

import math
import os
from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass, replace
from itertools import pairwise, product
from typing import Final, TypeVar

from geometry.angle_graph import speeds_of
from geometry.assess import Options, tolerances_of
from geometry.field_order import quickest_order
from geometry.legs import Point
from geometry.moves import Field, branches_of
from geometry.paths import Verdict
from geometry.progress import Progress, Silent, stop_if_cancelled
from geometry.setup import Setup
from geometry.spans import Tolerances
from geometry.states import CODE_OF, State
from geometry.treatment.data import BetterOrder, CheckReport, FieldCheck, MoveCheck, PlanField
from geometry.treatment.moves import Mover, Steps, changes_between
from geometry.treatment.stages import Stages, seconds_of

Path = tuple[Point, ...]
Result = TypeVar("Result")

# What a change of table or accessory weighs in the search for an order, and a move without a proved way, s.
_CHANGE_S: Final = 300.0
_REFUSED_S: Final = 1e5
# An order is told when it saves a change, or so much, s.
_WORTH_TELLING_S: Final = 5.0
_ATTEMPTS: Final = 4
_MOST_THREADS: Final = 8


@dataclass(frozen=True, eq=False)
class Planned:
    """A field and the set-up that it asks for.

    `doubts`: why it cannot be permitted, whatever its path; `blocked`: why nothing can be said of it at all, empty if
    something can; `notes`: what differs from the set-up. In words.
    """

    field: PlanField
    setup: Setup
    doubts: tuple[str, ...] = ()
    blocked: str = ""
    notes: tuple[str, ...] = ()


def check_fields(
    setup: Setup,
    planned: Sequence[Planned],
    options: Options,
    progress: Progress | None = None,
    notes: tuple[str, ...] = (),
    held: CheckReport | None = None,
) -> CheckReport:
    """Return what is known of the fields in their order. ValueError for none at all; GeometryError, Cancelled.

    `held`: a report on the same fields, whose whole turns of gantry and couch are kept, so that the two can be compared
    field by field and move by move.
    """
    if not planned:
        raise ValueError("no fields; allowed: 1 or more")
    return _Check(setup, planned, options, progress or Silent(), held).report(notes)


class _Check:
    """One check; fields and moves run in threads, since the kernels let go of the interpreter."""

    def __init__(
        self,
        setup: Setup,
        planned: Sequence[Planned],
        options: Options,
        progress: Progress,
        held: CheckReport | None = None,
    ) -> None:
        self._setup = setup
        self._planned = planned
        self._progress = progress
        self._tolerances = tolerances_of(setup.room, options)
        self._speeds = speeds_of(setup.room)
        self._branches = [_branches(one.field, self._tolerances) for one in planned]
        if held is not None:
            chosen = [field.points_deg for field in held.fields]
            self._branches = [
                tuple(path for path in paths if path == points)
                for paths, points in zip(self._branches, chosen, strict=True)
            ]
        stops = [end for paths in self._branches for path in paths for end in (path[0], path[-1])]
        self._quiet = _Quiet(progress)
        self._stages = Stages(options, stops)
        self._mover = Mover(self._stages, self._quiet)
        self._known: dict[tuple[int, Path, int, Path], MoveCheck] = {}

    def report(self, notes: tuple[str, ...]) -> CheckReport:
        """Return all of it."""
        count = len(self._planned)
        scene = self._stages.of(self._setup).scene
        for one in self._planned:
            stop_if_cancelled(self._progress)
            self._stages.of(one.setup)
        self._evaluate(list(pairwise(range(count))), 0.0, 0.4, "moves between fields")
        chosen, moves = self._in_order(range(count))
        fields = self._run(lambda k: self._field(k, chosen[k]), range(count), 0.4, 0.9, "fields")
        # Where a field cannot be treated, no order of them can.
        free = all(field.state is State.PERMITTED for field in fields)
        better = self._better(moves) if free else None
        self._progress.report(1.0, "fields")
        return CheckReport(
            self._setup, scene, self._stages.options, tuple(fields), tuple(moves), self._speeds, better, notes
        )

    def _field(self, k: int, path: Path | None) -> FieldCheck:
        one = self._planned[k]
        stage = self._stages.of(one.setup)
        points = path or _nearest_turns(one.field.points_deg, self._tolerances)
        seconds = seconds_of(points, self._speeds.gantry, self._speeds.couch, together=True)
        if one.blocked:
            verdict = Verdict(State.UNPROVED, reason=one.blocked)
            return FieldCheck(one.field, stage.scene, points, verdict, None, one.notes, seconds)
        verdict = stage.verdict(points, self._quiet)
        within = None
        if verdict.state is State.UNPROVED:
            places = [place for place in (verdict.first_short, verdict.nearest) if place is not None]
            within = stage.worst_within(places) if places else None
        return FieldCheck(one.field, stage.scene, points, _doubted(verdict, one.doubts), within, one.notes, seconds)

    def _evaluate(self, pairs: Sequence[tuple[int, int]], low: float, high: float, message: str) -> None:
        """Find the moves between pairs of fields, on every branch, unless they are known."""
        wanted = [
            (before, leaves, after, arrives)
            for before, after in pairs
            for leaves, arrives in product(self._branches[before], self._branches[after])
            if (before, leaves, after, arrives) not in self._known
        ]
        self._run(self._learn, wanted, low, high, message)

    def _learn(self, key: tuple[int, Path, int, Path]) -> None:
        before, leaves, after, arrives = key
        one, other = self._planned[before], self._planned[after]
        blocked = one.blocked or other.blocked
        if blocked:
            self._known[key] = MoveCheck(before, after, (), State.UNPROVED, blocked)
            return
        found = self._mover.between(one.setup, other.setup, leaves[-1], arrives[0])
        doubted = [planned.field.name for planned in (one, other) if planned.doubts]
        self._known[key] = _move(before, after, found, doubted)

    def _in_order(self, order: Sequence[int]) -> tuple[dict[int, Path | None], list[MoveCheck]]:
        """Return each field's branch and the moves of an order whose pairs are evaluated, the best all together."""
        best: list[tuple[float, list[Path | None], list[MoveCheck]]] = [(0.0, [], [])]
        for at, field in enumerate(order):
            options: Sequence[Path | None] = self._branches[field] or (None,)
            best = [
                min((self._extended(entry, order, at, path) for entry in best), key=lambda entry: entry[0])
                for path in options
            ]
        _, paths, moves = min(best, key=lambda entry: entry[0])
        return dict(zip(order, paths, strict=True)), moves

    def _extended(
        self,
        entry: tuple[float, list[Path | None], list[MoveCheck]],
        order: Sequence[int],
        at: int,
        path: Path | None,
    ) -> tuple[float, list[Path | None], list[MoveCheck]]:
        cost, paths, moves = entry
        if at == 0:
            return cost, [path], []
        before, after = order[at - 1], order[at]
        leaves = paths[-1]
        if leaves is None or path is None:
            lost = self._planned[before if leaves is None else after].field.name
            reason = f"field '{lost}' is outside the travel of gantry or couch"
            move = MoveCheck(before, after, (), State.NO_TRAVEL, reason)
        else:
            move = self._known[before, leaves, after, path]
        return cost + _cost_s(move), [*paths, path], [*moves, move]

    def _better(self, moves: Sequence[MoveCheck]) -> BetterOrder | None:
        """Return a better order of the treatment fields, after the set-up fields that lead the plan; all permitted."""
        planned = self._planned
        lead = next((k for k, one in enumerate(planned) if not one.field.is_setup), len(planned))
        movable = range(lead, len(planned))
        if len(movable) < 2 or any(planned[k].field.is_setup for k in movable):
            return None
        visits = [*([lead - 1] if lead else []), *movable]
        refused: set[tuple[int, int]] = set()
        for attempt in range(_ATTEMPTS):
            found, exact = self._quickest(visits, refused, held=lead > 0)
            order = [*range(lead), *(found[1:] if lead else found)]
            if order == list(range(len(planned))):
                return None
            share = 0.9 + 0.1 * attempt / _ATTEMPTS
            self._evaluate(list(pairwise(order)), share, share + 0.1 / _ATTEMPTS, "a better order")
            chosen, other = self._in_order(order)
            failed = {(move.before, move.after) for move in other if move.state is not State.PERMITTED}
            if failed:
                refused |= failed
                continue
            paths = tuple(path for k in order if (path := chosen[k]) is not None)
            plain = all(len(points) <= 3 for move in other for points in move.turns)
            return _told(BetterOrder(tuple(order), tuple(other), paths, 0.0, 0, exact and plain and not attempt), moves)
        return None

    def _quickest(self, visits: Sequence[int], refused: set[tuple[int, int]], *, held: bool) -> tuple[list[int], bool]:
        """Return the order of visits that would be quickest if every plain way were free but those refused."""
        ends = [self._branches[k] for k in visits]

        def cost_s(one: tuple[int, int], other: tuple[int, int]) -> float:
            before, after = visits[one[0]], visits[other[0]]
            way = ends[one[0]][one[1]][-1], ends[other[0]][other[1]][0]
            cost = seconds_of(way, self._speeds.gantry, self._speeds.couch, together=False)
            if changes_between(self._planned[before].setup, self._planned[after].setup):
                cost += _CHANGE_S
            return cost + (_REFUSED_S if (before, after) in refused else 0.0)

        found, exact = quickest_order([len(paths) for paths in ends], cost_s, 0 if held else None)
        return [visits[k] for k in found], exact

    def _run(
        self,
        work: Callable[..., Result],
        items: Sequence[object],
        low: float,
        high: float,
        message: str,
    ) -> list[Result]:
        """Run work on all items in threads, with progress from one fraction to another. Raises Cancelled."""
        stop_if_cancelled(self._progress)
        found = []
        with ThreadPoolExecutor(min(os.cpu_count() or 1, _MOST_THREADS)) as pool:
            for done, result in enumerate(pool.map(work, items), start=1):
                found.append(result)
                if not self._progress.cancelled():
                    self._progress.report(low + (high - low) * done / len(items), message)
        return found


class _Quiet:
    """Passes on the wish to stop, and keeps the parts' fractions to itself."""

    def __init__(self, progress: Progress) -> None:
        self._progress = progress

    def report(self, fraction: float, message: str) -> None:
        """Keep it."""

    def cancelled(self) -> bool:
        """Tell whether the user wants the work stopped."""
        return self._progress.cancelled()


def _branches(field: PlanField, tolerances: Tolerances) -> tuple[Path, ...]:
    return branches_of(Field(field.name, field.points_deg), tolerances.gantry_travel_deg, tolerances.couch_travel_deg)


def _nearest_turns(points: Path, tolerances: Tolerances) -> Path:
    """Return a path that fits no travel with the whole turns that bring its middle nearest to the travel's."""
    shifts = []
    for axis, travel in enumerate((tolerances.gantry_travel_deg, tolerances.couch_travel_deg)):
        angles = [point[axis] for point in points]
        away = 0.5 * (min(angles) + max(angles)) - 0.5 * (travel[0] + travel[1])
        shifts.append(-360.0 * round(away / 360.0))
    return tuple((gantry + shifts[0], couch + shifts[1]) for gantry, couch in points)


def _doubted(verdict: Verdict, doubts: tuple[str, ...]) -> Verdict:
    """Return the verdict of a field that is in doubt: never permitted."""
    if not doubts:
        return verdict
    reason = "; ".join((*([verdict.reason] if verdict.reason else []), *doubts))
    if verdict.state is State.PERMITTED:
        return replace(verdict, state=State.UNPROVED, least=None, tightest=None, reason=reason)
    return replace(verdict, reason=reason)


def _move(before: int, after: int, found: Steps, doubted: Sequence[str]) -> MoveCheck:
    state, reason, seconds = found.state, found.reason, math.nan
    if state is State.PERMITTED and doubted:
        state = State.UNPROVED
        reason = f"in doubt: field {' and field '.join(repr(name) for name in doubted)}"
    if state is State.PERMITTED:
        seconds = math.fsum(step.seconds for step in found.steps)
    return MoveCheck(before, after, found.steps, state, reason, found.in_the_way, seconds)


def _turn_s(moves: Sequence[MoveCheck]) -> float:
    return math.fsum(step.seconds for move in moves for step in move.steps if step.kind == "turn")


def _changes(moves: Sequence[MoveCheck]) -> int:
    return sum(any(step.kind in ("table", "fit") for step in move.steps) for move in moves)


def _cost_s(move: MoveCheck) -> float:
    return _turn_s([move]) if move.state is State.PERMITTED else _REFUSED_S * (1 + len(CODE_OF) - CODE_OF[move.state])


def _told(better: BetterOrder, moves: Sequence[MoveCheck]) -> BetterOrder | None:
    """Return the order with what it saves against the plan's own, None where that is not worth telling."""
    changes = _changes(moves) - _changes(better.moves)
    if not all(move.state is State.PERMITTED for move in moves):
        return replace(better, seconds_saved=math.nan, changes_saved=max(changes, 0))
    saved = _turn_s(moves) - _turn_s(better.moves)
    if changes < 0 or (changes == 0 and saved < _WORTH_TELLING_S):
        return None
    return replace(better, seconds_saved=saved, changes_saved=changes)
