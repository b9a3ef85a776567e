"""The report on a plan as tables of text, for a terminal or a file of its own."""

import io
import math
import sys
from typing import Final, TextIO

from rich.console import Console
from rich.table import Table
from rich.text import Text

from app.files.provenance import Provenance
from app.files.readings import clearance_text, reading_deg
from geometry.paths import Approach
from geometry.states import State
from geometry.treatment.data import CheckReport, FieldCheck, MoveCheck

# Where no terminal tells how wide it is.
_WIDTH: Final = 140
_NARROWEST: Final = 72


def show_report(report: CheckReport, provenance: Provenance, stream: TextIO | None = None) -> None:
    """Print the report on `stream`, standard output unless given."""
    stream = sys.stdout if stream is None else stream
    on_terminal = stream.isatty()
    width = max(Console(file=stream).width, _NARROWEST) if on_terminal else _WIDTH
    buffer = io.StringIO()
    console = Console(file=buffer, width=width, force_terminal=on_terminal, highlight=False, markup=False, emoji=False)
    console.print(f"{provenance.setup}, {provenance.room}")
    for mark in provenance.marks:
        console.print(f"{mark}.")
    for table in (_fields(report), *([_moves(report)] if report.moves else [])):
        console.print()
        console.print(table)
    console.print()
    for line in _remarks(report):
        console.print(line)
    console.print(Text(_summary(report), style="bold"))
    # A field's name may hold letters that the stream cannot write.
    encoding = stream.encoding or "utf-8"
    stream.write(buffer.getvalue().encode(encoding, "replace").decode(encoding))


def _fields(report: CheckReport) -> Table:
    table = Table(box=None, pad_edge=False, padding=(0, 2, 0, 0))
    for name in ("", "field", "gantry", "couch", "collimator"):
        table.add_column(name, justify="right" if name in ("", "collimator") else "left")
    table.add_column("state")
    table.add_column("clearance mm", justify="right")
    table.add_column("where, between what")
    for number, check in enumerate(report.fields, start=1):
        name = check.field.name + (" (set-up)" if check.field.is_setup else "")
        collimator = check.scene.setup.collimator_deg
        table.add_row(
            str(number),
            Text(name),
            _turn([point[0] for point in check.points_deg]),
            _turn([point[1] for point in check.points_deg]),
            "any" if collimator is None else f"{reading_deg(collimator):g}",
            _state(check.state),
            _clearance(check),
            Text(_where(check)),
        )
    return table


def _moves(report: CheckReport) -> Table:
    table = Table(box=None, pad_edge=False, padding=(0, 2, 0, 0))
    for name in ("move", "state", "time", "how"):
        table.add_column(name, justify="right" if name == "time" else "left")
    for move in report.moves:
        table.add_row(
            f"{move.before + 1} to {move.after + 1}",
            _state(move.state),
            "" if math.isnan(move.seconds) else f"{move.seconds:.0f} s",
            Text(_how(move)),
        )
    return table


def _turn(angles_deg: list[float]) -> str:
    first, last = angles_deg[0], angles_deg[-1]
    if all(angle == first for angle in angles_deg):
        return f"{reading_deg(first):g}"
    sign = "" if last == first else f" ({last - first:+g})"
    return f"{reading_deg(first):g} to {reading_deg(last):g}{sign}"


def _state(state: State) -> Text:
    return Text(state.value, style="" if state is State.PERMITTED else "bold")


def _clearance(check: FieldCheck) -> str:
    """Return the proved bound, rounded down, or the exact clearance at the place to look at."""
    if check.state is State.PERMITTED:
        least = check.verdict.least_clearance_mm
        return clearance_text(least).removesuffix(" mm") if math.isfinite(least) else ""
    place = check.place
    return f"{place.clearance_mm:.1f}" if place is not None and math.isfinite(place.clearance_mm) else ""


def _where(check: FieldCheck) -> str:
    words = []
    verdict = check.verdict
    place = verdict.least if check.state is State.PERMITTED else check.place
    if place is not None:
        words.append(_place(check, place))
    if check.within is not None:
        words.append("not proved within the tolerances")
    if not math.isnan(check.shortfall_mm) and check.state is not State.CONTACT:
        words.append(f"{check.shortfall_mm:.1f} mm short")
    first = verdict.first_short
    if check.field.is_arc and first is not None and check.place is not first:
        words.append(f"short from {_angles(first)} on")
    if verdict.reason:
        words.append(verdict.reason)
    return "; ".join(words)


def _place(check: FieldCheck, place: Approach) -> str:
    labels = check.labels(place)
    return _angles(place) if labels is None else f"{_angles(place)}: {labels[0]} and {labels[1]}"


def _angles(place: Approach) -> str:
    gantry, couch = (reading_deg(round(angle, 2)) for angle in (place.gantry_deg, place.couch_deg))
    return f"gantry {gantry:g}, couch {couch:g}"


def _how(move: MoveCheck) -> str:
    steps = "; ".join(step.text for step in move.steps)
    table_as = f"figures for {move.table_as}" if move.table_as and move.steps else ""
    return "; ".join(words for words in (steps, move.reason, table_as) if words)


def _remarks(report: CheckReport) -> list[str]:
    lines = list(report.notes)
    told: dict[str, list[str]] = {}
    for number, check in enumerate(report.fields, start=1):
        for note in check.notes:
            told.setdefault(note, []).append(str(number))
    for note, numbers in told.items():
        every = len(numbers) == len(report.fields)
        lines.append(f"{'Every field' if every else 'Field ' + ', '.join(numbers)}: {note}.")
    if report.speeds.assumed:
        lines.append(f"Times rest on usual speeds: the room states none for {' and '.join(report.speeds.assumed)}.")
    better = report.better
    if better is not None:
        order = ", ".join(str(k + 1) for k in better.fields)
        gains = []
        if better.changes_saved:
            gains.append(f"{better.changes_saved} changes of table or accessory fewer")
        if not math.isnan(better.seconds_saved) and better.seconds_saved > 0.0:
            gains.append(f"{better.seconds_saved:.0f} s less for turns")
        if any(move.state is not State.PERMITTED for move in report.moves):
            gains.append("every move permitted")
        lines.append(f"A better order: {order} ({', '.join(gains)}).")
    return lines


def _summary(report: CheckReport) -> str:
    fields = sum(check.state is State.PERMITTED for check in report.fields)
    moves = sum(move.state is State.PERMITTED for move in report.moves)
    return f"{fields} of {len(report.fields)} fields and {moves} of {len(report.moves)} moves permitted."
