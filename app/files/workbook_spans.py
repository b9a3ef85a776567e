"""The sheet "Permitted angles": the spans as arcs to copy, in IEC 61217 and on the machine's own scales."""

from collections.abc import Iterator
from typing import Final

from openpyxl import Workbook
from openpyxl.utils import get_column_letter
from openpyxl.worksheet._write_only import WriteOnlyWorksheet

from app.files.permitted_rows import PermittedRow, permitted_rows
from app.files.provenance import Provenance
from app.files.readings import OwnScales, own_scales, rounded_down
from app.files.workbook_cells import HEADER_FILL, INK, PALE_INK, WHITE, Look, Value, cell, landscape, running_heads
from geometry.assess import Assessment

SHEET: Final = "Permitted angles"

_IEC: Final = ("Couch °", "Start °", "Stop °", "Direction", "Extent °")
_OWN: Final = ("Couch °", "Start °", "Stop °", "Scale")
_OTHER: Final = ("Least clearance, mm", "Required, mm", "Machine part", "Couch part")
_DEGREES: Final = "0.0##"
_HEADER: Final = Look(bold=True, fill=HEADER_FILL, across="center", wrap=True)


def add_spans(workbook: Workbook, assessment: Assessment, provenance: Provenance) -> None:
    """Add the sheet, and fill it."""
    sheet = workbook.create_sheet(SHEET)
    scales = own_scales(assessment.scene.setup.room)
    with_own = scales != OwnScales(None, None)
    header = (*_IEC, *(_OWN if with_own else ()), *_OTHER)
    rows = [_values(row, scales) for row in permitted_rows(assessment)]
    top = list(_top(provenance))
    first_row = len(top) + 3
    _prepare(sheet, header, rows, first_row, provenance)
    for text, look in top:
        # Cells beside the text are coloured and empty, so that it runs on over them.
        beside = [cell(sheet, None, look) for _ in header[1:]] if look.fill else []
        sheet.append([cell(sheet, text, look), *beside])
    sheet.append(list(_groups(sheet, with_own)))
    sheet.append([cell(sheet, name, _HEADER) for name in header])
    previous: Value = None
    for row in rows:
        sheet.append([_cell(sheet, name, value, row, previous) for name, value in zip(header, row, strict=True)])
        previous = row[0]


def _top(provenance: Provenance) -> Iterator[tuple[str, Look]]:
    """Yield the lines above the table."""
    yield "Permitted gantry and couch angles", Look(size=16, bold=True)
    for mark in provenance.marks:
        yield mark, Look(bold=True, colour=WHITE, fill=INK)
    yield f"Set-up: {provenance.setup}", Look(size=11)
    yield f"Room: {provenance.room} ({provenance.survey})", Look(size=11)
    yield (
        f"{provenance.date.isoformat()}, Wideberth {provenance.version}, fingerprint {provenance.short_fingerprint}",
        Look(colour=PALE_INK),
    )
    for excess in provenance.no_travel:
        yield excess, Look(bold=True)
    yield provenance.caution, Look(bold=True)
    yield (
        "An arc a row: the gantry turns clockwise (CW, rising IEC angle) from start to stop; to turn back, swap them.",
        Look(colour=PALE_INK),
    )
    yield (
        "Least clearance is proved for the whole arc, readout tolerances included; the named parts come so near.",
        Look(colour=PALE_INK),
    )


def _groups(sheet: WriteOnlyWorksheet, with_own: bool) -> Iterator[object]:
    """Yield the row over the header that tells whose angles these are."""
    left = Look(bold=True, fill=HEADER_FILL)
    yield cell(sheet, "IEC 61217", left)
    yield from (cell(sheet, None, left) for _ in _IEC[1:])
    if with_own:
        yield cell(sheet, "As the machine shows it", left)
        yield from (cell(sheet, None, left) for _ in _OWN[1:])
    yield from (cell(sheet, None, left) for _ in _OTHER)


def _values(row: PermittedRow, scales: OwnScales) -> list[Value]:
    """Return what stands in a row, in the header's order."""
    permitted = row.gantry_from_deg is not None
    direction = "CW" if permitted else "none"
    iec: list[Value] = [row.couch_deg, row.gantry_from_deg, row.gantry_to_deg, direction, row.gantry_extent_deg]
    # Two decimals are enough for print, and the bound must not be rounded up.
    lengths = [None if mm is None else rounded_down(mm, 2) for mm in (row.least_clearance_mm, row.required_mm)]
    other: list[Value] = [*lengths, row.machine_part, row.couch_part]
    if scales == OwnScales(None, None):
        return [*iec, *other]
    own: list[Value] = [
        row.couch_deg if scales.couch is None else row.couch_readout_deg,
        row.gantry_from_deg if scales.gantry is None else row.gantry_from_readout_deg,
        row.gantry_to_deg if scales.gantry is None else row.gantry_to_readout_deg,
        _scale_direction(scales) if permitted else "none",
    ]
    return [*iec, *own, *other]


def _scale_direction(scales: OwnScales) -> str:
    """Tell which way the shown gantry angle runs while the gantry turns clockwise."""
    return "falling" if scales.gantry is not None and scales.gantry.sense < 0 else "rising"


def _cell(sheet: WriteOnlyWorksheet, name: str, value: Value, row: list[Value], previous: Value) -> object:
    nothing = row[1] is None
    is_part = name.endswith("part")
    look = Look(
        colour=PALE_INK if nothing else INK,
        italic=nothing,
        number=_DEGREES if name.endswith("°") else "0.00" if name.endswith("mm") else "General",
        across="center" if name in {"Direction", "Scale"} else "left" if is_part else "general",
        indent=1 if is_part else 0,
        line_above=row[0] != previous,
    )
    return cell(sheet, value, look)


def _prepare(
    sheet: WriteOnlyWorksheet, header: tuple[str, ...], rows: list[list[Value]], first_row: int, provenance: Provenance
) -> None:
    """Set what has to stand before the first row: widths, frozen rows, filter, print."""
    for column, name in enumerate(header):
        longest = max((len(str(row[column])) for row in rows if row[column] is not None), default=0)
        width = max(longest + 4, 14) if name.endswith("part") else 12 if name.endswith("mm") else 10
        sheet.column_dimensions[get_column_letter(column + 1)].width = width
    sheet.row_dimensions[1].height = 24
    sheet.row_dimensions[first_row - 1].height = 42
    sheet.freeze_panes = f"A{first_row}"
    last = get_column_letter(len(header))
    sheet.auto_filter.ref = f"A{first_row - 1}:{last}{first_row - 1 + len(rows)}"
    sheet.print_title_rows = f"{first_row - 2}:{first_row - 1}"
    landscape(sheet, 1, 0)
    running_heads(sheet, f"{provenance.setup}, {provenance.room}", provenance.caution)
