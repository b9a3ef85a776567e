"""What people take to the machine for a dry run: from a report on a plan to the rows of a sheet. No drawing, no files.

Every figure is the report's own, but for the clearance at each stop, which is exact there. Clearances are rounded down
and required ones up, so that paper never claims more than was computed.
"""

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import Final

from app.files.readings import OwnScales, clearance_text, own_scales, reading_deg, required_text
from app.files.setup_lines import setup_lines
from app.plan.dry_run_places import Place, is_same, place_at, place_of, stop_before
from app.plan.dry_run_words import AXES, Turn, Which, leg_texts, turn_of
from geometry.paths import Approach, Verdict
from geometry.scene import Scene
from geometry.states import State
from geometry.treatment.data import CheckReport, FieldCheck, MoveCheck, MoveStep, part_labels

NOT_PERMITTED: Final = "NOT PERMITTED"
DO_NOT_RUN: Final = "Do not run, unless your local rules say how this is done."
NO_INSTRUCTION: Final = "in these figures, no instruction: plan and set-up differ, settle first which counts"
# Lines of the set-up's inputs that nobody can check in the room.
_NOT_IN_THE_ROOM: Final = ("Patient envelope", "Gantry travel", "Couch travel", "Greatest excess of a piece")
_SAME_MM: Final = 0.05


@dataclass(frozen=True)
class FieldRow:
    """A field as the sheet has it.

    `kind`: "arc" or "static beam"; `state`: in words, see `state_words`; `turning`: the axes that turn during the
    field. `least`: the clearance to expect, in words: the proved bound of a permitted field, otherwise the exact
    clearance at `tightest`. `required`: of that pair. `parts`: the pair. `tightest`: the exact place to look at on the
    field's own path, `look` says what it is; `first`: for contact and short the first place on the path that is short,
    None where that is `tightest` itself; `stop`: where to enter the room and look before it, None where there is
    none (not permitted) or where it is `tightest` itself. `remarks`: what is particular to it, in words.
    """

    number: int
    name: str
    is_setup: bool
    kind: str
    permitted: bool
    state: str
    gantry: Turn
    couch: Turn
    turning: tuple[Which, ...]
    collimator: str
    least: str
    required: str
    parts: tuple[str, str] | None
    look: str
    tightest: Place | None
    first: Place | None
    stop: Place | None
    remarks: tuple[str, ...]


@dataclass(frozen=True)
class MoveRow:
    """A move as the sheet has it.

    `steps`: what to drive, in that order, none for a move that is not permitted: nobody is to drive it. `least`: the
    proved bound; `parts` come that near. `tightest`: the exact nearest approach of that step, None for not permitted;
    `end`: the number of the field at whose end or start that is, None for a place on the way.
    """

    before: int
    after: int
    permitted: bool
    state: str
    steps: tuple[str, ...]
    least: str
    required: str
    parts: tuple[str, str] | None
    reason: str
    tightest: Place | None
    end: int | None


@dataclass(frozen=True)
class DryRun:
    """Everything on the sheet but pictures. `checks`: what to check in the room, (label, text)."""

    verdict: str
    permitted: bool
    checks: tuple[tuple[str, str], ...]
    fields: tuple[FieldRow, ...]
    moves: tuple[MoveRow, ...]
    remarks: tuple[str, ...]
    scales: OwnScales


def dry_run(report: CheckReport) -> DryRun:
    """Return a report's rows."""
    scales = own_scales(report.setup.room)
    return DryRun(
        verdict=_verdict(report),
        permitted=report.permitted,
        checks=tuple(_checks(report.scene)),
        fields=tuple(_field(number, check, report.scene, scales) for number, check in enumerate(report.fields, 1)),
        moves=tuple(_move(move, report, scales) for move in report.moves),
        remarks=tuple(_remarks(report)),
        scales=scales,
    )


def state_words(state: State) -> str:
    """Return a state so that nobody overlooks one that is not permitted."""
    return "permitted" if state is State.PERMITTED else f"{NOT_PERMITTED}: {state.value}"


def _checks(scene: Scene) -> Iterator[tuple[str, str]]:
    couch = scene.setup.room.couch
    fixed = {
        f"Couch {name}"
        for name, axis in (("pitch", couch.pitch), ("roll", couch.roll), ("eccentric", couch.eccentric))
        if axis.low == axis.high
    }
    for name, text in setup_lines(scene):
        if name not in fixed and name not in _NOT_IN_THE_ROOM:
            yield name, text


def _verdict(report: CheckReport) -> str:
    if report.permitted:
        return "All fields and moves permitted"
    fields = sum(check.state is not State.PERMITTED for check in report.fields)
    moves = sum(move.state is not State.PERMITTED for move in report.moves)
    counts = [f"{count} of {of}" for count, of in ((fields, len(report.fields)), (moves, len(report.moves)))]
    return f"{NOT_PERMITTED}: {counts[0]} fields, {counts[1]} moves"


def _field(number: int, check: FieldCheck, given: Scene, scales: OwnScales) -> FieldRow:
    permitted = check.state is State.PERMITTED
    place = check.place
    tightest = place_of(check.scene, place) if place is not None else None
    shown = check.verdict.least if permitted else place
    parts, required_mm = _pair(check.scene, shown)
    least_mm = check.verdict.least_clearance_mm if permitted else (shown.clearance_mm if shown else math.nan)
    collimator = check.scene.setup.collimator_deg
    return FieldRow(
        number=number,
        name=check.field.name,
        is_setup=check.field.is_setup,
        kind="arc" if check.field.is_arc else "static beam",
        permitted=permitted,
        state=state_words(check.state),
        gantry=turn_of([point[0] for point in check.points_deg], "gantry", scales.gantry),
        couch=turn_of([point[1] for point in check.points_deg], "couch", scales.couch),
        turning=tuple(name for k, name in enumerate(AXES) if len({point[k] for point in check.points_deg}) > 1),
        collimator="any angle" if collimator is None else f"{reading_deg(round(collimator, 2)):g}°",
        least=_bound_text(least_mm, is_bound=permitted),
        required=required_text(required_mm),
        parts=parts,
        look=_look(check),
        tightest=tightest,
        first=_first(check),
        stop=_stop(check, place) if permitted else None,
        remarks=tuple(_field_remarks(check, given)),
    )


def _pair(scene: Scene, place: Approach | None) -> tuple[tuple[str, str] | None, float | None]:
    """Return the labels of the parts at a place, and what must remain between them."""
    labels = None if place is None else part_labels(scene, place)
    if place is None or labels is None:
        return None, None
    return labels, scene.required_mm(scene.parts[place.machine_part], scene.parts[place.couch_part])


def _bound_text(clearance_mm: float, *, is_bound: bool) -> str:
    text = clearance_text(clearance_mm)
    return f"≥ {text}" if is_bound and math.isfinite(clearance_mm) else text


def _look(check: FieldCheck) -> str:
    """Return what the place to look at is; a field that is in doubt fails nowhere in particular."""
    if check.state is State.PERMITTED:
        return "Tightest at"
    if check.state is State.CONTACT:
        return "Contact at" if _first(check) is None else "Contact (nearest approach) at"
    if check.state is State.SHORT:
        return "Short at" if _first(check) is None else "Shortest at"
    return "Nearest at" if check.verdict.reason else "Not proved at"


def _first(check: FieldCheck) -> Place | None:
    """Return where a field is first short, exact, unless that is the place to look at anyhow."""
    first, place = check.verdict.first_short, check.place
    if check.state not in (State.CONTACT, State.SHORT) or first is None:
        return None
    ends = None if place is None else (place.gantry_deg, place.couch_deg)
    if ends is not None and is_same((first.gantry_deg, first.couch_deg), ends):
        return None
    return place_of(check.scene, first)


def _stop(check: FieldCheck, place: Approach | None) -> Place | None:
    if place is None or not math.isfinite(place.clearance_mm):
        return None
    at = stop_before(check.points_deg, place)
    return None if is_same(at, (place.gantry_deg, place.couch_deg)) else place_at(check.scene, at)


def _field_remarks(check: FieldCheck, given: Scene) -> list[str]:
    """Return what differs from the set-up's values on the sheet, and why a field is not permitted."""
    words = [*_why_not(check), *_other_table(check, given)]
    setup, table, held = check.scene.setup, check.scene.couch, given.couch
    if (table.pitch_deg, table.roll_deg, table.eccentric_deg) != (held.pitch_deg, held.roll_deg, held.eccentric_deg):
        words.append("tilt: " + _values(check.scene, ("Couch pitch", "Couch roll", "Couch eccentric")))
    if setup.fitted != given.setup.fitted:
        words.append(f"fitted: {', '.join(setup.fitted) or 'none'}")
    if setup.arm_positions != given.setup.arm_positions:
        words.append("arms: " + _values(check.scene, [f"Arm {arm.name}" for arm in setup.room.arms]))
    least, tightest = check.verdict.least, check.verdict.tightest
    if least is not None and tightest is not None and _pair(check.scene, least)[0] != _pair(check.scene, tightest)[0]:
        pair, required_mm = _pair(check.scene, tightest)
        if pair is not None:
            bound = _bound_text(tightest.clearance_mm, is_bound=True)
            words.append(f"nearest to its limit: {pair[0]} and {pair[1]}, {bound} of {required_text(required_mm)}")
    return words


def _why_not(check: FieldCheck) -> Iterator[str]:
    """Yield why a field is not permitted, and by how much it is short."""
    if check.verdict.reason:
        yield check.verdict.reason
    if check.state is not State.CONTACT and not math.isnan(check.shortfall_mm):
        yield f"{required_text(check.shortfall_mm)} short of what is required"
    elif check.state is State.UNPROVED and not check.verdict.reason:
        yield "not proved within the readouts' tolerances"


def _other_table(check: FieldCheck, given: Scene) -> Iterator[str]:
    """Yield where the table is for a field, no instruction where plan and set-up differ."""
    table, held = check.scene.couch, given.couch
    if max(abs(one - other) for one, other in zip(table.T_mm, held.T_mm, strict=True)) > _SAME_MM:
        where = "table at " + _values(check.scene, ("Couch lateral", "Couch longitudinal", "Couch vertical"))
        yield where if check.table_settled else f"{where} {NO_INSTRUCTION}"
    elif not check.table_settled:
        yield f"table as on page 1 {NO_INSTRUCTION}"
    if check.table_as:
        yield f"figures for {check.table_as}"


def _values(scene: Scene, labels: Sequence[str]) -> str:
    """Return some of a set-up's lines, in short."""
    return ", ".join(
        f"{label.removeprefix('Couch ').removeprefix('Arm ')} {text}"
        for label, text in setup_lines(scene)
        if label in labels
    )


def _move(move: MoveCheck, report: CheckReport, scales: OwnScales) -> MoveRow:
    settled = all(report.fields[k].table_settled for k in (move.before, move.after))
    permitted = move.state is State.PERMITTED
    table_as = f"figures for {move.table_as}" if move.table_as and move.steps else ""
    found = [(step, *known) for step in move.steps if (known := _bound(step)) is not None]
    least_mm, parts, required_mm, tightest = math.nan, None, None, None
    if found:
        step, least_mm, place = min(found, key=lambda entry: entry[1])
        parts, required_mm = _pair(step.scene, place)
        if permitted and step.verdict is not None and step.verdict.nearest is not None:
            tightest = place_of(step.scene, step.verdict.nearest)
    elif permitted:
        least_mm = math.inf
    return MoveRow(
        before=move.before + 1,
        after=move.after + 1,
        permitted=permitted,
        state=state_words(move.state),
        steps=tuple(_steps(move, scales, settled=settled)) if permitted else (),
        least=_bound_text(least_mm, is_bound=permitted),
        required=required_text(required_mm),
        parts=move.in_the_way or parts,
        reason="; ".join(words for words in (move.reason, table_as) if words),
        tightest=tightest,
        end=None if tightest is None else _end(move, tightest),
    )


def _end(move: MoveCheck, place: Place) -> int | None:
    """Return the number of the field in whose pose a move is tightest, None for neither."""
    at = (place.gantry_deg, place.couch_deg)
    if is_same(at, move.steps[0].points_deg[0]):
        return move.before + 1
    return move.after + 1 if is_same(at, move.steps[-1].points_deg[-1]) else None


def _bound(step: MoveStep) -> tuple[float, Approach | None] | None:
    """Return a step's proved clearance, mm, and whose it is or, not permitted, the exact one where it fails."""
    found = step.verdict or step.table
    if found is not None and step.state is not State.PERMITTED:
        return None if found.first_short is None else (found.first_short.clearance_mm, found.first_short)
    if isinstance(found, Verdict):
        return found.least_clearance_mm, found.least
    return None if found is None else (found.least_clearance_mm, None)


def _steps(move: MoveCheck, scales: OwnScales, *, settled: bool) -> Iterator[str]:
    """Yield what to do; a table's shift only where plan and set-up agree on it."""
    for step in move.steps:
        if step.kind == "turn":
            yield from leg_texts(step.points_deg, scales)
        elif step.kind == "table" and not settled:
            yield "table to its place for the next field, once it is settled whether plan or set-up counts"
        else:
            yield step.text.replace(" deg", "°")


def _remarks(report: CheckReport) -> list[str]:
    lines = list(report.notes)
    told: dict[str, list[str]] = {}
    for number, check in enumerate(report.fields, start=1):
        for note in check.notes:
            told.setdefault(note, []).append(str(number))
    lines += [f"Field {', '.join(numbers)}: {note}." for note, numbers in told.items()]
    if report.better is not None:
        order = ", ".join(str(k + 1) for k in report.better.fields)
        lines.append(f"A better order of the fields, not the one on this sheet: {order}.")
    return lines
