"""A number to type, to step or to drag, for the set-up panel."""

import math

from PySide6.QtCore import QPointF, QSize, Qt, Signal
from PySide6.QtGui import (
    QCursor,
    QFocusEvent,
    QKeyEvent,
    QMouseEvent,
    QPainter,
    QPaintEvent,
    QPen,
    QValidator,
    QWheelEvent,
)
from PySide6.QtWidgets import QAbstractSpinBox, QLabel, QWidget

from app.window.theme import LIGHT, Theme

# A drag of one pixel changes a value by a step divided by this; with Shift by a tenth of that.
_PIXELS_OF_STEP = 5
_FINE = 0.1
_GRIP = 12


class NumberBox(QAbstractSpinBox):
    """A number as text, or nothing where that is allowed: `value_wanted` (float or None) comes from a person alone.

    What is typed is asked for with Enter or when the box is left, arrow keys and buttons at once. Any number can be
    typed: whoever listens tells what is allowed. `finished` follows when a row of changes is over.
    """

    value_wanted = Signal(object)
    unreadable = Signal(str)
    finished = Signal()

    def __init__(self, name: str, step: float, *, may_be_empty: bool = False, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._step = step
        self._value: float | None = None
        self._start: float | None = None
        self._may_be_empty = may_be_empty
        self.setAccessibleName(name)
        self.setFocusPolicy(Qt.FocusPolicy.StrongFocus)
        self.setAlignment(Qt.AlignmentFlag.AlignRight)
        self.setAccelerated(True)
        self.setMinimumWidth(60)
        # Qt's own mark of a modified text goes as soon as Enter is pressed, before anybody could ask.
        self._typed = False
        self.lineEdit().textEdited.connect(self._on_edited)

    def show_value(self, value: float | None, placeholder: str = "") -> None:
        """Show a value quietly. What somebody is typing stays."""
        self._value = value
        if self.lineEdit().placeholderText() != placeholder:
            self.lineEdit().setPlaceholderText(placeholder)
        text = number_shown(value)
        if self.is_being_typed() or self.lineEdit().text() == text:
            return
        place = self.lineEdit().cursorPosition()
        selected = self.lineEdit().hasSelectedText()
        self.lineEdit().setText(text)
        self.lineEdit().setCursorPosition(place)
        if selected and self.hasFocus():
            self.lineEdit().selectAll()

    def set_start(self, value: float | None) -> None:
        """Take over where an empty box steps from."""
        self._start = value

    def is_being_typed(self) -> bool:
        """Tell whether somebody has typed something that was not asked for yet."""
        return self._typed

    def keep_typed(self, value: float | None) -> None:
        """Leave a value that was refused in sight, as one that is still being typed."""
        self.lineEdit().setText(number_shown(value))
        self._typed = True

    def commit(self) -> None:
        """Ask for what was typed, if anything was."""
        if not self._typed:
            return
        text = self.lineEdit().text().strip()
        value = number_typed(text)
        if value is None and text:
            self.unreadable.emit(f"'{text[:20]}' is no number.")
            return
        self._typed = False
        if value != self._value and (value is not None or self._may_be_empty):
            self.value_wanted.emit(value)
        else:
            self.show_value(self._value, self.lineEdit().placeholderText())
            self.unreadable.emit("")

    def validate(self, text: str, place: int) -> tuple[QValidator.State, str, int]:
        """Accept any text: what it comes to is told beside the box, not by keys that do nothing."""
        return QValidator.State.Acceptable, text, place

    def stepBy(self, steps: int) -> None:
        """Step from what is in the box, to whole steps where it lies between two."""
        typed = number_typed(self.lineEdit().text()) if self.is_being_typed() else self._value
        start = typed if typed is not None else self._start
        value = stepped(start or 0.0, steps, self._step) if start is not None or typed is not None else 0.0
        self._typed = False
        self.value_wanted.emit(value)
        self.lineEdit().selectAll()

    def stepEnabled(self) -> QAbstractSpinBox.StepEnabledFlag:
        """Allow both ways; what is out of range is told when it is met."""
        both = QAbstractSpinBox.StepEnabledFlag
        return both.StepUpEnabled | both.StepDownEnabled

    def wheelEvent(self, event: QWheelEvent) -> None:
        """Leave the wheel to the page unless the box is in use."""
        if self.hasFocus():
            super().wheelEvent(event)
        else:
            event.ignore()

    def keyPressEvent(self, event: QKeyEvent) -> None:
        """Ask with Enter, take what was typed back with Escape."""
        if event.key() in {Qt.Key.Key_Return, Qt.Key.Key_Enter}:
            self.commit()
            self.lineEdit().selectAll()
            self.finished.emit()
        elif event.key() == Qt.Key.Key_Escape and self._typed:
            self._typed = False
            self.show_value(self._value, self.lineEdit().placeholderText())
            self.lineEdit().selectAll()
            self.unreadable.emit("")
        else:
            super().keyPressEvent(event)

    def focusOutEvent(self, event: QFocusEvent) -> None:
        """Ask for what was typed, and tell that a row of changes is over. What was refused gives way to what holds."""
        self.commit()
        self._typed = False
        self.show_value(self._value, self.lineEdit().placeholderText())
        super().focusOutEvent(event)
        self.finished.emit()

    def sizeHint(self) -> QSize:
        """Return room for six digits."""
        hint = super().sizeHint()
        return QSize(max(self.fontMetrics().horizontalAdvance("-00000.0") + 40, 84), hint.height())

    def minimumSizeHint(self) -> QSize:
        """Return the least room."""
        return QSize(60, super().minimumSizeHint().height())

    def _on_edited(self) -> None:
        self._typed = True


class DragLabel(QLabel):
    """A label that drags its number: sideways by one pixel for a fifth of a step, finely with Shift.

    `drag_started` comes with the first move, then `dragged` with the change since the last, then `drag_ended`.
    """

    drag_started = Signal()
    dragged = Signal(float)
    drag_ended = Signal()

    def __init__(self, text: str, step: float, parent: QWidget | None = None) -> None:
        super().__init__(text, parent)
        self._step = step
        self._last: QPointF | None = None
        self._dragging = False
        self._theme = LIGHT
        self.setCursor(QCursor(Qt.CursorShape.SizeHorCursor))
        self.setAttribute(Qt.WidgetAttribute.WA_Hover)
        self.setContentsMargins(_GRIP, 0, 0, 0)

    def set_theme(self, theme: Theme) -> None:
        """Take over colours."""
        self._theme = theme
        self.update()

    def mousePressEvent(self, event: QMouseEvent) -> None:
        """Take hold."""
        if event.button() == Qt.MouseButton.LeftButton and self.isEnabled():
            self._last = event.position()
            event.accept()

    def mouseMoveEvent(self, event: QMouseEvent) -> None:
        """Drag."""
        if self._last is None:
            return
        pixels = round(event.position().x() - self._last.x())
        if not pixels:
            return
        self._last = QPointF(self._last.x() + pixels, self._last.y())
        if not self._dragging:
            self._dragging = True
            self.drag_started.emit()
            self.update()
        fine = event.modifiers() & Qt.KeyboardModifier.ShiftModifier
        self.dragged.emit(pixels * self._step / _PIXELS_OF_STEP * (_FINE if fine else 1.0))

    def mouseReleaseEvent(self, event: QMouseEvent) -> None:
        """Let go."""
        if event.button() != Qt.MouseButton.LeftButton:
            return
        self._last = None
        if self._dragging:
            self._dragging = False
            self.drag_ended.emit()
            self.update()

    def paintEvent(self, event: QPaintEvent) -> None:
        """Draw the grip before the text: two short lines to take hold of."""
        super().paintEvent(event)
        painter = QPainter(self)
        hot = self._dragging or self.underMouse()
        painter.setPen(QPen(self._theme.colour("accent" if hot else "line"), 1.6))
        middle = self.height() / 2
        for x in (2.5, 6.0):
            painter.drawLine(QPointF(x, middle - 4.5), QPointF(x, middle + 4.5))
        painter.end()


def number_shown(value: float | None) -> str:
    """Return a number as the panel shows it: at most three digits after the point, none that say nothing."""
    if value is None:
        return ""
    text = f"{value:.3f}".rstrip("0").rstrip(".")
    return "0" if text == "-0" else text


def number_typed(text: str) -> float | None:
    """Return the finite number that somebody typed, decimal comma or point, None where it is none."""
    bare = text.strip().replace("−", "-").replace(",", ".")
    try:
        value = float(bare)
    except ValueError:
        return None
    return value if math.isfinite(value) else None


def stepped(value: float, steps: int, step: float) -> float:
    """Return the value that many steps on; from between two steps the first one leads to the next whole step."""
    places = value / step
    whole = round(places)
    if abs(places - whole) > 1e-6:
        whole = math.floor(places) if steps > 0 else math.ceil(places)
    return round((whole + steps) * step, 6)
