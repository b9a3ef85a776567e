"""What lies on the table with the patient: to shift, take away and add."""

from collections.abc import Callable

from PySide6.QtCore import Qt, Signal
from PySide6.QtWidgets import (
    QGridLayout,
    QHBoxLayout,
    QLabel,
    QLineEdit,
    QPushButton,
    QToolButton,
    QVBoxLayout,
    QWidget,
)

from app.document.device_edits import add_box, position_field, remove_device
from app.document.document import Document
from app.document.fields import Edit
from app.window.setup.number import NumberBox
from app.window.setup.rows import NumberRow, allowed_only, plain_label
from app.window.theme import LIGHT, Theme
from geometry.errors import GeometryError
from geometry.scene import patient_solids

_NEW_SIZE_MM = (300.0, 400.0, 50.0)
_SIZES = (("Size across", "x"), ("Size along", "y"), ("Size up", "z"))


class DevicesEditor(QWidget):
    """A line for each device, which opens to its position. `edit_wanted`, `edit_finished` as those of a row."""

    edit_wanted = Signal(object, str, object)
    edit_finished = Signal()

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._document: Document | None = None
        self._theme = LIGHT
        self._names: tuple[str, ...] = ()
        self.lines: list[DeviceLine] = []
        self._column = QVBoxLayout(self)
        self._column.setContentsMargins(0, 0, 0, 0)
        self._column.setSpacing(3)
        self.none = QLabel("Nothing lies on the table with the patient.")
        self.none.setObjectName("unit")
        self.none.setWordWrap(True)
        self.box_form = BoxForm(self._ask)
        self.box_form.hide()
        self.add = QPushButton("Add a box …")
        self.add.clicked.connect(self._open_form)
        for widget in (self.none, self.box_form, self.add):
            self._column.addWidget(widget)
        self.box_form.closed.connect(self._close_form)

    def set_theme(self, theme: Theme) -> None:
        """Take over colours."""
        self._theme = theme
        for line in self.lines:
            line.set_theme(theme)

    def show_document(self, document: Document) -> None:
        """Show the devices quietly."""
        self._document = document
        names = tuple(device.name for device in document.setup.devices)
        if names != self._names:
            self._build(names)
        for line in self.lines:
            line.show_document(document)

    def commit(self) -> None:
        """Ask for what was typed and not asked for yet."""
        for line in self.lines:
            line.commit()

    def _build(self, names: tuple[str, ...]) -> None:
        opened = {line.name for line in self.lines if line.is_open()}
        for line in self.lines:
            self._column.removeWidget(line)
            line.blockSignals(True)
            line.hide()
            line.deleteLater()
        self._names = names
        self.lines = [DeviceLine(name, is_open=name in opened) for name in names]
        for i, line in enumerate(self.lines):
            line.set_theme(self._theme)
            line.edit_wanted.connect(self.edit_wanted)
            line.edit_finished.connect(self.edit_finished)
            self._column.insertWidget(i, line)
        self.none.setVisible(not names)

    def _ask(self, edit: Edit, title: str) -> str:
        """Ask for an edit and return "", or return what is wrong with it."""
        if self._document is None:
            return "No set-up is open."
        try:
            edit(self._document)
        except GeometryError as error:
            return allowed_only(str(error))
        self.edit_wanted.emit(edit, title, None)
        return ""

    def _open_form(self) -> None:
        if self._document is None:
            return
        setup = self._document.setup
        taken = {part.name for part in (*setup.room.parts, *setup.devices)}
        taken |= {name for name, _ in patient_solids(setup.patient)}
        number = next(n for n in range(1, len(taken) + 2) if _numbered(n) not in taken)
        self.box_form.start(_numbered(number))
        self.box_form.show()
        self.add.hide()
        self.box_form.name.setFocus()

    def _close_form(self) -> None:
        self.box_form.hide()
        self.add.show()
        self.add.setFocus()


class DeviceLine(QWidget):
    """One device: its name, a button to take it away, and its position while it is open."""

    edit_wanted = Signal(object, str, object)
    edit_finished = Signal()

    def __init__(self, name: str, *, is_open: bool = False, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self.name = name
        self.toggle = QToolButton()
        self.toggle.setText(name)
        self.toggle.setCheckable(True)
        self.toggle.setAutoRaise(True)
        self.toggle.setToolButtonStyle(Qt.ToolButtonStyle.ToolButtonTextBesideIcon)
        self.toggle.setAccessibleName(f"Device {name}, position")
        self.toggle.setToolTip("Show where it lies")
        remove = QToolButton()
        remove.setText("×")
        remove.setAutoRaise(True)
        remove.setAccessibleName(f"Remove device {name}")
        remove.setToolTip(f"Take {name} off the table; undo brings it back")
        remove.clicked.connect(lambda: self.edit_wanted.emit(remove_device(name), f"remove device {name}", None))
        self.remove = remove
        self.place = QLabel()
        self.place.setObjectName("unit")
        head = QHBoxLayout()
        head.setContentsMargins(0, 0, 0, 0)
        head.addWidget(self.toggle)
        head.addStretch(1)
        head.addWidget(self.place)
        head.addWidget(remove)
        self.rows = [NumberRow(position_field(name, axis)) for axis in range(3)]
        self.body = QWidget()
        rows = QVBoxLayout(self.body)
        rows.setContentsMargins(0, 0, 0, 6)
        rows.setSpacing(4)
        for row in self.rows:
            row.edit_wanted.connect(self.edit_wanted)
            row.edit_finished.connect(self.edit_finished)
            rows.addWidget(row)
        column = QVBoxLayout(self)
        column.setContentsMargins(0, 0, 0, 0)
        column.setSpacing(2)
        column.addLayout(head)
        column.addWidget(self.body)
        self.toggle.toggled.connect(self._on_toggled)
        self.toggle.setChecked(is_open)
        self._on_toggled(is_open)

    def set_theme(self, theme: Theme) -> None:
        """Take over colours."""
        for row in self.rows:
            row.set_theme(theme)

    def is_open(self) -> bool:
        """Tell whether the position is shown."""
        return self.toggle.isChecked()

    def show_document(self, document: Document) -> None:
        """Show the position quietly."""
        shifts = [row.field.read(document) or 0.0 for row in self.rows]
        self.place.setText("shifted" if any(shifts) else "")
        self.place.setToolTip(", ".join(f"{value:g}" for value in shifts) + " mm across, along, up")
        for row in self.rows:
            row.show_document(document)

    def commit(self) -> None:
        """Ask for what was typed and not asked for yet."""
        for row in self.rows:
            row.commit()

    def _on_toggled(self, is_open: bool) -> None:
        self.body.setVisible(is_open)
        self.toggle.setArrowType(Qt.ArrowType.DownArrow if is_open else Qt.ArrowType.RightArrow)


class BoxForm(QWidget):
    """Name and sizes of a box to add. `closed`: done with, one way or the other."""

    closed = Signal()

    def __init__(self, ask: Callable[[Edit, str], str], parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._ask = ask
        self._size = list(_NEW_SIZE_MM)
        self.name = QLineEdit()
        self.name.setAccessibleName("Name of the box")
        grid = QGridLayout(self)
        grid.setContentsMargins(0, 4, 0, 4)
        grid.setHorizontalSpacing(6)
        grid.setVerticalSpacing(4)
        grid.setColumnStretch(1, 1)
        grid.addWidget(plain_label("Name"), 0, 0)
        grid.addWidget(self.name, 0, 1, 1, 2)
        self.sizes: list[NumberBox] = []
        for axis, (label, _) in enumerate(_SIZES):
            box = NumberBox(f"{label}, mm", 10.0)
            box.value_wanted.connect(lambda value, axis=axis: self._set_size(axis, value))
            unit = QLabel("mm")
            unit.setObjectName("unit")
            grid.addWidget(plain_label(label), axis + 1, 0)
            grid.addWidget(box, axis + 1, 1)
            grid.addWidget(unit, axis + 1, 2)
            self.sizes.append(box)
        self.message = QLabel()
        self.message.setObjectName("message")
        self.message.setWordWrap(True)
        self.message.hide()
        self.confirm = QPushButton("Add")
        self.cancel = QPushButton("Cancel")
        self.confirm.clicked.connect(self._add)
        self.cancel.clicked.connect(self.closed)
        buttons = QHBoxLayout()
        buttons.addStretch(1)
        buttons.addWidget(self.confirm)
        buttons.addWidget(self.cancel)
        grid.addWidget(self.message, 4, 0, 1, 3)
        grid.addLayout(buttons, 5, 0, 1, 3)

    def start(self, name: str) -> None:
        """Begin with a name and a usual size."""
        self._size = list(_NEW_SIZE_MM)
        self.name.setText(name)
        self.name.selectAll()
        self.message.hide()
        for box, size in zip(self.sizes, self._size, strict=True):
            box.show_value(size)

    def _set_size(self, axis: int, value: float) -> None:
        self._size[axis] = value
        self.sizes[axis].show_value(value)

    def _add(self) -> None:
        for box in self.sizes:
            box.commit()
        across, along, up = self._size
        # On the table, in the middle, where the patient's head may be.
        name = self.name.text()
        wrong = self._ask(add_box(name, (across, along, up), (0.0, -along / 2.0, up / 2.0)), f"add device {name}")
        self.message.setText(wrong)
        self.message.setVisible(bool(wrong))
        if not wrong:
            self.closed.emit()


def _numbered(number: int) -> str:
    return "box" if number == 1 else f"box {number}"
