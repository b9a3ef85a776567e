"""How the sheet "Every pair" is laid out: sizes that fit a page, the looks of its cells, legends."""

import math
from dataclasses import dataclass, replace
from typing import Final

from openpyxl.cell.cell import Cell
from openpyxl.worksheet._write_only import WriteOnlyWorksheet

from app.clearance_scale import BANDS, Band
from app.files.workbook_cells import INK, PALE_INK, WHITE, Look, cell, hex_argb
from geometry.states import State

# A spreadsheet shrinks a page to a tenth at most: this many pixels fill A4 across.
_PAGE_PX: Final = 10_500
_COLUMN_PX: Final = 27
_ROW_PX: Final = 24
_LETTER: Final = {State.SHORT: "s", State.UNPROVED: "u"}
_PATTERN: Final = {State.SHORT: "lightUp", State.UNPROVED: "lightTrellis"}
_STATE_WORDS: Final = (
    (State.PERMITTED, "permitted, outlined"),
    (State.SHORT, "s  short of what is required"),
    (State.UNPROVED, "u  unproved, not permitted"),
    (State.CONTACT, "C  contact"),
    (State.NO_TRAVEL, "–  no travel"),
)


@dataclass(frozen=True)
class Sizes:
    """What fits the page: pixels of a cell, letters in it, and letters that are read on the printed page."""

    columns: int
    rows: int
    own: int

    @property
    def column_px(self) -> int:
        """A column of clearances; a fine grid gets narrower ones as long as anything can be read in them."""
        return max(13, min(_COLUMN_PX, (_PAGE_PX - 500) // self.columns))

    @property
    def row_px(self) -> int:
        """A row; that of a single couch angle is high enough to be seen on paper."""
        return max(10, min(max(_ROW_PX, 400 // self.rows), 4700 // self.rows))

    @property
    def pages_across(self) -> int:
        """One, unless the grid is much finer than 1 degree."""
        return math.ceil(self.columns * self.column_px / _PAGE_PX)

    @property
    def letters(self) -> float:
        """Points of the letters in a cell."""
        return max(3.0, round(7.0 * self.column_px / _COLUMN_PX, 1))

    @property
    def print_letters(self) -> int:
        """Eight points on paper, as far as a spreadsheet's letters go."""
        return max(9, min(72, round(8.0 * self.columns * self.column_px / 1050.0)))

    @property
    def first_column(self) -> int:
        """The first column with a clearance, from 1; before it the couch angles, one or two columns."""
        return 2 + self.own

    def columns_for(self, pixels: float) -> int:
        """Return how many columns are that wide together."""
        return max(2, math.ceil(pixels / self.column_px))


def tick_step(extent_deg: float, most: float) -> float:
    """Return a round step in degrees that makes at most so many labels."""
    return next((step for step in (1.0, 5.0, 10.0, 15.0, 30.0, 45.0) if extent_deg / step <= most), 90.0)


def band_samples(sizes: Sizes) -> list[tuple[Look, str]]:
    """Return a look and words for each band of clearances."""

    def words(band: Band) -> str:
        return f"{band.low_mm:g}–{band.high_mm:g}" if math.isfinite(band.high_mm) else f"≥ {band.low_mm:g}"

    return [(pair_look(State.PERMITTED, i, sizes.letters), words(band)) for i, band in enumerate(BANDS)]


def state_samples(sizes: Sizes) -> list[tuple[Look, str]]:
    """Return a look and words for each state."""
    looks = {state: pair_look(state, 4, sizes.letters) for state, _ in _STATE_WORDS}
    looks[State.PERMITTED] = replace(looks[State.PERMITTED], outline=frozenset({"top", "bottom"}))
    return [(looks[state], words) for state, words in _STATE_WORDS]


def legend_row(
    sheet: WriteOnlyWorksheet, sizes: Sizes, columns: int, letters: float, samples: list[tuple[Look, str]]
) -> list[Cell | None]:
    """Return a row of samples, each of so many columns: a quarter coloured, then the words running on."""
    line: list[Cell | None] = [None] * (sizes.first_column - 1)
    coloured = max(1, columns // 4)
    for look, words in samples:
        line += [cell(sheet, None, look)] * coloured
        line.append(cell(sheet, f" {words}", Look(letters)))
        line += [None] * (columns - coloured - 1)
    return line


def pair_look(state: State, band: int, letters: float) -> Look:
    """Return how a pair looks in a state, its clearance in a band of `BANDS`; -1 where there is none to show."""
    if state is State.CONTACT:
        return Look(letters, colour=INK, fill="FFB9BCC0", pattern="lightGrid", lines="FF6A7077", across="center")
    if state is State.NO_TRAVEL:
        return Look(letters, colour=PALE_INK, fill=WHITE, pattern="lightHorizontal", lines="FFB4BBC2", across="center")
    if band < 0:
        return Look(letters, colour=INK, fill=WHITE, pattern="lightTrellis", lines="FFB4BBC2", across="center")
    shade = BANDS[band]
    return Look(
        letters,
        colour=WHITE if shade.is_dark else INK,
        fill=hex_argb(shade.colour),
        pattern=_PATTERN.get(state, "solid"),
        lines="FF8FA3B8" if shade.is_dark else "FF6A7077",
        across="center",
        number=f'0"{_LETTER.get(state, "")}"' if state in _LETTER else "0",
    )


def column_width(pixels: int) -> float:
    """Return a column's width in the workbook's unit, letters of 7 pixels and 5 pixels around them."""
    return (pixels - 5) / 7.0
