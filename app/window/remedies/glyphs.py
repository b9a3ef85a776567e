"""The signs of the kinds of changes that would help."""

import math
from typing import Final

from PySide6.QtCore import QPointF, QRectF, Qt
from PySide6.QtGui import QColor, QPainter, QPen, QPolygonF

from geometry.remedies.find import RemedyKind


def draw_glyph(painter: QPainter, kind: RemedyKind, box: QRectF, colour: QColor) -> None:
    """Draw the sign of a kind of change into a square box."""
    painter.save()
    painter.setPen(QPen(colour, 1.6, Qt.PenStyle.SolidLine, Qt.PenCapStyle.RoundCap, Qt.PenJoinStyle.RoundJoin))
    painter.setBrush(Qt.BrushStyle.NoBrush)
    painter.translate(box.center())
    r = box.width() / 2.0 - 1.0
    _GLYPHS[kind](painter, r, colour)
    painter.restore()


def _head(painter: QPainter, tip: QPointF, angle_deg: float, colour: QColor) -> None:
    """Draw an arrow's head that points along an angle, deg clockwise from the right."""
    along, across = 4.2, 2.6
    cos, sin = math.cos(math.radians(angle_deg)), math.sin(math.radians(angle_deg))
    corners = [
        tip,
        *(
            tip + QPointF(-along * cos - side * across * sin, -along * sin + side * across * cos)
            for side in (-1.0, 1.0)
        ),
    ]
    painter.setBrush(colour)
    painter.drawPolygon(QPolygonF(corners))
    painter.setBrush(Qt.BrushStyle.NoBrush)


def _angles(painter: QPainter, r: float, colour: QColor) -> None:
    painter.drawArc(QRectF(-r, -r, 2 * r, 2 * r), 16 * 20, 16 * 230)
    at = math.radians(-20.0)
    _head(painter, QPointF(r * math.cos(at), r * math.sin(at)), 75.0, colour)


def _other_pair(painter: QPainter, r: float, colour: QColor) -> None:
    for side in (-1.0, 1.0):
        painter.drawLine(QPointF(-side * r * 0.8, side * 3.5), QPointF(side * r * 0.6, side * 3.5))
        _head(painter, QPointF(side * r, side * 3.5), 0.0 if side > 0 else 180.0, colour)


def _arm(painter: QPainter, r: float, colour: QColor) -> None:
    painter.drawLine(QPointF(-r, -r * 0.8), QPointF(-r, r * 0.8))
    painter.drawLine(QPointF(-r * 0.3, 0.0), QPointF(r, 0.0))
    _head(painter, QPointF(-r * 0.55, 0.0), 180.0, colour)


def _collimator(painter: QPainter, r: float, colour: QColor) -> None:
    painter.save()
    painter.rotate(20.0)
    painter.drawRect(QRectF(-r * 0.55, -r * 0.55, 1.1 * r, 1.1 * r))
    painter.restore()
    painter.drawArc(QRectF(-r, -r, 2 * r, 2 * r), 16 * 40, 16 * 70)
    at = math.radians(-40.0)
    _head(painter, QPointF(r * math.cos(at), r * math.sin(at)), 50.0, colour)


def _accessory(painter: QPainter, r: float, colour: QColor) -> None:  # noqa: ARG001 - as the others
    painter.drawEllipse(QPointF(0.0, 0.0), r * 0.9, r * 0.9)
    painter.drawLine(QPointF(-r * 0.45, 0.0), QPointF(r * 0.45, 0.0))


def _shift(painter: QPainter, r: float, colour: QColor) -> None:
    painter.drawLine(QPointF(-r, r * 0.75), QPointF(r, r * 0.75))
    painter.drawLine(QPointF(-r, -r * 0.1), QPointF(r * 0.5, -r * 0.1))
    _head(painter, QPointF(r, -r * 0.1), 0.0, colour)


def _device(painter: QPainter, r: float, colour: QColor) -> None:  # noqa: ARG001 - as the others
    painter.drawRect(QRectF(-r * 0.85, -r * 0.5, 1.7 * r, r))
    painter.drawLine(QPointF(-r, r), QPointF(r, -r))


_GLYPHS: Final = {
    RemedyKind.ANGLES: _angles,
    RemedyKind.OTHER_PAIR: _other_pair,
    RemedyKind.ARM: _arm,
    RemedyKind.COLLIMATOR: _collimator,
    RemedyKind.ACCESSORY: _accessory,
    RemedyKind.SHIFT: _shift,
    RemedyKind.DEVICE: _device,
}
