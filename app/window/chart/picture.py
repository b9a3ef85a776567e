"""The angle chart without what moves on it: all that is painted once for a map, a size and a theme."""

from dataclasses import dataclass
from typing import Final

import numpy as np
import shapely
from numpy.typing import NDArray
from PySide6.QtCore import QPointF, QRectF, QSizeF, Qt
from PySide6.QtGui import QColor, QFont, QFontMetricsF, QPainter, QPainterPath, QPen, QTransform

from app.window.chart.legend import LegendItem, line_item, paint_items, permitted_item, state_item
from app.window.chart.paint import cased_stroke, cased_text, dashed, font_of, outline_path, texture_brush
from app.window.chart.paint_axes import (
    AxisWords,
    Frame,
    frame_of,
    paint_angle_axis_across,
    paint_angle_axis_upwards,
    paint_border,
    paint_colour_scale,
)
from app.window.chart.paint_contours import NONE, Contours, paint_contour_labels, paint_contours
from app.window.chart.paint_map import Cells, exact_codes
from app.window.chart.view import Window
from app.window.theme import Theme
from geometry.machine import Readout
from geometry.states import State
from geometry.sweep import ClearanceMap

_REGION_WIDTH: Final = 2.0
_REGION_HALO: Final = 1.8
_UNSEEN_PIXELS: Final = 0.4
_NOTE_WIDTH: Final = 460.0
_WRAPPED: Final = Qt.AlignmentFlag.AlignHCenter.value | Qt.TextFlag.TextWordWrap.value
_KEPT_DASHES: Final = (2.0, 1.6)


@dataclass(frozen=True)
class ChartField:
    """A field or an arc on the chart: one or more pairs (gantry unwrapped, couch), deg; state None if not checked."""

    name: str
    points: tuple[tuple[float, float], ...]
    state: State | None


class PlaneRegion:
    """A region of polygons on the plane (x gantry, unwrapped, y couch, deg), and its outline as it was drawn last."""

    def __init__(self, region: shapely.Geometry) -> None:
        self._region = region
        self._unseen_deg = -1.0
        self._path = QPainterPath()

    def on_picture(self, frame: Frame) -> QPainterPath:
        """Return the outline as it is drawn, without steps that are too small to see."""
        unseen_deg = _UNSEEN_PIXELS / min(frame.across.pixels_per_deg, -frame.upwards.pixels_per_deg)
        if unseen_deg != self._unseen_deg:
            self._unseen_deg = unseen_deg
            self._path = outline_path(shapely.simplify(self._region, unseen_deg))
        return to_picture(frame).map(self._path)


@dataclass(frozen=True, eq=False)
class Content:
    """All that the chart shows, but for the pose and the pointer.

    `codes` are the map's states, None while they
    are not proved. `no_travel` holds the reasons why nothing can be reached.
    """

    found: ClearanceMap | None = None
    codes: NDArray[np.int8] | None = None
    contours: Contours = NONE
    region: PlaneRegion | None = None
    stale: bool = False
    kept: PlaneRegion | None = None
    no_travel: tuple[str, ...] = ()
    fields: tuple[ChartField, ...] = ()
    gantry_own: Readout | None = None
    couch_own: Readout | None = None


def chart_frame(
    size: QSizeF, font: QFont, content: Content, gantry: Window, couch: Window, theme: Theme, ratio: float
) -> Frame:
    """Return where everything of the chart lies."""
    across = (gantry, AxisWords("Gantry", content.gantry_own))
    upwards = (couch, AxisWords("Couch", content.couch_own))
    return frame_of(size, font, across, upwards, _legend(content, theme, ratio), with_scale=True)


def paint_surround(painter: QPainter, frame: Frame, content: Content, theme: Theme) -> None:
    """Paint all around the plot."""
    painter.setRenderHint(QPainter.RenderHint.Antialiasing)
    painter.fillRect(QRectF(QPointF(0.0, 0.0), frame.size), theme.colour("canvas"))
    paint_border(painter, frame, theme)
    paint_angle_axis_across(painter, frame, AxisWords("Gantry", content.gantry_own), theme)
    paint_angle_axis_upwards(painter, frame, AxisWords("Couch", content.couch_own), theme)
    paint_colour_scale(painter, frame, theme)
    paint_items(painter, frame.legend, frame.small, theme)


def paint_plot(painter: QPainter, frame: Frame, content: Content, theme: Theme, ratio: float) -> None:
    """Paint what lies within the plot; `ratio` is the number of device pixels per pixel."""
    painter.setRenderHint(QPainter.RenderHint.Antialiasing)
    painter.setClipRect(frame.plot)
    painter.fillRect(frame.plot, theme.colour("canvas"))
    if content.no_travel:
        painter.setBrushOrigin(frame.plot.topLeft())
        painter.fillRect(frame.plot, texture_brush(State.NO_TRAVEL, theme, ratio))
    elif content.found is not None:
        _paint_map(painter, frame, content, content.found, theme, ratio)
    _paint_fields(painter, frame, content.fields, theme)
    if content.no_travel:
        paint_note(painter, frame, "No travel", content.no_travel, theme)
    elif content.found is None:
        paint_note(painter, frame, "No map yet", (), theme)


def to_picture(frame: Frame) -> QTransform:
    """Return how angles (x gantry, y couch) come onto the picture."""
    across, upwards = frame.across, frame.upwards
    return QTransform(across.pixels_per_deg, 0.0, 0.0, upwards.pixels_per_deg, across.pixel(0.0), upwards.pixel(0.0))


def paint_note(painter: QPainter, frame: Frame, title: str, reasons: tuple[str, ...], theme: Theme) -> None:
    """Write in the middle of the plot why there is nothing to see; smaller where there is much to say."""
    room = QSizeF(max(frame.plot.width() - 36.0, 60.0), frame.plot.height() - 24.0)
    text = "\n".join(reasons)
    sizes = [_note_size(frame.font, scale, title, text, room) for scale in (1.1, 1.0, 0.9, 0.8, 0.7, 0.6)]
    bold, plain, head, body = next((size for size in sizes if _height(*size[2:]) <= room.height()), sizes[-1])
    height = _height(head, body)
    width = max(head.width(), body.width()) + 2.0
    box = QRectF(0.0, 0.0, width + 28.0, height + 20.0)
    box.moveCenter(frame.plot.center())
    painter.setPen(QPen(theme.colour("line"), 1.0))
    painter.setBrush(theme.colour("panel"))
    painter.drawRoundedRect(box, 5.0, 5.0)
    painter.setPen(theme.colour("ink"))
    painter.setFont(bold)
    inner = box.adjusted(14.0, 10.0, -14.0, -10.0)
    painter.drawText(inner, Qt.AlignmentFlag.AlignHCenter | Qt.AlignmentFlag.AlignTop, title)
    painter.setFont(plain)
    painter.drawText(inner.adjusted(0.0, head.height() + 4.0, 0.0, 0.0), _WRAPPED, text)


def _note_size(font: QFont, scale: float, title: str, text: str, room: QSizeF) -> tuple[QFont, QFont, QRectF, QRectF]:
    """Return the fonts of a note's title and text, and what both take."""
    bold, plain = font_of(font, scale * 1.15, bold=True), font_of(font, scale)
    body = QRectF()
    if text:
        widest = QRectF(0.0, 0.0, min(room.width(), _NOTE_WIDTH), 1e4)
        body = QFontMetricsF(plain).boundingRect(widest, _WRAPPED, text)
    return bold, plain, QFontMetricsF(bold).boundingRect(title), body


def _height(head: QRectF, body: QRectF) -> float:
    return head.height() + (body.height() + 4.0 if body.height() else 0.0)


def _legend(content: Content, theme: Theme, ratio: float) -> list[LegendItem]:
    items = [
        permitted_item(theme, stale=content.stale),
        line_item(
            "clearance equals what is required", "clearance = required", theme.colour("required"), 1.7, (4.0, 2.2)
        ),
    ]
    if content.kept is not None:
        items.append(line_item("kept", "kept", theme.colour("kept"), _REGION_WIDTH, _KEPT_DASHES))
    states = (State.SHORT, State.UNPROVED, State.CONTACT, State.NO_TRAVEL)
    return [*items, *(state_item(state, theme, ratio) for state in states)]


def _paint_map(
    painter: QPainter, frame: Frame, content: Content, found: ClearanceMap, theme: Theme, ratio: float
) -> None:
    codes = exact_codes(found) if content.codes is None else content.codes
    cells = Cells(found, codes, frame.across, frame.upwards, ratio)
    cells.paint_colours(painter)
    region = None if content.region is None else content.region.on_picture(frame)
    proved = content.codes is not None and not content.stale
    cells.paint_textures(painter, theme, region if proved else None)
    paint_contours(painter, content.contours, frame.across, frame.upwards, theme)
    if region is not None:
        pen = QPen(theme.colour("permitted"), _REGION_WIDTH)
        halo = theme.colour("halo")
        if content.stale:
            pen = dashed(QPen(theme.colour("permitted"), 1.4), 3.0, 2.4)
            halo.setAlphaF(0.5)
        pen.setJoinStyle(Qt.PenJoinStyle.MiterJoin)
        cased_stroke(painter, region, pen, halo, _REGION_HALO)
    if content.kept is not None:
        pen = dashed(QPen(theme.colour("kept"), _REGION_WIDTH), *_KEPT_DASHES)
        cased_stroke(painter, content.kept.on_picture(frame), pen, theme.colour("halo"), 2.4)
    if not content.stale:
        # Under a drag they would jump about, and hold the chart up.
        paint_contour_labels(painter, content.contours, frame.across, frame.upwards, font_of(frame.font, 0.85))


def _paint_fields(painter: QPainter, frame: Frame, fields: tuple[ChartField, ...], theme: Theme) -> None:
    """Draw fields as dots and arcs as lines, each with its name; one that is not permitted as crosses and dashes."""
    halo = theme.colour("halo")
    taken: list[QRectF] = []
    for field in fields:
        places = [QPointF(frame.across.pixel(g), frame.upwards.pixel(c)) for g, c in field.points]
        if not places:
            continue
        refused = field.state not in {None, State.PERMITTED}
        colour = theme.colour("marked" if refused else "accent")
        path = QPainterPath(places[0])
        for place in places[1:]:
            path.lineTo(place)
        pen = QPen(colour, 2.4)
        cased_stroke(painter, path, dashed(pen, 2.2, 1.3) if refused else pen, halo, 2.6)
        for place in (places[0], places[-1])[: len(places)]:
            _paint_end(painter, place, refused=refused, pen=QPen(colour, 2.4), halo=halo)
        label = field.name if field.state in {None, State.PERMITTED} else f"{field.name}: {field.state}"
        _paint_name(painter, frame, label, places, theme, taken)


def _paint_end(painter: QPainter, place: QPointF, *, refused: bool, pen: QPen, halo: QColor) -> None:
    mark = QPainterPath()
    if refused:
        for x, y in ((4.0, 4.0), (4.0, -4.0)):
            mark.moveTo(place.x() - x, place.y() - y)
            mark.lineTo(place.x() + x, place.y() + y)
        cased_stroke(painter, mark, pen, halo, 2.6)
        return
    painter.setPen(QPen(halo, 1.6))
    painter.setBrush(pen.color())
    painter.drawEllipse(place, 4.6, 4.6)


def _paint_name(
    painter: QPainter, frame: Frame, label: str, places: list[QPointF], theme: Theme, taken: list[QRectF]
) -> None:
    """Write a name beside its middle, above or below it, where it stays in the plot and off the others."""
    font = font_of(frame.font, 0.92, bold=True)
    metrics = QFontMetricsF(font)
    size = QSizeF(metrics.horizontalAdvance(label) + 6.0, metrics.height())
    middle = places[len(places) // 2] if len(places) != 2 else (places[0] + places[1]) / 2.0
    box = QRectF(QPointF(0.0, 0.0), size)
    for step in (-1, 1, -2, 2, -3, 3):
        box.moveCenter(middle + QPointF(0.0, step * (size.height() + 1.0)))
        box.moveLeft(min(max(box.left(), frame.plot.left() + 2.0), frame.plot.right() - size.width() - 2.0))
        if frame.plot.contains(box) and not any(box.intersects(other) for other in taken):
            break
    taken.append(QRectF(box))
    painter.save()
    painter.translate(box.center())
    cased_text(painter, label, font, theme.colour("ink"), theme.colour("halo"))
    painter.restore()
