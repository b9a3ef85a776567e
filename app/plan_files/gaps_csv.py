"""Measured gaps as comma-separated values (RFC 4180, UTF-8, first row: names of columns).

- `field`: of the plan; `gantry_deg`, `couch_deg`: IEC 61217, at which it was measured; `measured_mm`: from surface to
  surface; `by`, `on`: who, and the day as 2026-03-04
- `fingerprint`: of the set-up that it was measured for, as printed on the sheet
- `computed_mm`, `machine_part`, `couch_part`: in a list to fill in, what was computed; not read back

The last six may be left out; rows without `measured_mm` are passed over: nobody has measured there yet. Those of a
set-up are kept in a file beside it: `NAME.gaps.csv` beside `NAME.setup.toml`.
"""

import datetime
import math
from collections.abc import Iterable
from pathlib import Path
from typing import Final

from app.files.delimited import Cell, write_table
from app.files.input_file import bad
from app.files.readings import reading_deg, rounded_down
from app.files.wording import described, printable
from app.plan.dry_run import DryRun
from app.plan.dry_run_words import PLACE_DIGITS
from app.plan.gaps import MeasuredGap, places_to_measure
from app.plan_files.typed_table import read_table
from geometry.errors import BadInput, Fault

COLUMNS: Final = ("field", "gantry_deg", "couch_deg", "measured_mm", "by", "on", "fingerprint")
_COMPUTED: Final = ("computed_mm", "machine_part", "couch_part")
_NEEDED: Final = COLUMNS[:4]
_SUFFIX: Final = ".gaps.csv"
_SETUP_SUFFIXES: Final = (".setup.toml", ".toml")
MOST_GAPS: Final = 5000
LONGEST_CELL: Final = 200
MOST_MM: Final = 10_000.0
_MOST_DEG: Final = 720.0
_MOST_FAULTS: Final = 20
_DIGITS: Final = 9


def read_gaps(path: Path | str) -> tuple[MeasuredGap, ...]:
    """Return the gaps of a list in its order, none where nothing was measured. Raises BadInput with up to 20 faults."""
    found: list[MeasuredGap] = []
    faults: list[Fault] = []
    for number, cells in read_table(path, (*COLUMNS, *_COMPUTED), _NEEDED):
        if not cells.get("measured_mm"):
            continue
        row = _Row(str(path), number, cells)
        gap = row.gap()
        faults += row.faults
        if gap is not None:
            found.append(gap)
        if len(faults) >= _MOST_FAULTS:
            break
    if len(found) > MOST_GAPS:
        faults.append(Fault(str(path), "", f"{len(found)} gaps", f"at most {MOST_GAPS}"))
    if faults:
        raise BadInput(faults[:_MOST_FAULTS])
    return tuple(found)


def gaps_path(setup_path: Path) -> Path:
    """Return the file beside a set-up's that keeps its measured gaps."""
    name = setup_path.name
    for suffix in _SETUP_SUFFIXES:
        if name.lower().endswith(suffix):
            name = name[: -len(suffix)]
            break
    return setup_path.with_name(f"{name}{_SUFFIX}")


def read_kept_gaps(setup_path: Path) -> tuple[MeasuredGap, ...]:
    """Return the gaps that are kept with a set-up, none where there is no such file. Raises BadInput."""
    path = gaps_path(setup_path)
    return read_gaps(path) if path.exists() else ()


def keep_gaps(setup_path: Path, gaps: Iterable[MeasuredGap], fingerprint: str = "") -> tuple[MeasuredGap, ...]:
    """Add gaps to those kept with a set-up, and return all; those that are there already are not written twice.

    Those that state no fingerprint get `fingerprint`. Raises BadInput where the file beside the set-up cannot be read
    or written; it stays as it is then.
    """
    path = gaps_path(setup_path)
    stated = [gap if gap.fingerprint else _for_setup(gap, fingerprint) for gap in gaps]
    kept = tuple(dict.fromkeys((*read_kept_gaps(setup_path), *stated)))
    if len(kept) > MOST_GAPS:
        raise bad(path, "", f"{len(kept)} gaps", f"at most {MOST_GAPS}")
    write_table(path, COLUMNS, [_cells(gap) for gap in kept])
    return kept


def replace_gaps(setup_path: Path, gaps: Iterable[MeasuredGap]) -> None:
    """Keep these gaps with a set-up, and no others. Raises BadInput where the file beside it cannot be written."""
    write_table(gaps_path(setup_path), COLUMNS, [_cells(gap) for gap in gaps])


def write_gaps_template(rows: DryRun, fingerprint: str, path: Path) -> None:
    """Write a list of the places on a dry-run sheet, to fill in what was measured. Raises BadInput."""
    table: list[list[Cell]] = []
    for place in places_to_measure(rows):
        parts = place.parts or ("", "")
        angles = reading_deg(round(place.gantry_deg, PLACE_DIGITS)), reading_deg(round(place.couch_deg, PLACE_DIGITS))
        computed_mm = rounded_down(place.computed_mm, 1)
        table.append([place.field, *angles, None, None, None, fingerprint, computed_mm, *parts])
    write_table(path, (*COLUMNS, *_COMPUTED), table)


def _for_setup(gap: MeasuredGap, fingerprint: str) -> MeasuredGap:
    return MeasuredGap(gap.field, gap.gantry_deg, gap.couch_deg, gap.measured_mm, gap.by, gap.on, fingerprint)


def _cells(gap: MeasuredGap) -> list[Cell]:
    return [gap.field, gap.gantry_deg, gap.couch_deg, gap.measured_mm, gap.by, gap.on, gap.fingerprint]


class _Row:
    """One row; `faults` gathers what is wrong with it."""

    def __init__(self, path: str, number: int, cells: dict[str, str]) -> None:
        self._path = path
        self._number = number
        self._cells = cells
        self.faults: list[Fault] = []

    def gap(self) -> MeasuredGap | None:
        """Return the row as a measured gap, None where it has faults."""
        for column, text in self._cells.items():
            if len(text) > LONGEST_CELL:
                self._fault(column, f"{len(text)} characters", f"at most {LONGEST_CELL}")
        field = self._cells.get("field", "")
        if not field:
            self._fault("field", "nothing", "the name of a field or place")
        gantry_deg = self._number_in("gantry_deg", -_MOST_DEG, _MOST_DEG, "degrees")
        couch_deg = self._number_in("couch_deg", -_MOST_DEG, _MOST_DEG, "degrees")
        measured_mm = self._number_in("measured_mm", 0.0, MOST_MM, "mm")
        on, fingerprint = self._day(), self._fingerprint()
        if self.faults:
            return None
        return MeasuredGap(
            printable(field),
            reading_deg(gantry_deg),
            reading_deg(couch_deg),
            round(measured_mm, _DIGITS),
            printable(self._cells.get("by", "")),
            on,
            fingerprint,
        )

    def _number_in(self, column: str, low: float, high: float, unit: str) -> float:
        text = self._cells.get(column, "")
        try:
            value = float(text)
        except ValueError:
            value = math.nan
        if not low <= value <= high:
            allowed = f"{unit}, {low:g} to {high:g}, with a decimal point"
            self._fault(column, described(text) if text else "nothing", allowed)
            return 0.0
        return value

    def _day(self) -> str:
        text = self._cells.get("on", "")
        if not text:
            return ""
        try:
            return datetime.date.fromisoformat(text).isoformat()
        except ValueError:
            self._fault("on", described(text), "a day as 2026-03-04, or nothing")
            return ""

    def _fingerprint(self) -> str:
        text = self._cells.get("fingerprint", "").casefold()
        if text and not (16 <= len(text) <= 64 and all(digit in "0123456789abcdef" for digit in text)):
            self._fault("fingerprint", described(text), "16 to 64 digits, 0 to 9 and a to f, as printed, or nothing")
        return text

    def _fault(self, column: str, found: str, allowed: str) -> None:
        self.faults.append(Fault(self._path, f"row {self._number}, {column}", found, allowed))
