"""What charts of angles have in common to look at: travel, readouts, pose, card, and the layers painted once."""

from abc import abstractmethod
from collections.abc import Sequence
from typing import Final

from PySide6.QtCore import QEvent, QPointF, QRectF, QSize, QSizeF, Qt, Signal
from PySide6.QtGui import (
    QImage,
    QPainter,
    QPaintEvent,
    QPen,
    QPixmap,
    QResizeEvent,
)
from PySide6.QtWidgets import QSizePolicy, QWidget

from app.window.chart.card import Card, card_box
from app.window.chart.paint_axes import Frame
from app.window.chart.reading import Reading
from app.window.chart.view import Window
from app.window.theme import LIGHT, Theme
from geometry.machine import Readout

_TRAVEL: Final = (-180.0, 180.0)
_COMFORTABLE: Final = QSizeF(900.0, 620.0)


class ChartSurface(QWidget):
    """A chart over angles; a subclass paints it, and `chart_canvas.ChartCanvas` adds what hand and keys do.

    Emits `axis_moved` (left and right end of the gantry axis in pixels of the widget, and the angles there) when the
    gantry axis lies elsewhere than before.
    """

    axis_moved = Signal(float, float, float, float)

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._theme = LIGHT
        self._gantry_travel, self._couch_travel = _TRAVEL, (-90.0, 90.0)
        self._gantry_view, self._couch_view = Window.whole(*_TRAVEL), Window.whole(-90.0, 90.0)
        self._gantry_own: Readout | None = None
        self._couch_own: Readout | None = None
        self._labels: tuple[str, ...] = ()
        self._no_travel: tuple[str, ...] = ()
        self._pose: tuple[float, float] | None = None
        self._surround: QPixmap | None = None
        self._plot: QPixmap | None = None
        self._frame: Frame | None = None
        self._axis: tuple[float, float, float, float] | None = None
        self._pointer: QPointF | None = None
        self._card_box: QRectF | None = None
        self.setSizePolicy(QSizePolicy.Policy.Expanding, QSizePolicy.Policy.Expanding)
        self.setAttribute(Qt.WidgetAttribute.WA_OpaquePaintEvent)

    # What the subclass knows.

    @abstractmethod
    def _new_frame(self, size: QSizeF, theme: Theme, ratio: float) -> Frame:
        """Return where everything lies on a picture of that size."""

    @abstractmethod
    def _paint_surround(self, painter: QPainter, frame: Frame, theme: Theme, ratio: float) -> None:
        """Paint what lies around the plot."""

    @abstractmethod
    def _paint_plot(self, painter: QPainter, frame: Frame, theme: Theme, ratio: float) -> None:
        """Paint what lies within the plot, but for what the pose and the pointer change."""

    @abstractmethod
    def _paint_pose(self, painter: QPainter, frame: Frame, theme: Theme, pose: tuple[float, float]) -> None:
        """Paint the pose."""

    @abstractmethod
    def _paint_pointed(self, painter: QPainter, frame: Frame, reading: Reading) -> None:
        """Mark the angles that the card speaks of."""

    @abstractmethod
    def _angles_at(self, frame: Frame, place: QPointF) -> tuple[float, float]:
        """Return gantry and couch angle of a place on the picture, unwrapped; they may lie beyond the travel."""

    @abstractmethod
    def _reading(self, angles: tuple[float, float]) -> Reading | None:
        """Return what is known there."""

    # What the owner sets.

    def set_theme(self, theme: Theme) -> None:
        """Use these colours from now on."""
        self._theme = theme
        self.repaint_layer()

    def set_travel(self, gantry: tuple[float, float], couch: tuple[float, float]) -> None:
        """Set the travel of both axes, deg, unwrapped; the gantry's whole turn is shown in any case."""
        self._gantry_travel, self._couch_travel = gantry, couch
        self._gantry_view = self._gantry_view.over(min(-180.0, gantry[0]), max(180.0, gantry[1]))
        self._couch_view = self._couch_view.over(*couch)
        self.repaint_layer()

    def set_readouts(self, gantry: Readout, couch: Readout) -> None:
        """Show the machine's own scales beside IEC 61217, where they differ."""
        self._gantry_own = None if gantry.is_iec() else gantry
        self._couch_own = None if couch.is_iec() else couch
        self.repaint_layer()

    def set_no_travel(self, reasons: Sequence[str]) -> None:
        """Say why no pair of angles can be reached; without reasons some can."""
        self._no_travel = tuple(reasons)
        self.repaint_layer()

    def set_part_names(self, labels: Sequence[str]) -> None:
        """Set the labels that the map's part indices stand for; without any, those of the map's own scene hold."""
        self._labels = tuple(labels)
        self.update()

    def set_pose(self, gantry_deg: float, couch_deg: float) -> None:
        """Mark a pose, unwrapped angles."""
        if self._pose != (gantry_deg, couch_deg):
            self._pose = (gantry_deg, couch_deg)
            self.update()

    def reset_view(self) -> None:
        """Show the whole chart."""
        self._gantry_view = Window.whole(self._gantry_view.least, self._gantry_view.most)
        self._couch_view = Window.whole(self._couch_view.least, self._couch_view.most)
        self.repaint_layer()

    def picture(self, width: int, height: int, theme: Theme | None = None) -> QImage:
        """Return the chart with its pose as an image of that many pixels; in the widget's theme unless told.

        Large images are drawn larger, not with smaller letters.
        """
        ratio = max(min(width / _COMFORTABLE.width(), height / _COMFORTABLE.height()), 1.0)
        image = QImage(width, height, QImage.Format.Format_RGB32)
        image.setDevicePixelRatio(ratio)
        theme = theme or self._theme
        image.fill(theme.colour("canvas"))
        frame = self._new_frame(QSizeF(width / ratio, height / ratio), theme, ratio)
        with QPainter(image) as painter:
            self._paint_surround(painter, frame, theme, ratio)
            painter.save()
            self._paint_plot(painter, frame, theme, ratio)
            painter.restore()
            if self._pose is not None and not self._no_travel:
                self._paint_pose(painter, frame, theme, self._pose)
        return image

    def repaint_layer(self) -> None:
        """Paint everything again, at the next opportunity."""
        self._surround = self._plot = None
        self._frame = None
        self.update()

    def repaint_plot(self) -> None:
        """Paint what lies within the plot again, at the next opportunity."""
        self._plot = None
        self.update()

    # Painting.

    def sizeHint(self) -> QSize:  # noqa: D102 - Qt's
        return QSize(680, 460)

    def minimumSizeHint(self) -> QSize:  # noqa: D102 - Qt's
        return QSize(360, 260)

    def frame(self) -> Frame:
        """Return where everything lies now."""
        if self._frame is None:
            self._frame = self._new_frame(QSizeF(self.size()), self._theme, self.devicePixelRatioF())
        return self._frame

    def paintEvent(self, event: QPaintEvent) -> None:  # noqa: ARG002, D102 - Qt's
        frame = self.frame()
        self._renew_layers(frame)
        with QPainter(self) as painter:
            self._paint_all(painter, frame)
        axis = (frame.across.start, frame.across.stop, frame.across.window.low, frame.across.window.high)
        if axis != self._axis:
            self._axis = axis
            self.axis_moved.emit(*axis)

    def _renew_layers(self, frame: Frame) -> None:
        """Paint the layers again that something has changed."""
        ratio = self.devicePixelRatioF()
        if self._surround is None or self._surround.devicePixelRatio() != ratio:
            self._plot = None
            self._surround = _blank(QSizeF(self.size()), ratio)
            with QPainter(self._surround) as painter:
                self._paint_surround(painter, frame, self._theme, ratio)
        if self._plot is None:
            self._plot = _blank(frame.plot.size(), ratio)
            with QPainter(self._plot) as painter:
                painter.translate(-frame.plot.topLeft())
                self._paint_plot(painter, frame, self._theme, ratio)

    def _paint_all(self, painter: QPainter, frame: Frame) -> None:
        """Paint the layers, and on them what moves."""
        if self._surround is not None and self._plot is not None:
            painter.drawPixmap(QPointF(0.0, 0.0), self._surround)
            painter.drawPixmap(frame.plot.topLeft(), self._plot)
        painter.setRenderHint(QPainter.RenderHint.Antialiasing)
        if self._pose is not None and not self._no_travel:
            self._paint_pose(painter, frame, self._theme, self._pose)
        reading = self._pointed_reading()
        if reading is not None and self._pointer is not None:
            self._paint_pointed(painter, frame, reading)
            self._paint_card(painter, frame, reading, self._pointer)
        if self.hasFocus():
            painter.setBrush(Qt.BrushStyle.NoBrush)
            painter.setPen(QPen(self._theme.colour("accent"), 2.0))
            painter.drawRect(frame.plot.adjusted(-2.0, -2.0, 2.0, 2.0))

    def _paint_card(self, painter: QPainter, frame: Frame, reading: Reading, pointer: QPointF) -> None:
        own = (self._gantry_own, self._couch_own)
        room = max(frame.plot.width() - 40.0, 200.0)
        card = Card(reading, frame.font, own, room)
        if card.size.height() > frame.plot.height() * 0.5:
            card = Card(reading, frame.small, own, room, brief=True)
        self._card_box = card_box(card.size, frame.plot, pointer, self._card_box)
        card.paint(painter, self._card_box, self._theme)

    def _pointed_reading(self) -> Reading | None:
        if self._pointer is None or self._no_travel or not self.frame().plot.contains(self._pointer):
            return None
        return self._reading(self._angles_at(self.frame(), self._pointer))

    def _place_of(self, frame: Frame, pose: tuple[float, float]) -> QPointF:
        """Return where a pose lies on the picture."""
        return QPointF(frame.across.pixel(pose[0]), frame.upwards.pixel(pose[1]))

    def changeEvent(self, event: QEvent) -> None:  # noqa: D102 - Qt's
        if event.type() == QEvent.Type.FontChange:
            self.repaint_layer()
        super().changeEvent(event)

    def resizeEvent(self, event: QResizeEvent) -> None:  # noqa: ARG002, D102 - Qt's
        self.repaint_layer()


def _blank(size: QSizeF, ratio: float) -> QPixmap:
    """Return a new layer of a size in device-independent pixels."""
    layer = QPixmap((size * ratio).toSize())
    layer.setDevicePixelRatio(ratio)
    return layer
