"""What every chart of the window is painted with: fonts, textures, outlines, text with a halo."""

from functools import lru_cache
from typing import Final

import numpy as np
import shapely
from numpy.typing import NDArray
from PySide6.QtCore import QPointF, QRectF, Qt
from PySide6.QtGui import (
    QBrush,
    QColor,
    QFont,
    QFontMetricsF,
    QImage,
    QPainter,
    QPainterPath,
    QPainterPathStroker,
    QPen,
    QPolygonF,
)

from app.window.theme import Theme
from geometry.states import State

Pixels = NDArray[np.uint32]

# Device-independent pixels after which every texture repeats.
TILE: Final = 8
_TEXT_HALO: Final = 3.0
_SOLID: Final = {
    State.CONTACT: ("#b9bcc0", "#3d4248"),
    State.NO_TRAVEL: ("#ffffff", "#9aa1a8"),
}
_SOLID_DARK: Final = {
    State.CONTACT: ("#4b5259", "#b4bbc1"),
    State.NO_TRAVEL: ("#15191d", "#59636c"),
}
# Over the colours of clearance, which are the same in both themes.
_OVER_COLOUR: Final = "#ffffff"
_SHORT_ALPHA: Final = 0.8
# A line and its neighbours, so that the corners of the tiles meet.
_RISING: Final = tuple(((x - 1.0, TILE + 1.0), (x + TILE + 1.0, -1.0)) for x in (-TILE, 0, TILE))
_FALLING: Final = tuple(((x - 1.0, -1.0), (x + TILE + 1.0, TILE + 1.0)) for x in (-TILE, 0, TILE))
_TILE_LINES: Final = {
    State.CONTACT: (*_RISING, *_FALLING),
    State.SHORT: _RISING,
    State.NO_TRAVEL: tuple(((-1.0, y), (TILE + 1.0, y)) for y in (2.0, 6.0)),
}


def font_of(base: QFont, scale: float = 1.0, *, bold: bool = False) -> QFont:
    """Return a font of the same family, with figures of one width."""
    font = QFont(base)
    size = base.pointSizeF()
    if size > 0.0:
        font.setPointSizeF(max(size * scale, 6.0))
    else:
        font.setPixelSize(max(round(base.pixelSize() * scale), 8))
    font.setWeight(QFont.Weight.DemiBold if bold else QFont.Weight.Normal)
    font.setFeature(QFont.Tag("tnum"), 1)
    return font


def mixed(first: QColor, second: QColor, share: float) -> QColor:
    """Return a colour between two, `share` of the way to the second."""
    return QColor.fromRgbF(*(a + (b - a) * share for a, b in zip(_rgb(first), _rgb(second), strict=True)))


@lru_cache(maxsize=64)
def texture(state: State, theme: Theme, ratio: float, *, on_canvas: bool = False) -> Pixels:
    """Return the tile of a state's texture, premultiplied ARGB, square, for a number of device pixels per pixel.

    `on_canvas`: to lie on the bare canvas, and not on the colours of clearance.
    """
    side = max(round(TILE * ratio), 4)
    image = QImage(side, side, QImage.Format.Format_ARGB32_Premultiplied)
    image.fill(Qt.GlobalColor.transparent)
    with QPainter(image) as painter:
        painter.setRenderHint(QPainter.RenderHint.Antialiasing)
        painter.scale(side / TILE, side / TILE)
        _draw_tile(painter, state, theme, on_canvas=on_canvas)
    return np.frombuffer(image.constBits(), np.uint32).reshape(side, side).copy()


def texture_brush(state: State, theme: Theme, ratio: float, *, on_canvas: bool = False) -> QBrush:
    """Return the texture as a brush for areas given in device-independent pixels."""
    tile = texture(state, theme, ratio, on_canvas=on_canvas)
    side = len(tile)
    image = QImage(tile.tobytes(), side, side, 4 * side, QImage.Format.Format_ARGB32_Premultiplied).copy()
    image.setDevicePixelRatio(side / TILE)
    return QBrush(image)


def _draw_tile(painter: QPainter, state: State, theme: Theme, *, on_canvas: bool) -> None:
    whole = QRectF(0.0, 0.0, TILE, TILE)
    if state in _SOLID:
        face, line = (_SOLID_DARK if theme.dark else _SOLID)[state]
        painter.fillRect(whole, QColor(face))
    else:
        line = theme.faint if on_canvas else _OVER_COLOUR
    colour = QColor(line)
    colour.setAlphaF(_SHORT_ALPHA if state is State.SHORT else 1.0)
    painter.setPen(QPen(colour, 1.0))
    if state is State.UNPROVED:
        painter.setPen(Qt.PenStyle.NoPen)
        painter.setBrush(colour)
        for x, y in ((2.0, 2.0), (6.0, 6.0), (6.0, 2.0), (2.0, 6.0)):
            painter.drawEllipse(QPointF(x, y), 1.0, 1.0)
        return
    for start, stop in _TILE_LINES[state]:
        painter.drawLine(QPointF(*start), QPointF(*stop))


def outline_path(region: shapely.Geometry | None) -> QPainterPath:
    """Return the borders of a region of polygons, holes included, in its own coordinates."""
    path = QPainterPath()
    path.setFillRule(Qt.FillRule.OddEvenFill)
    if region is None:
        return path
    for polygon in shapely.get_parts(region):
        if not isinstance(polygon, shapely.Polygon) or polygon.is_empty:
            continue
        for ring in (polygon.exterior, *polygon.interiors):
            path.addPolygon(polygon_of(shapely.get_coordinates(ring)))
            path.closeSubpath()
    return path


def polygon_of(points: NDArray[np.float64]) -> QPolygonF:
    """Return points (n, 2) as Qt's own."""
    return QPolygonF([QPointF(x, y) for x, y in points.tolist()])


def cased_stroke(painter: QPainter, path: QPainterPath, pen: QPen, halo: QColor, width: float = 2.2) -> None:
    """Draw a line with a halo around it, which keeps it visible on any colour."""
    painter.setBrush(Qt.BrushStyle.NoBrush)
    around = QPen(halo, pen.widthF() + width)
    around.setJoinStyle(pen.joinStyle())
    around.setCapStyle(Qt.PenCapStyle.FlatCap)
    painter.setPen(around)
    painter.drawPath(path)
    painter.setPen(pen)
    painter.drawPath(path)


def cased_text(painter: QPainter, text: str, font: QFont, ink: QColor, halo: QColor) -> None:
    """Write a line of text about the painter's origin, with a halo around it."""
    inner, outer = _text_paths(text, font.toString())
    painter.setPen(Qt.PenStyle.NoPen)
    painter.setBrush(halo)
    painter.drawPath(outer)
    painter.setBrush(ink)
    painter.drawPath(inner)


@lru_cache(maxsize=256)
def _text_paths(text: str, font_words: str) -> tuple[QPainterPath, QPainterPath]:
    """Return a line of text about (0, 0) as outlines, and what a halo around it covers."""
    font = QFont()
    font.fromString(font_words)
    metrics = QFontMetricsF(font)
    inner = QPainterPath()
    inner.addText(-metrics.horizontalAdvance(text) / 2.0, (metrics.ascent() - metrics.descent()) / 2.0, font, text)
    stroker = QPainterPathStroker()
    stroker.setWidth(_TEXT_HALO)
    stroker.setJoinStyle(Qt.PenJoinStyle.RoundJoin)
    outer = stroker.createStroke(inner).united(inner)
    return inner, outer


def dashed(pen: QPen, on: float, off: float) -> QPen:
    """Return the pen with dashes of these lengths, in pen widths."""
    pen.setDashPattern([on, off])
    pen.setCapStyle(Qt.PenCapStyle.FlatCap)
    return pen


def _rgb(colour: QColor) -> tuple[float, float, float]:
    return colour.redF(), colour.greenF(), colour.blueF()
