"""The angle chart of a couch that cannot turn, as in a bore: clearance over the gantry's turn, as a curve."""

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
import shapely
from numpy.typing import NDArray
from PySide6.QtCore import QPointF, QSizeF
from PySide6.QtGui import QPainter, QPainterPath, QPen
from PySide6.QtWidgets import QWidget

from app.window.chart.canvas import ChartCanvas
from app.window.chart.paint import cased_stroke
from app.window.chart.paint_axes import Frame, paint_tag
from app.window.chart.paint_curve import (
    CurveContent,
    curve_frame,
    paint_curve_plot,
    paint_curve_surround,
    runs_of,
)
from app.window.chart.reading import Reading, reading_at
from app.window.theme import Theme
from geometry.spans import Span
from geometry.states import State
from geometry.sweep import ClearanceMap

_RING = 5.5


class ClearanceCurve(ChartCanvas):
    """The chart of a room whose couch has one angle; see `ChartCanvas` and `ChartSurface` for its signals."""

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._content = CurveContent()
        self._spans: tuple[Span, ...] | None = None
        self.setAccessibleName("Clearance curve")
        self.setAccessibleDescription(
            "Clearance over the gantry angle, with the permitted angles as a bar. Left and right arrow keys move the "
            "gantry by 1°, with Shift by 0.1°. Plus and minus zoom, Home shows everything."
        )
        self.setWhatsThis(
            "Click or drag to turn the gantry. Arrow keys step by 1°, with Shift by 0.1°. The wheel zooms, the middle "
            "button or the space bar with a drag moves the curve, a double click shows all of it."
        )

    def show_map(self, found: ClearanceMap | None, state: NDArray[np.int8] | None) -> None:
        """Show a map with one couch angle, and its states (1, n), or None while they are unproved. ValueError."""
        if found is not None and len(found.couch_deg) != 1:
            raise ValueError(f"the map has {len(found.couch_deg)} couch angles; a curve shows one")
        if found is not None and state is not None and state.shape != found.clearance_mm.shape:
            raise ValueError(f"state has the shape {state.shape}, the map {found.clearance_mm.shape}")
        codes = None if state is None else state[0]
        # The scale may have to change with the map.
        changed = found is not self._content.found
        self._content = replace(self._content, found=found, codes=codes)
        self._find_permitted()
        self.repaint_layer() if changed else self.repaint_plot()

    def show_spans(self, couch_deg: float, spans: Sequence[Span], stale: bool) -> None:  # noqa: ARG002 - as the strip's
        """Show the permitted spans, faintly while they are those of the state before."""
        self._spans = tuple(spans)
        self.show_region(None, stale)

    def show_region(self, region: shapely.Geometry | None, stale: bool) -> None:  # noqa: ARG002 - as the chart's
        """Take over whether what is permitted is that of the state before; one couch angle has no region."""
        changed = stale != self._content.stale
        self._content = replace(self._content, stale=stale)
        self._find_permitted()
        self.repaint_layer() if changed else self.repaint_plot()

    def show_kept(self, region: shapely.Geometry | None) -> None:
        """Show what a kept region (x gantry, y couch, deg) permits at this couch angle; see also `show_kept_spans`."""
        kept = []
        if region is not None and not region.is_empty:
            couch = self._couch_deg()
            low, _, high, _ = region.bounds
            cut = shapely.intersection(region, shapely.LineString([(low, couch), (high, couch)]))
            kept = [(part.bounds[0], part.bounds[2]) for part in shapely.get_parts(cut)]
        self._show_kept_ranges(tuple(kept))

    def show_kept_spans(self, spans: Sequence[Span] | None) -> None:
        """Show the spans of a map kept to compare with."""
        self._show_kept_ranges(tuple((span.gantry_from_deg, span.gantry_to_deg) for span in spans or ()))

    def _show_kept_ranges(self, kept: tuple[tuple[float, float], ...]) -> None:
        self._content = replace(self._content, kept=kept)
        self.repaint_layer()

    def _find_permitted(self) -> None:
        """Take the spans where they are known, else the grid angles that are permitted."""
        content = self._content
        permitted = None
        if self._spans is not None:
            permitted = tuple((span.gantry_from_deg, span.gantry_to_deg) for span in self._spans)
        elif content.found is not None and content.codes is not None:
            permitted = runs_of(content.codes, content.found.gantry_deg, State.PERMITTED)
        self._content = replace(content, permitted=permitted)

    def _couch_deg(self) -> float:
        return self._couch_travel[0] if self._content.found is None else float(self._content.found.couch_deg[0])

    def _current(self) -> CurveContent:
        return replace(self._content, no_travel=self._no_travel, gantry_own=self._gantry_own)

    def _new_frame(self, size: QSizeF, theme: Theme, ratio: float) -> Frame:
        return curve_frame(size, self.font(), self._current(), self._gantry_view, theme, ratio)

    def _paint_surround(self, painter: QPainter, frame: Frame, theme: Theme, ratio: float) -> None:  # noqa: ARG002
        paint_curve_surround(painter, frame, self._current(), theme)

    def _paint_plot(self, painter: QPainter, frame: Frame, theme: Theme, ratio: float) -> None:
        paint_curve_plot(painter, frame, self._current(), theme, ratio)

    def _paint_pose(self, painter: QPainter, frame: Frame, theme: Theme, pose: tuple[float, float]) -> None:
        x = frame.across.pixel(pose[0])
        if not frame.plot.left() <= x <= frame.plot.right():
            return
        line = QPainterPath(QPointF(x, frame.plot.top()))
        line.lineTo(x, frame.plot.bottom())
        cased_stroke(painter, line, QPen(theme.colour("accent"), 1.4), theme.colour("halo"), 1.6)
        y = self._curve_pixel(frame, pose[0])
        if y is not None:
            ring = QPainterPath()
            ring.addEllipse(QPointF(x, y), _RING, _RING)
            painter.setPen(QPen(theme.colour("accent"), 2.6))
            painter.setBrush(theme.colour("canvas"))
            painter.drawPath(ring)
        paint_tag(painter, frame, "below", pose[0], theme)

    def _paint_pointed(self, painter: QPainter, frame: Frame, reading: Reading) -> None:
        y = self._curve_pixel(frame, reading.gantry_deg)
        if y is not None:
            painter.setPen(QPen(self._theme.colour("halo"), 1.5))
            painter.setBrush(self._theme.colour("ink"))
            painter.drawEllipse(QPointF(frame.across.pixel(reading.gantry_deg), y), 4.0, 4.0)

    def _curve_pixel(self, frame: Frame, gantry_deg: float) -> float | None:
        """Return how high the curve runs at an angle, as it is drawn; None where it does not."""
        found = self._content.found
        if found is None or not found.gantry_deg[0] <= gantry_deg <= found.gantry_deg[-1]:
            return None
        clearance = float(np.interp(gantry_deg, found.gantry_deg, found.clearance_mm[0]))
        return None if np.isnan(clearance) else frame.upwards.pixel(min(clearance, frame.upwards.window.high))

    def _place_of(self, frame: Frame, pose: tuple[float, float]) -> QPointF:
        return QPointF(frame.across.pixel(pose[0]), frame.plot.center().y())

    def _angles_at(self, frame: Frame, place: QPointF) -> tuple[float, float]:
        return frame.across.angle_deg(place.x()), self._couch_deg()

    def _reading(self, angles: tuple[float, float]) -> Reading | None:
        content = self._content
        if content.found is None:
            return None
        labels = self._labels or [part.label for part in content.found.scene.parts]
        state = None if content.codes is None else content.codes[None, :]
        return reading_at(content.found, state, labels, *angles)
