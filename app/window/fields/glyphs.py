"""Small signs of the list of fields and of its controls, drawn in the theme's colours."""

from collections.abc import Callable
from typing import Final

from PySide6.QtCore import QPointF, QRectF, Qt
from PySide6.QtGui import QIcon, QPainter, QPen, QPixmap, QPolygonF

from app.window.chart.legend import permitted_item, state_item
from app.window.theme import Theme
from geometry.states import State

GLYPH: Final = (26.0, 14.0)
_ICON: Final = 18
_MARK: Final = 3.2


def paint_state(painter: QPainter, box: QRectF, state: State, theme: Theme, ratio: float, *, stale: bool) -> None:
    """Draw a state: the texture that it has on the charts, and a cross where it is not permitted."""
    painter.save()
    if state is State.PERMITTED:
        permitted_item(theme, stale=stale).draw(painter, box)
        painter.restore()
        return
    state_item(state, theme, ratio).draw(painter, box)
    painter.setRenderHint(QPainter.RenderHint.Antialiasing)
    for colour, width in ((theme.colour("halo"), 4.2), (theme.colour("marked"), 2.0)):
        painter.setPen(QPen(colour, width, Qt.PenStyle.SolidLine, Qt.PenCapStyle.RoundCap))
        for way in (1.0, -1.0):
            reach = QPointF(_MARK, way * _MARK)
            painter.drawLine(box.center() - reach, box.center() + reach)
    painter.restore()


def play_icon(theme: Theme) -> QIcon:
    """Return a triangle."""
    return _icon(theme, lambda painter: painter.drawPolygon(_polygon((5, 3), (15, 9), (5, 15))))


def pause_icon(theme: Theme) -> QIcon:
    """Return two bars."""
    return _icon(theme, lambda painter: painter.drawRects([QRectF(4, 3, 3.6, 12), QRectF(10.4, 3, 3.6, 12)]))


def step_icon(theme: Theme, *, forth: bool) -> QIcon:
    """Return a valley, the sign of a tight place, with an arrow head towards the next or the one before."""

    def draw(painter: QPainter) -> None:
        if not forth:
            painter.translate(_ICON, 0)
            painter.scale(-1, 1)
        painter.drawPolygon(_polygon((2, 4), (8, 9), (2, 14)))
        painter.drawRect(QRectF(9.6, 4, 2.0, 10))
        painter.drawPolygon(_polygon((12.4, 5.6), (17, 5.6), (14.7, 10.4)))

    return _icon(theme, draw)


def _polygon(*points: tuple[float, float]) -> QPolygonF:
    return QPolygonF([QPointF(x, y) for x, y in points])


def _icon(theme: Theme, draw: Callable[[QPainter], object]) -> QIcon:
    """Return an icon in ink, and faint where it is disabled; large enough for dense screens."""
    icon = QIcon()
    for mode, name in ((QIcon.Mode.Normal, "ink"), (QIcon.Mode.Disabled, "line")):
        for ratio in (1, 2, 3):
            picture = QPixmap(_ICON * ratio, _ICON * ratio)
            picture.setDevicePixelRatio(ratio)
            picture.fill(Qt.GlobalColor.transparent)
            with QPainter(picture) as painter:
                painter.setRenderHint(QPainter.RenderHint.Antialiasing)
                painter.setPen(Qt.PenStyle.NoPen)
                painter.setBrush(theme.colour(name))
                draw(painter)
            icon.addPixmap(picture, mode)
    return icon
