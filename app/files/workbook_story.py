"""The sheet "Inputs and cautions": what the result rests on."""

import math
from typing import Final

from openpyxl import Workbook
from openpyxl.cell.cell import Cell

from app.files.provenance import Provenance
from app.files.setup_lines import setup_lines
from app.files.workbook_cells import HEADER_FILL, INK, WHITE, Look, cell, landscape, running_heads
from geometry.scene import Scene

SHEET: Final = "Inputs and cautions"

_LABEL_WIDTH: Final = 42
_TEXT_WIDTH: Final = 105
# Letters of ten points that a line holds at least.
_LETTERS: Final = 110
_LINE_POINTS: Final = 13.5


def add_story(workbook: Workbook, scene: Scene, provenance: Provenance) -> None:
    """Add the sheet, and fill it: marks, cautions, provenance, the set-up as stated."""
    sheet = workbook.create_sheet(SHEET)
    sheet.column_dimensions["A"].width = _LABEL_WIDTH
    sheet.column_dimensions["B"].width = _TEXT_WIDTH
    landscape(sheet, 1, 0)
    running_heads(sheet, f"{provenance.setup}, {provenance.room}", provenance.caution)
    mark = Look(size=12, bold=True, colour=WHITE, fill=INK)
    heading = Look(size=11, bold=True, fill=HEADER_FILL)
    label, text = Look(bold=True, up="top"), Look(up="top", wrap=True)
    row = 0

    def line(first: Cell | None = None, second: Cell | None = None, lines: int = 1) -> None:
        nonlocal row
        row += 1
        if lines > 1:
            # Not every program works out for itself how high wrapped text stands.
            sheet.row_dimensions[row].height = lines * _LINE_POINTS
        sheet.append([first, second])

    def section(title: str, lines: list[tuple[str, str]]) -> None:
        line()
        line(cell(sheet, title, heading), cell(sheet, None, heading))
        for name, value in lines:
            line(cell(sheet, name, label), cell(sheet, value, text), math.ceil(len(value) / _LETTERS))

    sheet.row_dimensions[1].height = 24
    line(cell(sheet, "Inputs and cautions", Look(size=16, bold=True)))
    for words in provenance.marks:
        line(cell(sheet, words, mark), cell(sheet, None, mark))
    line()
    line(cell(sheet, "Cautions", heading), cell(sheet, None, heading))
    for caution in provenance.cautions:
        line(cell(sheet, caution, Look()))
    result = [(name, value) for name, value in provenance.lines() if name not in {"Caution", "Mark"}]
    section("Result", result)
    section("Set-up", list(setup_lines(scene)))
