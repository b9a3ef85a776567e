"""Rows of a table that people type or a program wrote: comma-separated values, their columns checked."""

import csv
import io
from collections.abc import Sequence
from pathlib import Path
from typing import Final

from app.files.input_file import bad, checked_file
from app.files.wording import described, did_you_mean
from geometry.errors import BadInput, Fault

LARGEST_FILE_BYTES: Final = 2_000_000
_MOST_FAULTS: Final = 20
# What `app.files.delimited` puts before text that a spreadsheet would take for a formula.
_HARMLESS: Final = tuple(f"'{sign}" for sign in "=+-@\t\r")


def read_table(path: Path | str, columns: Sequence[str], needed: Sequence[str]) -> list[tuple[int, dict[str, str]]]:
    """Return the rows that hold something, each with its number in the file, cells by their column's name.

    Raises BadInput for a file that cannot be read, a column that is unknown, missing or there twice, and a row with
    more cells than the first row has names.
    """
    file = checked_file(path, LARGEST_FILE_BYTES)
    try:
        text = file.read_bytes().decode("utf-8-sig")
        rows = list(csv.reader(io.StringIO(text, newline=""), strict=True))
    except (OSError, UnicodeDecodeError) as error:
        raise bad(path, "", f"content that is no text ({type(error).__name__})", "values in UTF-8") from error
    except csv.Error as error:
        raise bad(path, "", f"{error}", "comma-separated values") from error
    filled = [
        (number, [_plain(cell) for cell in cells])
        for number, cells in enumerate(rows, start=1)
        if any(map(str.strip, cells))
    ]
    if not filled:
        raise bad(path, "", "no rows", f"a first row with {', '.join(columns)}")
    number, header = filled[0]
    faults = [
        Fault(str(path), f"row {number}", f"the column {described(name)}", did_you_mean(name, columns))
        for name in dict.fromkeys(header)
        if name not in columns
    ]
    faults += [
        Fault(str(path), f"row {number}", f"the column '{name}' {header.count(name)} times", "once")
        for name in columns
        if header.count(name) > 1 or (name in needed and name not in header)
    ]
    faults += [
        Fault(str(path), f"row {number}", f"{len(cells)} cells", f"{len(header)}, as the first row has")
        for number, cells in filled[1:]
        if len(cells) > len(header)
    ]
    if faults:
        raise BadInput(faults[:_MOST_FAULTS])
    return [(number, dict(zip(header, cells, strict=False))) for number, cells in filled[1:]]


def _plain(cell: str) -> str:
    cell = cell.strip()
    return cell[1:] if cell.startswith(_HARMLESS) else cell
