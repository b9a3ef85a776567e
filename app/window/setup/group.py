"""A group of the set-up panel that folds, with a line that sums it up while it is folded."""

from PySide6.QtCore import QEvent, QPointF, QRectF, QSize, Qt, Signal
from PySide6.QtGui import QEnterEvent, QFont, QFontMetrics, QPainter, QPaintEvent, QPen, QPolygonF
from PySide6.QtWidgets import QAbstractButton, QSizePolicy, QVBoxLayout, QWidget

from app.window.theme import LIGHT, Theme

_ARROW = 22
_GAP = 10


class GroupHeader(QAbstractButton):
    """The line that folds a group: Space, Enter or a click."""

    def __init__(self, title: str, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self.setCheckable(True)
        self.setText(title)
        self.setAccessibleName(title)
        self.setFocusPolicy(Qt.FocusPolicy.TabFocus)
        self.setSizePolicy(QSizePolicy.Policy.Expanding, QSizePolicy.Policy.Fixed)
        self.setCursor(Qt.CursorShape.PointingHandCursor)
        self._summary = ""
        self._theme = LIGHT
        self.toggled.connect(lambda _: self.update())

    def set_theme(self, theme: Theme) -> None:
        """Take over colours."""
        self._theme = theme
        self.update()

    def set_summary(self, text: str) -> None:
        """Take over the words beside the title while the group is folded."""
        if text != self._summary:
            self._summary = text
            self.setAccessibleDescription(text)
            self.setToolTip(text)
            self.update()

    def sizeHint(self) -> QSize:
        """Return the size of a line with air around it."""
        return QSize(160, self.fontMetrics().height() + 14)

    def enterEvent(self, event: QEnterEvent) -> None:
        """Show that it can be clicked."""
        self.update()
        super().enterEvent(event)

    def leaveEvent(self, event: QEvent) -> None:
        """Show it at rest."""
        self.update()
        super().leaveEvent(event)

    def paintEvent(self, _: QPaintEvent) -> None:
        """Draw arrow, title and summary."""
        painter = QPainter(self)
        painter.setRenderHint(QPainter.RenderHint.Antialiasing)
        theme, middle = self._theme, self.height() / 2
        painter.setPen(QPen(theme.colour("line"), 1.0))
        painter.drawLine(QPointF(0, 0.5), QPointF(self.width(), 0.5))
        hot = self.underMouse() or self.hasFocus()
        painter.setPen(QPen(theme.colour("accent" if hot else "faint"), 1.6))
        if self.isChecked():
            points = [QPointF(8, middle - 2), QPointF(12, middle + 2.5), QPointF(16, middle - 2)]
        else:
            points = [QPointF(10, middle - 4.5), QPointF(14.5, middle), QPointF(10, middle + 4.5)]
        painter.drawPolyline(QPolygonF(points))
        font = QFont(self.font())
        font.setWeight(QFont.Weight.DemiBold)
        painter.setFont(font)
        painter.setPen(theme.colour("ink"))
        width = QFontMetrics(font).horizontalAdvance(self.text())
        flags = Qt.AlignmentFlag.AlignVCenter
        painter.drawText(QRectF(_ARROW, 0, width + 2, self.height()), flags, self.text())
        if self.hasFocus():
            painter.setPen(QPen(theme.colour("accent"), 1.4))
            painter.drawRoundedRect(QRectF(1, 3, self.width() - 2, self.height() - 5), 3, 3)
        if not self.isChecked():
            painter.setFont(self.font())
            painter.setPen(theme.colour("faint"))
            room = QRectF(_ARROW + width + _GAP, 0, self.width() - _ARROW - width - _GAP - 8, self.height())
            text = self.fontMetrics().elidedText(self._summary, Qt.TextElideMode.ElideRight, int(room.width()))
            painter.drawText(room, flags | Qt.AlignmentFlag.AlignRight, text)
        painter.end()


class Group(QWidget):
    """A header with what it folds. `content` is the column to add rows to. `folded_changed` (open or not)."""

    folded_changed = Signal(bool)

    def __init__(self, title: str, *, is_open: bool = False, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self.header = GroupHeader(title)
        self.body = QWidget()
        self.content = QVBoxLayout(self.body)
        self.content.setContentsMargins(8, 2, 8, 10)
        self.content.setSpacing(5)
        column = QVBoxLayout(self)
        column.setContentsMargins(0, 0, 0, 0)
        column.setSpacing(0)
        column.addWidget(self.header)
        column.addWidget(self.body)
        self.header.setChecked(is_open)
        self.body.setVisible(is_open)
        self.header.toggled.connect(self._on_toggled)

    def set_theme(self, theme: Theme) -> None:
        """Take over colours."""
        self.header.set_theme(theme)

    def set_open(self, is_open: bool) -> None:
        """Fold or unfold."""
        self.header.setChecked(is_open)

    def _on_toggled(self, is_open: bool) -> None:
        self.body.setVisible(is_open)
        self.folded_changed.emit(is_open)
