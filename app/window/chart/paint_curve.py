"""The clearance over the gantry's turn as the curve that it is: what is painted once."""

import math
from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray
from PySide6.QtCore import QPointF, QRectF, QSizeF, Qt
from PySide6.QtGui import QColor, QFont, QFontMetricsF, QImage, QPainter, QPainterPath, QPen

from app.clearance_scale import EDGE_COLOURS, places
from app.files.readings import clearance_text, required_text
from app.window.chart.legend import LegendItem, line_item, paint_items, permitted_item, state_item
from app.window.chart.paint import cased_stroke, cased_text, dashed, font_of, polygon_of, texture, texture_brush
from app.window.chart.paint_axes import (
    AxisWords,
    Frame,
    frame_of,
    paint_angle_axis_across,
    paint_border,
    paint_mm_axis,
)
from app.window.chart.paint_map import TABLE, angles_of_pixels, exact_codes, tiled
from app.window.chart.picture import paint_note
from app.window.chart.reading import angle_words
from app.window.chart.view import Window, cells_at
from app.window.theme import Theme
from geometry.machine import Readout
from geometry.states import CODE_OF, State
from geometry.sweep import ClearanceMap

Array = NDArray[np.float64]
Range = tuple[float, float]

# The bar of permitted angles, below 0, as shares of the scale's upper end.
_BAR: Final = (0.04, 0.11)
_FOOT: Final = 0.15
_LEAST_TOP_MM: Final = 60.0
_STEP_MM: Final = 50.0
_TEXTURED: Final = (State.CONTACT, State.SHORT, State.UNPROVED)
_AREA_ALPHA: Final = 0.8
# Less than what is shown of a clearance.
_SAME_MM: Final = 0.05
_NOWHERE_MM: Final = 1e9


@dataclass(frozen=True, eq=False)
class CurveContent:
    """All that the curve shows, but for the pose and the pointer; angles in deg, unwrapped.

    `codes` (n,) are states over the map's gantry angles, None while unproved. `permitted` and `kept` are ranges of
    gantry angles; `permitted` None where they are not known.
    """

    found: ClearanceMap | None = None
    codes: NDArray[np.int8] | None = None
    permitted: tuple[Range, ...] | None = None
    stale: bool = False
    kept: tuple[Range, ...] = ()
    no_travel: tuple[str, ...] = ()
    gantry_own: Readout | None = None

    @property
    def required_mm(self) -> tuple[float, ...]:
        """What pairs of parts must keep: machine and room, and, where it is more, with patient or device."""
        if self.found is None:
            return ()
        required = self.found.scene.setup.required
        return tuple(dict.fromkeys(required.of_pair_mm(with_patient=flag) for flag in (False, True)))

    @property
    def top_mm(self) -> float:
        """Where the scale ends: above everything, at a round number, so that it seldom changes under a drag."""
        if self.found is None:
            return 2.0 * _STEP_MM
        known = self.found.clearance_mm[np.isfinite(self.found.clearance_mm)]
        most = max(_LEAST_TOP_MM, 1.2 * max(self.required_mm), 1.08 * float(known.max(initial=0.0)))
        return math.ceil(most / _STEP_MM) * _STEP_MM


def curve_frame(size: QSizeF, font: QFont, content: CurveContent, gantry: Window, theme: Theme, ratio: float) -> Frame:
    """Return where everything of the curve lies."""
    top = content.top_mm
    upwards = Window(-_FOOT * top, top, -_FOOT * top, top)
    items = _legend(content, theme, ratio)
    return frame_of(
        size, font, (gantry, AxisWords("Gantry", content.gantry_own)), (upwards, None), items, with_scale=False
    )


def paint_curve_surround(painter: QPainter, frame: Frame, content: CurveContent, theme: Theme) -> None:
    """Paint all around the plot."""
    painter.setRenderHint(QPainter.RenderHint.Antialiasing)
    painter.fillRect(QRectF(QPointF(0.0, 0.0), frame.size), theme.colour("canvas"))
    paint_border(painter, frame, theme)
    paint_angle_axis_across(painter, frame, AxisWords("Gantry", content.gantry_own), theme)
    paint_mm_axis(painter, frame, "Clearance, mm", theme)
    paint_items(painter, frame.legend, frame.small, theme)


def paint_curve_plot(painter: QPainter, frame: Frame, content: CurveContent, theme: Theme, ratio: float) -> None:
    """Paint what lies within the plot; `ratio` is the number of device pixels per pixel."""
    painter.setRenderHint(QPainter.RenderHint.Antialiasing)
    painter.setClipRect(frame.plot)
    painter.fillRect(frame.plot, theme.colour("canvas"))
    if content.no_travel or content.found is None:
        if content.no_travel:
            painter.setBrushOrigin(frame.plot.topLeft())
            painter.fillRect(frame.plot, texture_brush(State.NO_TRAVEL, theme, ratio))
        paint_note(painter, frame, "No travel" if content.no_travel else "No map yet", content.no_travel, theme)
        return
    paint_mm_axis(painter, frame, "", theme)
    _paint_area(painter, frame, content, content.found, theme, ratio)
    _paint_required(painter, frame, content, theme)
    _paint_line(painter, frame, content.found, theme)
    _paint_least(painter, frame, content.found, theme)
    _paint_bars(painter, frame, content, theme)


def runs_of(codes: NDArray[np.int8], angles_deg: Array, state: State) -> tuple[Range, ...]:
    """Return the ranges between the first and the last grid angle of each run in a state."""
    change = np.diff(np.concatenate([[0], codes == CODE_OF[state], [0]]).astype(int))
    starts, stops = np.nonzero(change == 1)[0], np.nonzero(change == -1)[0] - 1
    return tuple((float(angles_deg[i]), float(angles_deg[j])) for i, j in zip(starts, stops, strict=True))


def _legend(content: CurveContent, theme: Theme, ratio: float) -> list[LegendItem]:
    items = [
        permitted_item(theme, stale=content.stale),
        line_item("clearance", "clearance", theme.colour("ink"), 2.0),
        line_item("required clearance", "required", theme.colour("required"), 1.5, (4.0, 2.2)),
    ]
    if content.kept:
        items.append(line_item("kept", "kept", theme.colour("kept"), 3.0))
    states = (State.SHORT, State.UNPROVED, State.CONTACT, State.NO_TRAVEL)
    return [*items, *(state_item(state, theme, ratio) for state in states)]


def _paint_area(
    painter: QPainter, frame: Frame, content: CurveContent, found: ClearanceMap, theme: Theme, ratio: float
) -> None:
    """Fill what lies under the curve with the colour of its clearance, and lay textures over each state's angles."""
    plot = frame.plot
    height, width = round(plot.height() * ratio), round(plot.width() * ratio)
    angles = angles_of_pixels(frame.across, plot.left(), plot.width(), ratio)[:width]
    columns = cells_at(found.gantry_deg, angles)
    codes = exact_codes(found)[0] if content.codes is None else content.codes
    state = np.where(columns < 0, CODE_OF[State.NO_TRAVEL], codes[columns])
    clearance = np.where(columns < 0, np.nan, np.interp(angles, found.gantry_deg, found.clearance_mm[0]))
    clearance = np.where(np.isinf(clearance), content.top_mm, clearance)
    zero = round((frame.upwards.pixel(0.0) - plot.top()) * ratio)
    rows = np.arange(height)[:, None]
    under = (rows < zero) & (rows >= zero - np.nan_to_num(clearance) * -frame.upwards.pixels_per_deg * ratio)
    layer = np.zeros((height, width), np.uint32)
    share = np.rint(places(np.nan_to_num(clearance)) * (len(TABLE) - 2)).astype(int)
    np.copyto(layer, np.array(TABLE, np.uint32)[share][None, :], where=under)
    _draw(painter, layer, plot, _AREA_ALPHA)
    textures = np.zeros((height, width), np.uint32)
    above = rows < zero
    for kind in _TEXTURED:
        there = above & (state == CODE_OF[kind])[None, :]
        np.copyto(textures, tiled(texture(kind, theme, ratio, on_canvas=True), textures.shape), where=there)
        if kind is not State.CONTACT:
            # On the colours it is the same texture as on the chart of both angles.
            np.copyto(textures, tiled(texture(kind, theme, ratio), textures.shape), where=there & under)
    beyond = np.broadcast_to(state == CODE_OF[State.NO_TRAVEL], textures.shape)
    np.copyto(textures, tiled(texture(State.NO_TRAVEL, theme, ratio), textures.shape), where=beyond)
    _draw(painter, textures, plot, 1.0)


def _draw(painter: QPainter, layer: NDArray[np.uint32], target: QRectF, alpha: float) -> None:
    height, width = layer.shape
    image = QImage(layer.data, width, height, 4 * width, QImage.Format.Format_ARGB32_Premultiplied)
    painter.setOpacity(alpha)
    painter.drawImage(target, image)
    painter.setOpacity(1.0)


def _paint_required(painter: QPainter, frame: Frame, content: CurveContent, theme: Theme) -> None:
    """Draw what must remain: a band, its upper edge dashed, named at the side where there is room."""
    levels = content.required_mm
    both = len(levels) > 1
    font = font_of(frame.font, 0.88)
    metrics = QFontMetricsF(font)
    zero = frame.upwards.pixel(0.0)
    for level, with_patient in zip(levels, (False, True) if both else (None,), strict=True):
        y = frame.upwards.pixel(level)
        band = theme.colour("required")
        band.setAlphaF(0.07)
        painter.fillRect(QRectF(frame.plot.left(), y, frame.plot.width(), zero - y), band)
        path = QPainterPath(QPointF(frame.plot.left(), y))
        path.lineTo(frame.plot.right(), y)
        pen = dashed(QPen(theme.colour("required"), 1.5), 4.0, 2.2)
        cased_stroke(painter, path, pen, theme.colour("halo"), 1.6)
        words = {None: "required", False: "required, machine and room", True: "required, with patient or device"}
        text = f"{words[with_patient]}: {required_text(level)}"
        if metrics.horizontalAdvance(text) > frame.plot.width() * 0.6:
            text = f"required: {required_text(level)}"
        below = with_patient is False
        x = frame.plot.right() - 6.0 - metrics.horizontalAdvance(text) / 2.0
        painter.save()
        painter.translate(x, y + (metrics.height() * 0.5 + 2.0) * (1.0 if below else -1.0))
        cased_text(painter, text, font, theme.colour("required"), theme.colour("halo"))
        painter.restore()


def _points(frame: Frame, found: ClearanceMap) -> Array:
    clearance = np.where(np.isinf(found.clearance_mm[0]), frame.upwards.window.high, found.clearance_mm[0])
    across, upwards = frame.across, frame.upwards
    return np.column_stack(
        [
            across.pixel(0.0) + found.gantry_deg * across.pixels_per_deg,
            upwards.pixel(0.0) + clearance * upwards.pixels_per_deg,
        ]
    )


def _paint_line(painter: QPainter, frame: Frame, found: ClearanceMap, theme: Theme) -> None:
    """Draw the curve, broken where no distance is known."""
    points = _points(frame, found)
    known = np.isfinite(points[:, 1])
    path = QPainterPath()
    for run in np.split(np.arange(len(points)), np.nonzero(np.diff(known.astype(int)))[0] + 1):
        if known[run[0]]:
            path.addPolygon(polygon_of(points[run]))
    pen = QPen(theme.colour("ink"), 2.0)
    pen.setJoinStyle(Qt.PenJoinStyle.RoundJoin)
    cased_stroke(painter, path, pen, theme.colour("halo"), 1.8)
    painter.setPen(QPen(theme.colour("ink"), 1.0))
    zero = frame.upwards.pixel(0.0)
    painter.drawLine(QPointF(frame.plot.left(), zero), QPointF(frame.plot.right(), zero))


def _paint_least(painter: QPainter, frame: Frame, found: ClearanceMap, theme: Theme) -> None:
    """Write the smallest clearance in view at its place."""
    window = frame.across.window
    seen = (found.gantry_deg >= window.low) & (found.gantry_deg <= window.high)
    clearance = np.where(seen & np.isfinite(found.clearance_mm[0]), found.clearance_mm[0], _NOWHERE_MM)
    place = int(np.argmin(clearance))
    if clearance[place] in {0.0, _NOWHERE_MM}:
        return
    angle, least = float(found.gantry_deg[place]), float(clearance[place])
    font = font_of(frame.font, 1.0, bold=True)
    metrics = QFontMetricsF(font)
    where = angle_words(angle) if np.ptp(clearance[seen]) > _SAME_MM else "every angle"
    text = f"least {clearance_text(least)} at {where}"
    at = QPointF(frame.across.pixel(angle), frame.upwards.pixel(least))
    half = metrics.horizontalAdvance(text) / 2.0 + 6.0
    x = min(max(at.x(), frame.plot.left() + half), frame.plot.right() - half)
    # Under a high curve there is nothing but its colour; near the foot the required clearance is written.
    away = 26.0 if least > 0.3 * frame.upwards.window.high else -44.0
    painter.setPen(QPen(theme.colour("ink"), 1.0))
    painter.drawLine(at, QPointF(at.x(), at.y() + away * 0.7))
    painter.setBrush(theme.colour("ink"))
    painter.drawEllipse(at, 3.0, 3.0)
    painter.save()
    painter.translate(x, at.y() + away)
    cased_text(painter, text, font, theme.colour("ink"), theme.colour("halo"))
    painter.restore()


def _paint_bars(painter: QPainter, frame: Frame, content: CurveContent, theme: Theme) -> None:
    """Draw the permitted angles as bars below the curve, those of a kept map as lines under them."""
    top = frame.upwards.window.high
    upper, lower = (frame.upwards.pixel(-share * top) for share in _BAR)
    pen = QPen(theme.colour("permitted"), 2.0)
    if content.stale:
        pen = dashed(QPen(theme.colour("permitted"), 1.4), 3.0, 2.4)
    for low, high in content.permitted or ():
        left, right = frame.across.pixel(low), frame.across.pixel(high)
        # A span of a single angle is a span.
        box = QRectF(left, upper, max(right - left, 2.0), lower - upper)
        fill = QColor(EDGE_COLOURS[7])
        fill.setAlphaF(0.45 if content.stale else 1.0)
        painter.setPen(pen)
        painter.setBrush(fill)
        painter.drawRect(box)
    painter.setPen(QPen(theme.colour("kept"), 3.0))
    y = (lower + frame.plot.bottom()) / 2.0
    for low, high in content.kept:
        painter.drawLine(QPointF(frame.across.pixel(low), y), QPointF(frame.across.pixel(high), y))
