"""The direction discs: beam directions as they come to the patient, on two flat discs of equal areas."""

from collections.abc import Callable
from dataclasses import replace
from typing import Final

import numpy as np
from numpy.typing import NDArray
from PySide6.QtCore import QPointF, QRectF, QSize, QSizeF, Qt, Signal
from PySide6.QtGui import QImage, QKeyEvent, QMouseEvent, QPainter, QPaintEvent, QPen
from PySide6.QtWidgets import QSizePolicy, QWidget

from app.window.discs.layout import Layout
from app.window.discs.marks import paint_pointer, paint_pose, paint_readout
from app.window.discs.paint import View, layout_for, paint_frame, paint_known
from app.window.discs.reading import DirectionReading, pointed_words, pose_words, reading_of
from app.window.discs.switch import PairingSwitch
from app.window.theme import LIGHT, Theme
from geometry.directions.axes import directions_patient
from geometry.directions.discs import Pairing
from geometry.directions.field import DirectionField
from geometry.directions.regions import Share

Array = NDArray[np.float64]

_ARROWS: Final = {
    Qt.Key.Key_Left: (-1.0, 0.0),
    Qt.Key.Key_Right: (1.0, 0.0),
    Qt.Key.Key_Up: (0.0, 1.0),
    Qt.Key.Key_Down: (0.0, -1.0),
}
_STEP_DEG: Final = 2.0
_LONG_STEP_DEG: Final = 10.0
# How near the pointer has to come to directions that are a line, pixels.
_CATCH: Final = 12.0
_HELP: Final = (
    "Each place is a direction that the beam comes from, shaded by the best clearance of the angles that give it. "
    "Click or drag to go there; arrow keys move by about 2°, with Shift by 10°."
)
_SHARE_HELP: Final = (
    "How much of all directions permitted angles reach, readout tolerances included. A direction that several pairs "
    "of angles give counts once. Rounded down."
)


class DirectionDiscs(QWidget):
    """Two discs of beam directions, in the patient's own axes.

    `pose_wanted(gantry_deg, couch_deg)`, unwrapped: a direction was chosen. `pointed` carries a `DirectionReading` of
    what lies under the pointer, or None. `pairing_changed` carries the `Pairing` that was chosen on the switch.
    """

    pose_wanted = Signal(float, float)
    pointed = Signal(object)
    pairing_changed = Signal(object)

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._view = View(LIGHT)
        self._pose_deg: tuple[float, float] | None = None
        self._reading: DirectionReading | None = None
        # The direction that was asked for; the pose that was wanted for it lies on the map's grid.
        self._chosen: Array | None = None
        self._wanted_deg: tuple[float, float] | None = None
        # What changes with every map, and what lies over that and does not.
        self._known: QImage | None = None
        self._frame: QImage | None = None
        self._layout: Layout | None = None
        self._switch = PairingSwitch(self)
        self._switch.chosen.connect(self._choose_pairing)
        self.setFocusPolicy(Qt.FocusPolicy.StrongFocus)
        self.setMouseTracking(True)
        self.setSizePolicy(QSizePolicy.Policy.Expanding, QSizePolicy.Policy.Expanding)
        self.setMinimumSize(320, 340)
        self.setAccessibleName("Direction discs")
        self.setAccessibleDescription(_HELP)

    def sizeHint(self) -> QSize:
        """Return a size at which both discs read well."""
        return QSize(700, 380)

    def set_theme(self, theme: Theme) -> None:
        """Draw in other colours."""
        self._switch.set_theme(theme)
        self._show(theme=theme)

    def show_field(self, field: DirectionField | None) -> None:
        """Show clearances and states; None clears the discs."""
        known = self._view.field
        same_frame = (
            known is not None
            and field is not None
            and known.axes == field.axes
            and (known.along_line() is None) == (field.along_line() is None)
        )
        self._view = replace(self._view, field=field)
        if same_frame:
            self._known = None
            self.update()
        else:
            self._forget_layers()
        self._point_again()

    def show_fields(self, fields: list[tuple[str, Array]]) -> None:
        """Show a plan's fields: names with directions, (n, 3) or, of a static beam, (3,), DICOM patient axes."""
        self._show(fields=tuple((name, np.asarray(directions, dtype=np.float64)) for name, directions in fields))

    def set_share(self, share: Share | None) -> None:
        """Show how much of the sphere is permitted; None while it is not proved."""
        self._view = replace(self._view, share=share)
        self._known = None
        self.update()

    def set_pairing(self, pairing: Pairing) -> None:
        """Cut the sphere another way; gives no signal."""
        self._switch.show_pairing(pairing)
        if pairing is not self._view.pairing:
            self._show(pairing=pairing)
            self._forget_pointer()

    def set_pose(self, gantry_deg: float, couch_deg: float) -> None:
        """Mark the direction of the current pose, unwrapped angles. Cheap: the discs themselves are kept."""
        if (gantry_deg, couch_deg) != self._pose_deg:
            self._pose_deg = (gantry_deg, couch_deg)
            if self._pose_deg != self._wanted_deg:
                self._chosen = None
                if not self.underMouse():
                    # What was said was said of a direction chosen by keys.
                    self._forget_pointer()
            self.update()

    @property
    def pairing(self) -> Pairing:
        """How the sphere is cut in two."""
        return self._view.pairing

    def picture(self, width: int, height: int) -> QImage:
        """Return the discs with the current pose as a picture of width x height pixels."""
        image = QImage(width, height, QImage.Format.Format_ARGB32_Premultiplied)
        layout = layout_for(self._view, QSizeF(width, height), self.font(), QSizeF(), 1.0)
        painter = QPainter(image)
        painter.setFont(self.font())
        paint_known(painter, layout, self._view, 1.0)
        paint_frame(painter, layout, self._view)
        paint_pose(painter, layout, self._direction_of_pose(), self._view.theme)
        paint_readout(painter, layout, self._pose_lines(), self._view.theme)
        painter.end()
        return image

    def paintEvent(self, _event: QPaintEvent) -> None:
        """Draw the kept layer, and pose, pointer and readout on it."""
        layout = self._laid_out()
        ratio = self.devicePixelRatioF()
        if self._known is None:
            self._known = self._layer(layout, lambda to: paint_known(to, layout, self._view, ratio))
        if self._frame is None:
            self._frame = self._layer(layout, lambda to: paint_frame(to, layout, self._view))
        painter = QPainter(self)
        painter.setRenderHint(QPainter.RenderHint.Antialiasing)
        painter.drawImage(QPointF(), self._known)
        painter.drawImage(QPointF(), self._frame)
        paint_pose(painter, layout, self._direction_of_pose(), self._view.theme)
        if self._reading is not None:
            paint_pointer(painter, layout, self._reading.direction)
        paint_readout(painter, layout, self._lines(), self._view.theme)
        if self.hasFocus():
            painter.setPen(QPen(self._view.theme.colour("accent"), 1.5))
            painter.setBrush(Qt.BrushStyle.NoBrush)
            painter.drawRect(QRectF(self.rect()).adjusted(1.0, 1.0, -1.0, -1.0))
        painter.end()

    def resizeEvent(self, _event: object) -> None:
        """Lay everything out anew, and put the switch in its place."""
        self._forget_layers()
        self._laid_out()

    def changeEvent(self, event: object) -> None:
        """Lay everything out anew when the font changes."""
        super().changeEvent(event)  # type: ignore[arg-type]
        if hasattr(self, "_frame"):
            self._forget_layers()
            self._laid_out()

    def mousePressEvent(self, event: QMouseEvent) -> None:
        """Go to the direction that is pressed."""
        if event.button() is Qt.MouseButton.LeftButton:
            self._point(event.position())
            self._want(self._reading)

    def mouseMoveEvent(self, event: QMouseEvent) -> None:
        """Say what lies under the pointer, and go there while the button is down."""
        self._point(event.position())
        layout = self._laid_out()
        self.setToolTip(_SHARE_HELP if layout.share.contains(event.position()) else "")
        if event.buttons() & Qt.MouseButton.LeftButton:
            self._want(self._reading)

    def leaveEvent(self, _event: object) -> None:
        """Forget the pointer."""
        self._forget_pointer()

    def keyPressEvent(self, event: QKeyEvent) -> None:
        """Move the chosen direction with the arrow keys."""
        way = _ARROWS.get(Qt.Key(event.key()))
        start = self._direction_of_pose() if self._chosen is None else self._chosen
        if way is None or start is None or self._view.field is None:
            super().keyPressEvent(event)
            return
        far = bool(event.modifiers() & Qt.KeyboardModifier.ShiftModifier)
        step = _LONG_STEP_DEG if far else _STEP_DEG
        halves = self._view.pairing.hemispheres
        half = halves[0] if halves[0].holds(start) else halves[1]
        self._chosen = self._view.field.stepped(half, start, way[0] * step, way[1] * step)
        self._show_reading(reading_of(self._view.field, self._chosen, self._pose_deg or (0.0, 0.0)))
        self._want(self._reading)

    def _show(self, **changes: object) -> None:
        self._view = replace(self._view, **changes)  # type: ignore[arg-type]
        self._forget_layers()

    def _forget_layers(self) -> None:
        self._known = self._frame = self._layout = None
        self.update()

    def _forget_pointer(self) -> None:
        if self._reading is not None:
            self._show_reading(None)

    def _show_reading(self, reading: DirectionReading | None) -> None:
        self._reading = reading
        self.pointed.emit(reading)
        self.update()

    def _choose_pairing(self, pairing: Pairing) -> None:
        if pairing is not self._view.pairing:
            self.set_pairing(pairing)
            self.pairing_changed.emit(pairing)

    def _laid_out(self) -> Layout:
        if self._layout is None:
            need = QSizeF(self._switch.sizeHint())
            ratio = self.devicePixelRatioF()
            self._layout = layout_for(self._view, QSizeF(self.size()), self.font(), need, ratio)
            self._switch.place(self._layout.switch.toRect())
        return self._layout

    def _layer(self, layout: Layout, paint: Callable[[QPainter], None]) -> QImage:
        ratio = self.devicePixelRatioF()
        layer = QImage((layout.size * ratio).toSize(), QImage.Format.Format_ARGB32_Premultiplied)
        layer.setDevicePixelRatio(ratio)
        layer.fill(Qt.GlobalColor.transparent)
        painter = QPainter(layer)
        painter.setFont(self.font())
        paint(painter)
        painter.end()
        return layer

    def _point(self, position: QPointF) -> None:
        direction = self._direction_at(position)
        if direction is None or self._view.field is None:
            self._forget_pointer()
            return
        self._show_reading(reading_of(self._view.field, direction, self._pose_deg or (0.0, 0.0)))

    def _point_again(self) -> None:
        """Say of the direction under the pointer what the field now says of it."""
        if self._reading is not None:
            reading = None
            if self._view.field is not None:
                reading = reading_of(self._view.field, self._reading.direction, self._pose_deg or (0.0, 0.0))
            self._show_reading(reading)

    def _direction_at(self, position: QPointF) -> Array | None:
        """Return the direction at a point, (3,); where directions are a line, the one of them that is near."""
        line = None if self._view.field is None else self._view.field.along_line()
        for disc in self._laid_out().discs:
            direction = disc.direction(position)
            if line is not None:
                away = np.linalg.norm(disc.pixels(line[0]) - np.array([position.x(), position.y()]), axis=-1)
                away[~disc.hemisphere.holds(line[0])] = np.inf
                nearest = int(np.argmin(away))
                if away[nearest] <= _CATCH:
                    return np.asarray(line[0][nearest])
            if direction is not None:
                return direction
        return None

    def _want(self, reading: DirectionReading | None) -> None:
        if reading is not None and reading.chosen is not None:
            self._chosen = reading.direction
            self._wanted_deg = (reading.chosen.gantry_deg, reading.chosen.couch_deg)
            self.pose_wanted.emit(reading.chosen.gantry_deg, reading.chosen.couch_deg)

    def _direction_of_pose(self) -> Array | None:
        if self._pose_deg is None or self._view.field is None:
            return None
        return directions_patient(*self._pose_deg, self._view.field.axes)

    def _lines(self) -> tuple[str, tuple[str, ...]] | None:
        """Return what to say of what lies under the pointer or, without one, of the pose."""
        if self._reading is not None:
            return pointed_words(self._reading)
        return self._pose_lines()

    def _pose_lines(self) -> tuple[str, tuple[str, ...]] | None:
        if self._pose_deg is None or self._view.field is None:
            return None
        return pose_words(self._view.field, self._pose_deg)
