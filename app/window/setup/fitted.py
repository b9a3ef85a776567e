"""What is fitted to the machine: accessories by slot, arms, and the collimator's angle."""

from typing import Final

from PySide6.QtCore import Signal
from PySide6.QtWidgets import QCheckBox, QVBoxLayout, QWidget

from app.document.document import Document
from app.document.edits import arm_place, fit, in_turn, set_arm, slide_field
from app.document.fields import ChoiceField, NumberField
from app.document.setup_fields import COLLIMATOR
from app.window.setup.rows import NumberRow, Row, tint
from app.window.setup.words import ChoiceRow
from app.window.theme import LIGHT, Theme
from geometry.machine import Arm, Room

NOTHING: Final = "nothing"
_SLID: Final = "slid by hand"


class FittedEditor(QWidget):
    """Rows for whatever the room has. `edit_wanted` (edit, words for undo, merge key), `edit_finished`."""

    edit_wanted = Signal(object, str, object)
    edit_finished = Signal()

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._room: Room | None = None
        self._theme = LIGHT
        self.rows: list[Row] = []
        self._column = QVBoxLayout(self)
        self._column.setContentsMargins(0, 0, 0, 0)
        self._column.setSpacing(5)

    def set_theme(self, theme: Theme) -> None:
        """Take over colours."""
        self._theme = theme
        for row in self.rows:
            row.set_theme(theme)

    def show_document(self, document: Document) -> None:
        """Show what is fitted quietly; another room has other rows."""
        if document.setup.room is not self._room:
            self._room = document.setup.room
            self._build(document.setup.room)
        for row in self.rows:
            row.show_document(document)

    def commit(self) -> None:
        """Ask for what was typed and not asked for yet."""
        for row in self.rows:
            row.commit()

    def _build(self, room: Room) -> None:
        for row in self.rows:
            self._column.removeWidget(row)
            row.blockSignals(True)
            row.hide()
            row.deleteLater()
        self.rows = [AnyAngleRow(COLLIMATOR), *_accessory_rows(room)]
        for arm in room.arms:
            if arm.positions:
                self.rows.append(ChoiceRow(arm_field(arm)))
            if arm.travel_mm is not None:
                self.rows.append(NumberRow(_slide_row(arm)))
        for row in self.rows:
            row.set_theme(self._theme)
            row.edit_wanted.connect(self.edit_wanted)
            row.edit_finished.connect(self.edit_finished)
            self._column.addWidget(row)


class AnyAngleRow(NumberRow):
    """A number that may also be any: with a box to tick for that."""

    def __init__(self, field: NumberField, parent: QWidget | None = None) -> None:
        super().__init__(field, parent)
        self.any = QCheckBox("Any angle")
        self.any.setToolTip(field.help)
        self.any.setAccessibleName(f"{field.title}, any angle")
        self.grid.addWidget(self.any, 2, 1, 1, 2)
        self.any.clicked.connect(self._on_any)

    def set_theme(self, theme: Theme) -> None:
        """Take over colours."""
        super().set_theme(theme)
        tint(self.any, theme)

    def show_document(self, document: Document) -> None:
        """Show the number, or that it may be any."""
        super().show_document(document)
        is_any = self.field.read(document) is None
        self.any.setChecked(is_any)

    def _placeholder(self, usual: float | None) -> str:
        # The tick below says it.
        del usual
        return ""

    def _on_any(self, checked: bool) -> None:
        field, value = self.field, None if checked else 0.0
        self.ask(lambda document: field.changed(document, value), merge=False)


def accessory_field(label: str, names: tuple[str, ...]) -> ChoiceField:
    """Return which of the accessories of a slot is fitted, as a word."""

    def read(document: Document) -> str:
        return next((name for name in names if name in document.setup.fitted), NOTHING)

    def write(document: Document, name: str) -> Document:
        if name != NOTHING:
            return fit(name)(document)
        return in_turn(*(fit(other, fitted=False) for other in names))(document)

    return ChoiceField(
        f"fitted.accessories.{label}",
        "accessory",
        label,
        "Of the accessories of one slot one at most can be fitted.",
        lambda _: (NOTHING, *names),
        read,
        write,
        _capital,
    )


def arm_field(arm: Arm) -> ChoiceField:
    """Return where an arm is, as a word."""
    names = tuple(position.name for position in arm.positions)

    def options(document: Document) -> tuple[str, ...]:
        return names if isinstance(arm_place(document, arm), str) else (*names, _SLID)

    def read(document: Document) -> str:
        place = arm_place(document, arm)
        return place if isinstance(place, str) else _SLID

    def write(document: Document, name: str) -> Document:
        return document if name == _SLID else set_arm(arm.name, name)(document)

    return ChoiceField(
        f"fitted.arms.{arm.name}",
        "arm",
        _capital(arm.name),
        "Where the arm is. Its first position is where it is when a set-up says nothing.",
        options,
        read,
        write,
        _capital,
    )


def _accessory_rows(room: Room) -> list[Row]:
    slots: dict[str, list[str]] = {}
    for accessory in room.accessories:
        # One without a slot shares with none: a list of its own.
        slots.setdefault(accessory.slot or f"\0{accessory.name}", []).append(accessory.name)
    return [
        ChoiceRow(accessory_field(names[0] if slot.startswith("\0") else f"In the {slot}", tuple(names)))
        for slot, names in slots.items()
    ]


def _slide_row(arm: Arm) -> NumberField:
    field = slide_field(arm)
    label = "Slid by" if arm.positions else _capital(arm.name)
    return NumberField(
        f"{field.key}.mm",
        "arm",
        label,
        "mm",
        f"{arm.name}: how far it has slid.",
        field.limits,
        field.step,
        field.read,
        field.write,
    )


def _capital(word: str) -> str:
    return word[:1].upper() + word[1:]


def fitted_summary(document: Document) -> str:
    """Return what is fitted in a line."""
    setup = document.setup
    angle = "any collimator angle" if setup.collimator_deg is None else f"collimator {setup.collimator_deg:g}°"
    moved: list[str] = []
    for arm in setup.room.arms:
        place = arm_place(document, arm)
        first = arm.positions[0].name if arm.positions else None
        if place != first:
            moved.append(f"{arm.name} {place}" if isinstance(place, str) else f"{arm.name} {place:g} mm")
    return ", ".join([*setup.fitted, *moved, angle])
