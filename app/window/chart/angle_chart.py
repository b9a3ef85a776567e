"""The angle chart: gantry across, couch upwards, clearance as colour, the permitted region outlined."""

from collections.abc import Sequence
from dataclasses import replace
from typing import Final

import numpy as np
import shapely
from numpy.typing import NDArray
from PySide6.QtCore import QPointF, QRectF, QSizeF, Qt, QTimer
from PySide6.QtGui import QPainter, QPainterPath, QPen
from PySide6.QtWidgets import QWidget

from app.window.chart.canvas import ChartCanvas
from app.window.chart.paint import cased_stroke
from app.window.chart.paint_axes import Frame, paint_tag
from app.window.chart.paint_contours import NONE, contours_of, is_fine
from app.window.chart.picture import ChartField, Content, PlaneRegion, chart_frame, paint_plot, paint_surround
from app.window.chart.reading import Reading, reading_at
from app.window.theme import Theme
from geometry.sweep import ClearanceMap

__all__ = ["AngleChart", "ChartField", "Reading"]

# Contours of larger maps take too long to follow a drag; they come when it rests for so many ms.
_PROMPT_CELLS: Final = 6_000
_REST_MS: Final = 90
_RING: Final = 6.0


class AngleChart(ChartCanvas):
    """The chart of a room whose gantry and couch both turn; see `ChartCanvas` and `ChartSurface` for its signals."""

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._content = Content()
        self._region: shapely.Geometry | None = None
        self._rest = QTimer(self)
        self._rest.setSingleShot(True)
        self._rest.setInterval(_REST_MS)
        self._rest.timeout.connect(self._find_contours)
        self.setAccessibleName("Angle chart")
        self.setAccessibleDescription(
            "Clearance over gantry and couch angle, with the permitted region outlined. Arrow keys move the pose by "
            "1°, with Shift by 0.1°. Plus and minus zoom, Home shows everything."
        )
        self.setWhatsThis(
            "Click or drag to move the room to a pair of angles. Arrow keys step by 1°, with Shift by 0.1°. The wheel "
            "zooms, the middle button or the space bar with a drag moves the chart, a double click shows all of it."
        )

    def show_map(self, found: ClearanceMap | None, state: NDArray[np.int8] | None) -> None:
        """Show a map on any grid, with its states, or None while they are unproved. ValueError if shapes differ."""
        if found is not None and state is not None and state.shape != found.clearance_mm.shape:
            raise ValueError(f"state has the shape {state.shape}, the map {found.clearance_mm.shape}")
        # A proof changes states alone.
        same = found is self._content.found
        contours = self._content.contours if same else NONE
        self._content = replace(self._content, found=found, codes=state, contours=contours)
        if not same:
            self._rest.stop()
        if found is not None and not same:
            if found.clearance_mm.size <= _PROMPT_CELLS:
                self._find_contours()
            elif is_fine(found):
                self._rest.start()
        self.repaint_plot()

    def show_region(self, region: shapely.Geometry | None, stale: bool) -> None:
        """Outline permitted readings (x gantry, unwrapped, y couch, deg); faintly while those of the state before."""
        legend_changes = stale != self._content.stale
        if region is not self._region:
            self._region = region
            self._content = replace(self._content, region=None if region is None else PlaneRegion(region))
        self._content = replace(self._content, stale=stale)
        self.repaint_layer() if legend_changes else self.repaint_plot()

    def show_kept(self, region: shapely.Geometry | None) -> None:
        """Outline the permitted readings of a map kept to compare with."""
        self._content = replace(self._content, kept=None if region is None else PlaneRegion(region))
        self.repaint_layer()

    def show_fields(self, fields: Sequence[ChartField]) -> None:
        """Show a plan's fields."""
        self._content = replace(self._content, fields=tuple(fields))
        self.repaint_plot()

    def _find_contours(self) -> None:
        if self._content.found is not None:
            self._content = replace(self._content, contours=contours_of(self._content.found))
            self.repaint_plot()

    def _current(self) -> Content:
        return replace(self._content, no_travel=self._no_travel, gantry_own=self._gantry_own, couch_own=self._couch_own)

    def _new_frame(self, size: QSizeF, theme: Theme, ratio: float) -> Frame:
        return chart_frame(size, self.font(), self._current(), self._gantry_view, self._couch_view, theme, ratio)

    def _paint_surround(self, painter: QPainter, frame: Frame, theme: Theme, ratio: float) -> None:  # noqa: ARG002
        paint_surround(painter, frame, self._current(), theme)

    def _paint_plot(self, painter: QPainter, frame: Frame, theme: Theme, ratio: float) -> None:
        paint_plot(painter, frame, self._current(), theme, ratio)

    def _paint_pose(self, painter: QPainter, frame: Frame, theme: Theme, pose: tuple[float, float]) -> None:
        place, plot = self._place_of(frame, pose), frame.plot
        across = plot.left() <= place.x() <= plot.right()
        upwards = plot.top() <= place.y() <= plot.bottom()
        lines = QPainterPath()
        if upwards:
            _line(lines, QPointF(plot.left(), place.y()), QPointF(place.x() - _RING, place.y()))
            _line(lines, QPointF(place.x() + _RING, place.y()), QPointF(plot.right(), place.y()))
        if across:
            _line(lines, QPointF(place.x(), plot.top()), QPointF(place.x(), place.y() - _RING))
            _line(lines, QPointF(place.x(), place.y() + _RING), QPointF(place.x(), plot.bottom()))
        painter.save()
        painter.setClipRect(plot)
        halo = theme.colour("halo")
        halo.setAlphaF(0.7)
        cased_stroke(painter, lines, QPen(theme.colour("accent"), 1.2), halo, 1.6)
        ring = QPainterPath()
        ring.addEllipse(place, _RING, _RING)
        cased_stroke(painter, ring, QPen(theme.colour("accent"), 2.6), theme.colour("halo"), 2.6)
        painter.restore()
        if across:
            paint_tag(painter, frame, "below", pose[0], theme)
        if upwards:
            paint_tag(painter, frame, "left", pose[1], theme)

    def _paint_pointed(self, painter: QPainter, frame: Frame, reading: Reading) -> None:
        place = self._place_of(frame, (reading.gantry_deg, reading.couch_deg))
        mark = QPainterPath()
        mark.addRect(QRectF(place.x() - 2.5, place.y() - 2.5, 5.0, 5.0))
        pen = QPen(self._theme.colour("ink"), 1.2)
        pen.setJoinStyle(Qt.PenJoinStyle.MiterJoin)
        cased_stroke(painter, mark, pen, self._theme.colour("halo"), 2.0)

    def _angles_at(self, frame: Frame, place: QPointF) -> tuple[float, float]:
        return frame.across.angle_deg(place.x()), frame.upwards.angle_deg(place.y())

    def _reading(self, angles: tuple[float, float]) -> Reading | None:
        found = self._content.found
        if found is None:
            return None
        labels = self._labels or [part.label for part in found.scene.parts]
        return reading_at(found, self._content.codes, labels, *angles)


def _line(path: QPainterPath, start: QPointF, stop: QPointF) -> None:
    path.moveTo(start)
    path.lineTo(stop)
