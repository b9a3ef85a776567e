"""Labels in the picture of the room, each near what it speaks of and none on another."""

from collections.abc import Sequence
from typing import Final

from PySide6.QtCore import QLineF, QPointF, QRectF, Qt
from PySide6.QtGui import QFont, QFontMetricsF, QPainter, QPen

from app.window.theme import Theme

_PADDING_PX: Final = 7.0
_GAP_PX: Final = 16.0
_MARGIN_PX: Final = 6.0


class LabelPlacer:
    """Finds room for labels, one after the other, within `bounds`."""

    def __init__(self, bounds: QRectF) -> None:
        self.bounds = bounds
        self._taken: list[QRectF] = []

    def reserve(self, rect: QRectF) -> None:
        """Keep a place clear of labels, as far as there is room elsewhere."""
        self._taken.append(rect)

    def place(self, width: float, height: float, line: QLineF) -> QRectF:
        """Return where a label of that size, about a line, goes: beside it, clear of it and of other labels."""
        inner = self.bounds.adjusted(_MARGIN_PX, _MARGIN_PX, -_MARGIN_PX, -_MARGIN_PX)
        box = QRectF(line.p1(), line.p2()).normalized()
        best, least = QRectF(), float("inf")
        for rank, rect in enumerate(_around(box, width, height)):
            held = _within(rect, inner)
            blocked = sum(_shared_area(held, taken) for taken in self._taken)
            if held.intersects(box.adjusted(-4.0, -4.0, 4.0, 4.0)):
                blocked += _shared_area(held, box.adjusted(-8.0, -8.0, 8.0, 8.0)) + width
            moved = (held.center() - rect.center()).manhattanLength()
            cost = blocked + moved + 0.1 * rank
            if cost < least:
                best, least = held, cost
        self._taken.append(best)
        return best


def draw_label(
    painter: QPainter, lines: Sequence[str], about: QLineF, placer: LabelPlacer, theme: Theme, *, loud: bool
) -> None:
    """Draw lines of text, the first of them bold, in a box near the line that they speak of, with a leader to it."""
    bold = QFont(painter.font())
    bold.setBold(True)
    fonts = [bold] + [painter.font()] * (len(lines) - 1)
    metrics = [QFontMetricsF(font) for font in fonts]
    room = placer.bounds.width() - 2.0 * (_MARGIN_PX + _PADDING_PX)
    width = min(max(m.horizontalAdvance(text) for m, text in zip(metrics, lines, strict=True)), room)
    height = sum(m.height() for m in metrics)
    rect = placer.place(width + 2.0 * _PADDING_PX, height + _PADDING_PX, about)
    painter.save()
    edge = theme.colour("marked" if loud else "faint")
    middle = about.center()
    if not rect.contains(middle):
        painter.setPen(QPen(edge, 1.0))
        painter.drawLine(QLineF(_nearest(rect, middle), middle))
    paper = theme.colour("canvas")
    paper.setAlphaF(0.92)
    painter.setPen(QPen(edge, 1.5 if loud else 1.0))
    painter.setBrush(paper)
    painter.drawRoundedRect(rect, 4.0, 4.0)
    painter.setPen(theme.colour("ink"))
    top = rect.top() + _PADDING_PX / 2.0
    for font, m, text in zip(fonts, metrics, lines, strict=True):
        painter.setFont(font)
        painter.drawText(QPointF(rect.left() + _PADDING_PX, top + m.ascent()), _elided(text, m, width))
        top += m.height()
    painter.restore()


def _elided(text: str, metrics: QFontMetricsF, width: float) -> str:
    """Return the text, its middle left out where the picture is too narrow for it."""
    return metrics.elidedText(text, Qt.TextElideMode.ElideMiddle, width + 1.0)


def _around(box: QRectF, width: float, height: float) -> list[QRectF]:
    centre = box.center()
    right, left = box.right() + _GAP_PX, box.left() - _GAP_PX - width
    below, above = box.bottom() + _GAP_PX, box.top() - _GAP_PX - height
    middle_x, middle_y = centre.x() - width / 2.0, centre.y() - height / 2.0
    corners = (
        (right, above),
        (right, middle_y),
        (left, above),
        (right, below),
        (left, middle_y),
        (left, below),
        (middle_x, above),
        (middle_x, below),
        (right + _GAP_PX, above - height),
        (left - _GAP_PX, above - height),
        (right + _GAP_PX, below + height),
        (left - _GAP_PX, below + height),
    )
    return [QRectF(x, y, width, height) for x, y in corners]


def _within(rect: QRectF, bounds: QRectF) -> QRectF:
    held = QRectF(rect)
    held.moveLeft(max(min(rect.left(), bounds.right() - rect.width()), bounds.left()))
    held.moveTop(max(min(rect.top(), bounds.bottom() - rect.height()), bounds.top()))
    return held


def _shared_area(one: QRectF, other: QRectF) -> float:
    shared = one.intersected(other)
    return max(shared.width(), 0.0) * max(shared.height(), 0.0)


def _nearest(rect: QRectF, point: QPointF) -> QPointF:
    return QPointF(min(max(point.x(), rect.left()), rect.right()), min(max(point.y(), rect.top()), rect.bottom()))
