"""The direction discs as a picture: colours, textures, lines and letters on two circles."""

from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray
from PySide6.QtCore import QPointF, QRectF, QSizeF, Qt
from PySide6.QtGui import QColor, QFont, QFontMetricsF, QImage, QLinearGradient, QPainter, QPainterPath, QPen

from app.clearance_scale import EDGE_COLOURS, EDGES_MM, places
from app.window.chart.legend import LegendItem, line_item, permitted_item, state_item
from app.window.chart.paint import cased_stroke, cased_text, font_of, polygon_of
from app.window.discs.layout import BAND, RAMP_WORD, SAMPLE, Disc, Layout, layout_of
from app.window.discs.pixels import colour_at, disc_pixels
from app.window.discs.reading import share_words
from app.window.theme import LIGHT, Theme
from geometry.directions.axes import PatientAxes, directions_patient
from geometry.directions.discs import Pairing
from geometry.directions.field import Best, DirectionField
from geometry.directions.regions import Share
from geometry.states import CODE_OF, State

Array = NDArray[np.float64]

# A disc of more pixels across is painted from fewer: a map of whole degrees has no more to tell. Their number is
# rounded down, so that what is remembered for a size serves while the window is dragged to another.
_MOST_PIXELS: Final = 240
_PIXEL_STEP: Final = 16
# A smaller radius, pixels, has no room for angles.
_ROOM_FOR_ANGLES: Final = 64.0
_RAMP_FIGURES_MM: Final = (0.0, 50.0, 100.0, 300.0)
# DICOM's letters for the patient's own directions (PS3.3 C.7.6.1.1.1).
_LETTERS: Final = (
    ("L", (1.0, 0.0, 0.0)),
    ("R", (-1.0, 0.0, 0.0)),
    ("P", (0.0, 1.0, 0.0)),
    ("A", (0.0, -1.0, 0.0)),
    ("H", (0.0, 0.0, 1.0)),
    ("F", (0.0, 0.0, -1.0)),
)
_FINE: Final = np.arange(0.0, 361.0, 2.0)
# Lies over colours that are the same in both themes, so it is the same in both as well.
_ON_COLOURS: Final = QColor(LIGHT.ink)


@dataclass(frozen=True, eq=False)
class View:
    """All that the discs show, apart from the pose and the pointer."""

    theme: Theme
    pairing: Pairing = Pairing.FRONT_AND_BACK
    field: DirectionField | None = None
    fields: tuple[tuple[str, Array], ...] = ()
    share: Share | None = None


def layout_for(view: View, size: QSizeF, font: QFont, switch: QSizeF, ratio: float) -> Layout:
    """Return where everything lies; `switch` is the room that the switch needs, empty for none."""
    with_band = view.field is not None and view.field.along_line() is not None
    items = _legend_items(view.theme, ratio)
    return layout_of(size, font, switch, view.pairing.hemispheres, items, with_band=with_band)


def paint_known(painter: QPainter, layout: Layout, view: View, ratio: float) -> None:
    """Paint what changes with every map: the share, the colours, the outline; `ratio`: device pixels per pixel."""
    painter.setRenderHint(QPainter.RenderHint.Antialiasing)
    painter.fillRect(QRectF(QPointF(), layout.size), view.theme.colour("canvas"))
    _paint_share(painter, layout, view)
    for disc in layout.discs:
        if view.field is not None:
            _paint_pixels(painter, disc, view.field, view.theme, ratio)
        painter.setBrush(Qt.BrushStyle.NoBrush)
        painter.setPen(QPen(view.theme.colour("faint"), 1.4))
        painter.drawPath(disc.rim)
        if view.field is not None:
            _paint_edges(painter, disc, view.field, view.theme)


def paint_frame(painter: QPainter, layout: Layout, view: View) -> None:
    """Paint what lies over that and stays the same from map to map: lines, letters, a plan's fields, the legend."""
    painter.setRenderHint(QPainter.RenderHint.Antialiasing)
    for disc in layout.discs:
        _paint_lines(painter, disc, view)
        _paint_letters(painter, disc, layout, view.theme)
        _paint_labels(painter, disc, layout, view)
        for name, directions in view.fields:
            _paint_beam(painter, disc, layout, view.theme, name, np.atleast_2d(directions))
    _paint_legend(painter, layout, view.theme)


def _legend_items(theme: Theme, ratio: float) -> tuple[LegendItem, ...]:
    states = (State.SHORT, State.UNPROVED, State.CONTACT, State.NO_TRAVEL)
    couch = line_item("coplanar, couch 0", "coplanar, couch 0", theme.colour("ink"), 1.6)
    return permitted_item(theme, stale=False), couch, *(state_item(state, theme, ratio) for state in states)


def _paint_share(painter: QPainter, layout: Layout, view: View) -> None:
    bold = font_of(layout.font, 1.0, bold=True)
    line = QFontMetricsF(layout.font).height()
    box = QRectF(layout.share.topLeft(), QSizeF(layout.share.width(), line))
    for texts, font, ink in zip(share_words(view.share), (bold, layout.small), ("ink", "faint"), strict=True):
        # The longest that fits.
        fitting = (text for text in texts if QFontMetricsF(font).horizontalAdvance(text) <= box.width())
        painter.setFont(font)
        painter.setPen(view.theme.colour(ink))
        painter.drawText(box, Qt.AlignmentFlag.AlignLeft | Qt.AlignmentFlag.AlignVCenter, next(fitting, texts[-1]))
        box.translate(0.0, line)


def _paint_pixels(painter: QPainter, disc: Disc, shown: DirectionField, theme: Theme, ratio: float) -> None:
    across = max(round(2.0 * disc.radius * ratio), 2)
    size = max(min(across // _PIXEL_STEP * _PIXEL_STEP, _MOST_PIXELS), _PIXEL_STEP)
    pixels = disc_pixels(shown.on_disc(disc.hemisphere, size), across, theme, ratio, proved=shown.proved)
    image = QImage(pixels.data, across, across, 4 * across, QImage.Format.Format_ARGB32_Premultiplied)
    painter.drawImage(disc.box, image)


def _paint_edges(painter: QPainter, disc: Disc, shown: DirectionField, theme: Theme) -> None:
    """Paint directions that are a line and have no pixels, and the outline of what is permitted."""
    line = shown.along_line()
    if line is not None:
        _paint_along(painter, disc, *line, theme)
    for outline in shown.outlines:
        pen = QPen(theme.colour("permitted"), 1.7)
        pen.setJoinStyle(Qt.PenJoinStyle.RoundJoin)
        cased_stroke(painter, disc.path(outline), pen, theme.colour("halo"), 1.8)


def _paint_along(painter: QPainter, disc: Disc, directions: Array, best: Best, theme: Theme) -> None:
    """Paint a line of directions as a band, its colour the clearance.

    It is cased where permitted; where short it has a dashed middle, and in contact it is dashed itself.
    """
    between = _unit(np.concatenate([directions[:1], directions[:-1] + directions[1:], directions[-1:]]))
    # Each piece begins under the one before, so that no seam shows.
    before = np.concatenate([directions[:1], directions[:-1]])
    pieces = disc.pixels(np.stack([before, directions, between[1:]], axis=1))
    here = disc.hemisphere.holds(before) & disc.hemisphere.holds(between[1:])
    share = places(best.clearance_mm)
    state = best.state
    permitted, contact = state == CODE_OF[State.PERMITTED], state == CODE_OF[State.CONTACT]
    plain = np.isfinite(share) & ~contact
    # Every other couple of pieces, which makes dashes.
    dashed = np.arange(len(state)) % 4 < 2
    wide = 2.0 * BAND
    for there, colour, width in (
        (here & (state != CODE_OF[State.NO_TRAVEL]), theme.colour("halo"), wide - 3.0),
        (here & permitted, theme.colour("permitted"), wide - 1.0),
        (here & plain, None, wide - 5.0),
        (here & contact & dashed, theme.colour("marked"), wide - 5.0),
        (here & plain & dashed & (state == CODE_OF[State.SHORT]), QColor(LIGHT.halo), 2.0),
    ):
        for place in np.flatnonzero(there):
            pen = QPen(colour or colour_at(float(share[place])), width)
            pen.setCapStyle(Qt.PenCapStyle.FlatCap)
            painter.setPen(pen)
            painter.drawPolyline(polygon_of(pieces[place]))


def _unit(vectors: Array) -> Array:
    found: Array = vectors / np.linalg.norm(vectors, axis=-1, keepdims=True)
    return found


def _paint_lines(painter: QPainter, disc: Disc, view: View) -> None:
    """Paint lines of one gantry or couch angle each 30°, and the coplanar circle."""
    painter.setBrush(Qt.BrushStyle.NoBrush)
    if view.field is not None:
        axes = view.field.axes
        faint = QColor(_ON_COLOURS)
        faint.setAlphaF(0.28)
        lines = QPainterPath()
        for angle in range(30, 180, 30):
            lines.addPath(disc.path(directions_patient(float(angle), _FINE, axes)))
            lines.addPath(disc.path(directions_patient(_FINE, float(angle), axes)))
        painter.setPen(QPen(faint, 0.8))
        painter.drawPath(lines)
        if view.field.along_line() is None:
            _paint_coplanar(painter, disc, axes, view.theme)


def _paint_coplanar(painter: QPainter, disc: Disc, axes: PatientAxes, theme: Theme) -> None:
    circle = disc.path(directions_patient(_FINE, 0.0, axes))
    ticks = QPainterPath()
    for gantry in range(0, 360, 10):
        reach = 6.0 if gantry % 30 else 9.0 if gantry % 90 else 12.0
        couch = np.array([-reach, reach]) / 4.0
        # Across the circle: a little to both sides along the axis that is square to it.
        middle, aside = directions_patient(float(gantry), 0.0, axes), directions_patient(90.0, 90.0, axes)
        ticks.addPath(disc.path(_unit(middle + np.radians(couch)[:, None] * aside)))
    ink, halo = theme.colour("ink"), theme.colour("halo")
    halo.setAlphaF(0.5)
    cased_stroke(painter, circle, QPen(ink, 1.3), halo, 1.6)
    cased_stroke(painter, ticks, QPen(ink, 1.0), halo, 1.2)


def _paint_letters(painter: QPainter, disc: Disc, layout: Layout, theme: Theme) -> None:
    bold = font_of(layout.font, 1.0, bold=True)
    metrics = QFontMetricsF(bold)
    for letter, direction in _LETTERS:
        vector = np.array(direction)
        x, y = disc.hemisphere.places(vector).tolist()
        if x * x + y * y > 0.5:
            painter.setFont(bold)
            painter.setPen(theme.colour("ink"))
            box = QRectF(0.0, 0.0, 20.0, metrics.height())
            box.moveCenter(disc.centre + QPointF(x, -y) * disc.letters)
            painter.drawText(box, Qt.AlignmentFlag.AlignCenter, letter)
    name = disc.hemisphere.name
    if QFontMetricsF(layout.small).horizontalAdvance(name) > disc.letters - metrics.height():
        # The letter in the middle tells it as well.
        return
    painter.setFont(layout.small)
    painter.setPen(theme.colour("faint"))
    corner = disc.centre - QPointF(disc.letters, disc.letters + metrics.height() / 2.0)
    painter.drawText(corner + QPointF(0.0, metrics.ascent()), name[0].upper() + name[1:])


def _paint_labels(painter: QPainter, disc: Disc, layout: Layout, view: View) -> None:
    """Write the letter of the centre, and gantry angles along the coplanar circle."""
    for gantry in range(0, 360, 90) if disc.radius >= _ROOM_FOR_ANGLES else ():
        _paint_gantry_angle(painter, disc, layout, view, gantry)
    bold = font_of(layout.font, 1.0, bold=True)
    for letter, direction in _LETTERS:
        if np.dot(direction, disc.hemisphere.centre) > 0.5:
            _label(painter, letter, bold, disc.centre + QPointF(-11.0, -11.0), view.theme)


def _paint_gantry_angle(painter: QPainter, disc: Disc, layout: Layout, view: View, gantry_deg: int) -> None:
    if view.field is None:
        return
    point = disc.point(directions_patient(float(gantry_deg), 0.0, view.field.axes))
    if point is None:
        return
    text = f"{gantry_deg}°"
    half = QFontMetricsF(layout.small).horizontalAdvance(text) / 2.0 + 4.0
    inwards = disc.centre - point
    length = max((inwards.x() ** 2 + inwards.y() ** 2) ** 0.5, 1e-9)
    # Inside the rim, and off the circle itself.
    shift = inwards / length * (half + 4.0) if length > 0.5 * disc.radius else QPointF(half + 2.0, 0.0)
    off = QPointF(0.0, 12.0) if abs(shift.x()) > abs(shift.y()) else QPointF(half + 2.0, 0.0)
    _label(painter, text, layout.small, point + shift + off, view.theme)


def _paint_beam(painter: QPainter, disc: Disc, layout: Layout, theme: Theme, name: str, directions: Array) -> None:
    beam, halo = QColor(theme.colour("beam")), theme.colour("halo")
    if len(directions) > 1:
        pen = QPen(beam, 3.0)
        pen.setCapStyle(Qt.PenCapStyle.RoundCap)
        cased_stroke(painter, disc.path(directions), pen, halo)
    middle = disc.point(directions[len(directions) // 2])
    if middle is None:
        return
    if len(directions) == 1:
        mark = QPainterPath()
        mark.addPolygon([middle + QPointF(*at) for at in ((0.0, -5.5), (5.5, 0.0), (0.0, 5.5), (-5.5, 0.0))])
        mark.closeSubpath()
        cased_stroke(painter, mark, QPen(_ON_COLOURS, 1.2), halo)
        painter.fillPath(mark, beam)
    text = QFontMetricsF(layout.small).elidedText(name, Qt.TextElideMode.ElideRight, disc.radius)
    half = QFontMetricsF(layout.small).horizontalAdvance(text) / 2.0
    side = 1.0 if middle.x() <= disc.centre.x() else -1.0
    _label(painter, text, layout.small, middle + QPointF(side * (half + 9.0), -9.0), theme)


def _paint_legend(painter: QPainter, layout: Layout, theme: Theme) -> None:
    small = layout.small
    metrics = QFontMetricsF(small)
    painter.setFont(small)
    ramp = layout.ramp
    colours = QLinearGradient(ramp.topLeft(), ramp.topRight())
    for place, colour in zip(np.linspace(0.0, 1.0, len(EDGE_COLOURS)).tolist(), EDGE_COLOURS, strict=True):
        colours.setColorAt(place, QColor(colour))
    painter.fillRect(ramp, colours)
    painter.setPen(theme.colour("faint"))
    painter.setBrush(Qt.BrushStyle.NoBrush)
    painter.drawRect(ramp)
    baseline = ramp.bottom() + metrics.ascent() + 2.0
    for figure in _RAMP_FIGURES_MM:
        mark = ramp.left() + float(places(np.array([figure]))[0]) * ramp.width()
        text = f"≥ {figure:g} mm" if figure == EDGES_MM[-1] else f"{figure:g}"
        # The first begins at its mark, the last has its figure there, and the others stand about theirs.
        before = "" if figure == 0.0 else "≥ 3" if figure == EDGES_MM[-1] else text[: len(text) // 2]
        painter.setPen(theme.colour("faint"))
        painter.drawLine(QPointF(mark, ramp.bottom()), QPointF(mark, ramp.bottom() + 2.0))
        painter.setPen(theme.colour("ink"))
        painter.drawText(QPointF(mark - metrics.horizontalAdvance(before), baseline), text)
    beside = QPointF(ramp.right() + 5.0, ramp.center().y() + metrics.ascent() / 2.0 - 1.0)
    painter.drawText(beside, RAMP_WORD)
    for at, item in layout.legend:
        item.draw(painter, QRectF(at - QPointF(0.0, SAMPLE.height() / 2.0), SAMPLE))
        painter.setPen(theme.colour("ink"))
        painter.drawText(at + QPointF(SAMPLE.width() + 5.0, metrics.ascent() / 2.0 - 1.0), item.brief)


def _label(painter: QPainter, text: str, font: QFont, centre: QPointF, theme: Theme) -> None:
    painter.save()
    painter.translate(centre)
    cased_text(painter, text, font, theme.colour("ink"), theme.colour("halo"))
    painter.restore()
