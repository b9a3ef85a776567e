"""Cells of a workbook and how they look."""

from dataclasses import dataclass
from typing import Final

from openpyxl.cell.cell import Cell, WriteOnlyCell
from openpyxl.styles import Alignment, Border, Font, PatternFill, Side
from openpyxl.worksheet._write_only import WriteOnlyWorksheet
from openpyxl.worksheet.page import PageMargins

Value = str | float | None

INK: Final = "FF1B1F23"
PALE_INK: Final = "FF59636E"
WHITE: Final = "FFFFFFFF"
HEADER_FILL: Final = "FFE3E7EB"
_FAMILY: Final = "Arial"
_A4: Final = 9  # paper size 9 of ECMA-376 part 1, 18.3.1.63


@dataclass(frozen=True)
class Look:
    """How a cell looks; colours are "AARRGGBB". `pattern` is a fill of `lines` over `fill`; "solid" has none.

    `outline` names sides, "left", "right", "top", "bottom", that have a heavy line.
    """

    size: float = 10.0
    bold: bool = False
    italic: bool = False
    colour: str = INK
    fill: str | None = None
    pattern: str = "solid"
    lines: str | None = None
    across: str = "general"
    up: str = "center"
    wrap: bool = False
    number: str = "General"
    indent: int = 0
    line_above: bool = False
    turned: int = 0
    outline: frozenset[str] = frozenset()


def cell(sheet: WriteOnlyWorksheet, value: Value, look: Look) -> Cell:
    """Return a cell for the next row of a sheet."""
    made = WriteOnlyCell(sheet, value)
    if isinstance(value, str):
        # Whatever it begins with, it is text and no formula.
        made.data_type = "s"
    made.font = Font(name=_FAMILY, size=look.size, bold=look.bold, italic=look.italic, color=look.colour)
    made.alignment = Alignment(
        horizontal=look.across,
        vertical=look.up,
        wrap_text=look.wrap,
        text_rotation=look.turned,
        indent=look.indent,
    )
    made.number_format = look.number
    if look.fill is not None:
        made.fill = _fill(look.fill, look.pattern, look.lines)
    if look.outline:
        made.border = Border(**{side: Side(style="thick", color="FF000000") for side in look.outline})
    elif look.line_above:
        made.border = Border(top=Side(style="thin", color="FFB4BBC2"))
    return made


def hex_argb(colour: str) -> str:
    """Return "#rrggbb" as the workbook has it."""
    return "FF" + colour[1:].upper()


def landscape(sheet: WriteOnlyWorksheet, pages_across: int, pages_down: int) -> None:
    """Print on A4 across, on so many pages (0 down: as many as it takes)."""
    sheet.page_setup.orientation = "landscape"
    sheet.page_setup.paperSize = _A4
    sheet.page_setup.fitToWidth = pages_across
    sheet.page_setup.fitToHeight = pages_down
    sheet.sheet_properties.pageSetUpPr.fitToPage = True
    sheet.print_options.horizontalCentered = True
    sheet.page_margins = PageMargins(left=0.3, right=0.3, top=0.75, bottom=0.65, header=0.3, footer=0.25)


def running_heads(sheet: WriteOnlyWorksheet, head: str, foot: str) -> None:
    """Print a line above and one below every page, at their own size however far the sheet is shrunk."""
    sheet.HeaderFooter.scaleWithDoc = False
    sheet.HeaderFooter.alignWithMargins = True
    for part, text in ((sheet.oddHeader.left, head), (sheet.oddFooter.left, foot)):
        # An ampersand starts a code there, and two stand for one; Excel takes 255 characters in all.
        part.text = text[:200].replace("&", "&&")
        part.size = 8
    sheet.oddFooter.right.text = "&P / &N"
    sheet.oddFooter.right.size = 8


def _fill(background: str, pattern: str, lines: str | None) -> PatternFill:
    if pattern == "solid":
        return PatternFill("solid", fgColor=background)
    return PatternFill(pattern, fgColor=lines or INK, bgColor=background)
