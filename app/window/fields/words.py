"""What the list of fields says: fields, moves and the whole plan, in words. No Qt.

Clearances are rounded down and what is missing is rounded up, as on the dry-run sheet.
"""

import math
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final, Literal

from app.files.readings import OwnScales, clearance_text, own_scales, required_text, rounded_up
from app.plan.dry_run_words import Which, angle_text, leg_texts, turn_of
from geometry.legs import Point
from geometry.machine import Readout
from geometry.paths import Approach
from geometry.scene import Scene
from geometry.states import STATES, State
from geometry.treatment.data import BetterOrder, CheckReport, FieldCheck, MoveCheck, MoveStep, part_labels

# Kept with the number before them.
_UNITS: Final = ("mm", "s;", "deg")

STATE_WORDS: Final = {
    State.NO_TRAVEL: "No travel",
    State.CONTACT: "Contact",
    State.SHORT: "Short",
    State.UNPROVED: "Unproved",
    State.PERMITTED: "Permitted",
}


@dataclass(frozen=True)
class RowWords:
    """A row of the list: `place` among the report's fields, or among the moves of the order that is shown."""

    kind: Literal["field", "move"]
    place: int
    title: str
    state: State
    lines: tuple[str, ...]
    spoken: str


def summary_words(report: CheckReport) -> str:
    """Return how many fields and moves are permitted, and what the others are."""
    if not report.fields:
        return "The plan has no fields"
    fields = _counted([check.state for check in report.fields], "field")
    refused = sum(move.state is not State.PERMITTED for move in report.moves)
    if not report.moves:
        return fields
    if not refused:
        return f"{fields}; {_all(len(report.moves), 'move')} permitted"
    return f"{fields}; {refused} of {len(report.moves)} moves not permitted"


def better_words(better: BetterOrder, report: CheckReport) -> str:
    """Return what the better order gains."""
    gains = []
    if not math.isnan(better.seconds_saved) and better.seconds_saved >= 0.5:
        gains.append(f"{better.seconds_saved:.0f} s less")
    if better.changes_saved > 0:
        gains.append("1 change fewer" if better.changes_saved == 1 else f"{better.changes_saved} changes fewer")
    if any(move.state is not State.PERMITTED for move in report.moves):
        gains.append("every move permitted")
    return f"Better order: {', '.join(gains)}" if gains else "Better order"


def rows_of(report: CheckReport, *, better: bool) -> tuple[RowWords, ...]:
    """Return the rows of the list: fields with the moves between them, in the plan's order or in the better one."""
    scales = own_scales(report.setup.room)
    other = report.better if better else None
    order = other.fields if other is not None else range(len(report.fields))
    moves = other.moves if other is not None else report.moves
    rows: list[RowWords] = []
    for at, field in enumerate(order):
        rows.append(field_row(field, report.fields[field], scales))
        if at < len(moves):
            rows.append(move_row(at, moves[at]))
    return tuple(rows)


def field_row(place: int, check: FieldCheck, scales: OwnScales) -> RowWords:
    """Return a field's row."""
    title = f"{place + 1}  {check.field.name}"
    if check.field.is_setup:
        title += "  (set-up field)"
    angles, own = angle_lines(check.points_deg, scales)
    lines = (angles, *((own,) if own else ()), found_words(check))
    spoken = f"Field {title.replace('  ', ' ')}: {check.state}. {'. '.join(lines)}"
    return RowWords("field", place, title, check.state, lines, spoken)


def move_row(place: int, move: MoveCheck) -> RowWords:
    """Return a move's row."""
    steps = step_words(move, OwnScales(None, None))
    title = ", then ".join(steps) or (f"To field {move.after + 1}" if move.reason else "Nothing moves")
    found = move_words(move)
    spoken = f"Move to field {move.after + 1}: {move.state}. {title}. {found}"
    return RowWords("move", place, sentence(title), move.state, (found,) if found else (), spoken)


def step_words(move: MoveCheck, scales: OwnScales) -> tuple[str, ...]:
    """Return what is done in a move, step by step."""
    words: list[str] = []
    for step in move.steps:
        words += leg_texts(step.points_deg, scales) if step.kind == "turn" else (step.text,)
    return tuple(words)


def angle_lines(points_deg: Sequence[Point], scales: OwnScales) -> tuple[str, str]:
    """Return a field's angles in IEC 61217 and, where that differs, as the machine shows them."""
    iec, own = [], []
    axes: tuple[tuple[Which, Readout | None], ...] = (("gantry", scales.gantry), ("couch", scales.couch))
    for k, (which, scale) in enumerate(axes):
        turn = turn_of([point[k] for point in points_deg], which, scale)
        sense = f" {turn.sense}" if turn.sense and which == "gantry" else ""
        iec.append(f"{which} {turn.iec}{sense}")
        own.append(f"{which} {turn.own or turn.iec}")
    shown = ", ".join(own)
    line = ", ".join(iec)
    return line[0].upper() + line[1:], "" if scales.gantry is None and scales.couch is None else f"Reads {shown}"


def found_words(check: FieldCheck) -> str:
    """Return in a line what was found of a field."""
    place, state = check.place, check.state
    if state is State.PERMITTED:
        least = check.verdict.least
        bound = clearance_text(check.verdict.least_clearance_mm)
        names = part_names(check.scene, least)
        return sentence(f"at least {bound}{', ' + names if names else ''}") if least is not None else "Nothing near"
    if state is State.NO_TRAVEL or place is None:
        return sentence(check.verdict.reason or str(state))
    where, names = angles_words(place), part_names(check.scene, place)
    about = f" at {where}{': ' + names if names else ''}"
    if state is State.CONTACT:
        return sentence(f"contact{about}")
    if state is State.UNPROVED and check.verdict.reason:
        return sentence(check.verdict.reason)
    missing = "" if math.isnan(check.shortfall_mm) else f", {missing_words(check.shortfall_mm)}"
    if state is State.UNPROVED:
        return sentence(f"not proved within the tolerances{missing}{about}")
    return sentence(f"{clearance_text(place.clearance_mm)}{missing}{about}")


def place_words(check: FieldCheck) -> str:
    """Return the exact place to look at, with its clearance and what must remain; empty where none is known."""
    place = check.place
    if place is None:
        return ""
    labels = part_labels(check.scene, place)
    shown = "contact" if place.clearance_mm == 0.0 else clearance_text(place.clearance_mm)
    text = f"{shown} at {angles_words(place)}"
    if labels is None:
        return text
    required = check.scene.required_mm(check.scene.parts[place.machine_part], check.scene.parts[place.couch_part])
    return f"{text}: {labels[0]} and {labels[1]}, {required_text(required)} required"


def missing_words(shortfall_mm: float) -> str:
    """Return by how much something is short."""
    return f"{max(rounded_up(shortfall_mm), 0.1):.1f} mm short"


def angles_words(place: Approach) -> str:
    """Return the angles of a place, IEC 61217."""
    return f"gantry {angle_text(place.gantry_deg, 1)}, couch {angle_text(place.couch_deg, 1)}"


def part_names(scene: Scene, place: Approach | None) -> str:
    """Return the names of the two parts at a place, without their sides; empty for none."""
    if place is None or place.machine_part < 0 or place.couch_part < 0:
        return ""
    return f"{scene.parts[place.machine_part].name} – {scene.parts[place.couch_part].name}"


def seconds_words(seconds: float) -> str:
    """Return a time as minutes and seconds, "?" for none."""
    if not math.isfinite(seconds):
        return "?"
    whole = int(seconds + 1e-9)
    return f"{whole // 60}:{whole % 60:02d}"


def move_words(move: MoveCheck) -> str:
    """Return in a line what was found of a move; empty for nothing to say."""
    if move.state is not State.PERMITTED:
        return sentence(move.reason or str(move.state))
    time = "" if math.isnan(move.seconds) or not move.steps else f"{move.seconds:.0f} s"
    found = [(one, step) for step in move.steps if (one := _least_of(step)) is not None]
    if not found:
        return time
    least, step = min(found, key=lambda entry: entry[0].clearance_mm)
    bound, names = clearance_text(least.clearance_mm), part_names(step.scene, least)
    said = f"At least {bound}{', ' + names if names else ''}" if math.isfinite(least.clearance_mm) else "Nothing near"
    return sentence(f"{said}; {time}" if time else said)


def _least_of(step: MoveStep) -> Approach | None:
    return step.verdict.least if step.verdict is not None else None


def _counted(states: Sequence[State], noun: str) -> str:
    """Return how many are permitted, and the others by their state, the worst first."""
    count = Counter(states)
    if count[State.PERMITTED] == len(states):
        return f"{_all(len(states), noun)} permitted".capitalize()
    others = [f"{count[state]} {state}" for state in STATES if state is not State.PERMITTED and count[state]]
    return f"{count[State.PERMITTED]} of {len(states)} {noun}{'s' * (len(states) > 1)} permitted, {', '.join(others)}"


def _all(number: int, noun: str) -> str:
    return f"the {noun}" if number == 1 else f"all {number} {noun}s"


def sentence(text: str) -> str:
    """Return words with a capital first letter, and numbers that stay with their units where a line is broken."""
    for unit in _UNITS:
        text = text.replace(f" {unit}", f"\u00a0{unit}")
    return text[:1].upper() + text[1:]
