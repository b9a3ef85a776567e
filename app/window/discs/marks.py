"""What moves over the direction discs: the current pose, the pointer, and what is said of them."""

from typing import Final

import numpy as np
from numpy.typing import NDArray
from PySide6.QtCore import QPointF, QRectF, Qt
from PySide6.QtGui import QColor, QFontMetricsF, QPainter, QPen

from app.window.chart.paint import font_of
from app.window.discs.layout import Layout
from app.window.theme import LIGHT, Theme

Array = NDArray[np.float64]

# They lie on the colours of clearance, which are the same in both themes.
_INK: Final = QColor(LIGHT.ink)
_HALO: Final = QColor(LIGHT.halo)
_WAYS: Final = (QPointF(1.0, 0.0), QPointF(-1.0, 0.0), QPointF(0.0, 1.0), QPointF(0.0, -1.0))


def paint_pose(painter: QPainter, layout: Layout, direction: Array | None, theme: Theme) -> None:
    """Mark the direction of the current pose, (3,), with a ring."""
    for point in _points(layout, direction):
        painter.setBrush(Qt.BrushStyle.NoBrush)
        for colour, width in ((_HALO, 5.0), (_INK, 2.0)):
            painter.setPen(QPen(colour, width))
            painter.drawEllipse(point, 8.0, 8.0)
        painter.setPen(QPen(_INK, 1.0))
        painter.setBrush(theme.colour("beam"))
        painter.drawEllipse(point, 3.0, 3.0)


def paint_pointer(painter: QPainter, layout: Layout, direction: Array) -> None:
    """Mark the direction that is pointed at, (3,), with a cross that is open in the middle."""
    for point in _points(layout, direction):
        for colour, width in ((_HALO, 3.0), (_INK, 1.2)):
            painter.setPen(QPen(colour, width))
            for way in _WAYS:
                painter.drawLine(point + way * 4.0, point + way * 10.0)


def paint_readout(painter: QPainter, layout: Layout, lines: tuple[str, tuple[str, ...]] | None, theme: Theme) -> None:
    """Write a line, and below it the longest form of a second one that is not cut off."""
    if lines is None:
        return
    first, forms = lines
    flags = Qt.AlignmentFlag.AlignLeft | Qt.AlignmentFlag.AlignTop | Qt.TextFlag.TextWordWrap
    bold, box = font_of(layout.font, 1.0, bold=True), QRectF(layout.readout)
    painter.setFont(bold)
    painter.setPen(theme.colour("ink"))
    painter.drawText(box, flags, first)
    box.setTop(box.top() + QFontMetricsF(bold).boundingRect(box, flags, first).height())
    metrics = QFontMetricsF(layout.font)
    fitting = (form for form in forms if metrics.boundingRect(box, flags, form).height() <= box.height() + 0.5)
    painter.setFont(layout.font)
    painter.setPen(theme.colour("faint"))
    painter.drawText(box, flags, next(fitting, forms[-1]))


def _points(layout: Layout, direction: Array | None) -> list[QPointF]:
    """Return where a direction lies: one place, or one on each rim."""
    if direction is None:
        return []
    points = (disc.point(direction) for disc in layout.discs)
    return [point for point in points if point is not None]
