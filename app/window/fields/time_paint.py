"""The clearance over time as it is painted: the curve with what is required, tightest places, the cursor."""

import math
from typing import Final

import numpy as np
from numpy.typing import NDArray
from PySide6.QtCore import QPointF, QRectF, Qt
from PySide6.QtGui import QColor, QFontMetricsF, QImage, QPainter, QPainterPath, QPen, QPolygonF

from app.clearance_scale import places
from app.files.readings import clearance_text
from app.plan.timeline_clearance import TightPlace
from app.window.chart.paint import cased_stroke, cased_text, dashed, font_of, polygon_of, texture
from app.window.chart.paint_axes import fitting
from app.window.chart.paint_map import TABLE, tiled
from app.window.fields.time_frame import EDGE, TimeFrame
from app.window.fields.time_paint_axes import paint_clearance_axis, paint_lane, paint_time_axis, paint_time_tag
from app.window.theme import Theme
from geometry.states import CODE_OF, State

_AREA_ALPHA: Final = 0.8
_TEXTURED: Final = (State.CONTACT, State.SHORT, State.UNPROVED, State.NO_TRAVEL)
_RING: Final = 5.0


def paint_time_layer(painter: QPainter, frame: TimeFrame, theme: Theme, ratio: float, *, stale: bool) -> None:
    """Paint all but what moves; `ratio` is the number of device pixels per pixel."""
    painter.setRenderHint(QPainter.RenderHint.Antialiasing)
    painter.fillRect(QRectF(QPointF(0.0, 0.0), frame.size), theme.colour("canvas"))
    paint_clearance_axis(painter, frame, theme)
    painter.save()
    painter.setClipRect(frame.plot)
    painter.setOpacity(0.45 if stale else 1.0)
    _paint_borders(painter, frame, theme)
    _paint_area(painter, frame, theme, ratio)
    _paint_required(painter, frame, theme)
    _paint_line(painter, frame, theme)
    painter.restore()
    painter.save()
    painter.setClipRect(QRectF(frame.plot.left() - 8.0, 0.0, frame.plot.width() + 15.0, frame.size.height()))
    _paint_tight(painter, frame, theme)
    painter.restore()
    painter.setBrush(Qt.BrushStyle.NoBrush)
    painter.setPen(QPen(theme.colour("faint"), 1.0))
    painter.drawRect(frame.plot.adjusted(-0.5, -0.5, 0.5, 0.5))
    paint_lane(painter, frame, theme, ratio)
    paint_time_axis(painter, frame, theme)


def paint_cursor(painter: QPainter, frame: TimeFrame, seconds: float, theme: Theme) -> None:
    """Mark the current time through curve and lane, and write it on the time axis."""
    if not frame.across.window.low <= seconds <= frame.across.window.high:
        return
    x = frame.across.pixel(seconds)
    line = QPainterPath(QPointF(x, frame.plot.top()))
    line.lineTo(x, frame.lane.bottom())
    cased_stroke(painter, line, QPen(theme.colour("accent"), 1.6), theme.colour("halo"), 1.6)
    y = frame.height_at(seconds)
    if y is not None:
        painter.setPen(QPen(theme.colour("accent"), 2.6))
        painter.setBrush(theme.colour("canvas"))
        painter.drawEllipse(QPointF(x, y), _RING, _RING)
    paint_time_tag(painter, frame, seconds, theme)


def paint_heading(painter: QPainter, frame: TimeFrame, forms: tuple[str, ...], theme: Theme) -> None:
    """Write the longest form of a line that fits above the plot."""
    metrics = QFontMetricsF(frame.font)
    box = QRectF(EDGE, EDGE - 2.0, frame.size.width() - 2.0 * EDGE, metrics.height() + 2.0)
    painter.setFont(frame.font)
    painter.setPen(theme.colour("ink"))
    painter.drawText(box, Qt.AlignmentFlag.AlignVCenter, fitting(forms, metrics, box.width()))


def _paint_borders(painter: QPainter, frame: TimeFrame, theme: Theme) -> None:
    """Set the moves off from the fields."""
    for segment in frame.curve.timeline.segments:
        if segment.field is None:
            left, right = frame.across.pixel(segment.start_s), frame.across.pixel(segment.stop_s)
            painter.fillRect(QRectF(left, frame.plot.top(), right - left, frame.plot.height()), theme.colour("window"))


def _paint_area(painter: QPainter, frame: TimeFrame, theme: Theme, ratio: float) -> None:
    """Fill what lies under the curve with the colour of its clearance, and lay each state's texture over its time."""
    columns, plot = frame.columns, frame.plot
    height, width = max(round(plot.height() * ratio), 1), len(columns.seconds)
    most = frame.upwards.window.high
    shown = np.clip(np.where(np.isinf(columns.clearance_mm), most, np.nan_to_num(columns.clearance_mm)), 0.0, most)
    rows = np.arange(height)[:, None]
    under = rows >= height * (1.0 - shown / most)
    area = np.zeros((height, width), np.uint32)
    share = np.rint(places(np.nan_to_num(columns.clearance_mm, posinf=most)) * (len(TABLE) - 2)).astype(int)
    np.copyto(area, np.array(TABLE, np.uint32)[share][None, :], where=under & ~np.isnan(columns.clearance_mm))
    _draw(painter, area, plot, _AREA_ALPHA)
    textures = np.zeros((height, width), np.uint32)
    for state in _TEXTURED:
        there = np.broadcast_to(columns.state == CODE_OF[state], textures.shape)
        if state is not State.UNPROVED:
            np.copyto(textures, tiled(texture(state, theme, ratio, on_canvas=True), textures.shape), where=there)
        if state in {State.SHORT, State.UNPROVED}:
            np.copyto(textures, tiled(texture(state, theme, ratio), textures.shape), where=there & under)
    _draw(painter, textures, plot, 1.0)


def _draw(painter: QPainter, layer: NDArray[np.uint32], target: QRectF, alpha: float) -> None:
    height, width = layer.shape
    image = QImage(layer.data, width, height, 4 * width, QImage.Format.Format_ARGB32_Premultiplied)
    before = painter.opacity()
    painter.setOpacity(before * alpha)
    painter.drawImage(target, image)
    painter.setOpacity(before)


def _paint_required(painter: QPainter, frame: TimeFrame, theme: Theme) -> None:
    """Draw what must remain between the nearest pair as a band with a dashed edge."""
    band = theme.colour("required")
    band.setAlphaF(0.10)
    path = QPainterPath()
    last: float | None = None
    left_of = frame.plot.left()
    width = frame.plot.width() / len(frame.columns.seconds)
    for column, required in enumerate(frame.columns.required_mm.tolist()):
        if math.isnan(required):
            last = None
            continue
        x, y = left_of + column * width, frame.upwards.pixel(min(required, frame.upwards.window.high))
        painter.fillRect(QRectF(x, y, width, frame.plot.bottom() - y), band)
        if last is None:
            path.moveTo(x, y)
        elif y != last:
            path.lineTo(x, last)
            path.lineTo(x, y)
        path.lineTo(x + width, y)
        last = y
    cased_stroke(painter, path, dashed(QPen(theme.colour("required"), 1.3), 4.0, 2.2), theme.colour("halo"), 1.4)
    known = frame.columns.required_mm[np.isfinite(frame.columns.required_mm)]
    if len(known):
        font = font_of(frame.font, 0.88)
        metrics = QFontMetricsF(font)
        painter.save()
        y = frame.upwards.pixel(float(known[-1])) + metrics.height() * 0.55
        painter.translate(frame.plot.right() - 5.0 - metrics.horizontalAdvance("required") / 2.0, y)
        cased_text(painter, "required", font, theme.colour("required"), theme.colour("halo"))
        painter.restore()


def _paint_line(painter: QPainter, frame: TimeFrame, theme: Theme) -> None:
    """Draw the curve, broken where nothing is known."""
    columns = frame.columns
    top = frame.upwards.window.high
    value = np.clip(np.where(np.isinf(columns.clearance_mm), top, columns.clearance_mm), 0.0, top)
    known = np.isfinite(value)
    x = frame.across.pixel(0.0) + columns.seconds * frame.across.pixels_per_deg
    y = frame.upwards.pixel(0.0) + value * frame.upwards.pixels_per_deg
    path = QPainterPath()
    for run in np.split(np.arange(len(x)), np.nonzero(np.diff(known.astype(int)))[0] + 1):
        if known[run[0]]:
            path.addPolygon(polygon_of(np.column_stack([x[run], y[run]])))
    pen = QPen(theme.colour("ink"), 1.8)
    pen.setJoinStyle(Qt.PenJoinStyle.RoundJoin)
    cased_stroke(painter, path, pen, theme.colour("halo"), 1.6)


def _paint_tight(painter: QPainter, frame: TimeFrame, theme: Theme) -> None:
    """Mark the place to look at of each field, and write the clearances, the least first, none over another."""
    font = font_of(frame.font, 0.92, bold=True)
    metrics = QFontMetricsF(font)
    taken: list[QRectF] = []
    window = frame.across.window
    seen = [tight for tight in frame.curve.tight if window.low <= tight.seconds <= window.high]
    for tight in sorted(seen, key=lambda tight: (tight.state, tight.clearance_mm)):
        y = frame.pixel(tight.clearance_mm)
        if y is None:
            continue
        at = QPointF(frame.across.pixel(tight.seconds), y)
        colour = theme.colour("ink" if tight.state is State.PERMITTED else "marked")
        _paint_valley(painter, at, colour, theme)
        text = _tight_text(tight)
        box = QRectF(0.0, 0.0, metrics.horizontalAdvance(text) + 8.0, metrics.height())
        box.moveCenter(QPointF(at.x(), at.y() - 16.0))
        box.moveTop(min(max(box.top(), frame.plot.top() + 1.0), frame.plot.bottom() - box.height() - 10.0))
        box.moveLeft(min(max(box.left(), frame.plot.left() + 1.0), frame.plot.right() - box.width() - 1.0))
        if any(box.intersects(other) for other in taken):
            continue
        taken.append(QRectF(box))
        painter.save()
        painter.translate(box.center())
        cased_text(painter, text, font, colour, theme.colour("halo"))
        painter.restore()


def _tight_text(tight: TightPlace) -> str:
    return "contact" if tight.state is State.CONTACT else clearance_text(tight.clearance_mm, 0)


def _paint_valley(painter: QPainter, at: QPointF, colour: QColor, theme: Theme) -> None:
    mark = QPolygonF([at, at + QPointF(-4.5, -7.0), at + QPointF(4.5, -7.0)])
    painter.setPen(QPen(theme.colour("halo"), 1.4))
    painter.setBrush(colour)
    painter.drawPolygon(mark)
