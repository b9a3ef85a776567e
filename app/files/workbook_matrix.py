"""The sheet "Every pair": couch angles down, gantry angles across, each pair coloured by its clearance.

A cell holds the clearance in whole millimetres, rounded down. A letter after it and a texture tell the state: nothing
means permitted, s short, u unproved; C stands for contact, ? for a distance that could not be found, – for no travel.
"""

import math
from collections.abc import Iterator
from dataclasses import replace
from typing import Final

import numpy as np
from numpy.typing import NDArray
from openpyxl import Workbook
from openpyxl.cell.cell import Cell
from openpyxl.utils import get_column_letter
from openpyxl.worksheet._write_only import WriteOnlyWorksheet

from app.clearance_scale import band_of
from app.files.provenance import Provenance
from app.files.readings import OwnScales, own_scales, reading_deg, shown_deg
from app.files.workbook_cells import HEADER_FILL, PALE_INK, Look, cell, landscape, running_heads
from app.files.workbook_matrix_layout import (
    Sizes,
    band_samples,
    column_width,
    legend_row,
    pair_look,
    state_samples,
    tick_step,
)
from geometry.assess import Assessment
from geometry.machine import Readout
from geometry.states import CODE_OF, STATES, State

SHEET: Final = "Every pair"
# Beyond these a spreadsheet is no longer a way to look at a grid.
MOST_COLUMNS: Final = 4000
MOST_CELLS: Final = 1_500_000

_SIDE_PX: Final = 62
_NAMES_OF_SIDES: Final = ("left", "right", "top", "bottom")
_SIDES: Final = tuple(
    frozenset(name for place, name in enumerate(_NAMES_OF_SIDES) if mask >> place & 1) for mask in range(16)
)


def add_matrix(workbook: Workbook, assessment: Assessment, provenance: Provenance) -> None:
    """Add the sheet, and fill it, or say on it that the grid is too fine for a spreadsheet."""
    sheet = workbook.create_sheet(SHEET)
    rows, columns = assessment.state.shape
    if columns > MOST_COLUMNS or rows * columns > MOST_CELLS:
        text = f"A grid of {columns} × {rows} pairs is too fine for a sheet. Write it with --grid FILE.csv or as .json."
        sheet.append([cell(sheet, text, Look(size=11))])
        return
    scales = own_scales(assessment.scene.setup.room)
    sizes = Sizes(columns, rows, 0 if scales.couch is None else 1)
    top = list(_top(sheet, provenance, sizes))
    header = list(_header(sheet, assessment, scales, sizes))
    first_row = len(top) + len(header) + 1
    bottom = list(_bottom(sheet, assessment, provenance, sizes))
    _prepare(sheet, range(len(top) + 1, first_row), sizes, len(bottom), provenance)
    for line in (*top, *header):
        sheet.append(line)
    painter = _Painter(sheet, sizes)
    labels = _couch_labels(sheet, assessment, sizes, first_row)
    ends = _ends_of_permitted(assessment)
    for place, i in enumerate(reversed(range(rows))):
        sheet.append(_row(assessment, painter, scales.couch, i, ends[i].tolist(), labels.get(place)))
    for line in bottom:
        sheet.append(line)


class _Painter:
    """Makes the cells of the matrix, one for each look, over and over.

    A sheet that is only written puts each cell down before it asks for the next one, so that a look is worked out
    once and not seventy thousand times.
    """

    def __init__(self, sheet: WriteOnlyWorksheet, sizes: Sizes) -> None:
        self._sheet = sheet
        self._sizes = sizes
        self._made: dict[tuple[State, int, frozenset[str]], Cell] = {}
        self.angle = cell(sheet, 0.0, Look(size=8, bold=True, fill=HEADER_FILL, across="center", number="0.##"))
        self.shown = cell(sheet, 0.0, Look(size=8, colour=PALE_INK, fill=HEADER_FILL, across="center", number="0.##"))

    def painted(self, state: State, clearance_mm: float, outline: frozenset[str]) -> Cell:
        """Return the cell of a pair, good until the next call for the same look."""
        band = -1 if math.isnan(clearance_mm) or state in {State.CONTACT, State.NO_TRAVEL} else band_of(clearance_mm)
        made = self._made.get((state, band, outline))
        if made is None:
            made = cell(self._sheet, 0, replace(pair_look(state, band, self._sizes.letters), outline=outline))
            self._made[state, band, outline] = made
        made.value = _content(state, clearance_mm)
        return made


def _content(state: State, clearance_mm: float) -> str | int:
    if state is State.NO_TRAVEL:
        return "–"
    if state is State.CONTACT:
        return "C"
    if math.isnan(clearance_mm):
        return "?"
    return "∞" if math.isinf(clearance_mm) else math.floor(clearance_mm)


def _row(
    assessment: Assessment, painter: _Painter, own: Readout | None, i: int, ends: list[int], label: Cell | None
) -> Iterator[Cell]:
    """Yield the cells of the i-th couch angle. `ends`: for each pair an index into `_SIDES`."""
    couch_deg = float(assessment.map.couch_deg[i])
    painter.angle.value = reading_deg(couch_deg)
    yield painter.angle
    if own is not None:
        painter.shown.value = shown_deg(own, couch_deg)
        yield painter.shown
    codes = assessment.state[i].tolist()
    clearances = assessment.map.clearance_mm[i].tolist()
    for code, clearance_mm, end in zip(codes, clearances, ends, strict=True):
        yield painter.painted(STATES[code], clearance_mm, _SIDES[end])
    if label is not None:
        yield label


def _ends_of_permitted(assessment: Assessment) -> NDArray[np.int64]:
    """Return for each pair the sides on which the permitted area ends, (m, n), as indices into `_SIDES`."""
    there = np.pad(assessment.state == CODE_OF[State.PERMITTED], 1)
    inner = there[1:-1, 1:-1]
    # Higher couch angles stand above lower ones.
    neighbours = {
        "left": there[1:-1, :-2],
        "right": there[1:-1, 2:],
        "top": there[2:, 1:-1],
        "bottom": there[:-2, 1:-1],
    }
    ends = np.zeros(inner.shape, np.int64)
    for place, name in enumerate(_NAMES_OF_SIDES):
        ends |= (inner & ~neighbours[name]).astype(np.int64) << place
    return ends


def _couch_labels(sheet: WriteOnlyWorksheet, assessment: Assessment, sizes: Sizes, first_row: int) -> dict[int, Cell]:
    """Return, by row of the matrix from its top, the couch angles in letters for print, over several rows each."""
    angles = assessment.map.couch_deg[::-1].tolist()
    rows = min(max(1, math.ceil(1.7 * sizes.print_letters / sizes.row_px)), len(angles))
    step = tick_step(angles[0] - angles[-1], len(angles) / (2.0 * rows))
    column = get_column_letter(sizes.first_column + sizes.columns)
    look = Look(sizes.print_letters, across="left")
    labels = {}
    for place, angle in enumerate(angles):
        if angle % step == 0.0:
            top = min(max(place - rows // 2, 0), len(angles) - rows)
            labels[top] = cell(sheet, f"{reading_deg(angle):g}°", look)
            if rows > 1:
                sheet.merged_cells.add(f"{column}{first_row + top}:{column}{first_row + top + rows - 1}")
    return labels


def _top(sheet: WriteOnlyWorksheet, provenance: Provenance, sizes: Sizes) -> Iterator[list[Cell | None]]:
    """Yield title and legends for the screen."""
    marks = "   ".join(provenance.marks)
    yield [cell(sheet, "Clearance of every pair, mm, rounded down", Look(size=14, bold=True))]
    if marks:
        yield [cell(sheet, marks, Look(size=11, bold=True))]
    yield [cell(sheet, f"{provenance.setup}, {provenance.room}, {provenance.short_fingerprint}", Look(size=11))]
    yield legend_row(sheet, sizes, sizes.columns_for(140), 9, band_samples(sizes))
    yield legend_row(sheet, sizes, sizes.columns_for(220), 9, state_samples(sizes))


def _header(
    sheet: WriteOnlyWorksheet, assessment: Assessment, scales: OwnScales, sizes: Sizes
) -> Iterator[list[Cell | None]]:
    """Yield the gantry angles, on the machine's scale first where it has one."""
    angles = assessment.map.gantry_deg.tolist()
    shown = Look(sizes.letters, colour=PALE_INK, fill=HEADER_FILL, across="center", number="0.##", turned=90)
    name = Look(8, bold=True, fill=HEADER_FILL, wrap=True)
    empty = [cell(sheet, None, name)] * sizes.own
    if scales.gantry is not None:
        own = [cell(sheet, shown_deg(scales.gantry, angle), shown) for angle in angles]
        yield [cell(sheet, "Gantry, as shown", name), *empty, *own]
    iec = Look(sizes.letters, bold=True, fill=HEADER_FILL, across="center", number="0.##", turned=90)
    couch_shown = [cell(sheet, "Couch, as shown", name)] * sizes.own
    yield [
        cell(sheet, "Couch, gantry IEC", name),
        *couch_shown,
        *(cell(sheet, reading_deg(angle), iec) for angle in angles),
    ]


def _bottom(
    sheet: WriteOnlyWorksheet, assessment: Assessment, provenance: Provenance, sizes: Sizes
) -> Iterator[list[Cell | None]]:
    """Yield what the printed page needs: angles, legends and cautions in letters that survive the shrinking."""
    letters = sizes.print_letters
    look = Look(letters, across="center")
    angles = assessment.map.gantry_deg.tolist()
    before: list[Cell | None] = [None] * (sizes.first_column - 1)
    step = tick_step(float(angles[-1] - angles[0]), sizes.columns * sizes.column_px / (letters * 5.5))
    yield before + [cell(sheet, f"{reading_deg(angle):g}°", look) if angle % step == 0.0 else None for angle in angles]
    for samples, width in ((band_samples(sizes), 6.0 * letters), (state_samples(sizes), 19.0 * letters)):
        columns = max(sizes.columns // len(samples), sizes.columns_for(width))
        yield legend_row(sheet, sizes, columns, letters, samples)
    yield []
    who = f"{provenance.setup}, {provenance.room}, {provenance.date.isoformat()}, {provenance.short_fingerprint}"
    for text, bold in (
        ("Clearance in mm, rounded down. Gantry angles across, couch angles down, IEC 61217.", False),
        (who, False),
        (provenance.caution, True),
    ):
        yield [*before, cell(sheet, text, Look(letters, bold=bold))]


def _prepare(sheet: WriteOnlyWorksheet, header: range, sizes: Sizes, bottom_rows: int, provenance: Provenance) -> None:
    """Set what has to stand before the first row: sizes, frozen panes, print. `header`: rows of gantry angles."""
    first_row, after = header.stop, header.stop + sizes.rows
    for column in range(1, sizes.first_column):
        sheet.column_dimensions[get_column_letter(column)].width = column_width(_SIDE_PX)
    narrow = sheet.column_dimensions[get_column_letter(sizes.first_column)]
    narrow.width = column_width(sizes.column_px)
    narrow.min, narrow.max = sizes.first_column, sizes.first_column + sizes.columns - 1
    sheet.column_dimensions[get_column_letter(sizes.first_column + sizes.columns)].width = column_width(
        3 * sizes.print_letters
    )
    sheet.row_dimensions[1].height = 20
    for row in header:
        sheet.row_dimensions[row].height = 30
    for row in range(first_row, after):
        sheet.row_dimensions[row].height = 0.75 * sizes.row_px
    for row in range(after, after + bottom_rows):
        sheet.row_dimensions[row].height = 1.35 * sizes.print_letters
    sheet.freeze_panes = f"{get_column_letter(sizes.first_column)}{first_row}"
    sheet.sheet_view.zoomScale = 70
    sheet.print_title_rows = f"1:{first_row - 1}"
    sheet.print_title_cols = f"A:{get_column_letter(sizes.first_column - 1)}"
    landscape(sheet, sizes.pages_across, 1)
    running_heads(sheet, f"{provenance.setup}, {provenance.room}, {provenance.short_fingerprint}", provenance.caution)
