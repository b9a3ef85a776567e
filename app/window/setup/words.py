"""Rows of the set-up panel for words to choose from and texts to write."""

from collections.abc import Callable

from PySide6.QtCore import Qt, Signal
from PySide6.QtGui import QFocusEvent, QKeyEvent, QWheelEvent
from PySide6.QtWidgets import QComboBox, QLabel, QPlainTextEdit, QSizePolicy, QWidget

from app.document.document import Document
from app.document.fields import ChoiceField, TextField
from app.window.setup.rows import Row, plain_label


class QuietCombo(QComboBox):
    """A list to choose from that leaves the wheel to the page unless it is in use."""

    def __init__(self, name: str, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self.setAccessibleName(name)
        self.setFocusPolicy(Qt.FocusPolicy.StrongFocus)
        self.setSizePolicy(QSizePolicy.Policy.Expanding, QSizePolicy.Policy.Fixed)
        self.setSizeAdjustPolicy(QComboBox.SizeAdjustPolicy.AdjustToMinimumContentsLengthWithIcon)
        self.setMinimumContentsLength(8)

    def wheelEvent(self, event: QWheelEvent) -> None:
        """Leave the wheel to the page unless the list is in use."""
        if self.hasFocus():
            super().wheelEvent(event)
        else:
            event.ignore()

    def show_words(self, words: tuple[str, ...], chosen: str, shown: Callable[[str], str] = str) -> None:
        """Show the words that can be chosen, and the one that is, quietly."""
        self.blockSignals(True)
        if tuple(self.itemData(i) for i in range(self.count())) != words:
            self.clear()
            for word in words:
                self.addItem(shown(word), word)
        self.setCurrentIndex(words.index(chosen) if chosen in words else -1)
        self.blockSignals(False)


class ChoiceRow(Row):
    """One word of a few; `is_long` gives the words the room that the label leaves."""

    def __init__(self, field: ChoiceField, *, is_long: bool = False, parent: QWidget | None = None) -> None:
        super().__init__(field.title, field.key, parent)
        self.field = field
        self.label = plain_label(field.label)
        if is_long:
            self.label.setMinimumWidth(0)
            self.label.setContentsMargins(0, 0, 0, 0)
        self.combo = QuietCombo(field.title)
        self.combo.setToolTip(field.help)
        self.combo.setAccessibleDescription(field.help)
        self.label.setToolTip(field.help)
        self.label.setBuddy(self.combo)
        self.grid.addWidget(self.label, 0, 0)
        self.grid.addWidget(self.combo, 0, 1)
        self.grid.addWidget(self.message, 1, 0, 1, 2)
        self.grid.setColumnStretch(1, 1)
        self.combo.activated.connect(self._ask)

    def show_document(self, document: Document) -> None:
        """Show the word, and those that this document allows."""
        super().show_document(document)
        words = self.field.options(document)
        self.combo.show_words(words, self.field.read(document) or "", self.field.shown)
        self.combo.setEnabled(len(words) > 1)

    def _ask(self, index: int) -> None:
        word, field = self.combo.itemData(index), self.field
        asked = self.ask(lambda document: field.changed(document, word), merge=False)
        if not asked and self._document is not None:
            self.show_document(self._document)


class TextRow(Row):
    """A text that may run over some lines; `is_note` is one that may have line breaks of its own."""

    def __init__(self, field: TextField, lines: int, *, is_note: bool = False, parent: QWidget | None = None) -> None:
        super().__init__(field.title, field.key, parent)
        self.field = field
        self._is_note = is_note
        self.label = QLabel(field.label)
        self.label.setVisible(not is_note)
        self.edit = _Lines(lines, breaks=is_note)
        self.edit.left.connect(self.commit)
        self.edit.setAccessibleName(field.title)
        self.edit.setToolTip(field.help)
        self.label.setBuddy(self.edit)
        self.grid.addWidget(self.label, 0, 0)
        self.grid.addWidget(self.edit, 1, 0)
        self.grid.addWidget(self.message, 2, 0)

    def show_document(self, document: Document) -> None:
        """Show the text. What somebody is typing stays."""
        super().show_document(document)
        text = self.field.read(document)
        if self._text() == text or (self.edit.hasFocus() and self._is_modified()):
            return
        self.edit.setPlainText(text)
        self._set_unmodified()

    def commit(self) -> None:
        """Ask for what was typed and not asked for yet."""
        if self._document is None or not self._is_modified():
            return
        text, field = self._text(), self.field
        if text == field.read(self._document):
            self._set_unmodified()
            self.tell("")
        elif self.ask(lambda document: field.changed(document, text), merge=False):
            self._set_unmodified()

    def _text(self) -> str:
        text = self.edit.toPlainText()
        return text if self._is_note else " ".join(text.split())

    def _is_modified(self) -> bool:
        return self.edit.document().isModified()

    def _set_unmodified(self) -> None:
        self.edit.document().setModified(False)


class _Lines(QPlainTextEdit):
    """A few lines of text; Tab leaves them, and so does Enter where there are no line breaks. `left`: it was left."""

    left = Signal()

    def __init__(self, lines: int, *, breaks: bool, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._breaks = breaks
        self.setTabChangesFocus(True)
        self.setFixedHeight(self.fontMetrics().lineSpacing() * lines + 12)

    def keyPressEvent(self, event: QKeyEvent) -> None:
        """Take Enter as the end where there are no line breaks."""
        if not self._breaks and event.key() in (Qt.Key.Key_Return, Qt.Key.Key_Enter):
            self.left.emit()
            return
        super().keyPressEvent(event)

    def focusOutEvent(self, event: QFocusEvent) -> None:
        """Tell that the text was left."""
        super().focusOutEvent(event)
        self.left.emit()
