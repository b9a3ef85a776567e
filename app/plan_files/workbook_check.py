"""The workbook of a plan's check: the dry-run sheet's rows, with columns to fill in, and what they rest on."""

import math
from collections.abc import Iterable, Sequence
from pathlib import Path
from typing import BinaryIO, Final

from openpyxl import Workbook
from openpyxl.utils import get_column_letter

from app.files.atomic import write_atomically
from app.files.provenance import Provenance
from app.files.readings import OwnScales, rounded_down
from app.files.workbook_archive import save_workbook
from app.files.workbook_cells import HEADER_FILL, INK, PALE_INK, WHITE, Look, Value, cell, landscape, running_heads
from app.files.workbook_story import add_story
from app.plan.dry_run import DO_NOT_RUN, FieldRow, MoveRow, dry_run
from app.plan.dry_run_places import Place
from app.plan.dry_run_words import PLACE_DIGITS, angle_text, own_text
from app.plan.gaps import GapRow
from geometry.treatment.data import CheckReport

FIELDS: Final = "Dry run"
MOVES: Final = "Moves"
GAPS: Final = "Measured gaps"
_TICK: Final = "☐"
_FIELD_COLUMNS: Final = (
    ("Done", 6),
    ("No.", 6),
    ("Field", 30),
    ("Kind", 14),
    ("State", 26),
    ("Gantry", 20),
    ("Turns", 14),
    ("Gantry, machine shows", 20),
    ("Couch", 16),
    ("Couch, machine shows", 16),
    ("Collimator", 12),
    ("Clearance", 14),
    ("Required", 12),
    ("Machine part", 22),
    ("Couch part", 22),
    ("Stop at gantry", 13),
    ("Stop at couch", 13),
    ("Machine shows there", 24),
    ("Gap at the stop, mm", 11),
    ("Measured there, mm", 13),
    ("Tightest at gantry", 13),
    ("Tightest at couch", 13),
    ("Gap there, mm", 11),
    ("Measured there, mm", 13),
    ("Where to look", 44),
    ("Remarks", 60),
)
_MOVE_COLUMNS: Final = (
    ("Done", 6),
    ("From", 7),
    ("To", 7),
    ("State", 26),
    ("Drive, in this order", 70),
    ("Clearance", 14),
    ("Required", 12),
    ("Machine part", 22),
    ("Couch part", 22),
    ("Tightest at gantry", 13),
    ("Tightest at couch", 13),
    ("Where to look", 44),
    ("Remarks", 60),
)
_GAP_COLUMNS: Final = (
    ("Field", 30),
    ("Gantry", 12),
    ("Couch", 12),
    ("Measured, mm", 13),
    ("Computed, mm", 13),
    ("Difference, mm", 13),
    ("Machine part", 22),
    ("Couch part", 22),
    ("By", 18),
    ("On", 14),
    ("Remarks", 70),
)
# What fills a page across, in the unit of columns; how much broader than the usual letter some are; a line's height.
_PAGE_WIDTH: Final = 230.0
_BROAD: Final = 1.2
_LINE_POINTS: Final = 13.0
_HEADER: Final = Look(bold=True, fill=HEADER_FILL, across="center", wrap=True)
_CELL: Final = Look(across="left", up="top", wrap=True, line_above=True)
_FAILED: Final = Look(bold=True, across="left", up="top", wrap=True, outline=frozenset({"top", "bottom"}))


def write_check_workbook(report: CheckReport, provenance: Provenance, path: Path, gaps: Sequence[GapRow] = ()) -> None:
    """Write the workbook; `gaps` make a sheet of their own where there are any. Raises BadInput where it cannot."""
    rows = dry_run(report)
    workbook = Workbook(write_only=True)
    workbook.properties.title = f"Dry run: {provenance.setup}, {provenance.room}"
    workbook.properties.creator = f"Wideberth {provenance.version}"
    workbook.properties.description = provenance.caution
    fields = ((_field_values(row, rows.scales), row.permitted) for row in rows.fields)
    notes = (rows.verdict, *(() if rows.permitted else (f"What is not permitted: {DO_NOT_RUN}",)), *rows.remarks)
    _add_table(workbook, FIELDS, _FIELD_COLUMNS, fields, notes, provenance)
    if rows.moves:
        moves = ((_move_values(row), row.permitted) for row in rows.moves)
        _add_table(workbook, MOVES, _MOVE_COLUMNS, moves, ("Moves between the fields",), provenance)
    if gaps:
        measured = ((_gap_values(row), not row.is_flagged) for row in gaps)
        _add_table(workbook, GAPS, _GAP_COLUMNS, measured, ("Measured gaps beside the computed ones",), provenance)
    add_story(workbook, report.scene, provenance)

    def write(stream: BinaryIO) -> None:
        save_workbook(workbook, stream, provenance.date)

    write_atomically(path, write)


def _add_table(
    workbook: Workbook,
    title: str,
    columns: Sequence[tuple[str, int]],
    rows: Iterable[tuple[list[Value], bool]],
    notes: Sequence[str],
    provenance: Provenance,
) -> None:
    """Add a sheet: what it is, marks and caution, then a table. A row that is not all right stands out."""
    sheet = workbook.create_sheet(title)
    top = list(_top(notes, provenance))
    for k, (_, width) in enumerate(columns, start=1):
        sheet.column_dimensions[get_column_letter(k)].width = width
    sheet.row_dimensions[1].height = 24
    sheet.row_dimensions[len(top) + 1].height = 30
    sheet.freeze_panes = f"A{len(top) + 2}"
    sheet.print_title_rows = f"{len(top) + 1}:{len(top) + 1}"
    sheet.print_title_cols = "A:C"
    landscape(sheet, math.ceil(sum(width for _, width in columns) / _PAGE_WIDTH), 0)
    running_heads(sheet, f"{provenance.setup}, {provenance.room}, {provenance.short_fingerprint}", provenance.caution)
    for text, look in top:
        beside = [cell(sheet, None, look) for _ in columns[1:]] if look.fill else []
        sheet.append([cell(sheet, text, look), *beside])
    sheet.append([cell(sheet, name, _HEADER) for name, _ in columns])
    for number, (values, right) in enumerate(rows, start=len(top) + 2):
        # Not every program works out for itself how high wrapped text stands.
        lines = max(
            math.ceil(_BROAD * len(str(value)) / width)
            for value, (_, width) in zip(values, columns, strict=True)
            if value is not None
        )
        sheet.row_dimensions[number].height = max(1, lines) * _LINE_POINTS + 3.0
        sheet.append([cell(sheet, value, _CELL if right else _FAILED) for value in values])


def _top(notes: Sequence[str], provenance: Provenance) -> Iterable[tuple[str, Look]]:
    yield notes[0], Look(size=16, bold=True)
    for mark in provenance.marks:
        yield mark, Look(bold=True, colour=WHITE, fill=INK)
    yield f"Set-up: {provenance.setup}", Look(size=11)
    yield f"Room: {provenance.room} ({provenance.survey})", Look(size=11)
    yield (
        f"{provenance.date.isoformat()}, Wideberth {provenance.version}, fingerprint {provenance.short_fingerprint}",
        Look(colour=PALE_INK),
    )
    for words in (*notes[1:], *provenance.no_travel):
        yield words, Look(bold=True)
    yield provenance.caution, Look(bold=True)


def _field_values(row: FieldRow, scales: OwnScales) -> list[Value]:
    stop, tightest = row.stop, row.tightest
    return [
        _TICK if row.permitted else "",
        row.number,
        row.name,
        f"{row.kind}, set-up field" if row.is_setup else row.kind,
        row.state,
        row.gantry.iec,
        row.gantry.sense or row.couch.sense,
        row.gantry.own or row.gantry.iec,
        row.couch.iec,
        row.couch.own or row.couch.iec,
        row.collimator,
        row.least,
        row.required,
        *(row.parts or ("", "")),
        *_angles(stop),
        _shown(stop, scales),
        _gap(stop),
        None,
        *_angles(tightest),
        _gap(tightest),
        None,
        "" if tightest is None else tightest.side,
        "; ".join(row.remarks if row.permitted else (DO_NOT_RUN, *row.remarks)),
    ]


def _move_values(row: MoveRow) -> list[Value]:
    return [
        _TICK if row.permitted else "",
        row.before,
        row.after,
        row.state,
        "; then ".join(row.steps) or ("nothing moves" if row.permitted else DO_NOT_RUN),
        row.least,
        row.required,
        *(row.parts or ("", "")),
        *_angles(row.tightest),
        "" if row.tightest is None else row.tightest.side,
        row.reason,
    ]


def _gap_values(row: GapRow) -> list[Value]:
    gap = row.gap
    return [
        gap.field,
        angle_text(gap.gantry_deg),
        angle_text(gap.couch_deg),
        gap.measured_mm,
        None if row.computed_mm is None else rounded_down(row.computed_mm, 1),
        None if row.difference_mm is None else round(row.difference_mm, 1),
        *(row.parts or ("", "")),
        gap.by,
        gap.on,
        row.words,
    ]


def _angles(place: Place | None) -> tuple[Value, Value]:
    if place is None:
        return None, None
    return angle_text(place.gantry_deg, PLACE_DIGITS), angle_text(place.couch_deg, PLACE_DIGITS)


def _shown(place: Place | None, scales: OwnScales) -> str:
    """Return a place on the machine's own scales; empty where it shows IEC 61217."""
    if place is None:
        return ""
    axes = (("gantry", place.gantry_deg, scales.gantry), ("couch", place.couch_deg, scales.couch))
    return ", ".join(f"{name} {own_text(own, angle, PLACE_DIGITS)}" for name, angle, own in axes if own is not None)


def _gap(place: Place | None) -> float | None:
    return None if place is None else rounded_down(place.clearance_mm, 1)
