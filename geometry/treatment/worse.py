"""The worse of two reports on one plan, checked with the table in two places."""

import math
from dataclasses import replace
from typing import Final

from geometry.states import CODE_OF
from geometry.treatment.data import BetterOrder, CheckReport, FieldCheck, MoveCheck
from geometry.treatment.stages import state_of

# Table tops nearer to each other than this are in one place, mm.
_SAME_MM: Final = 0.05


def worse_of(one: CheckReport, other: CheckReport) -> CheckReport:
    """Return the worse of two reports on the same fields, field by field and move by move.

    The other must hold the whole turns of the one, see `check_fields`: ValueError otherwise. Each row is of one of the
    two, and says of which where that matters. A better order must be one in both.
    """
    if any(a.points_deg != b.points_deg for a, b in zip(one.fields, other.fields, strict=True)):
        raise ValueError("the two reports run the fields over different turns; allowed: the same ones")
    better = None
    if one.better is not None and other.better is not None and _is_same_order(one.better, other.better):
        moves = tuple(_worse_move(a, b) for a, b in zip(one.better.moves, other.better.moves, strict=True))
        better = replace(one.better, moves=moves)
    fields = tuple(_worse_field(a, b) for a, b in zip(one.fields, other.fields, strict=True))
    worse = [_worse_move(a, b) for a, b in zip(one.moves, other.moves, strict=True)]
    return replace(
        one,
        fields=fields,
        moves=tuple(
            move if fields[move.before].table_as or fields[move.after].table_as else replace(move, table_as="")
            for move in worse
        ),
        better=better,
        notes=tuple(dict.fromkeys((*one.notes, *other.notes))),
    )


def told_as(report: CheckReport, table_as: str) -> CheckReport:
    """Return a report whose fields and moves say with which table they were checked, in words."""
    better = report.better
    if better is not None:
        better = replace(better, moves=tuple(replace(move, table_as=table_as) for move in better.moves))
    return replace(
        report,
        fields=tuple(replace(field, table_as=table_as) for field in report.fields),
        moves=tuple(replace(move, table_as=table_as) for move in report.moves),
        better=better,
    )


def _worse_field(one: FieldCheck, other: FieldCheck) -> FieldCheck:
    worse = min(one, other, key=lambda field: (CODE_OF[field.state], _room_mm(field)))
    notes = (*one.notes, *other.notes)
    apart = max(abs(a - b) for a, b in zip(one.scene.couch.T_mm, other.scene.couch.T_mm, strict=True))
    return replace(
        worse,
        notes=tuple(dict.fromkeys(notes)),
        # Where both are of one state of the room, which of them is told does not matter.
        table_as="" if state_of(one.scene.setup) == state_of(other.scene.setup) else worse.table_as,
        table_settled=bool(one.table_settled and other.table_settled and apart <= _SAME_MM),
    )


def _room_mm(field: FieldCheck) -> float:
    """Return how much room a field has, to compare two of the same state; a bound where there is one."""
    verdict = field.verdict
    place = verdict.tightest or verdict.nearest
    return -math.inf if place is None or math.isnan(place.slack_mm) else place.slack_mm


def _worse_move(one: MoveCheck, other: MoveCheck) -> MoveCheck:
    return min(one, other, key=lambda move: (CODE_OF[move.state], move.least_clearance_mm))


def _is_same_order(one: BetterOrder, other: BetterOrder) -> bool:
    return one.fields == other.fields and one.points_deg == other.points_deg
