"""Rows of the set-up panel: a field of the set-up with its label, its unit and what is allowed; numbers here."""

import re

from PySide6.QtCore import Signal
from PySide6.QtGui import QPalette
from PySide6.QtWidgets import QCheckBox, QGridLayout, QLabel, QWidget

from app.document.document import Document
from app.document.fields import Edit, NumberField
from app.window.setup.number import DragLabel, NumberBox
from app.window.theme import LIGHT, Theme
from geometry.errors import GeometryError
from geometry.machine import Axis, Room

LABEL_WIDTH = 118
UNIT_WIDTH = 26
_ALLOWED = re.compile(r"; allowed(?: is| are|:) ")


class Row(QWidget):
    """A field in the panel. `edit_wanted` (edit, words for undo, merge key); `edit_finished` when they are over."""

    edit_wanted = Signal(object, str, object)
    edit_finished = Signal()

    def __init__(self, title: str, key: str, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self.key = key
        self._title = title
        self._document: Document | None = None
        self.grid = QGridLayout(self)
        self.grid.setContentsMargins(0, 0, 0, 0)
        self.grid.setHorizontalSpacing(6)
        self.grid.setVerticalSpacing(1)
        self.message = QLabel()
        self.message.setObjectName("message")
        self.message.setWordWrap(True)
        self.message.hide()

    def set_theme(self, theme: Theme) -> None:
        """Take over colours."""

    def show_document(self, document: Document) -> None:
        """Show the field's value quietly."""
        self._document = document

    def commit(self) -> None:
        """Ask for what was typed and not asked for yet."""

    def tell(self, text: str) -> None:
        """Say what is wrong below the field, "" for nothing."""
        self.message.setText(text)
        self.message.setVisible(bool(text))

    def ask(self, edit: Edit, *, merge: bool = True) -> bool:
        """Ask for an edit; one that is not allowed is told here and goes no further. Returns whether it was asked.

        The row goes on from the document as it will be: the next key may come before that one is shown.
        """
        if self._document is None:
            return False
        try:
            self._document = edit(self._document)
        except GeometryError as error:
            self.tell(allowed_only(str(error), self._title))
            return False
        self.tell("")
        self.edit_wanted.emit(edit, self._title, self.key if merge else None)
        return True


class NumberRow(Row):
    """A number with a label to drag it by."""

    def __init__(self, field: NumberField, parent: QWidget | None = None) -> None:
        super().__init__(field.title, field.key, parent)
        self.field = field
        self.label = DragLabel(field.label, field.step)
        self.label.setMinimumWidth(LABEL_WIDTH)
        self.label.setMaximumWidth(LABEL_WIDTH)
        unit = f", {_unit_word(field.unit)}" if field.unit else ""
        self.box = NumberBox(f"{field.title}{unit}", field.step, may_be_empty=bool(field.none))
        self.unit = QLabel(field.unit)
        self.unit.setObjectName("unit")
        self.unit.setMinimumWidth(UNIT_WIDTH)
        self.label.setBuddy(self.box)
        self.grid.addWidget(self.label, 0, 0)
        self.grid.addWidget(self.box, 0, 1)
        self.grid.addWidget(self.unit, 0, 2)
        self.grid.addWidget(self.message, 1, 0, 1, 3)
        self.grid.setColumnStretch(1, 1)
        self._dragged = 0.0
        self._theme = LIGHT
        self.box.value_wanted.connect(self._ask)
        self.box.unreadable.connect(self.tell)
        self.box.finished.connect(self.edit_finished)
        self.label.drag_started.connect(self._start_drag)
        self.label.dragged.connect(self._drag)
        self.label.drag_ended.connect(self.edit_finished)

    def set_theme(self, theme: Theme) -> None:
        """Take over colours."""
        self._theme = theme
        self.label.set_theme(theme)

    def show_document(self, document: Document) -> None:
        """Show the number, or what an empty box stands for."""
        changed = self._document is None or self.field.read(self._document) != self.field.read(document)
        super().show_document(document)
        value = self.field.read(document)
        usual = self.field.usual(document) if self.field.usual is not None else None
        self.box.set_start(usual)
        self.box.show_value(value, self._placeholder(usual) if value is None else "")
        self._set_tips(document.setup.room)
        if changed and not self.box.is_being_typed():
            self.tell("")

    def commit(self) -> None:
        """Ask for what was typed and not asked for yet."""
        self.box.commit()

    def tell(self, text: str) -> None:
        """Say what is wrong below the number, and mark it."""
        super().tell(text)
        palette = QPalette(self.palette())
        if text:
            palette.setColor(QPalette.ColorRole.Text, self._theme.colour("marked"))
        self.box.lineEdit().setPalette(palette)

    def _ask(self, value: float | None) -> None:
        field = self.field
        if not self.ask(lambda document: field.changed(document, value)):
            # What was typed stays in sight beside what is allowed.
            self.box.keep_typed(value)
        elif self._document is not None:
            self.show_document(self._document)

    def _start_drag(self) -> None:
        self.box.commit()
        if self._document is not None:
            value = self.field.read(self._document)
            usual = self.field.usual(self._document) if self.field.usual is not None else 0.0
            self._dragged = value if value is not None else usual

    def _drag(self, change: float) -> None:
        self._dragged = round(self._dragged + change, 6)
        limits = self.field.limits
        value = min(max(self._dragged, limits.low), limits.high)
        field = self.field
        asked = self.ask(lambda document: field.changed(document, value))
        if asked and self._document is not None:
            self.show_document(self._document)
        if asked and value != self._dragged:
            self.tell(f"Allowed: {self.field.allowed}")

    def _placeholder(self, usual: float | None) -> str:
        return f"≈ {usual:.0f}" if usual is not None else self.field.none

    def _set_tips(self, room: Room) -> None:
        field = self.field
        lines = [field.help, f"Allowed: {field.allowed}."]
        lines += [f"{travel_shown(axis_of(room, name), name)}." for name in field.axes]
        if field.none:
            lines.append(f"Empty: {field.none}{', the average counts' if field.usual is not None else ''}.")
        tip = "\n".join(lines)
        if self.box.toolTip() != tip:
            self.box.setToolTip(tip)
            self.label.setToolTip(f"{tip}\nDrag sideways to change it, with Shift finely.")
            self.box.setAccessibleDescription(tip)


def plain_label(text: str) -> QLabel:
    """Return a label of the panel's first column, in line with those that can be dragged."""
    label = QLabel(text)
    label.setContentsMargins(12, 0, 0, 0)
    label.setMinimumWidth(LABEL_WIDTH)
    label.setMaximumWidth(LABEL_WIDTH)
    return label


def tint(box: QCheckBox, theme: Theme) -> None:
    """Give a box to tick a ground that stands out from a dark panel."""
    palette = QPalette(box.palette())
    palette.setColor(QPalette.ColorRole.Base, theme.colour("line" if theme.dark else "canvas"))
    box.setPalette(palette)


def allowed_only(message: str, title: str = "") -> str:
    """Return what an error says beside its own field: what is allowed there, or all of it where it speaks of others."""
    found, *allowed = _ALLOWED.split(message, maxsplit=1)
    if allowed and found.startswith(f"{title} = "):
        return f"Allowed: {allowed[0]}"
    return message[:1].upper() + message[1:]


def axis_of(room: Room, name: str) -> Axis:
    """Return an axis of the room by the name that fields know it by."""
    axis: Axis = room.collimator if name == "collimator" else getattr(room.couch, name)
    return axis


def travel_shown(axis: Axis, name: str) -> str:
    """Return an axis's travel in words."""
    unit = "mm" if name in {"lateral", "longitudinal", "vertical"} else "°"
    what = "collimator" if name == "collimator" else f"couch {name}"
    if axis.low == axis.high:
        return f"This room's {what} does not move"
    return f"This room's {what} travels {axis.low:g} to {axis.high:g} {unit}"


def _unit_word(unit: str) -> str:
    return {"°": "degrees"}.get(unit, unit)
