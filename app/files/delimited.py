"""Comma-separated files (RFC 4180): UTF-8, lines end in CR LF, names harmless in a spreadsheet.

A spreadsheet takes a cell that begins with one of = + - @ for a formula, tab and carriage return before it or not. Text
that comes from a user's file and begins so is written with an apostrophe before it, which spreadsheets take as "this is
text". Numbers are written as they are. There is no byte order mark: it would become part of the first column's name
for every reader that is not a spreadsheet.
"""

import csv
import io
from collections.abc import Iterable, Sequence
from pathlib import Path
from typing import BinaryIO, Final

from app.files.atomic import write_atomically
from app.files.readings import number_text

Cell = str | float | None

_FORMULA: Final = ("=", "+", "-", "@", "\t", "\r")


def write_table(path: Path, header: Sequence[str], rows: Iterable[Sequence[Cell]]) -> None:
    """Write a header and rows as a whole file. Raises BadInput where it cannot be written."""

    def write(stream: BinaryIO) -> None:
        text = io.TextIOWrapper(stream, encoding="utf-8", newline="")
        writer = csv.writer(text, lineterminator="\r\n")
        writer.writerow(header)
        writer.writerows([cell_text(cell) for cell in row] for row in rows)
        text.flush()
        # The stream is not this function's to close, and a wrapper closes it when it goes.
        text.detach()

    write_atomically(path, write)


def cell_text(cell: Cell) -> str:
    """Return what stands in the file: nothing for None, a number as short as it can be, text made harmless."""
    if cell is None:
        return ""
    if isinstance(cell, str):
        return f"'{cell}" if cell.startswith(_FORMULA) else cell
    return number_text(cell)
