"""A chart's legend: its items, their samples, and how they fill rows."""

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from typing import Final

from PySide6.QtCore import QPointF, QRectF, Qt
from PySide6.QtGui import QColor, QFont, QFontMetricsF, QPainter, QPen

from app.clearance_scale import EDGE_COLOURS
from app.window.chart.paint import dashed, texture_brush
from app.window.theme import Theme
from geometry.states import State

# Width and height.
SAMPLE: Final = (24.0, 11.0)
_PERMITTED: Final = EDGE_COLOURS[7]
_SHORT: Final = EDGE_COLOURS[2]
_WORDS: Final = {State.SHORT: "short of what is required", State.UNPROVED: "unproved, not permitted"}


@dataclass(frozen=True)
class LegendItem:
    """One entry of a legend: words, fewer words, and how to draw the sample before them."""

    label: str
    brief: str
    draw: Callable[[QPainter, QRectF], None]


def legend_rows(
    items: Sequence[LegendItem], metrics: QFontMetricsF, room: float, *, brief: bool
) -> list[tuple[float, list[tuple[float, LegendItem]]]]:
    """Return rows of (width, [(x, item)]) that fit into the room, as evenly filled as they can be.

    With fewer words where asked, or where they would take more than two rows.
    """
    if brief:
        items = [replace(item, label=item.brief) for item in items]
    widths = [SAMPLE[0] + 5.0 + metrics.horizontalAdvance(item.label) for item in items]
    gap = 16.0
    total = sum(widths) + gap * (len(items) - 1)
    count = max(math.ceil(total / room), 1)
    while True:
        rows = _filled(list(zip(items, widths, strict=True)), total / count, gap, room)
        if len(rows) <= count or count > len(items):
            return rows if brief or len(rows) <= 2 else legend_rows(items, metrics, room, brief=True)
        count += 1


def _filled(
    items: list[tuple[LegendItem, float]], wanted: float, gap: float, room: float
) -> list[tuple[float, list[tuple[float, LegendItem]]]]:
    rows: list[tuple[float, list[tuple[float, LegendItem]]]] = []
    row: list[tuple[float, LegendItem]] = []
    end = 0.0
    for item, width in items:
        start = end + gap if row else 0.0
        # Half of what is too much may stand over in the row before.
        if row and (start + width > room or start + width / 2.0 > wanted):
            rows.append((end, row))
            row, start = [], 0.0
        row.append((start, item))
        end = start + width
    if row:
        rows.append((end, row))
    return rows


def paint_items(painter: QPainter, items: Sequence[tuple[QPointF, LegendItem]], font: QFont, theme: Theme) -> None:
    """Draw samples and words; each place is the left end of an item, at mid height."""
    metrics = QFontMetricsF(font)
    for place, item in items:
        sample = QRectF(place.x(), round(place.y() - SAMPLE[1] / 2.0), *SAMPLE)
        painter.save()
        item.draw(painter, sample)
        painter.restore()
        painter.setFont(font)
        painter.setPen(theme.colour("ink"))
        box = QRectF(sample.right() + 5.0, place.y() - metrics.height(), 400.0, 2.0 * metrics.height())
        painter.drawText(box, Qt.AlignmentFlag.AlignVCenter, item.label)


def permitted_item(theme: Theme, *, stale: bool) -> LegendItem:
    """Return the sample of the permitted region's outline, dashed while it is that of the state before."""

    def draw(painter: QPainter, box: QRectF) -> None:
        painter.fillRect(box, QColor(_PERMITTED))
        pen = QPen(theme.colour("permitted"), 1.8)
        painter.setPen(dashed(pen, 2.5, 1.8) if stale else pen)
        painter.drawRect(box.adjusted(0.9, 0.9, -0.9, -0.9))

    # The same words either way: a chart must not change its shape under a drag.
    return LegendItem("permitted", "permitted", draw)


def state_item(state: State, theme: Theme, ratio: float) -> LegendItem:
    """Return the sample of a state's texture, over a colour where it lies over one on the chart."""

    def draw(painter: QPainter, box: QRectF) -> None:
        if state in {State.SHORT, State.UNPROVED}:
            painter.fillRect(box, QColor(_SHORT))
        painter.setBrushOrigin(box.topLeft())
        painter.fillRect(box, texture_brush(state, theme, ratio))
        painter.setPen(QPen(theme.colour("faint"), 1.0))
        painter.drawRect(box.adjusted(0.5, 0.5, -0.5, -0.5))

    return LegendItem(_WORDS.get(state, str(state)), str(state), draw)


def line_item(
    label: str, brief: str, colour: QColor, width: float, dashes: tuple[float, float] | None = None
) -> LegendItem:
    """Return the sample of a line."""

    def draw(painter: QPainter, box: QRectF) -> None:
        pen = QPen(colour, width)
        pen.setCapStyle(Qt.PenCapStyle.FlatCap)
        painter.setPen(dashed(pen, *dashes) if dashes else pen)
        y = box.center().y()
        painter.drawLine(QPointF(box.left(), y), QPointF(box.right(), y))

    return LegendItem(label, brief, draw)
