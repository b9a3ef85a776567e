"""The frame of a chart: margins, ticks, titles, the machine's own scales, the scale of colours, the legend."""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final, Literal

import numpy as np
from numpy.typing import NDArray
from PySide6.QtCore import QPointF, QRectF, QSizeF, Qt
from PySide6.QtGui import QColor, QFont, QFontMetricsF, QLinearGradient, QPainter, QPen

from app.clearance_scale import EDGE_COLOURS, EDGES_MM
from app.window.chart.legend import LegendItem, legend_rows
from app.window.chart.paint import font_of
from app.window.chart.reading import angle_words
from app.window.chart.view import Place, Window, ticks_deg
from app.window.theme import Theme
from geometry.machine import Readout

Array = NDArray[np.float64]

EDGE: Final = 7.0
_TICK: Final = 4.0
_GAP: Final = 4.0
_BAR: Final = 12.0
_TAG: Final = 6.0
_MOST_TICKS: Final = 14
# Below this height there is no room for long words.
_LOW: Final = 330.0


@dataclass(frozen=True)
class AxisWords:
    """What an axis is called, in full and where there is little room, and the machine's own scale if it has one."""

    name: str
    own: Readout | None

    @property
    def titles(self) -> tuple[str, ...]:
        """Titles of the scale of IEC 61217, the longest first."""
        return (f"{self.name}, IEC 61217", self.name)

    @property
    def own_titles(self) -> tuple[str, ...]:
        """Titles of the machine's own scale, the longest first."""
        return (f"{self.name}, as the machine shows it", f"{self.name}, machine's scale", "machine's scale")


@dataclass(frozen=True)
class Frame:
    """Where everything of a chart lies, device-independent pixels."""

    size: QSizeF
    font: QFont
    plot: QRectF
    across: Place
    upwards: Place
    scale: QRectF | None
    legend: tuple[tuple[QPointF, LegendItem], ...]

    @property
    def small(self) -> QFont:
        """The font of ticks and legend."""
        return font_of(self.font, 0.88)


def frame_of(
    size: QSizeF,
    font: QFont,
    across: tuple[Window, AxisWords],
    upwards: tuple[Window, AxisWords | None],
    items: Sequence[LegendItem],
    *,
    with_scale: bool,
) -> Frame:
    """Return the frame of a chart; upwards, with words None, is a scale of mm and not of angles."""
    font = font_of(font, min(max(min(size.width() / 640.0, size.height() / 430.0), 0.86), 1.12))
    small = QFontMetricsF(font_of(font, 0.88))
    line = small.height()
    labels = small.horizontalAdvance("360°")
    # Room for the tag of the pose beside the title.
    left = EDGE + line + small.horizontalAdvance("360.0°" if upwards[1] else "1000") + _TAG + _TICK
    top = EDGE + (2.0 * line + _TICK if across[1].own else 0.5 * line)
    right = EDGE + 0.5 * small.horizontalAdvance("360°")
    if upwards[1] is not None and upwards[1].own is not None:
        right = EDGE + line + labels + _TICK + _GAP
    scale_left = right
    if with_scale:
        right += _BAR + _TICK + small.horizontalAdvance("≥ 300") + line + 2.0 * _GAP
    rows = legend_rows(items, small, size.width() - 2.0 * EDGE, brief=size.height() < _LOW)
    below = _TICK + 2.0 * line + _GAP
    row_height = line + 3.0
    bottom = below + len(rows) * row_height + EDGE
    plot = QRectF(
        round(left),
        round(top),
        max(round(size.width() - left - right), 40),
        max(round(size.height() - top - bottom), 30),
    )
    scale = None
    if with_scale:
        scale = QRectF(plot.right() + scale_left - EDGE + _GAP, plot.top(), _BAR, plot.height())
    placed: list[tuple[QPointF, LegendItem]] = []
    for i, row in enumerate(rows):
        y = plot.bottom() + below + (i + 0.5) * row_height + 1.0
        # The legend is centred under the plot, and moved where it would reach beyond the chart.
        start = min(max(plot.center().x() - row[0] / 2.0, EDGE), max(size.width() - EDGE - row[0], EDGE))
        placed.extend((QPointF(start + x, y), item) for x, item in row[1])
    return Frame(
        size,
        font,
        plot,
        Place(across[0], plot.left(), plot.right()),
        Place(upwards[0], plot.bottom(), plot.top()),
        scale,
        tuple(placed),
    )


def paint_angle_axis_across(painter: QPainter, frame: Frame, words: AxisWords, theme: Theme) -> None:
    """Draw ticks and titles under the plot, and the machine's own above it."""
    plot, metrics = frame.plot, QFontMetricsF(frame.small)
    ticks, digits = _ticks_across(frame)
    painter.setFont(frame.small)
    for tick in ticks:
        x = frame.across.pixel(float(tick))
        painter.setPen(QPen(theme.colour("faint"), 1.0))
        painter.drawLine(QPointF(x, plot.bottom()), QPointF(x, plot.bottom() + _TICK))
        painter.setPen(theme.colour("ink"))
        _centred(painter, QPointF(x, plot.bottom() + _TICK + metrics.height() / 2.0), angle_words(tick, digits=digits))
        if words.own is not None:
            painter.setPen(QPen(theme.colour("faint"), 1.0))
            painter.drawLine(QPointF(x, plot.top()), QPointF(x, plot.top() - _TICK))
            text = angle_words(tick, words.own, digits)
            _centred(painter, QPointF(x, plot.top() - _TICK - metrics.height() / 2.0), text)
    painter.setPen(theme.colour("faint"))
    middle = QPointF(plot.center().x(), plot.bottom() + _TICK + 1.5 * metrics.height())
    _centred(painter, middle, fitting(words.titles, metrics, plot.width()))
    if words.own is not None:
        middle = QPointF(plot.center().x(), plot.top() - _TICK - 1.5 * metrics.height())
        _centred(painter, middle, fitting(words.own_titles, metrics, plot.width()))


def paint_angle_axis_upwards(painter: QPainter, frame: Frame, words: AxisWords, theme: Theme) -> None:
    """Draw ticks and titles left of the plot, and the machine's own right of it."""
    plot, metrics = frame.plot, QFontMetricsF(frame.small)
    ticks, digits = _ticks_upwards(frame)
    _paint_left(painter, frame, [(float(tick), angle_words(tick, digits=digits)) for tick in ticks], theme)
    _paint_rotated(painter, frame, EDGE + metrics.height() / 2.0, fitting(words.titles, metrics, plot.height()), theme)
    if words.own is None:
        return
    painter.setFont(frame.small)
    painter.setPen(theme.colour("faint"))
    for tick in ticks:
        y = frame.upwards.pixel(float(tick))
        painter.drawLine(QPointF(plot.right(), y), QPointF(plot.right() + _TICK, y))
        box = QRectF(plot.right() + _TICK + 2.0, y - metrics.height(), 200.0, 2.0 * metrics.height())
        painter.drawText(box, Qt.AlignmentFlag.AlignVCenter, angle_words(tick, words.own, digits))
    widest = metrics.horizontalAdvance("360°")
    x = plot.right() + _TICK + 3.0 + widest + metrics.height() / 2.0
    _paint_rotated(painter, frame, x, fitting(words.own_titles, metrics, plot.height()), theme)


def paint_mm_axis(painter: QPainter, frame: Frame, title: str, theme: Theme) -> None:
    """Draw ticks and the title of a clearance, mm, left of the plot, with lines across it; none below 0."""
    top = frame.upwards.window.high
    metrics = QFontMetricsF(frame.small)
    most = max(int(frame.plot.height() / (metrics.height() * 2.0)), 2)
    step = next((step for step in (5, 10, 20, 25, 50, 100, 200, 500, 1000) if top / step < most), 1000)
    ticks = np.arange(0.0, top + 1e-9, step)
    painter.setPen(QPen(theme.colour("line"), 1.0))
    for tick in ticks:
        y = round(frame.upwards.pixel(float(tick))) + 0.5
        painter.drawLine(QPointF(frame.plot.left(), y), QPointF(frame.plot.right(), y))
    _paint_left(painter, frame, [(float(tick), f"{tick:g}") for tick in ticks], theme)
    _paint_rotated(painter, frame, EDGE + metrics.height() / 2.0, title, theme)


def paint_colour_scale(painter: QPainter, frame: Frame, theme: Theme) -> None:
    """Draw the scale of clearances beside the plot; its edges are evenly apart."""
    if frame.scale is None:
        return
    bar, metrics = frame.scale, QFontMetricsF(frame.small)
    last = len(EDGES_MM) - 1
    gradient = QLinearGradient(bar.bottomLeft(), bar.topLeft())
    for i, colour in enumerate(EDGE_COLOURS):
        gradient.setColorAt(i / last, QColor(colour))
    painter.fillRect(bar, gradient)
    painter.setBrush(Qt.BrushStyle.NoBrush)
    painter.setPen(QPen(theme.colour("faint"), 1.0))
    painter.drawRect(bar)
    painter.setFont(frame.small)
    # All of them, or every second, or only some, but always both ends.
    skip = next((skip for skip in (1, 2, 5) if bar.height() / (last / skip) >= metrics.height() * 0.98), 10)
    for i in range(0, last + 1, skip):
        y = bar.bottom() - bar.height() * i / last
        painter.setPen(QPen(theme.colour("faint"), 1.0))
        painter.drawLine(QPointF(bar.right(), y), QPointF(bar.right() + _TICK, y))
        painter.setPen(theme.colour("ink"))
        text = f"≥ {EDGES_MM[i]:g}" if i == last else f"{EDGES_MM[i]:g}"
        box = QRectF(bar.right() + _TICK + 3.0, y - metrics.height(), 200.0, 2.0 * metrics.height())
        painter.drawText(box, Qt.AlignmentFlag.AlignVCenter, text)
    x = bar.right() + _TICK + 3.0 + metrics.horizontalAdvance("≥ 300") + metrics.height() / 2.0
    _paint_rotated(painter, frame, x, fitting(("Clearance, mm", "mm"), metrics, bar.height()), theme)


def paint_tag(painter: QPainter, frame: Frame, side: Literal["below", "left"], angle_deg: float, theme: Theme) -> None:
    """Draw an angle as a tag on its axis, in place of the tick labels that it touches."""
    metrics = QFontMetricsF(frame.small)
    text = angle_words(angle_deg, digits=1)
    box = QRectF(0.0, 0.0, metrics.horizontalAdvance(text) + _TAG, metrics.height() + 1.0)
    ticks, digits = _ticks_across(frame) if side == "below" else _ticks_upwards(frame)
    place = _label_across if side == "below" else _label_upwards
    box.moveCenter(place(frame, angle_deg, text).center())
    if side == "left":
        box.moveRight(frame.plot.left() - 1.0)
    for tick in ticks:
        label = place(frame, float(tick), angle_words(tick, digits=digits))
        if label.intersects(box):
            painter.fillRect(label.adjusted(-1.0, 0.0, 1.0, 0.0), theme.colour("canvas"))
    painter.setPen(QPen(theme.colour("canvas"), 1.5))
    painter.setBrush(theme.colour("accent"))
    painter.drawRoundedRect(box, 3.0, 3.0)
    painter.setFont(frame.small)
    painter.setPen(theme.colour("on_accent"))
    painter.drawText(box, Qt.AlignmentFlag.AlignCenter, text)


def paint_border(painter: QPainter, frame: Frame, theme: Theme) -> None:
    """Draw the border of the plot."""
    painter.setBrush(Qt.BrushStyle.NoBrush)
    painter.setPen(QPen(theme.colour("faint"), 1.0))
    painter.drawRect(frame.plot.adjusted(-0.5, -0.5, 0.5, 0.5))


def fitting(texts: Sequence[str], metrics: QFontMetricsF, room: float) -> str:
    """Return the first text that fits, or the last."""
    return next((text for text in texts if metrics.horizontalAdvance(text) <= room), texts[-1])


def _ticks_across(frame: Frame) -> tuple[Array, int]:
    """Return the angles with a tick under the plot, and with how many decimals they are written."""
    width = QFontMetricsF(frame.small).horizontalAdvance("360°") * 1.45
    most = min(int(frame.plot.width() / width), _MOST_TICKS)
    ticks, step = ticks_deg(frame.across.window.low, frame.across.window.high, most)
    return ticks, 1 if step < 1.0 else 0


def _ticks_upwards(frame: Frame) -> tuple[Array, int]:
    most = min(int(frame.plot.height() / (QFontMetricsF(frame.small).height() * 1.35)), _MOST_TICKS)
    ticks, step = ticks_deg(frame.upwards.window.low, frame.upwards.window.high, most)
    return ticks, 1 if step < 1.0 else 0


def _label_across(frame: Frame, angle_deg: float, text: str) -> QRectF:
    """Return where the label of an angle stands under the plot."""
    metrics = QFontMetricsF(frame.small)
    width = metrics.horizontalAdvance(text)
    left = frame.across.pixel(angle_deg) - width / 2.0
    return QRectF(left, frame.plot.bottom() + _TICK, width, metrics.height())


def _label_upwards(frame: Frame, angle_deg: float, text: str) -> QRectF:
    """Return where the label of an angle stands left of the plot."""
    metrics = QFontMetricsF(frame.small)
    width = metrics.horizontalAdvance(text)
    top = frame.upwards.pixel(angle_deg) - metrics.height() / 2.0
    return QRectF(frame.plot.left() - _TICK - 2.0 - width, top, width, metrics.height())


def _paint_left(painter: QPainter, frame: Frame, ticks: list[tuple[float, str]], theme: Theme) -> None:
    plot, metrics = frame.plot, QFontMetricsF(frame.small)
    painter.setFont(frame.small)
    for value, text in ticks:
        y = frame.upwards.pixel(value)
        painter.setPen(QPen(theme.colour("faint"), 1.0))
        painter.drawLine(QPointF(plot.left() - _TICK, y), QPointF(plot.left(), y))
        painter.setPen(theme.colour("ink"))
        box = QRectF(plot.left() - _TICK - 202.0, y - metrics.height(), 200.0, 2.0 * metrics.height())
        painter.drawText(box, Qt.AlignmentFlag.AlignRight | Qt.AlignmentFlag.AlignVCenter, text)


def _paint_rotated(painter: QPainter, frame: Frame, x: float, text: str, theme: Theme) -> None:
    painter.save()
    painter.setFont(frame.small)
    painter.setPen(theme.colour("faint"))
    painter.translate(x, frame.plot.center().y())
    painter.rotate(-90.0)
    _centred(painter, QPointF(0.0, 0.0), text)
    painter.restore()


def _centred(painter: QPainter, centre: QPointF, text: str) -> None:
    painter.drawText(QRectF(centre.x() - 300.0, centre.y() - 50.0, 600.0, 100.0), Qt.AlignmentFlag.AlignCenter, text)
