"""A widget that shows pictures by a renderer: which one draws, when a picture is due, what is painted over it."""

import os
import sys
from collections.abc import Callable
from typing import Final

from PySide6.QtCore import QElapsedTimer, QRectF, QSize, Qt, QTimer, Signal
from PySide6.QtGui import QColor, QImage, QLinearGradient, QPainter, QPaintEvent, QPen, QResizeEvent, QShowEvent
from PySide6.QtWidgets import QWidget

from app.window.room.camera import Camera
from app.window.room.colours import backdrop
from app.window.room.drawing import Drawing
from app.window.room.opengl_probe import Graphics, OpenGLProbe
from app.window.room.overlay import Overlay, paint_overlay
from app.window.room.rendering import Colour, Frame, Renderer
from app.window.theme import Theme

CHOICE_VARIABLE: Final = "WIDEBERTH_3D"
PREPARING: Final = "Preparing the view …"
WITHOUT_OPENGL: Final = "Drawn without OpenGL"
_IDLE_MS: Final = 180
_SLOW_MS: Final = 45
_QUICK_MS: Final = 25
_COARSEST: Final = 0.5
# VTK on a thread of its own: tried on Linux. Windows and macOS bind windows, unseen ones too, to a thread's messages.
_VTK_THREADED: Final = sys.platform == "linux"


class SceneCanvas(QWidget):
    """The picture of a room. What is in it is said by `frame` and `overlay`, which a subclass gives.

    `frame_painted` comes after a picture has been painted that was not there before.
    """

    frame_painted = Signal()

    def __init__(self, theme: Theme, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self.setAttribute(Qt.WidgetAttribute.WA_OpaquePaintEvent)
        self._theme = theme
        self._probe: OpenGLProbe | None = None
        self._drawing: Drawing | None = None
        self._painted = False
        self._is_decided = False
        self._ready = False
        self._busy = False
        self._due = False
        self._fine = False
        self._closed = False
        self._shown: tuple[QImage, Camera, Overlay] | None = None
        self._in_work: Camera | None = None
        self._unseen = False
        self._message = PREPARING
        # Pixels for one of the layout while something moves. More than one would be lost on the eye.
        self._moving_ratio = 1.0
        self._fine_in_work = False
        self._since = QElapsedTimer()
        self._soon = self._timer(0, self._submit)
        self._idle = self._timer(_IDLE_MS, self._refine)

    def frame(self, width: int, height: int, *, fine: bool) -> Frame:
        """Return what is to be drawn now, for a picture of that many pixels."""
        raise NotImplementedError

    def overlay(self) -> Overlay:
        """Return what is to be painted over the picture now."""
        raise NotImplementedError

    def start(self) -> None:
        """Find out what can draw here, and begin to draw. Calling it again changes nothing."""
        if self._closed or self._drawing is not None or self._probe is not None:
            return
        choice = os.environ.get(CHOICE_VARIABLE, "")
        self._is_decided = choice in {"painted", "vtk"}
        if choice == "painted":
            self._draw_with(_painted_renderer, threaded=True, painted=True)
        elif choice == "vtk":
            self._draw_with(_vtk_renderer, threaded=_VTK_THREADED, painted=False)
        else:
            self._probe = OpenGLProbe(self)
            self._probe.found.connect(self._probed)
            self._probe.start()
            # Until it is known what a graphics card can do there is something to see.
            self._draw_with(_painted_renderer, threaded=True, painted=True)

    def shutdown(self) -> None:
        """Stop everything and give it back: no process, thread or timer is left. The widget is not used afterwards."""
        self._closed = True
        self._soon.stop()
        self._idle.stop()
        if self._probe is not None:
            self._probe.stop()
        if self._drawing is not None:
            self._drawing.close()
        self._drawing, self._ready = None, False

    def is_ready(self) -> bool:
        """Tell whether there is a renderer."""
        return self._ready

    def is_settled(self) -> bool:
        """Tell whether the picture shown is the last one that is due, with smooth edges."""
        pending = self._due or self._busy or self._idle.isActive() or self._unseen
        return self._shown is not None and self._is_decided and not pending

    def message(self) -> str:
        """Return what stands in the place of the picture while there is none."""
        return self._message

    def draws_without_opengl(self) -> bool:
        """Tell whether it is settled that the processor alone draws."""
        return self._painted and self._is_decided

    def picture(self, width: int, height: int) -> QImage:
        """Return the view as a picture of that many pixels, with all that is written over it."""
        image = QImage(width, height, QImage.Format.Format_RGB32)
        painter = QPainter(image)
        if self._ready and self._drawing is not None:
            frame = self.frame(width, height, fine=True)
            painter.drawImage(0, 0, self._drawing.picture(frame))
            # Letters as large, beside the parts, as they are in the window.
            scale = max(min(width / max(self.width(), 1), height / max(self.height(), 1)), 0.25)
            painter.scale(scale, scale)
            painter.setFont(self.font())
            paint_overlay(painter, self.overlay(), frame.camera, width / scale, height / scale, self._theme)
        else:
            self._paint_waiting(painter, QRectF(0, 0, width, height))
        painter.end()
        return image

    def sizeHint(self) -> QSize:
        """Return a size that shows a room well."""
        return QSize(720, 560)

    def minimumSizeHint(self) -> QSize:
        """Return the least size at which labels still have room."""
        return QSize(280, 220)

    def changed(self) -> None:
        """Tell that the picture is out of date: another follows, and a smooth one once nothing moves."""
        if self._closed:
            return
        self._due, self._fine = True, False
        self._idle.start()
        self._wake()

    def overlay_changed(self) -> None:
        """Tell that only what is painted over the picture is another."""
        if self._shown is not None and not self._due and not self._busy:
            self._shown = (*self._shown[:2], self.overlay())
            self.update()

    def paintEvent(self, _event: QPaintEvent) -> None:
        """Paint the last picture, and what goes over it."""
        painter = QPainter(self)
        if self._shown is None:
            self._paint_waiting(painter, QRectF(self.rect()))
        else:
            image, camera, overlay = self._shown
            painter.setRenderHint(QPainter.RenderHint.SmoothPixmapTransform)
            painter.drawImage(self.rect(), image)
            paint_overlay(painter, overlay, camera, self.width(), self.height(), self._theme)
        if self.hasFocus():
            painter.setRenderHint(QPainter.RenderHint.Antialiasing, on=False)
            painter.setBrush(Qt.BrushStyle.NoBrush)
            painter.setPen(QPen(self._theme.colour("accent"), 1.0))
            painter.drawRect(self.rect().adjusted(0, 0, -1, -1))
        painter.end()
        if self._unseen:
            self._unseen = False
            self.frame_painted.emit()

    def resizeEvent(self, event: QResizeEvent) -> None:
        """Draw for the new size."""
        super().resizeEvent(event)
        self.changed()

    def showEvent(self, event: QShowEvent) -> None:
        """Draw what has been waiting for the widget to be seen."""
        super().showEvent(event)
        self._wake()

    def _timer(self, interval_ms: int, call: Callable[[], None]) -> QTimer:
        timer = QTimer(self)
        timer.setSingleShot(True)
        timer.setInterval(interval_ms)
        timer.timeout.connect(call)
        return timer

    def _probed(self, graphics: Graphics) -> None:
        # Where OpenGL is only the processor's work, the own renderer does the same in a quarter of the time.
        if graphics is Graphics.CARD and self._drawing is not None:
            self._drawing.close()
            self._ready = self._busy = False
            self._draw_with(_vtk_renderer, threaded=_VTK_THREADED, painted=False)
        self._is_decided = True
        self.overlay_changed()

    def _draw_with(self, make: Callable[[], Renderer], *, threaded: bool, painted: bool) -> None:
        self._painted = painted
        self._drawing = Drawing(make, threaded=threaded, parent=self)
        self._drawing.ready.connect(self._began)
        self._drawing.drawn.connect(self._drawn)
        self._drawing.failed.connect(self._failed)
        self._drawing.begin()

    def _began(self) -> None:
        self._ready = True
        self.changed()

    def _failed(self, message: str) -> None:
        if self._drawing is None or self._closed:
            return
        self._drawing.close()
        self._ready = self._busy = False
        if self._painted:
            self._shown = None
            self._message = f"The room cannot be drawn here: {message}"
            self.update()
        else:
            self._draw_with(_painted_renderer, threaded=True, painted=True)

    def _wake(self) -> None:
        if self._due and self._ready and not self._busy and self.isVisible():
            self._soon.start()

    def _refine(self) -> None:
        self._due = self._fine = True
        self._wake()

    def _submit(self) -> None:
        if self._drawing is None or self._busy or not self._due or self.width() < 2 or self.height() < 2:
            return
        ratio = self.devicePixelRatioF() if self._fine else self._moving_ratio
        frame = self.frame(round(ratio * self.width()), round(ratio * self.height()), fine=self._fine)
        self._due, self._busy = False, True
        self._fine_in_work = self._fine
        self._in_work = frame.camera
        self._since.start()
        self._drawing.draw(frame)

    def _drawn(self, image: QImage) -> None:
        if self._closed or self._in_work is None:
            return
        self._busy = False
        if not self._fine_in_work:
            self._adapt(self._since.elapsed())
        self._shown = image, self._in_work, self.overlay()
        self._unseen = True
        self.update()
        self._wake()

    def _adapt(self, took_ms: int) -> None:
        """Draw coarser while something moves where pictures take too long for the hand, finer where there is time."""
        if took_ms > _SLOW_MS:
            self._moving_ratio = max(self._moving_ratio * 0.8, _COARSEST)
        elif took_ms < _QUICK_MS:
            self._moving_ratio = min(self._moving_ratio * 1.1, 1.0)

    def _paint_waiting(self, painter: QPainter, area: QRectF) -> None:
        top, bottom = backdrop(self._theme)
        gradient = QLinearGradient(area.topLeft(), area.bottomLeft())
        gradient.setColorAt(0.0, _colour(top))
        gradient.setColorAt(1.0, _colour(bottom))
        painter.fillRect(area, gradient)
        painter.setPen(self._theme.colour("faint"))
        margin = min(area.width(), area.height()) / 10.0
        flags = Qt.AlignmentFlag.AlignCenter | Qt.TextFlag.TextWordWrap
        painter.drawText(area.adjusted(margin, margin, -margin, -margin), flags, self._message)


def _colour(colour: Colour) -> QColor:
    return QColor.fromRgbF(*colour)


def _vtk_renderer() -> Renderer:
    # VTK takes a third of a second to load: on the drawing thread, and only where it is used.
    from app.window.room.vtk_renderer import VtkRenderer  # noqa: PLC0415

    return VtkRenderer()


def _painted_renderer() -> Renderer:
    # Loads numba, and compiles the first time.
    from app.window.room.painted_renderer import PaintedRenderer  # noqa: PLC0415

    return PaintedRenderer()
