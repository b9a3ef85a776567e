"""The components of the required clearance, each with its standard deviation, to change, add and remove."""

from collections.abc import Callable

from PySide6.QtCore import Signal
from PySide6.QtWidgets import QCheckBox, QGridLayout, QHBoxLayout, QLabel, QLineEdit, QPushButton, QToolButton, QWidget

from app.document.document import Document
from app.document.edits import add_component, change_component, component_field, remove_component
from app.document.fields import Edit
from app.window.setup.number import NumberBox
from app.window.setup.rows import allowed_only, tint
from app.window.theme import LIGHT, Theme
from geometry.errors import GeometryError
from geometry.setup import Component

_COLUMNS = ("Contribution", "SD, mm", "Patient", "")
_NEW_SD_MM = 2.0


class ComponentsEditor(QWidget):
    """A small table. `edit_wanted` (edit, words for undo, merge key), `edit_finished`."""

    edit_wanted = Signal(object, str, object)
    edit_finished = Signal()

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._document: Document | None = None
        self._theme = LIGHT
        self._wants_name = False
        self._lines: list[_Line] = []
        self._grid = QGridLayout(self)
        self._grid.setContentsMargins(0, 4, 0, 0)
        self._grid.setHorizontalSpacing(4)
        self._grid.setVerticalSpacing(3)
        self._grid.setColumnStretch(0, 1)
        for column, words in enumerate(_COLUMNS):
            label = QLabel(words)
            label.setObjectName("unit")
            self._grid.addWidget(label, 0, column)
        self.add = QPushButton("Add a contribution")
        self.add.clicked.connect(self._add)
        self.message = QLabel()
        self.message.setObjectName("message")
        self.message.setWordWrap(True)
        self.message.hide()

    def set_theme(self, theme: Theme) -> None:
        """Take over colours."""
        self._theme = theme
        for line in self._lines:
            tint(line.patient, theme)

    def show_document(self, document: Document) -> None:
        """Show the components quietly."""
        self._document = document
        components = document.setup.required.components
        is_new = len(components) > len(self._lines) and self._wants_name
        if len(components) != len(self._lines):
            self._build(len(components))
        for line, component in zip(self._lines, components, strict=True):
            line.show_component(component)
        if is_new:
            self._wants_name = False
            self._lines[-1].name.setFocus()
            self._lines[-1].name.selectAll()

    def commit(self) -> None:
        """Ask for what was typed and not asked for yet."""
        for line in tuple(self._lines):
            line.commit()

    def _build(self, count: int) -> None:
        had_focus = next((i for i, line in enumerate(self._lines) if line.has_focus()), None)
        for line in self._lines:
            line.discard(self._grid)
        self._grid.removeWidget(self.add)
        self._grid.removeWidget(self.message)
        self._lines = [_Line(i, self._ask, self.edit_finished.emit) for i in range(count)]
        for i, line in enumerate(self._lines):
            line.put(self._grid, i + 1)
            tint(line.patient, self._theme)
        self._grid.addWidget(self.message, count + 1, 0, 1, len(_COLUMNS))
        self._grid.addWidget(self.add, count + 2, 0, 1, len(_COLUMNS))
        if had_focus is not None and self._lines:
            self._lines[min(had_focus, count - 1)].name.setFocus()

    def _ask(self, edit: Edit, title: str, key: str | None) -> bool:
        """Ask for an edit; one that is not allowed is told here and goes no further."""
        if self._document is None:
            return False
        try:
            edit(self._document)
        except GeometryError as error:
            self.message.setText(allowed_only(str(error)))
            self.message.show()
            return False
        self.message.hide()
        self.edit_wanted.emit(edit, f"required clearance, {title}", key)
        return True

    def _add(self) -> None:
        if self._document is None:
            return
        taken = {component.name for component in self._document.setup.required.components}
        number = next(n for n in range(1, len(taken) + 2) if _numbered(n) not in taken)
        # Its line may be shown a little later.
        self._wants_name = True
        if not self._ask(add_component(_numbered(number), _NEW_SD_MM), "add a contribution", None):
            self._wants_name = False


class _Line:
    """The widgets of one component."""

    def __init__(self, index: int, ask: Callable[[Edit, str, str | None], bool], finished: Callable[[], None]) -> None:
        self._index = index
        self._ask = ask
        self._shown: Component | None = None
        number = index + 1
        self.name = QLineEdit()
        self.name.setAccessibleName(f"Contribution {number}, name")
        self.name.editingFinished.connect(self._rename)
        field = component_field(index)
        self._key = field.key
        self.sd = NumberBox(f"Contribution {number}, standard deviation, mm", field.step)
        self.sd.setButtonSymbols(NumberBox.ButtonSymbols.NoButtons)
        self.sd.setFixedWidth(46)
        self.sd.setToolTip(f"{field.help}\nAllowed: {field.allowed}.")
        self.sd.value_wanted.connect(self._change)
        self.sd.finished.connect(finished)
        self.patient = QCheckBox()
        self.patient.setAccessibleName(f"Contribution {number}, only where the patient or a device is in the pair")
        self.patient.setToolTip("Counts only where the patient or a device is in the pair.")
        self.patient.clicked.connect(self._limit)
        self.remove = QToolButton()
        self.remove.setText("×")
        self.remove.setAutoRaise(True)
        self.remove.setFixedWidth(20)
        self.remove.setAccessibleName(f"Remove contribution {number}")
        self.remove.setToolTip("Remove this contribution")
        self.remove.clicked.connect(lambda: ask(remove_component(index), "remove a contribution", None))
        self._centred = QWidget()
        row = QHBoxLayout(self._centred)
        row.setContentsMargins(8, 0, 0, 0)
        row.addWidget(self.patient)
        self._widgets = (self.name, self.sd, self._centred, self.remove)

    def put(self, grid: QGridLayout, row: int) -> None:
        """Put the widgets into a row of the grid."""
        for column, widget in enumerate(self._widgets):
            grid.addWidget(widget, row, column)
            # At once: what is not shown cannot have the focus.
            widget.show()

    def discard(self, grid: QGridLayout) -> None:
        """Take the widgets away."""
        for widget in self._widgets:
            grid.removeWidget(widget)
            widget.blockSignals(True)
            widget.hide()
            widget.deleteLater()

    def has_focus(self) -> bool:
        """Tell whether one of the widgets is in use."""
        return any(widget.hasFocus() for widget in (*self._widgets, self.patient))

    def show_component(self, component: Component) -> None:
        """Show a component quietly. What somebody is typing stays."""
        self._shown = component
        if not (self.name.hasFocus() and self.name.isModified()) and self.name.text() != component.name:
            self.name.setText(component.name)
            self.name.setCursorPosition(0)
        self.name.setToolTip(component.name)
        self.sd.show_value(component.sd_mm)
        self.patient.setChecked(component.patient_only)

    def commit(self) -> None:
        """Ask for what was typed and not asked for yet."""
        self._rename()
        self.sd.commit()

    def _rename(self) -> None:
        text = self.name.text()
        if not self.name.isModified() or self._shown is None or text == self._shown.name:
            return
        if self._ask(change_component(self._index, name=text), "name of a contribution", None):
            self.name.setModified(False)

    def _change(self, value: float) -> None:
        if self._ask(change_component(self._index, sd_mm=value), "standard deviation", self._key):
            self.sd.show_value(value)
        else:
            self.sd.keep_typed(value)

    def _limit(self, checked: bool) -> None:
        self._ask(change_component(self._index, patient_only=checked), "which pairs a contribution counts for", None)


def _numbered(number: int) -> str:
    return "contribution" if number == 1 else f"contribution {number}"
