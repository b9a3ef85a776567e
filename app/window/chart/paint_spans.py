"""The strip of permitted spans as it is painted: a bar a span, its least clearance, its end angles."""

import math
from dataclasses import dataclass
from typing import Final

from PySide6.QtCore import QPointF, QRectF, QSizeF, Qt
from PySide6.QtGui import QColor, QFont, QFontMetricsF, QPainter, QPainterPath, QPen

from app.clearance_scale import EDGE_COLOURS
from app.files.readings import clearance_text, number_text
from app.window.chart.paint import dashed, font_of, texture_brush
from app.window.chart.paint_axes import fitting
from app.window.chart.reading import angle_words
from app.window.chart.view import Place, Window
from app.window.theme import LIGHT, Theme
from geometry.spans import Span
from geometry.states import State

_SIDE: Final = 14.0
_BAR: Final = 21.0
_EDGE: Final = 5.0
# Between title and bars, where the mark of the pose stands.
_GAP: Final = 6.0
_LEAST_PIXELS: Final = 3.0


@dataclass(frozen=True)
class Strip:
    """All that the strip shows; angles in deg, the gantry's unwrapped.

    `spans` None: not known yet. `axis`: left and right end in pixels, and the angles there; None: the whole turn over
    the whole width. `touched` and `chosen` are places in `spans`; `focused`: keys go here.
    """

    couch_deg: float = 0.0
    spans: tuple[Span, ...] | None = None
    stale: bool = False
    travel_deg: tuple[float, float] = (-180.0, 180.0)
    axis: tuple[float, float, float, float] | None = None
    gantry_deg: float | None = None
    touched: int | None = None
    chosen: int | None = None
    focused: bool = False

    @property
    def titles(self) -> tuple[str, ...]:
        """What the strip says in one line, the longest first."""
        couch = f"couch {angle_words(self.couch_deg)}"
        if self.spans is None:
            return (f"Permitted at {couch}: not proved yet", f"C{couch[1:]}: not proved yet")
        if not self.spans:
            return (f"Nothing permitted at {couch}",)
        count = "1 span" if len(self.spans) == 1 else f"{len(self.spans)} spans"
        extent = f"{number_text(round(sum(span.extent_deg for span in self.spans), 1))}°"
        # Where the travel is more than a whole turn, so may be what is permitted of it.
        travel = f"{number_text(round(self.travel_deg[1] - self.travel_deg[0], 1))}°"
        title = f"Permitted at {couch}: {count}, {extent} of {travel}"
        brief = (f"C{couch[1:]}: {count}, {extent}", f"{count}, {extent}")
        return (f"{title}, before this change", title, *brief) if self.stale else (title, *brief)


class StripLayout:
    """Where everything of a strip lies in a widget of a size, with a font."""

    def __init__(self, strip: Strip, size: QSizeF, font: QFont) -> None:
        self.strip, self.size, self.font = strip, size, font
        self.place = _place(strip, size)
        top = _EDGE + QFontMetricsF(font).height() + _GAP
        self.track = QRectF(self.place.start, top, self.place.stop - self.place.start, _BAR)

    def bar(self, span: Span) -> QRectF:
        """Return where a span is drawn; one of a single angle is a span too."""
        left, right = self.place.pixel(span.gantry_from_deg), self.place.pixel(span.gantry_to_deg)
        if right - left < _LEAST_PIXELS:
            middle = (left + right) / 2.0
            left, right = middle - _LEAST_PIXELS / 2.0, middle + _LEAST_PIXELS / 2.0
        return QRectF(left, self.track.top(), right - left, self.track.height())

    def paint(self, painter: QPainter, theme: Theme, ratio: float) -> None:
        """Paint all of the strip; `ratio` is the number of device pixels per pixel."""
        painter.setRenderHint(QPainter.RenderHint.Antialiasing)
        painter.fillRect(QRectF(QPointF(0.0, 0.0), self.size), theme.colour("canvas"))
        self._paint_title(painter, theme)
        painter.save()
        painter.setClipRect(self.track.adjusted(-1.0, -1.0, 1.0, 1.0))
        self._paint_track(painter, theme, ratio)
        for index, span in enumerate(self.strip.spans or ()):
            self._paint_bar(painter, index, span, theme)
        painter.restore()
        if self.strip.focused and self.strip.chosen is None:
            painter.setBrush(Qt.BrushStyle.NoBrush)
            painter.setPen(QPen(theme.colour("accent"), 2.0))
            painter.drawRect(self.track.adjusted(-2.0, -2.0, 2.0, 2.0))
        self._paint_ends(painter, theme)
        self._paint_pose(painter, theme)

    def _paint_title(self, painter: QPainter, theme: Theme) -> None:
        font = font_of(self.font, 1.0, bold=True)
        metrics = QFontMetricsF(font)
        left = min(self.place.start, _SIDE)
        box = QRectF(left, _EDGE - 1.0, self.size.width() - left - 6.0, metrics.height())
        painter.setFont(font)
        painter.setPen(theme.colour("faint" if self.strip.stale else "ink"))
        painter.drawText(box, Qt.AlignmentFlag.AlignVCenter, fitting(self.strip.titles, metrics, box.width()))

    def _paint_track(self, painter: QPainter, theme: Theme, ratio: float) -> None:
        track, place = self.track, self.place
        left, right = (min(max(place.pixel(end), track.left()), track.right()) for end in self.strip.travel_deg)
        painter.setBrushOrigin(track.topLeft())
        painter.fillRect(track, texture_brush(State.NO_TRAVEL, theme, ratio))
        painter.fillRect(QRectF(left, track.top(), right - left, track.height()), theme.colour("window"))
        if self.strip.spans == ():
            # Less than a colour, and not nothing.
            painter.fillRect(
                QRectF(left, track.top(), right - left, track.height()),
                texture_brush(State.SHORT, theme, ratio, on_canvas=True),
            )
        painter.setBrush(Qt.BrushStyle.NoBrush)
        painter.setPen(QPen(theme.colour("line"), 1.0))
        painter.drawRect(track)
        for angle in (-180.0, -90.0, 0.0, 90.0, 180.0):
            x = place.pixel(angle)
            painter.drawLine(QPointF(x, track.top()), QPointF(x, track.bottom()))

    def _paint_bar(self, painter: QPainter, index: int, span: Span, theme: Theme) -> None:
        bar, stale = self.bar(span), self.strip.stale
        fill = QColor(EDGE_COLOURS[7])
        fill.setAlphaF(0.4 if stale else 1.0)
        pen = QPen(theme.colour("permitted"), 1.8)
        if stale:
            pen = dashed(QPen(theme.colour("permitted"), 1.3), 3.0, 2.4)
        painter.setBrush(fill)
        painter.setPen(pen)
        painter.drawRect(bar)
        if index in {self.strip.touched, self.strip.chosen}:
            painter.setBrush(Qt.BrushStyle.NoBrush)
            painter.setPen(QPen(theme.colour("accent"), 2.6))
            painter.drawRect(bar.adjusted(0.4, 0.4, -0.4, -0.4))
        seen = bar.intersected(self.track)
        font = font_of(self.font, 0.92)
        metrics = QFontMetricsF(font)
        least = least_words(span)
        # In words where there is room for them.
        text = fitting((f"at least {least} mm", f"≥ {least} mm", f"≥ {least}", ""), metrics, seen.width() - 6.0)
        painter.setFont(font)
        # The bar's colour is that of the charts, in both themes; while it is faint the canvas shows through.
        painter.setPen(theme.colour("ink") if stale else LIGHT.colour("ink"))
        painter.drawText(seen, Qt.AlignmentFlag.AlignCenter, text)

    def _paint_ends(self, painter: QPainter, theme: Theme) -> None:
        """Write the end angles under the bars, those of long spans first, and none over another."""
        font = font_of(self.font, 0.88)
        painter.setFont(font)
        spans = self.strip.spans or ()
        taken: list[QRectF] = []
        for index in sorted(range(len(spans)), key=lambda index: -spans[index].extent_deg):
            for text, box in self._ends(spans[index], QFontMetricsF(font)):
                if any(box.adjusted(-5.0, 0.0, 5.0, 0.0).intersects(other) for other in taken):
                    continue
                taken.append(box)
                plain = "faint" if self.strip.stale else "ink"
                painter.setPen(theme.colour("accent" if index == self.strip.touched else plain))
                painter.drawText(box, Qt.AlignmentFlag.AlignCenter, text)

    def _ends(self, span: Span, metrics: QFontMetricsF) -> list[tuple[str, QRectF]]:
        """Return the end angles of a span that are in view, one by one or, of a short one, together."""
        bar = self.bar(span)
        first, last = angle_words(span.gantry_from_deg), angle_words(span.gantry_to_deg)
        both = f"{first} – {last}"
        if metrics.horizontalAdvance(both) > bar.width() * 0.8:
            wanted = [(both, bar.center().x(), 0.5)]
        else:
            wanted = [(first, bar.left(), 0.0), (last, bar.right(), 1.0)]
        ends = []
        for text, at, share in wanted:
            if self.track.left() - 1.0 <= at <= self.track.right() + 1.0:
                width = metrics.horizontalAdvance(text)
                left = min(max(at - share * width, 2.0), self.size.width() - width - 2.0)
                ends.append((text, QRectF(left, self.track.bottom() + 3.0, width, metrics.height())))
        return ends

    def _paint_pose(self, painter: QPainter, theme: Theme) -> None:
        """Mark the gantry angle above the bars, where it hides nothing."""
        if self.strip.gantry_deg is None:
            return
        x = self.place.pixel(self.strip.gantry_deg)
        if self.track.left() - 1.0 <= x <= self.track.right() + 1.0:
            top = self.track.top() - _GAP
            mark = QPainterPath(QPointF(x - 4.5, top))
            mark.lineTo(x + 4.5, top)
            mark.lineTo(x, top + _GAP + 1.5)
            mark.closeSubpath()
            painter.setPen(QPen(theme.colour("canvas"), 1.0))
            painter.setBrush(theme.colour("accent"))
            painter.drawPath(mark)


def height_of(font: QFont) -> int:
    """Return how high a strip is."""
    line = QFontMetricsF(font_of(font, 0.88)).height()
    return math.ceil(2.0 * _EDGE + QFontMetricsF(font).height() + _GAP + _BAR + line)


def least_words(span: Span) -> str:
    """Return the proved clearance, rounded down, so that it stays a bound."""
    if not math.isfinite(span.least_clearance_mm):
        return "–"
    return clearance_text(span.least_clearance_mm).removesuffix(" mm")


def _place(strip: Strip, size: QSizeF) -> Place:
    if strip.axis is not None:
        left, right, low, high = strip.axis
        return Place(Window(low, high, low, high), left, right)
    window = Window.whole(min(-180.0, strip.travel_deg[0]), max(180.0, strip.travel_deg[1]))
    return Place(window, _SIDE, max(size.width() - _SIDE, _SIDE + 1.0))
