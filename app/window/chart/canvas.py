"""What hand and keys do on a chart of angles: pointing, dragging, zooming, panning, stepping."""

from typing import Final

from PySide6.QtCore import QEvent, QPointF, Qt, Signal
from PySide6.QtGui import QEnterEvent, QKeyEvent, QMouseEvent, QWheelEvent
from PySide6.QtWidgets import QWidget

from app.window.chart.surface import ChartSurface

_WHEEL_NOTCH: Final = 120.0
_ZOOM_OF_NOTCH: Final = 0.82
# What a click may say of an angle: what a machine shows.
_DIGITS: Final = 1


class ChartCanvas(ChartSurface):
    """A chart over angles that can be pointed at and moved on; a subclass paints it.

    Emits `pose_wanted` (gantry, unwrapped, and couch, deg, within the travel) on click, drag and arrow keys, and
    `pointed` with a `chart_reading.Reading` or None as the pointer moves.
    """

    pose_wanted = Signal(float, float)
    pointed = Signal(object)

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._drag: Qt.MouseButton | None = None
        self._pan_from: QPointF | None = None
        self._space = False
        self.setFocusPolicy(Qt.FocusPolicy.StrongFocus)
        self.setMouseTracking(True)
        self.setCursor(Qt.CursorShape.CrossCursor)

    def _point_at(self, place: QPointF | None) -> None:
        self._pointer = place
        self.pointed.emit(self._pointed_reading())
        self.update()

    def _want(self, gantry_deg: float, couch_deg: float, digits: int | None = _DIGITS) -> None:
        if self._no_travel:
            return
        gantry, couch = (
            min(max(angle if digits is None else round(angle, digits), low), high)
            for angle, (low, high) in ((gantry_deg, self._gantry_travel), (couch_deg, self._couch_travel))
        )
        self.pose_wanted.emit(gantry, couch)

    def mousePressEvent(self, event: QMouseEvent) -> None:  # noqa: D102 - Qt's
        place = event.position()
        left, middle = Qt.MouseButton.LeftButton, Qt.MouseButton.MiddleButton
        if event.button() == middle or (event.button() == left and self._space):
            self._drag, self._pan_from = event.button(), place
            self.setCursor(Qt.CursorShape.ClosedHandCursor)
        elif event.button() == left and self.frame().plot.contains(place):
            self._drag = left
            self._want(*self._angles_at(self.frame(), place))
        self._point_at(place)

    def mouseMoveEvent(self, event: QMouseEvent) -> None:  # noqa: D102 - Qt's
        place = event.position()
        if self._drag is not None and self._pan_from is not None:
            self._pan(place - self._pan_from)
            self._pan_from = place
        elif self._drag is not None:
            self._want(*self._angles_at(self.frame(), place))
        self._point_at(place)

    def mouseReleaseEvent(self, event: QMouseEvent) -> None:  # noqa: D102 - Qt's
        if event.button() == self._drag:
            self._drag = self._pan_from = None
            self._show_cursor()

    def mouseDoubleClickEvent(self, event: QMouseEvent) -> None:  # noqa: D102 - Qt's
        if event.button() == Qt.MouseButton.LeftButton:
            self.reset_view()

    def enterEvent(self, event: QEnterEvent) -> None:  # noqa: D102 - Qt's
        self._point_at(event.position())

    def leaveEvent(self, event: QEvent) -> None:  # noqa: ARG002, D102 - Qt's
        self._point_at(None)

    def wheelEvent(self, event: QWheelEvent) -> None:  # noqa: D102 - Qt's
        notches = event.angleDelta().y() / _WHEEL_NOTCH
        if notches:
            self._zoom(_ZOOM_OF_NOTCH**notches, event.position())
        event.accept()

    # Keys.

    def keyPressEvent(self, event: QKeyEvent) -> None:  # noqa: D102 - Qt's
        key, step = event.key(), 0.1 if event.modifiers() & Qt.KeyboardModifier.ShiftModifier else 1.0
        moves = {
            Qt.Key.Key_Left: (-step, 0.0),
            Qt.Key.Key_Right: (step, 0.0),
            Qt.Key.Key_Down: (0.0, -step),
            Qt.Key.Key_Up: (0.0, step),
        }
        if key in moves and self._pose is not None:
            by = moves[Qt.Key(key)]
            self._want(round(self._pose[0] + by[0], 6), round(self._pose[1] + by[1], 6), None)
        elif key in {Qt.Key.Key_Plus, Qt.Key.Key_Equal}:
            self._zoom(_ZOOM_OF_NOTCH, self._zoom_centre())
        elif key == Qt.Key.Key_Minus:
            self._zoom(1.0 / _ZOOM_OF_NOTCH, self._zoom_centre())
        elif key == Qt.Key.Key_Home:
            self.reset_view()
        elif key == Qt.Key.Key_Space:
            if not event.isAutoRepeat():
                self._space = True
                self._show_cursor()
        else:
            super().keyPressEvent(event)

    def keyReleaseEvent(self, event: QKeyEvent) -> None:  # noqa: D102 - Qt's
        if event.key() == Qt.Key.Key_Space and not event.isAutoRepeat():
            self._space = False
            self._show_cursor()
        else:
            super().keyReleaseEvent(event)

    def _show_cursor(self) -> None:
        self.setCursor(Qt.CursorShape.OpenHandCursor if self._space else Qt.CursorShape.CrossCursor)

    def _zoom_centre(self) -> QPointF:
        """Return what keys zoom about: the pose where it is in view, else the middle."""
        frame = self.frame()
        if self._pose is not None:
            place = self._place_of(frame, self._pose)
            if frame.plot.contains(place):
                return place
        return frame.plot.center()

    def _zoom(self, factor: float, about: QPointF) -> None:
        frame = self.frame()
        gantry, couch = self._angles_at(frame, about)
        self._gantry_view = self._gantry_view.zoomed(gantry, factor)
        self._couch_view = self._couch_view.zoomed(couch, factor)
        self.repaint_layer()

    def _pan(self, by: QPointF) -> None:
        frame = self.frame()
        self._gantry_view = self._gantry_view.shifted(-by.x() / frame.across.pixels_per_deg)
        self._couch_view = self._couch_view.shifted(-by.y() / frame.upwards.pixels_per_deg)
        self.repaint_layer()
