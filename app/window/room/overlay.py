"""What is written and drawn over the picture of the room: the nearest places, parts in contact, the isocentre, numbers.

Nothing here is hidden by parts, and nothing is told by colour alone.
"""

import math
from dataclasses import dataclass
from typing import Final

import numpy as np
from PySide6.QtCore import QLineF, QPointF, QRectF, Qt
from PySide6.QtGui import QBrush, QColor, QFont, QFontMetricsF, QPainter, QPainterPath, QPen, QPolygonF

from app.window.room.camera import Camera
from app.window.room.labels import LabelPlacer, draw_label
from app.window.room.rendering import Array
from app.window.theme import Theme
from geometry.states import State

_RING_PX: Final = 15.0
_DOT_PX: Final = 4.0


@dataclass(frozen=True, eq=False)
class Witness:
    """The nearest two points, (3,), mm, fixed system, with what is to be said of them."""

    machine_point: Array
    couch_point: Array
    text: str
    state: State | None


@dataclass(frozen=True, eq=False)
class Arc:
    """A turn of the beam's direction about the isocentre: points along it, (n, 3), mm, and what its two ends are."""

    points: Array
    texts: tuple[str, str]


@dataclass(frozen=True, eq=False)
class Overlay:
    """All that goes over one picture, in the fixed system, mm.

    `marked` are the vertices of each piece of parts in contact; `tight` are points with their numbers; `axis` (2, 3)
    and `field` (n, 3) are empty where the beam is not shown.
    """

    witness: Witness | None
    marked: tuple[Array, ...]
    tight: tuple[tuple[Array, str], ...]
    axis: Array
    field: Array
    note: str = ""
    arc: Arc | None = None


def paint_overlay(
    painter: QPainter, overlay: Overlay, camera: Camera, width: float, height: float, theme: Theme
) -> None:
    """Draw it for a picture of `width` by `height`, in the painter's units."""
    painter.setRenderHint(QPainter.RenderHint.Antialiasing)
    placer = LabelPlacer(QRectF(0.0, 0.0, width, height))
    view = _View(camera, width, height)
    _paint_marked(painter, overlay.marked, view, theme)
    centre = view.place(np.zeros(3))
    if centre is not None and len(overlay.axis):
        placer.reserve(QRectF(centre.x() - 24.0, centre.y() - 24.0, 48.0, 48.0))
    _paint_beam(painter, overlay, view, theme)
    if overlay.arc is not None:
        _paint_arc(painter, overlay.arc, view, placer, theme)
    if overlay.witness is not None:
        _paint_witness(painter, overlay.witness, view, placer, theme)
    for point, text in overlay.tight:
        _paint_tight(painter, point, text, view, placer, theme)
    if overlay.note:
        _paint_note(painter, overlay.note, height, theme)


@dataclass(frozen=True, eq=False)
class _View:
    camera: Camera
    width: float
    height: float

    def place(self, point: Array) -> QPointF | None:
        """Return where a point (3,) is in the picture; None behind the eye."""
        x, y, _ = self.camera.projected(point, self.width, self.height)
        return QPointF(float(x), float(y)) if math.isfinite(x) and abs(x) < 1e6 and abs(y) < 1e6 else None

    def polygon(self, points: Array) -> QPolygonF | None:
        """Return points (n, 3) in the picture; None where any lies behind the eye."""
        flat = self.camera.projected(points, self.width, self.height)[:, :2]
        if not np.isfinite(flat).all() or np.abs(flat).max(initial=0.0) > 1e6:
            return None
        return QPolygonF([QPointF(x, y) for x, y in flat.tolist()])


def _paint_beam(painter: QPainter, overlay: Overlay, view: _View, theme: Theme) -> None:
    if not len(overlay.axis):
        return
    colour, halo = theme.colour("beam"), _faded(theme.colour("halo"), 0.7)
    outline = view.polygon(overlay.field)
    if outline is not None:
        for pen in (QPen(halo, 2.6), QPen(colour, 1.2)):
            painter.setPen(pen)
            painter.drawPolygon(outline)
    ends = view.polygon(overlay.axis)
    if ends is not None:
        pen = QPen(_faded(colour, 0.85), 1.2, Qt.PenStyle.DashDotLine)
        painter.setPen(pen)
        painter.drawPolyline(ends)
    centre = view.place(np.zeros(3))
    if centre is not None:
        _paint_isocentre(painter, centre, colour, halo)


def _paint_arc(painter: QPainter, arc: Arc, view: _View, placer: LabelPlacer, theme: Theme) -> None:
    """Draw where the beam comes from over a span, with a spoke at either end."""
    line, centre = view.polygon(arc.points), view.place(np.zeros(3))
    ends = view.place(arc.points[0]), view.place(arc.points[-1])
    if line is None or centre is None or ends[0] is None or ends[1] is None:
        return
    colour, halo = theme.colour("accent"), theme.colour("halo")
    painter.setBrush(Qt.BrushStyle.NoBrush)
    for pen in (QPen(halo, 6.0), QPen(colour, 3.0)):
        painter.setPen(pen)
        painter.drawPolyline(line)
    for end, text in ((ends[0], arc.texts[0]), (ends[1], arc.texts[1])):
        painter.setPen(QPen(colour, 1.4, Qt.PenStyle.DashLine))
        painter.drawLine(QLineF(centre, end))
        draw_label(painter, [text], QLineF(end, end), placer, theme, loud=False)


def _paint_isocentre(painter: QPainter, centre: QPointF, colour: QColor, halo: QColor) -> None:
    arms = [QLineF(centre + QPointF(a, b), centre + QPointF(2.2 * a, 2.2 * b)) for a, b in _CROSS]
    painter.setBrush(Qt.BrushStyle.NoBrush)
    for pen in (QPen(halo, 3.6), QPen(colour, 1.5)):
        painter.setPen(pen)
        painter.drawEllipse(centre, 3.5, 3.5)
        painter.drawLines(arms)


_CROSS: Final = ((3.5, 0.0), (-3.5, 0.0), (0.0, 3.5), (0.0, -3.5))


def _paint_witness(painter: QPainter, witness: Witness, view: _View, placer: LabelPlacer, theme: Theme) -> None:
    one, other = view.place(witness.machine_point), view.place(witness.couch_point)
    if one is None or other is None:
        return
    loud = witness.state in {State.CONTACT, State.SHORT}
    colour, halo = theme.colour("marked" if loud else "ink"), theme.colour("halo")
    middle = (one + other) / 2.0
    if witness.state is State.CONTACT:
        _paint_contact(painter, middle, colour, halo)
        lines = witness.text.splitlines() or [str(State.CONTACT)]
        if not any(str(State.CONTACT) in line.lower() for line in lines):
            lines.insert(0, str(State.CONTACT).capitalize())
        line = QLineF(middle - QPointF(_RING_PX, 0.0), middle + QPointF(_RING_PX, 0.0))
    else:
        line = QLineF(one, other)
        solid = witness.state in {None, State.PERMITTED}
        style = Qt.PenStyle.SolidLine if solid else Qt.PenStyle.DashLine
        painter.setPen(QPen(halo, 5.0, Qt.PenStyle.SolidLine, Qt.PenCapStyle.RoundCap))
        painter.drawLine(line)
        painter.setPen(QPen(colour, 2.2, style, Qt.PenCapStyle.FlatCap))
        painter.drawLine(line)
        dot = min(max(line.length() / 5.0, _DOT_PX / 2.0), _DOT_PX)
        for place, filled in ((one, True), (other, False)):
            painter.setPen(QPen(halo, 4.5))
            painter.drawEllipse(place, dot, dot)
            painter.setPen(QPen(colour, 2.0))
            painter.setBrush(colour if filled else halo)
            painter.drawEllipse(place, dot, dot)
            painter.setBrush(Qt.BrushStyle.NoBrush)
        lines = witness.text.splitlines()
    if lines:
        draw_label(painter, lines, line, placer, theme, loud=loud)


def _paint_contact(painter: QPainter, centre: QPointF, colour: QColor, halo: QColor) -> None:
    """Draw a hatched ring: a sign that is told from the dots of a distance without any colour."""
    disc = QPainterPath()
    disc.addEllipse(centre, _RING_PX, _RING_PX)
    painter.fillPath(disc, _faded(halo, 0.55))
    painter.save()
    painter.setClipPath(disc)
    painter.setPen(QPen(colour, 2.0))
    for step in range(-3, 4):
        middle = centre + QPointF(6.0 * step, 0.0)
        painter.drawLine(middle + QPointF(-_RING_PX, _RING_PX), middle + QPointF(_RING_PX, -_RING_PX))
    painter.restore()
    for pen in (QPen(halo, 6.0), QPen(colour, 2.6)):
        painter.setPen(pen)
        painter.drawEllipse(centre, _RING_PX, _RING_PX)


def _paint_marked(painter: QPainter, pieces: tuple[Array, ...], view: _View, theme: Theme) -> None:
    """Outline the parts and hatch them lightly; outlines of pieces inside the part do not show."""
    joined = QPainterPath()
    joined.setFillRule(Qt.FillRule.WindingFill)
    for points in pieces:
        flat = view.camera.projected(points, view.width, view.height)[:, :2]
        if np.isfinite(flat).all() and np.abs(flat).max(initial=0.0) < 1e5:
            joined.addPolygon(QPolygonF([QPointF(x, y) for x, y in outline_of(flat.tolist())]))
            joined.closeSubpath()
    if joined.isEmpty():
        return
    colour = theme.colour("marked")
    # The outline lies outside: what is inside the union of the pieces is cut away from it.
    frame = QPainterPath()
    frame.addRect(QRectF(-10.0, -10.0, view.width + 20.0, view.height + 20.0))
    painter.save()
    painter.fillPath(joined, _hatch(colour))
    painter.setClipPath(frame.subtracted(joined.simplified()))
    for pen in (QPen(_faded(theme.colour("halo"), 0.8), 8.0), QPen(colour, 4.4)):
        pen.setJoinStyle(Qt.PenJoinStyle.RoundJoin)
        painter.strokePath(joined, pen)
    painter.restore()


def outline_of(points: list[list[float]]) -> list[tuple[float, float]]:
    """Return the convex outline of points in the plane, in order (Andrew's monotone chain)."""
    ordered = sorted({(x, y) for x, y in points})
    if len(ordered) < 3:
        return ordered
    return _chain(ordered)[:-1] + _chain(ordered[::-1])[:-1]


def _chain(ordered: list[tuple[float, float]]) -> list[tuple[float, float]]:
    chain: list[tuple[float, float]] = []
    for x, y in ordered:
        while len(chain) > 1:
            (ax, ay), (bx, by) = chain[-2], chain[-1]
            if (bx - ax) * (y - ay) - (by - ay) * (x - ax) > 0.0:
                break
            chain.pop()
        chain.append((x, y))
    return chain


def _paint_tight(painter: QPainter, point: Array, text: str, view: _View, placer: LabelPlacer, theme: Theme) -> None:
    place = view.place(point)
    if place is None or not placer.bounds.contains(place):
        return
    for pen in (QPen(theme.colour("halo"), 5.0), QPen(theme.colour("ink"), 2.0)):
        painter.setPen(pen)
        painter.setBrush(theme.colour("ink"))
        painter.drawEllipse(place, 3.0, 3.0)
    painter.setBrush(Qt.BrushStyle.NoBrush)
    draw_label(painter, [text], QLineF(place, place + QPointF(0.1, 0.0)), placer, theme, loud=False)


def _paint_note(painter: QPainter, note: str, height: float, theme: Theme) -> None:
    font = QFont(painter.font())
    font.setPointSizeF(max(font.pointSizeF() * 0.85, 7.0))
    metrics = QFontMetricsF(font)
    rect = QRectF(6.0, height - metrics.height() - 8.0, metrics.horizontalAdvance(note) + 8.0, metrics.height() + 2.0)
    painter.save()
    painter.setFont(font)
    painter.setPen(Qt.PenStyle.NoPen)
    painter.setBrush(_faded(theme.colour("canvas"), 0.65))
    painter.drawRoundedRect(rect, 3.0, 3.0)
    painter.setPen(theme.colour("faint"))
    painter.drawText(rect, Qt.AlignmentFlag.AlignCenter, note)
    painter.restore()


def _faded(colour: QColor, opacity: float) -> QColor:
    faded = QColor(colour)
    faded.setAlphaF(opacity)
    return faded


def _hatch(colour: QColor) -> QBrush:
    return QBrush(_faded(colour, 0.35), Qt.BrushStyle.BDiagPattern)
