"""The clearance over the course of a field or of the whole treatment, with a cursor at the current time."""

import math
from typing import Final

from PySide6.QtCore import QEvent, QPointF, QSize, QSizeF, Qt, Signal
from PySide6.QtGui import (
    QImage,
    QKeyEvent,
    QMouseEvent,
    QPainter,
    QPaintEvent,
    QPen,
    QPixmap,
    QResizeEvent,
    QWheelEvent,
)
from PySide6.QtWidgets import QSizePolicy, QWidget

from app.files.readings import clearance_text
from app.plan.dry_run_words import angle_text
from app.plan.timeline_clearance import ClearanceOverTime, next_tight
from app.window.chart.view import Window
from app.window.fields.time_frame import TimeFrame, time_frame
from app.window.fields.time_paint import paint_cursor, paint_heading, paint_time_layer
from app.window.fields.words import seconds_words
from app.window.theme import LIGHT, Theme

_WHEEL_NOTCH: Final = 120.0
_ZOOM_OF_NOTCH: Final = 0.82
_EMPTY: Final = "Clearance over time: no field is chosen"
_FLAGS: Final = Qt.AlignmentFlag.AlignCenter | Qt.TextFlag.TextWordWrap


class TimeCurve(QWidget):
    """Shows a curve; asks for a time by `time_wanted` (seconds) on click, drag and keys."""

    time_wanted = Signal(float)

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._theme = LIGHT
        self._curve: ClearanceOverTime | None = None
        self._stale = False
        self._seconds = 0.0
        self._window = Window.whole(0.0, 1.0)
        self._frame: TimeFrame | None = None
        self._layer: QPixmap | None = None
        self._pointer: QPointF | None = None
        self._is_dragging = False
        self.setFocusPolicy(Qt.FocusPolicy.StrongFocus)
        self.setMouseTracking(True)
        self.setSizePolicy(QSizePolicy.Policy.Expanding, QSizePolicy.Policy.Expanding)
        self.setAttribute(Qt.WidgetAttribute.WA_OpaquePaintEvent)
        self.setAccessibleName("Clearance over time")
        self.setWhatsThis(
            "Click or drag to go to a time. Left and right arrow keys step by 1 s, with Shift by 0.1 s, Page Up and "
            "Page Down go to the tightest place before or after, Home and End to the ends. The wheel zooms, a double "
            "click shows everything."
        )
        self.setAccessibleDescription(self.whatsThis())

    def set_theme(self, theme: Theme) -> None:
        """Take over colours."""
        self._theme = theme
        self._repaint_layer()

    def show_curve(self, curve: ClearanceOverTime | None, *, stale: bool = False) -> None:
        """Show another curve, or none; `stale`: faintly, as that of the set-up before."""
        if curve is not None and (not curve.timeline.segments or curve.timeline.seconds <= 0.0):
            curve = None
        if curve is not self._curve:
            self._curve = curve
            self._window = Window.whole(0.0, curve.timeline.seconds if curve is not None else 1.0)
        self._stale = stale
        self._repaint_layer()

    def set_time(self, seconds: float) -> None:
        """Put the cursor at a time, and keep it in sight."""
        if seconds == self._seconds:
            return
        self._seconds = seconds
        if not self._window.low <= seconds <= self._window.high:
            self._window = self._window.shifted(seconds - (self._window.low + 0.1 * self._window.extent))
            self._repaint_layer()
        self.update()

    def picture(self, width: int, height: int, theme: Theme | None = None) -> QImage:
        """Return the curve with its cursor as an image of that many pixels; in the widget's theme unless told."""
        image = QImage(width, height, QImage.Format.Format_RGB32)
        theme = theme or self._theme
        image.fill(theme.colour("canvas"))
        if self._curve is not None:
            frame = time_frame(QSizeF(width, height), self.font(), self._curve, self._window, 1.0)
            with QPainter(image) as painter:
                paint_time_layer(painter, frame, theme, 1.0, stale=self._stale)
                paint_cursor(painter, frame, self._seconds, theme)
        return image

    def sizeHint(self) -> QSize:
        """Return a comfortable size."""
        return QSize(640, 190)

    def minimumSizeHint(self) -> QSize:
        """Return the least size."""
        return QSize(280, 130)

    def line_at(self, seconds: float) -> tuple[str, ...]:
        """Return what is known at a time, the longest form first."""
        curve = self._curve
        if curve is None:
            return (_EMPTY,)
        segment = curve.timeline.segments[curve.timeline.segment_at(seconds)]
        sample = curve.sample_at(seconds)
        name = segment.text if segment.field is None else f"{segment.field + 1} {segment.text}"
        if segment.kind == "out of reach":
            told = f"{seconds_words(seconds)}  {name}: out of reach"
            return (told, f"{seconds_words(seconds)}  out of reach")
        # The exact clearance goes with the angles that it was computed for, a degree away at most.
        gantry, couch = (angle_text(float(angles[sample]), 1) for angles in (curve.gantry_deg, curve.couch_deg))
        value = float(curve.clearance_mm[sample])
        known = "clearance not known" if math.isnan(value) else clearance_text(value)
        if segment.kind == "table" and math.isfinite(value):
            known = f"at least {known}"
        state = curve.state_at(sample)
        labels = curve.labels(sample)
        untimed = "" if segment.is_timed or segment.field is not None else ", time not known"
        brief = f"{seconds_words(seconds)}  {name}: {known}, {state}"
        short = f"{seconds_words(seconds)}  {known}, {state}"
        where = f"{seconds_words(seconds)}  {name}{untimed}: gantry {gantry}, couch {couch}, {known}, {state}"
        return (*((f"{where}, {labels[0]} – {labels[1]}",) if labels else ()), where, brief, short)

    def paintEvent(self, _event: QPaintEvent) -> None:
        """Paint the layer, and on it what moves."""
        with QPainter(self) as painter:
            if self._curve is None:
                painter.fillRect(self.rect(), self._theme.colour("canvas"))
                painter.setPen(self._theme.colour("faint"))
                painter.drawText(self.rect().adjusted(8, 8, -8, -8), _FLAGS, _EMPTY)
                return
            frame = self._laid_out(self._curve)
            painter.drawPixmap(QPointF(0.0, 0.0), self._painted(frame))
            painter.setRenderHint(QPainter.RenderHint.Antialiasing)
            pointed = self._time_at(self._pointer) if self._pointer is not None else None
            paint_heading(painter, frame, self.line_at(self._seconds if pointed is None else pointed), self._theme)
            paint_cursor(painter, frame, self._seconds, self._theme)
            if pointed is not None and not self._is_dragging:
                x = frame.across.pixel(pointed)
                painter.setPen(QPen(self._theme.colour("faint"), 1.0, Qt.PenStyle.DashLine))
                painter.drawLine(QPointF(x, frame.plot.top()), QPointF(x, frame.lane.bottom()))
            if self.hasFocus():
                painter.setBrush(Qt.BrushStyle.NoBrush)
                painter.setPen(QPen(self._theme.colour("accent"), 2.0))
                painter.drawRect(frame.plot.adjusted(-2.0, -2.0, 2.0, 2.0))

    def mousePressEvent(self, event: QMouseEvent) -> None:
        """Go to the time that is clicked on."""
        if event.button() == Qt.MouseButton.LeftButton:
            self._is_dragging = True
            self._want(self._time_at(event.position()))

    def mouseMoveEvent(self, event: QMouseEvent) -> None:
        """Follow the pointer."""
        self._pointer = event.position()
        if self._is_dragging:
            self._want(self._time_at(event.position()))
        self.update()

    def mouseReleaseEvent(self, event: QMouseEvent) -> None:
        """Let go."""
        if event.button() == Qt.MouseButton.LeftButton:
            self._is_dragging = False

    def mouseDoubleClickEvent(self, _event: QMouseEvent) -> None:
        """Show everything."""
        self._window = Window.whole(self._window.least, self._window.most)
        self._repaint_layer()

    def leaveEvent(self, event: QEvent) -> None:
        """Point at nothing."""
        self._pointer = None
        self.update()
        super().leaveEvent(event)

    def wheelEvent(self, event: QWheelEvent) -> None:
        """Zoom about the time that is pointed at; sideways, move along."""
        along, turned = event.angleDelta().x(), event.angleDelta().y()
        about = self._time_at(event.position())
        if about is not None and turned:
            self._window = self._window.zoomed(about, _ZOOM_OF_NOTCH ** (turned / _WHEEL_NOTCH))
            self._repaint_layer()
        elif along:
            self._window = self._window.shifted(-0.1 * self._window.extent * along / _WHEEL_NOTCH)
            self._repaint_layer()
        event.accept()

    def keyPressEvent(self, event: QKeyEvent) -> None:
        """Step through time."""
        curve, key = self._curve, event.key()
        step = 0.1 if event.modifiers() & Qt.KeyboardModifier.ShiftModifier else 1.0
        if curve is None:
            super().keyPressEvent(event)
        elif key in {Qt.Key.Key_Left, Qt.Key.Key_Right}:
            self._want(self._seconds + (step if key == Qt.Key.Key_Right else -step))
        elif key in {Qt.Key.Key_Home, Qt.Key.Key_End}:
            self._want(0.0 if key == Qt.Key.Key_Home else curve.timeline.seconds)
        elif key in {Qt.Key.Key_PageUp, Qt.Key.Key_PageDown}:
            self._want(next_tight(curve, self._seconds, 1 if key == Qt.Key.Key_PageDown else -1))
        else:
            super().keyPressEvent(event)

    def resizeEvent(self, event: QResizeEvent) -> None:
        """Lay out anew."""
        self._repaint_layer()
        super().resizeEvent(event)

    def changeEvent(self, event: QEvent) -> None:
        """Lay out anew in another font."""
        if event.type() == QEvent.Type.FontChange:
            self._repaint_layer()
        super().changeEvent(event)

    def _want(self, seconds: float | None) -> None:
        if seconds is not None and self._curve is not None:
            self.time_wanted.emit(min(max(seconds, 0.0), self._curve.timeline.seconds))

    def _time_at(self, place: QPointF) -> float | None:
        if self._curve is None:
            return None
        across = self._laid_out(self._curve).across
        seconds = across.window.low + (place.x() - across.start) / across.pixels_per_deg
        return min(max(seconds, across.window.low), across.window.high)

    def _repaint_layer(self) -> None:
        self._frame = self._layer = None
        self.update()

    def _laid_out(self, curve: ClearanceOverTime) -> TimeFrame:
        if self._frame is None:
            ratio = self.devicePixelRatioF()
            self._frame = time_frame(QSizeF(self.size()), self.font(), curve, self._window, ratio)
        return self._frame

    def _painted(self, frame: TimeFrame) -> QPixmap:
        ratio = self.devicePixelRatioF()
        if self._layer is None or self._layer.devicePixelRatio() != ratio:
            self._layer = QPixmap((QSizeF(self.size()) * ratio).toSize())
            self._layer.setDevicePixelRatio(ratio)
            with QPainter(self._layer) as painter:
                paint_time_layer(painter, frame, self._theme, ratio, stale=self._stale)
        return self._layer
