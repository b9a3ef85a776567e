"""The list of changes that would help: what is in it, how a row is drawn, and how it is chosen from."""

import bisect
import math
from typing import Final

from PySide6.QtCore import (
    QAbstractListModel,
    QEvent,
    QModelIndex,
    QObject,
    QPersistentModelIndex,
    QRect,
    QRectF,
    QSize,
    Qt,
    Signal,
)
from PySide6.QtGui import QKeyEvent, QPainter
from PySide6.QtWidgets import (
    QAbstractItemView,
    QFrame,
    QListView,
    QStyle,
    QStyledItemDelegate,
    QStyleOptionViewItem,
    QWidget,
)

from app.window.remedies.glyphs import draw_glyph
from app.window.theme import LIGHT
from geometry.remedies.find import Remedy, RemedyKind

AnyIndex = QModelIndex | QPersistentModelIndex

# What costs the patient and the plan least comes first.
ORDER: Final = (
    RemedyKind.ANGLES,
    RemedyKind.OTHER_PAIR,
    RemedyKind.ARM,
    RemedyKind.COLLIMATOR,
    RemedyKind.ACCESSORY,
    RemedyKind.SHIFT,
    RemedyKind.DEVICE,
)
_ORDER_OF: Final = {kind: place for place, kind in enumerate(ORDER)}
REMEDY: Final = Qt.ItemDataRole.UserRole
_GLYPH: Final = 18
_GAP: Final = 8
# With less room than this for words, what is left to spare goes below them, pixels.
_NARROW: Final = 340
_WORDS_FLAGS: Final = int(Qt.TextFlag.TextWordWrap | Qt.AlignmentFlag.AlignLeft | Qt.AlignmentFlag.AlignVCenter)
_LINE_FLAGS: Final = int(Qt.AlignmentFlag.AlignLeft | Qt.AlignmentFlag.AlignVCenter)


def millimetres(value_mm: float, *, up: bool = False) -> str:
    """Return a length to 0.1 mm, rounded to the side that does not flatter."""
    tenths = math.ceil(value_mm * 10.0 - 1e-6) if up else math.floor(value_mm * 10.0 + 1e-6)
    return f"{tenths / 10.0:.1f}"


class RemediesModel(QAbstractListModel):
    """The changes by kind, in `ORDER`, and size."""

    def __init__(self, parent: QObject | None = None) -> None:
        super().__init__(parent)
        self.remedies: list[Remedy] = []

    def rowCount(self, parent: AnyIndex | None = None) -> int:  # Qt's name
        """Return the number of changes."""
        return 0 if parent is not None and parent.isValid() else len(self.remedies)

    def data(self, index: AnyIndex, role: int = Qt.ItemDataRole.DisplayRole) -> object:
        """Return a change's words, or itself."""
        if not index.isValid():
            return None
        remedy = self.remedies[index.row()]
        if role == Qt.ItemDataRole.DisplayRole:
            return remedy.text
        if role in {Qt.ItemDataRole.ToolTipRole, Qt.ItemDataRole.AccessibleTextRole}:
            return f"{remedy.text}: {_spare_words(remedy)}. Enter or a double click makes the change."
        return remedy if role == REMEDY else None

    def add(self, remedy: Remedy) -> None:
        """Put a change in its place."""
        row = bisect.bisect_right([_rank(known) for known in self.remedies], _rank(remedy))
        self.beginInsertRows(QModelIndex(), row, row)
        self.remedies.insert(row, remedy)
        self.endInsertRows()

    def clear(self) -> None:
        """Forget all changes."""
        self.beginResetModel()
        self.remedies = []
        self.endResetModel()


def _rank(remedy: Remedy) -> tuple[int, float]:
    return _ORDER_OF[remedy.kind], remedy.size


def _spare_words(remedy: Remedy) -> str:
    return f"{millimetres(remedy.slack_mm)} mm to spare" if math.isfinite(remedy.slack_mm) else "nothing near"


class RemedyList(QListView):
    """`left`: the pointer has gone. `chosen` (index): Enter."""

    left = Signal()
    chosen = Signal(QModelIndex)

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self.setMouseTracking(True)
        self.setFrameShape(QFrame.Shape.NoFrame)
        self.setEditTriggers(QAbstractItemView.EditTrigger.NoEditTriggers)
        self.setHorizontalScrollBarPolicy(Qt.ScrollBarPolicy.ScrollBarAlwaysOff)
        self.setVerticalScrollMode(QAbstractItemView.ScrollMode.ScrollPerPixel)
        # Words wrap anew at another width.
        self.setResizeMode(QListView.ResizeMode.Adjust)

    def leaveEvent(self, event: QEvent) -> None:  # Qt's name
        """Tell that the pointer has gone."""
        super().leaveEvent(event)
        self.left.emit()

    def keyPressEvent(self, event: QKeyEvent) -> None:  # Qt's name
        """Choose by Enter; everything else is the list's own."""
        if event.key() in {Qt.Key.Key_Return, Qt.Key.Key_Enter}:
            self.chosen.emit(self.currentIndex())
        else:
            super().keyPressEvent(event)


class RemedyDelegate(QStyledItemDelegate):
    """Draws a change: a sign for its kind, its words on as many lines as they need, and what it leaves to spare."""

    def __init__(self, parent: QObject | None = None) -> None:
        super().__init__(parent)
        self.theme = LIGHT

    def sizeHint(self, option: QStyleOptionViewItem, index: AnyIndex) -> QSize:  # Qt's name
        """Return the height that the words need at the list's width."""
        view = option.widget
        if not isinstance(view, QListView):
            return super().sizeHint(option, index)
        # Room for the scroll bar in any case: it comes only after the rows have been laid out.
        width = view.width() - view.verticalScrollBar().sizeHint().width()
        words, spare = self._boxes(option, QRect(0, 0, width, 0), index.data(REMEDY))
        return QSize(width, max(words.united(spare).height(), _GLYPH) + _GAP)

    def paint(self, painter: QPainter, option: QStyleOptionViewItem, index: AnyIndex) -> None:
        """Draw one row."""
        theme, remedy, row = self.theme, index.data(REMEDY), option.rect
        chosen = bool(option.state & QStyle.StateFlag.State_Selected)
        painter.save()
        painter.setRenderHint(QPainter.RenderHint.Antialiasing)
        if chosen:
            painter.fillRect(row, theme.colour("accent"))
        elif option.state & QStyle.StateFlag.State_MouseOver:
            painter.fillRect(row, theme.colour("panel"))
        words, spare = self._boxes(option, row, remedy)
        middle = words.united(spare).center().y() + 0.5
        glyph = QRectF(row.left() + _GAP, middle - _GLYPH / 2.0, _GLYPH, _GLYPH)
        draw_glyph(painter, remedy.kind, glyph, theme.colour("on_accent" if chosen else "accent"))
        painter.setFont(option.font)
        painter.setPen(theme.colour("on_accent" if chosen else "ink"))
        painter.drawText(words, _WORDS_FLAGS, remedy.text)
        painter.setPen(theme.colour("on_accent" if chosen else "faint"))
        painter.drawText(spare, _LINE_FLAGS, _spare_words(remedy))
        painter.setPen(theme.colour("line"))
        painter.drawLine(row.bottomLeft(), row.bottomRight())
        painter.restore()

    @staticmethod
    def _boxes(option: QStyleOptionViewItem, row: QRect, remedy: Remedy) -> tuple[QRect, QRect]:
        """Return where the words go in a row, and what is left to spare: beside them, or below where it is narrow."""
        metrics = option.fontMetrics
        line = metrics.height()
        side = metrics.horizontalAdvance(_spare_words(remedy)) + 4
        left, right = row.left() + 2 * _GAP + _GLYPH, row.right() - _GAP
        below = right - left < _NARROW
        width = max(right - left - (0 if below else side + _GAP), 60)
        asked = metrics.boundingRect(QRect(0, 0, width, 10_000), _WORDS_FLAGS, remedy.text).height()
        height = max(asked, line) + (line if below else 0)
        top = row.top() + max((row.height() - height) // 2, 0)
        words = QRect(left, top, width, max(asked, line))
        if below:
            return words, QRect(left, top + words.height(), width, line)
        return words, QRect(right - side, top + (words.height() - line) // 2, side, line)
