"""The list of a plan's fields with the moves between them; rows wrap, nothing is cut off."""

from collections.abc import Sequence
from typing import Final

from PySide6.QtCore import QEvent, QModelIndex, QPersistentModelIndex, QPointF, QRectF, QSize, QSizeF, Qt, Signal
from PySide6.QtGui import (
    QFont,
    QFontMetricsF,
    QKeyEvent,
    QPainter,
    QPen,
    QResizeEvent,
    QStandardItem,
    QStandardItemModel,
)
from PySide6.QtWidgets import QAbstractItemView, QListView, QStyle, QStyledItemDelegate, QStyleOptionViewItem, QWidget

from app.window.chart.paint import font_of
from app.window.fields.glyphs import GLYPH, paint_state
from app.window.fields.words import STATE_WORDS, RowWords
from app.window.theme import LIGHT, Theme
from geometry.states import State

_ROLE: Final = Qt.ItemDataRole.UserRole
_SIDE: Final = 8.0
_ABOVE: Final = 6.0
_GAP: Final = 7.0
_INDENT: Final = 18.0
_WRAPPED: Final = Qt.TextFlag.TextWordWrap | Qt.AlignmentFlag.AlignLeft | Qt.AlignmentFlag.AlignTop
_TALL: Final = 1e5
Index = QModelIndex | QPersistentModelIndex


class FieldsList(QListView):
    """Fields and moves. `row_chosen` (RowWords or None), `row_entered` (RowWords) on a double click or Enter."""

    row_chosen = Signal(object)
    row_entered = Signal(object)

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._model = QStandardItemModel(self)
        self._rows = _Rows(self)
        self._shown: tuple[RowWords, ...] = ()
        self.setModel(self._model)
        self.setItemDelegate(self._rows)
        self.setEditTriggers(QAbstractItemView.EditTrigger.NoEditTriggers)
        self.setVerticalScrollMode(QAbstractItemView.ScrollMode.ScrollPerPixel)
        self.setHorizontalScrollBarPolicy(Qt.ScrollBarPolicy.ScrollBarAlwaysOff)
        self.setUniformItemSizes(False)
        self.setMinimumHeight(110)
        self.setAccessibleName("Fields of the plan and moves between them")
        self.setToolTip("A click chooses a field, a double click or Enter goes to its tightest place.")
        self._is_quiet = False
        self.selectionModel().currentChanged.connect(self._on_current)
        self.doubleClicked.connect(lambda index: self.row_entered.emit(self._row(index)))

    def set_theme(self, theme: Theme) -> None:
        """Take over colours."""
        self._rows.theme = theme
        self.viewport().update()

    def show_rows(self, rows: Sequence[RowWords]) -> None:
        """Show other rows; the field that was chosen stays so where it is still there, and says nothing of that."""
        before = self.chosen()
        self._shown = tuple(rows)
        self._is_quiet = True
        self._model.clear()
        for row in rows:
            item = QStandardItem()
            item.setData(row, _ROLE)
            item.setData(row.spoken, Qt.ItemDataRole.AccessibleTextRole)
            item.setEditable(False)
            self._model.appendRow(item)
        if before is not None:
            self.choose(before.kind, before.place)
        self._is_quiet = False

    def set_stale(self, stale: bool) -> None:
        """Show whether the rows are those of the set-up before."""
        self._rows.stale = stale
        self.viewport().update()

    def set_running(self, kind: str, place: int | None) -> None:
        """Mark the row that is being played, None for none."""
        running = None if place is None else (kind, place)
        if running != self._rows.running:
            self._rows.running = running
            self.viewport().update()

    def chosen(self) -> RowWords | None:
        """Return the row that is chosen."""
        return self._row(self.currentIndex())

    def choose(self, kind: str, place: int) -> None:
        """Choose a field or a move by its place, and bring it into sight."""
        for number, row in enumerate(self._shown):
            if (row.kind, row.place) == (kind, place):
                index = self._model.index(number, 0)
                self.setCurrentIndex(index)
                self.scrollTo(index)
                return

    def keyPressEvent(self, event: QKeyEvent) -> None:
        """Go to the row's place with Enter."""
        if event.key() in {Qt.Key.Key_Return, Qt.Key.Key_Enter} and self.chosen() is not None:
            self.row_entered.emit(self.chosen())
            return
        if event.key() == Qt.Key.Key_Escape:
            self.setCurrentIndex(QModelIndex())
            return
        super().keyPressEvent(event)

    def resizeEvent(self, event: QResizeEvent) -> None:
        """Wrap the rows anew."""
        super().resizeEvent(event)
        self.scheduleDelayedItemsLayout()

    def changeEvent(self, event: QEvent) -> None:
        """Measure the rows anew in another font."""
        if event.type() == QEvent.Type.FontChange:
            self.scheduleDelayedItemsLayout()
        super().changeEvent(event)

    def _on_current(self, now: QModelIndex) -> None:
        if not self._is_quiet:
            self.row_chosen.emit(self._row(now))

    @staticmethod
    def _row(index: Index) -> RowWords | None:
        row = index.data(_ROLE)
        return row if isinstance(row, RowWords) else None


class _Rows(QStyledItemDelegate):
    """Paints rows, and tells how high they are."""

    def __init__(self, view: FieldsList) -> None:
        super().__init__(view)
        self._view = view
        self.theme = LIGHT
        self.stale = False
        self.running: tuple[str, int] | None = None

    def sizeHint(self, _option: QStyleOptionViewItem, index: Index) -> QSize:
        """Return the height that the row's words need at the width of the list."""
        row = index.data(_ROLE)
        width = float(self._view.viewport().width())
        return QSizeF(width, _Layout(row, width, self._view.font()).height).toSize()

    def paint(self, painter: QPainter, option: QStyleOptionViewItem, index: Index) -> None:
        """Paint a row."""
        row: RowWords = index.data(_ROLE)
        theme, box = self.theme, QRectF(option.rect)
        painter.save()
        painter.setRenderHint(QPainter.RenderHint.Antialiasing)
        painter.fillRect(box, theme.colour("panel" if row.kind == "field" else "window"))
        if option.state & QStyle.StateFlag.State_Selected:
            tint = theme.colour("accent")
            tint.setAlphaF(0.22 if theme.dark else 0.14)
            painter.fillRect(box, tint)
        if self.running == (row.kind, row.place):
            painter.fillRect(QRectF(box.left(), box.top(), 4.0, box.height()), theme.colour("accent"))
        painter.setPen(QPen(theme.colour("line"), 1.0))
        painter.drawLine(box.bottomLeft() + QPointF(0.0, -0.5), box.bottomRight() + QPointF(0.0, -0.5))
        self._paint_words(painter, box, row)
        if option.state & QStyle.StateFlag.State_HasFocus:
            painter.setPen(QPen(theme.colour("accent"), 1.6))
            painter.drawRect(box.adjusted(1.0, 1.0, -1.0, -2.0))
        painter.restore()

    def _paint_words(self, painter: QPainter, box: QRectF, row: RowWords) -> None:
        theme = self.theme
        layout = _Layout(row, box.width(), self._view.font())
        ratio = self._view.devicePixelRatioF()
        glyph = layout.glyph.translated(box.topLeft())
        paint_state(painter, glyph, row.state, theme, ratio, stale=self.stale)
        refused = row.state is not State.PERMITTED
        painter.setFont(layout.state_font)
        painter.setPen(theme.colour("marked" if refused and not self.stale else layout.state_colour(stale=self.stale)))
        painter.drawText(layout.state.translated(box.topLeft()), Qt.AlignmentFlag.AlignRight, layout.state_words)
        painter.setFont(layout.bold if row.kind == "field" else layout.small)
        painter.setPen(theme.colour("faint" if self.stale or row.kind == "move" else "ink"))
        painter.drawText(layout.title.translated(box.topLeft()), _WRAPPED, row.title)
        painter.setFont(layout.small)
        for number, (line, place) in enumerate(zip(row.lines, layout.lines, strict=True)):
            last = number == len(row.lines) - 1
            painter.setPen(theme.colour("ink" if last and not self.stale else "faint"))
            painter.drawText(place.translated(box.topLeft()), _WRAPPED, line)


class _Layout:
    """Where everything of a row lies, from its upper left corner on."""

    def __init__(self, row: RowWords, width: float, font: QFont) -> None:
        self.bold, self.small = font_of(font, 1.0, bold=True), font_of(font, 0.94)
        bold, small = QFontMetricsF(self.bold), QFontMetricsF(self.small)
        left = _SIDE + (_INDENT if row.kind == "move" else 0.0)
        self.state_words = STATE_WORDS[row.state]
        # A move that is permitted has nothing to say.
        self._is_quiet = row.kind == "move" and row.state is State.PERMITTED
        self.state_font = self.small if self._is_quiet else self.bold
        self.glyph = QRectF(left, _ABOVE + (bold.height() - GLYPH[1]) / 2.0, *GLYPH)
        words = left + GLYPH[0] + _GAP
        right = width - _SIDE
        state = QFontMetricsF(self.state_font).horizontalAdvance(self.state_words) + 2.0
        self.state = QRectF(right - state, _ABOVE, state, bold.height())
        metrics = bold if row.kind == "field" else small
        room = QRectF(words, _ABOVE, max(right - state - _GAP - words, 40.0), _TALL)
        self.title = metrics.boundingRect(room, _WRAPPED, row.title)
        self.title.setWidth(room.width())
        y = max(self.title.bottom(), self.state.bottom())
        self.lines: list[QRectF] = []
        for line in row.lines:
            place = small.boundingRect(QRectF(words, y + 1.0, max(right - words, 60.0), _TALL), _WRAPPED, line)
            place.setWidth(max(right - words, 60.0))
            self.lines.append(place)
            y = place.bottom()
        self.height = y + _ABOVE

    def state_colour(self, *, stale: bool) -> str:
        """Return the name of the colour in which a permitted state is written."""
        return "faint" if stale or self._is_quiet else "ink"
