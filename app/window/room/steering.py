"""Turning, moving and zooming the view of the room with mouse and keys, and pointing at what is in it."""

from typing import Final

import numpy as np
from PySide6.QtCore import QEvent, QPointF, Qt, QTimer
from PySide6.QtGui import QFocusEvent, QKeyEvent, QMouseEvent, QResizeEvent, QWheelEvent
from PySide6.QtWidgets import QWidget

from app.window.room.camera import Camera
from app.window.room.canvas import SceneCanvas
from app.window.room.rendering import Array
from app.window.room.views import BEAMS_EYE, VIEWS, beams_eye, standard_view
from app.window.theme import Theme

_DEG_PER_PIXEL: Final = 0.35
_KEY_STEP_DEG: Final = 5.0
_KEY_STEP_PX: Final = 30.0
_ZOOM_STEP: Final = 1.15
_HOVER_MS: Final = 40
_CLICK_PX: Final = 4.0
_ARROWS: Final = {
    Qt.Key.Key_Left: (-1.0, 0.0),
    Qt.Key.Key_Right: (1.0, 0.0),
    Qt.Key.Key_Up: (0.0, -1.0),
    Qt.Key.Key_Down: (0.0, 1.0),
}


class SceneSteering(SceneCanvas):
    """A canvas with an eye that a person moves. What there is to see and to point at, a subclass says."""

    def __init__(self, theme: Theme, parent: QWidget | None = None) -> None:
        super().__init__(theme, parent)
        self._camera = standard_view(VIEWS[0])
        self._follows_beam = False
        self._untouched = True
        self._pressed: QPointF | None = None
        self._dragged = False
        self._last = QPointF()
        self._hover = QTimer(self)
        self._hover.setSingleShot(True)
        self._hover.setInterval(_HOVER_MS)
        self._hover.timeout.connect(self._point)
        self.setMouseTracking(True)
        self.setFocusPolicy(Qt.FocusPolicy.StrongFocus)

    def fit_points(self) -> Array:
        """Return points, (n, 3), mm, fixed system, that are to be in view when all is."""
        raise NotImplementedError

    def beam_source(self) -> tuple[float, float]:
        """Return the gantry angle, degrees, and the distance from source to isocentre, mm."""
        raise NotImplementedError

    def point_at(self, position: QPointF | None) -> None:
        """Tell what is at a place of the widget; None when the pointer has left."""
        raise NotImplementedError

    def click_at(self, position: QPointF) -> None:
        """Tell what was clicked."""
        raise NotImplementedError

    def camera(self) -> Camera:
        """Return from where the room is seen now."""
        return beams_eye(*self.beam_source()) if self._follows_beam else self._camera

    def set_view(self, name: str) -> None:
        """Look from one of `VIEWS`, all in view. KeyError for another name."""
        if name == BEAMS_EYE:
            self._follows_beam = True
        else:
            self._camera = standard_view(name)
            self.fit()
        self.changed()

    def fit(self) -> None:
        """Bring all into view, from the present direction or, from the beam's eye, from the first of the views."""
        points = self.fit_points()
        self._follows_beam = False
        self._untouched = True
        self._camera = self._camera.fitted(points, max(self.width(), 1), max(self.height(), 1))
        self.changed()

    def zoom(self, factor: float) -> None:
        """Come nearer by a factor."""
        self._look(self.camera().zoomed(factor))

    def orbit(self, azimuth_deg: float, elevation_deg: float) -> None:
        """Walk round what is in the middle, and up."""
        self._look(self.camera().orbited(azimuth_deg, elevation_deg))

    def pan(self, right_px: float, down_px: float) -> None:
        """Move the picture by that many pixels of the layout."""
        self._look(self.camera().panned(right_px, down_px, max(self.height(), 1)))

    def shutdown(self) -> None:
        """Stop everything and give it back: no process, thread or timer is left. The widget is not used afterwards."""
        self._hover.stop()
        super().shutdown()

    def mousePressEvent(self, event: QMouseEvent) -> None:
        """Begin to turn or move the view."""
        self._pressed = self._last = event.position()
        self._dragged = False

    def mouseMoveEvent(self, event: QMouseEvent) -> None:
        """Turn the view (left button), move it (middle, or left with Shift), or see what is under the pointer."""
        position = event.position()
        if self._pressed is None:
            self._last = position
            if not self._hover.isActive() and not self._closed:
                self._hover.start()
            return
        if not self._dragged and (position - self._pressed).manhattanLength() < _CLICK_PX:
            return
        step = position - self._last
        self._dragged = True
        self._last = position
        left = bool(event.buttons() & Qt.MouseButton.LeftButton)
        shifted = bool(event.modifiers() & Qt.KeyboardModifier.ShiftModifier)
        if left and not shifted:
            self.orbit(-_DEG_PER_PIXEL * step.x(), _DEG_PER_PIXEL * step.y())
        elif left or event.buttons() & Qt.MouseButton.MiddleButton:
            self.pan(step.x(), step.y())

    def mouseReleaseEvent(self, event: QMouseEvent) -> None:
        """Tell of a click, if nothing was dragged."""
        clicked = self._pressed is not None and not self._dragged
        self._pressed = None
        if clicked and event.button() == Qt.MouseButton.LeftButton:
            self.click_at(event.position())

    def mouseDoubleClickEvent(self, _event: QMouseEvent) -> None:
        """Bring all into view."""
        self._pressed = None
        self.fit()

    def wheelEvent(self, event: QWheelEvent) -> None:
        """Come nearer to what is under the pointer, or go away from it."""
        turns = event.angleDelta().y() / 120.0
        event.accept()
        if turns == 0.0:
            return
        before = self.camera()
        nearer = before.zoomed(_ZOOM_STEP**turns)
        rest = 1.0 - before.distance_mm / nearer.distance_mm
        off = event.position() - QPointF(self.width() / 2.0, self.height() / 2.0)
        self._look(nearer.panned(rest * off.x(), rest * off.y(), max(self.height(), 1)))

    def leaveEvent(self, event: QEvent) -> None:
        """Tell that nothing is pointed at."""
        super().leaveEvent(event)
        self._hover.stop()
        self.point_at(None)

    def keyPressEvent(self, event: QKeyEvent) -> None:
        """Turn, move, zoom, fit or choose a standard view."""
        key = event.key()
        if key in _ARROWS:
            x, y = _ARROWS[Qt.Key(key)]
            if event.modifiers() & Qt.KeyboardModifier.ShiftModifier:
                self.pan(_KEY_STEP_PX * x, _KEY_STEP_PX * y)
            else:
                self.orbit(_KEY_STEP_DEG * x, -_KEY_STEP_DEG * y)
        elif key in {Qt.Key.Key_Plus, Qt.Key.Key_Equal}:
            self.zoom(_ZOOM_STEP)
        elif key == Qt.Key.Key_Minus:
            self.zoom(1.0 / _ZOOM_STEP)
        elif key == Qt.Key.Key_Home:
            self.fit()
        elif Qt.Key.Key_1 <= key < Qt.Key.Key_1 + len(VIEWS):
            self.set_view(VIEWS[key - Qt.Key.Key_1])
        else:
            super().keyPressEvent(event)

    def resizeEvent(self, event: QResizeEvent) -> None:
        """Keep all in view, unless somebody has chosen what to see."""
        super().resizeEvent(event)
        if self._untouched and not self._follows_beam:
            self.fit()

    def focusInEvent(self, event: QFocusEvent) -> None:
        """Show that the keys are heard here."""
        super().focusInEvent(event)
        self.update()

    def focusOutEvent(self, event: QFocusEvent) -> None:
        """Show that the keys are heard elsewhere."""
        super().focusOutEvent(event)
        self.update()

    def _look(self, camera: Camera) -> None:
        self._camera = camera
        self._follows_beam = self._untouched = False
        self.changed()

    def _point(self) -> None:
        if self._pressed is None:
            self.point_at(self._last)


def near_and_far_mm(eye: Array) -> tuple[float, float]:
    """Return the distances from the eye, mm, between which the parts of a room lie."""
    away = float(np.linalg.norm(eye))
    return max(away - 4500.0, 40.0), away + 7000.0
