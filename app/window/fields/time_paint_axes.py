"""What stands around the curve of clearance over time: scales, and the lane of fields and moves."""

import math
from typing import Final

import numpy as np
from PySide6.QtCore import QPointF, QRectF, Qt
from PySide6.QtGui import QFontMetricsF, QPainter, QPen

from app.plan.timeline import Segment
from app.window.chart.paint import cased_text, texture_brush
from app.window.chart.paint_axes import fitting
from app.window.fields.time_frame import EDGE, TICK, TimeFrame
from app.window.fields.words import seconds_words
from app.window.theme import Theme
from geometry.states import State

_STEPS_S: Final = (1, 2, 5, 10, 20, 30, 60, 120, 300, 600, 1200, 1800, 3600, 7200)


def paint_clearance_axis(painter: QPainter, frame: TimeFrame, theme: Theme) -> None:
    """Draw ticks and the title of the clearance left of the plot, with lines across it."""
    top = frame.upwards.window.high
    metrics = QFontMetricsF(frame.small)
    painter.setFont(frame.small)
    most = max(int(frame.plot.height() / (metrics.height() * 1.8)), 1)
    step = next((step for step in (10, 20, 25, 50, 100, 200, 500) if top / step <= most), top)
    for tick in np.arange(0.0, top + 1e-9, step):
        y = round(frame.upwards.pixel(float(tick))) + 0.5
        painter.setPen(QPen(theme.colour("line"), 1.0))
        painter.drawLine(QPointF(frame.plot.left() - TICK, y), QPointF(frame.plot.right(), y))
        text = f"≥ {tick:g}" if tick == top else f"{tick:g}"
        painter.setPen(theme.colour("ink"))
        box = QRectF(0.0, y - metrics.height(), frame.plot.left() - TICK - 2.0, 2.0 * metrics.height())
        painter.drawText(box, Qt.AlignmentFlag.AlignRight | Qt.AlignmentFlag.AlignVCenter, text)
    painter.save()
    painter.setPen(theme.colour("faint"))
    painter.translate(EDGE + metrics.height() / 2.0, frame.plot.center().y())
    painter.rotate(-90.0)
    text = fitting(("Clearance, mm", "mm"), metrics, frame.plot.height())
    painter.drawText(QRectF(-200.0, -20.0, 400.0, 40.0), Qt.AlignmentFlag.AlignCenter, text)
    painter.restore()


def paint_lane(painter: QPainter, frame: TimeFrame, theme: Theme, ratio: float) -> None:
    """Draw fields as boxes and moves as bare stretches, with their names, in the texture of their state."""
    painter.save()
    painter.setClipRect(frame.lane.adjusted(-1.0, -1.0, 1.0, 1.0))
    font = frame.small
    metrics = QFontMetricsF(font)
    for segment in frame.curve.timeline.segments:
        left, right = frame.across.pixel(segment.start_s), frame.across.pixel(segment.stop_s)
        box = QRectF(left, frame.lane.top(), right - left, frame.lane.height())
        seen = box.intersected(frame.lane)
        if seen.isEmpty():
            continue
        is_field = segment.field is not None
        inner = box if is_field else box.adjusted(0.0, box.height() * 0.3, 0.0, -box.height() * 0.3)
        painter.fillRect(inner, theme.colour("panel" if is_field else "window"))
        if segment.state is not State.PERMITTED:
            painter.setBrushOrigin(inner.topLeft())
            painter.fillRect(inner, texture_brush(segment.state, theme, ratio, on_canvas=True))
        painter.setBrush(Qt.BrushStyle.NoBrush)
        painter.setPen(QPen(theme.colour("ink" if is_field else "line"), 1.0))
        painter.drawRect(inner.adjusted(0.5, 0.5, -0.5, -0.5))
        name = fitting(_stretch_name(segment), metrics, seen.width() - 8.0) if is_field else ""
        if name:
            painter.save()
            painter.translate(seen.center())
            cased_text(painter, name, font, theme.colour("ink"), theme.colour("panel"))
            painter.restore()
    painter.restore()


def paint_time_axis(painter: QPainter, frame: TimeFrame, theme: Theme) -> None:
    """Draw ticks of time under the lane."""
    painter.setFont(frame.small)
    for x, text, box in _time_ticks(frame):
        painter.setPen(QPen(theme.colour("faint"), 1.0))
        painter.drawLine(QPointF(x, frame.lane.bottom()), QPointF(x, frame.lane.bottom() + TICK))
        painter.setPen(theme.colour("ink"))
        painter.drawText(box, Qt.AlignmentFlag.AlignCenter, text)


def paint_time_tag(painter: QPainter, frame: TimeFrame, seconds: float, theme: Theme) -> None:
    """Draw a time as a tag on its axis, in place of the tick labels that it touches."""
    metrics = QFontMetricsF(frame.small)
    text = seconds_words(seconds)
    box = QRectF(0.0, frame.lane.bottom() + 2.0, metrics.horizontalAdvance(text) + 8.0, metrics.height() + 1.0)
    centre = frame.across.pixel(seconds)
    box.moveLeft(min(max(centre - box.width() / 2.0, 1.0), frame.size.width() - box.width() - 1.0))
    for _, _, label in _time_ticks(frame):
        if label.intersects(box):
            painter.fillRect(label.adjusted(-1.0, 0.0, 1.0, 1.0), theme.colour("canvas"))
    painter.setPen(QPen(theme.colour("canvas"), 1.5))
    painter.setBrush(theme.colour("accent"))
    painter.drawRoundedRect(box, 3.0, 3.0)
    painter.setFont(frame.small)
    painter.setPen(theme.colour("on_accent"))
    painter.drawText(box, Qt.AlignmentFlag.AlignCenter, text)


def _time_ticks(frame: TimeFrame) -> list[tuple[float, str, QRectF]]:
    """Return the ticks of the time axis: pixel, label, and where that stands."""
    metrics = QFontMetricsF(frame.small)
    window = frame.across.window
    most = max(frame.plot.width() / (metrics.horizontalAdvance("00:00") * 2.0), 1.0)
    step = next((step for step in _STEPS_S if window.extent / step <= most), _STEPS_S[-1])
    ticks = []
    for k in range(math.ceil(window.low / step), math.floor(window.high / step) + 1):
        x, text = frame.across.pixel(float(k * step)), seconds_words(float(k * step))
        width = metrics.horizontalAdvance(text) + 2.0
        ticks.append((x, text, QRectF(x - width / 2.0, frame.lane.bottom() + TICK, width, metrics.height())))
    return ticks


def _stretch_name(segment: Segment) -> tuple[str, ...]:
    """Return what a stretch of the time axis is called, the longest form first."""
    if segment.field is None:
        return (segment.text, "")
    return (f"{segment.field + 1}  {segment.text}", f"{segment.field + 1}", "")
