"""A list of fields that a person types, as comma-separated values (RFC 4180, UTF-8, first row: names of columns).

- `field`: its name, each once
- `gantry_from_deg`, `gantry_to_deg`: IEC 61217; `to` empty where it stands still
- `direction`: the gantry's, `CW` (rising angle) or `CC` (falling), empty or `none` where it stands still; the same
  angle twice with a direction is a whole turn
- `couch_from_deg`, `couch_to_deg`: IEC 61217; `from` empty: 0; `to` empty where it stands still; the shorter way
- `collimator_deg`: empty: as the set-up has it
- `fitted`: accessories and arm positions between semicolons, as `electron applicator 15; kV source=extended`; `none`
  for no accessory; empty: as the set-up has it; arms that are not named stay as the set-up has them

Columns other than the first two may be left out; rows without any value are passed over.
"""

import csv
import io
import math
from collections.abc import Iterator
from pathlib import Path
from typing import Final

from app.files.input_file import checked_file
from app.files.wording import decimal_number, described, did_you_mean, one_of, printable
from app.plan_files.turns import snapped_deg
from geometry.errors import BadInput, Fault
from geometry.legs import Point
from geometry.treatment.data import PlanField

COLUMNS: Final = (
    "field",
    "gantry_from_deg",
    "gantry_to_deg",
    "direction",
    "couch_from_deg",
    "couch_to_deg",
    "collimator_deg",
    "fitted",
)
_NEEDED: Final = COLUMNS[:2]
LARGEST_FILE_BYTES: Final = 2_000_000
MOST_FIELDS: Final = 500
LONGEST_CELL: Final = 1000
MOST_FITTED: Final = 100
_MOST_FAULTS: Final = 20
_MOST_DEG: Final = 720.0
_SENSES: Final = {"cw": 1, "cc": -1, "none": 0, "": 0}
# Other words for falling angles, and the signs that other programs put between cells.
_ALSO_CC: Final = ("ccw", "acw", "anticlockwise", "anti-clockwise", "counterclockwise", "counter-clockwise")
_OTHER_SIGNS: Final = {";": "semicolons", "\t": "tabs"}


def read_field_rows(path: Path | str) -> tuple[PlanField, ...]:
    """Return the fields of a typed list in its order. Raises BadInput with up to 20 faults, by row and column."""
    header, rows = _table(path)
    fields: list[PlanField] = []
    faults: list[Fault] = []
    seen: dict[str, int] = {}
    for number, cells in rows:
        row = _Row(str(path), number, dict(zip(header, cells, strict=False)))
        if len(cells) > len(header):
            row.fault("", f"{len(cells)} cells", f"{len(header)}, as the first row has")
        field = row.field()
        if field is not None and field.name in seen:
            row.fault("field", f"'{printable(field.name)}', as in row {seen[field.name]}", "each name once")
        if field is not None:
            seen[field.name] = number
            fields.append(field)
        faults += row.faults
        if len(faults) >= _MOST_FAULTS or len(fields) > MOST_FIELDS:
            break
    if len(fields) > MOST_FIELDS:
        faults.append(Fault(str(path), "", f"more than {MOST_FIELDS} fields", f"at most {MOST_FIELDS}"))
    if not fields and not faults:
        faults.append(Fault(str(path), "", "no fields", "1 row or more after the names of the columns"))
    if faults:
        raise BadInput(faults[:_MOST_FAULTS])
    return tuple(fields)


def _table(path: Path | str) -> tuple[list[str], list[tuple[int, list[str]]]]:
    """Return the names of the columns, and the rows that hold something, each with its number in the file."""
    file = checked_file(path, LARGEST_FILE_BYTES)
    try:
        text = file.read_bytes().decode("utf-8-sig")
    except (OSError, UnicodeDecodeError) as error:
        found = f"content that is no text ({type(error).__name__})"
        raise BadInput([Fault(str(path), "", found, "comma-separated values in UTF-8")]) from error
    try:
        rows = list(enumerate(csv.reader(io.StringIO(text, newline=""), strict=True), start=1))
    except csv.Error as error:
        raise BadInput([Fault(str(path), "", f"{error}", "comma-separated values")]) from error
    filled = [(number, [cell.strip() for cell in cells]) for number, cells in rows if any(c.strip() for c in cells)]
    if not filled:
        raise BadInput([Fault(str(path), "", "no rows", f"a first row with {', '.join(COLUMNS)}")])
    number, header = filled[0]
    for sign, words in _OTHER_SIGNS.items():
        if len(header) == 1 and sign in header[0]:
            allowed = "commas between values, and decimal points"
            raise BadInput([Fault(str(path), f"row {number}", f"{words} between the names of the columns", allowed)])
    faults = [
        Fault(str(path), f"row {number}", f"the column {described(name)}", did_you_mean(name, COLUMNS))
        for name in dict.fromkeys(header)
        if name not in COLUMNS
    ]
    faults += [
        Fault(str(path), f"row {number}", f"the column '{name}' {header.count(name)} times", "once")
        for name in COLUMNS
        if header.count(name) > 1 or (name in _NEEDED and name not in header)
    ]
    if faults:
        raise BadInput(faults[:_MOST_FAULTS])
    return header, filled[1:]


class _Row:
    """One row; `faults` gathers what is wrong with it."""

    def __init__(self, path: str, number: int, cells: dict[str, str]) -> None:
        self._path = path
        self._number = number
        self._cells = cells
        self.faults: list[Fault] = []

    def fault(self, column: str, found: str, allowed: str) -> None:
        """Note a fault."""
        place = f"row {self._number}, {column}" if column else f"row {self._number}"
        self.faults.append(Fault(self._path, place, found, allowed))

    def field(self) -> PlanField | None:
        """Return the row as a field, None where it has faults."""
        for column, text in self._cells.items():
            if len(text) > LONGEST_CELL:
                self.fault(column, f"{len(text)} characters", f"at most {LONGEST_CELL}")
        name = self._cells.get("field", "")
        if not name:
            self.fault("field", "nothing", "a name")
        gantry = self._gantry()
        couch = self._couch()
        collimator_deg = self._angle("collimator_deg")
        fitted = tuple(self._fitted())
        if self.faults:
            return None
        return PlanField(
            name=printable(name),
            points_deg=_points(gantry, couch),
            collimator_deg=() if collimator_deg is None else (snapped_deg(collimator_deg),),
            fitted=fitted or None,
            place=f"row {self._number}",
        )

    def _gantry(self) -> tuple[float, float]:
        start, stop = self._angle("gantry_from_deg"), self._angle("gantry_to_deg")
        direction = self._cells.get("direction", "").casefold()
        if direction not in _SENSES:
            hint = "did you mean 'CC'? " if direction in _ALSO_CC else ""
            self.fault("direction", described(self._cells["direction"]), f"{hint}{one_of(('CW', 'CC', 'none'))}")
            return 0.0, 0.0
        if start is None:
            if not self._cells.get("gantry_from_deg"):
                self.fault("gantry_from_deg", "nothing", f"degrees within ±{_MOST_DEG:g}")
            return 0.0, 0.0
        sense = _SENSES[direction]
        first = snapped_deg(start)
        if stop is None:
            if sense and not self._cells.get("gantry_to_deg"):
                self.fault("gantry_to_deg", "nothing, with a direction", "where the arc ends")
            return first, first
        rising = snapped_deg(stop - start)
        if not sense:
            if rising:
                self.fault("direction", described(self._cells.get("direction", "")), "'CW' or 'CC' for an arc")
            return first, first
        turn = rising if sense > 0 else 360.0 - rising
        # A direction with one angle twice is a whole turn.
        return first, first + sense * ((turn % 360.0) or 360.0)

    def _couch(self) -> tuple[float, float]:
        start, stop = self._angle("couch_from_deg") or 0.0, self._angle("couch_to_deg")
        first = snapped_deg(start)
        if stop is None:
            return first, first
        rising = snapped_deg(stop - start)
        if rising == 180.0:
            self.fault("couch_to_deg", f"half a turn from {start:g}", "two rows, so that it is told which way")
        return first, first + (rising if rising < 180.0 else rising - 360.0)

    def _angle(self, column: str) -> float | None:
        text = self._cells.get(column, "")
        if not text:
            return None
        try:
            value = decimal_number(text)
        except ValueError:
            value = math.nan
        if not abs(value) <= _MOST_DEG:
            self.fault(column, described(text), f"degrees within ±{_MOST_DEG:g}, with a decimal point")
            return None
        return value

    def _fitted(self) -> Iterator[str]:
        named = [part.strip() for part in self._cells.get("fitted", "").split(";")]
        if len(named) > MOST_FITTED:
            self.fault("fitted", f"{len(named)} entries", f"at most {MOST_FITTED}")
            return
        yield from (part for part in named if part)


def _points(gantry: tuple[float, float], couch: tuple[float, float]) -> tuple[Point, ...]:
    start, stop = (gantry[0], couch[0]), (gantry[1], couch[1])
    return (start,) if start == stop else (start, stop)
