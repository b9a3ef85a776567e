"""Measured gaps of a field beside the computed ones: where to measure, and what somebody measured there."""

import datetime
from collections.abc import Sequence
from typing import Final

from PySide6.QtCore import Signal
from PySide6.QtWidgets import QGridLayout, QHBoxLayout, QLabel, QLineEdit, QVBoxLayout, QWidget

from app.files.readings import clearance_text
from app.plan.dry_run_words import angle_text
from app.plan.gaps import GapPlace, GapRow, MeasuredGap
from app.window.setup.number import NumberBox
from app.window.theme import LIGHT, Theme

# Nearer than this, deg, a gap was measured at the place of the sheet.
_SAME_DEG: Final = 0.051
_ALLOWED: Final = "A measured gap is a number of mm, 0 or more."


class GapsTable(QWidget):
    """The gaps of one field. `gap_typed` (MeasuredGap): a new one, in place of one of the same field and angles.

    `gap_removed` (MeasuredGap): its number was deleted.
    """

    gap_typed = Signal(object)
    gap_removed = Signal(object)

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._theme = LIGHT
        self._cells: list[_Cell] = []
        self.by = QLineEdit()
        self.by.setAccessibleName("Measured by")
        self.by.setPlaceholderText("initials")
        self.by.setToolTip("Written beside every gap that is typed from now on, with the day.")
        self._message = QLabel()
        self._message.setWordWrap(True)
        self._message.hide()
        label = QLabel("Measured by")
        label.setBuddy(self.by)
        line = QHBoxLayout()
        line.addWidget(label)
        line.addWidget(self.by, 1)
        self._column = QVBoxLayout()
        self._column.setSpacing(6)
        column = QVBoxLayout(self)
        column.setContentsMargins(0, 0, 0, 0)
        column.setSpacing(6)
        column.addLayout(self._column)
        column.addWidget(self._message)
        column.addLayout(line)

    def set_theme(self, theme: Theme) -> None:
        """Take over colours."""
        self._theme = theme
        self._message.setStyleSheet(f"color: {theme.marked};")
        for cell in self._cells:
            cell.set_theme(theme)

    def show_gaps(self, places: Sequence[GapPlace], rows: Sequence[GapRow]) -> None:
        """Show the places to measure at with what was measured there, then what was measured elsewhere."""
        entries: list[tuple[GapPlace | None, GapRow | None]] = []
        left = list(rows)
        for place in places:
            found = next((row for row in left if _is_at(row.gap, place)), None)
            if found is not None:
                left.remove(found)
            entries.append((place, found))
        entries += [(None, row) for row in left]
        if [cell.key for cell in self._cells] != [_key(*entry) for entry in entries]:
            self._build(entries)
        for cell, entry in zip(self._cells, entries, strict=True):
            cell.show_entry(*entry)
        self._message.hide()

    def commit(self) -> None:
        """Ask for what was typed and not asked for yet."""
        for cell in tuple(self._cells):
            cell.box.commit()

    def _build(self, entries: Sequence[tuple[GapPlace | None, GapRow | None]]) -> None:
        for cell in self._cells:
            cell.box.blockSignals(True)
            self._column.removeWidget(cell)
            cell.hide()
            cell.deleteLater()
        self._cells = [_Cell(_key(*entry)) for entry in entries]
        for cell in self._cells:
            cell.set_theme(self._theme)
            cell.box.value_wanted.connect(lambda value, cell=cell: self._typed(cell, value))
            cell.box.unreadable.connect(self._tell)
            self._column.addWidget(cell)

    def _typed(self, cell: "_Cell", value: float | None) -> None:
        if value is None:
            self._tell("")
            if cell.gap is not None:
                self.gap_removed.emit(cell.gap)
            return
        if value < 0.0:
            self._tell(_ALLOWED)
            return
        self._tell("")
        field, gantry_deg, couch_deg = cell.key
        today = datetime.datetime.now().astimezone().date().isoformat()
        self.gap_typed.emit(MeasuredGap(field, gantry_deg, couch_deg, value, self.by.text().strip(), today))

    def _tell(self, text: str) -> None:
        self._message.setText(text)
        self._message.setVisible(bool(text))


class _Cell(QWidget):
    """One place: its angles, the computed and the measured gap, and what is to be said of them."""

    def __init__(self, key: tuple[str, float, float]) -> None:
        super().__init__()
        self.key = key
        self.gap: MeasuredGap | None = None
        self._is_flagged = False
        self._theme = LIGHT
        where = f"gantry {angle_text(key[1])}, couch {angle_text(key[2])}"
        self._where = QLabel(where.capitalize())
        self._computed = QLabel()
        self.box = NumberBox(f"Measured gap at {where}, mm", 1.0, may_be_empty=True)
        self.box.setToolTip("What was measured in the room, mm. Delete the number to take it back.")
        self.box.setFixedWidth(80)
        self._difference = QLabel()
        self._said = QLabel()
        self._said.setWordWrap(True)
        for label in (self._where, self._computed, self._difference):
            label.setWordWrap(True)
        grid = QGridLayout(self)
        grid.setContentsMargins(0, 0, 0, 0)
        grid.setHorizontalSpacing(8)
        grid.setVerticalSpacing(1)
        grid.setColumnStretch(0, 1)
        grid.addWidget(self._where, 0, 0)
        grid.addWidget(self._computed, 1, 0)
        grid.addWidget(self.box, 0, 1, 2, 1)
        grid.addWidget(QLabel("mm"), 0, 2, 2, 1)
        grid.addWidget(self._difference, 2, 0, 1, 3)
        grid.addWidget(self._said, 3, 0, 1, 3)

    def set_theme(self, theme: Theme) -> None:
        """Take over colours."""
        self._theme = theme
        self._computed.setStyleSheet(f"color: {theme.faint};")
        self._difference.setStyleSheet("font-weight: 600;")
        self._said.setStyleSheet(f"color: {theme.marked if self._is_flagged else theme.faint};")

    def show_entry(self, place: GapPlace | None, row: GapRow | None) -> None:
        """Show a place, what was measured there, or both."""
        computed = row.computed_mm if row is not None else place.computed_mm if place is not None else None
        self._computed.setText("computed: none" if computed is None else f"computed {clearance_text(computed)}")
        self.gap = row.gap if row is not None else None
        self.box.show_value(row.gap.measured_mm if row is not None else None)
        self._is_flagged = row is not None and row.is_flagged
        self._difference.setText(_difference_words(row))
        self._said.setText(row.words[:1].upper() + row.words[1:] if row is not None else "")
        for label in (self._difference, self._said):
            label.setVisible(bool(label.text()))
        self.set_theme(self._theme)


def _difference_words(row: GapRow | None) -> str:
    if row is None:
        return ""
    words = []
    if row.difference_mm is not None:
        words.append(f"{row.difference_mm:+.1f} mm against the computed".replace("-", "−"))
    signed = ", ".join(part for part in (f"by {row.gap.by}" if row.gap.by else "", row.gap.on) if part)
    return "; ".join([*words, signed] if signed else words)


def _key(place: GapPlace | None, row: GapRow | None) -> tuple[str, float, float]:
    if place is not None:
        return place.field, place.gantry_deg, place.couch_deg
    if row is None:
        raise ValueError("neither a place nor a gap")
    return row.gap.field, row.gap.gantry_deg, row.gap.couch_deg


def _is_at(gap: MeasuredGap, place: GapPlace) -> bool:
    apart = (gap.gantry_deg - place.gantry_deg, gap.couch_deg - place.couch_deg)
    return all(abs((angle + 180.0) % 360.0 - 180.0) <= _SAME_DEG for angle in apart)
