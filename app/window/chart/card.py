"""The small card that says what is known of the pair of angles under the pointer."""

from typing import Final

from PySide6.QtCore import QPointF, QRectF, QSizeF, Qt
from PySide6.QtGui import QFont, QFontMetricsF, QPainter, QPen

from app.window.chart.paint import font_of
from app.window.chart.reading import Reading, angle_words
from app.window.theme import Theme
from geometry.machine import Readout
from geometry.states import State

_PADDING: Final = 9.0
_AWAY: Final = 8.0
# How near the pointer may come before the card moves to another corner.
_SHY: Final = 26.0
_WIDEST: Final = 300.0

# Text, font, name of the theme's colour.
Line = tuple[str, QFont, str]


class Card:
    """The lines of a reading, and the size that they take."""

    def __init__(
        self,
        reading: Reading,
        font: QFont,
        own: tuple[Readout | None, Readout | None],
        room: float,
        *,
        brief: bool = False,
    ) -> None:
        self._lines = _lines(reading, font, own, room - 2.0 * _PADDING, brief=brief)
        widths = [QFontMetricsF(line[1]).horizontalAdvance(line[0]) for line in self._lines]
        heights = [QFontMetricsF(line[1]).height() for line in self._lines]
        self.size = QSizeF(max(widths) + 2.0 * _PADDING, sum(heights) + 2.0 * _PADDING - 4.0)

    def paint(self, painter: QPainter, box: QRectF, theme: Theme) -> None:
        """Draw the card into a box of its size."""
        face = theme.colour("panel")
        face.setAlphaF(0.95)
        painter.setPen(QPen(theme.colour("line"), 1.0))
        painter.setBrush(face)
        painter.drawRoundedRect(box, 5.0, 5.0)
        y = box.top() + _PADDING - 2.0
        for text, font, colour in self._lines:
            height = QFontMetricsF(font).height()
            painter.setFont(font)
            painter.setPen(theme.colour(colour))
            painter.drawText(QRectF(box.left() + _PADDING, y, box.width(), height), Qt.AlignmentFlag.AlignVCenter, text)
            y += height


def card_box(size: QSizeF, plot: QRectF, pointer: QPointF, before: QRectF | None) -> QRectF:
    """Return where a card goes: into a corner off the pointer, where it was before as long as that is one."""
    corners = [
        QRectF(QPointF(x, y), size)
        for y in (plot.top() + _AWAY, plot.bottom() - size.height() - _AWAY)
        for x in (plot.right() - size.width() - _AWAY, plot.left() + _AWAY)
    ]

    def distance(box: QRectF) -> float:
        dx = max(box.left() - pointer.x(), pointer.x() - box.right(), 0.0)
        dy = max(box.top() - pointer.y(), pointer.y() - box.bottom(), 0.0)
        return float((dx * dx + dy * dy) ** 0.5)

    if before is not None:
        same = min(corners, key=lambda box: (box.center() - before.center()).manhattanLength())
        if distance(same) >= _SHY:
            return same
    free = [box for box in corners if distance(box) >= _SHY]
    return free[0] if free else max(corners, key=distance)


def _lines(
    reading: Reading, font: QFont, own: tuple[Readout | None, Readout | None], room: float, *, brief: bool
) -> list[Line]:
    plain, small, bold = font_of(font), font_of(font, 0.88), font_of(font, 1.0, bold=True)
    large = font_of(font, 1.35, bold=True)
    lines: list[Line] = []
    lines.append((f"Gantry {angle_words(reading.gantry_deg)}   Couch {angle_words(reading.couch_deg)}", bold, "ink"))
    shown = _own_words(reading, own)
    if shown:
        lines.append((shown, small, "faint"))
    if reading.state is State.NO_TRAVEL:
        return [*lines, ("no travel", bold, "marked")]
    colour = "ink" if reading.state in {None, State.PERMITTED} else "marked"
    lines.append((reading.clearance_words, large, "ink"))
    words = ", ".join(word for word in (reading.state_words, reading.slack_words) if word)
    lines.extend((part, plain, colour) for part in _wrapped(words, plain, room))
    if reading.machine_part:
        # Beside each other where there is room.
        both = f"{reading.machine_part} – {reading.couch_part}"
        narrow = QFontMetricsF(small).horizontalAdvance(both) > min(room, _WIDEST)
        parts = (reading.machine_part, reading.couch_part) if narrow else (both,)
        lines.extend((part, small, "faint") for part in parts)
    if not brief:
        lines.extend((part, small, "faint") for part in _wrapped(reading.grid_words, small, room))
    return [
        (QFontMetricsF(face).elidedText(text, Qt.TextElideMode.ElideMiddle, room), face, name)
        for text, face, name in lines
    ]


def _own_words(reading: Reading, own: tuple[Readout | None, Readout | None]) -> str:
    if own[0] is not None and own[1] is not None:
        gantry, couch = (angle_words(reading.gantry_deg, own[0]), angle_words(reading.couch_deg, own[1]))
        return f"machine shows {gantry} and {couch}"
    if own[0] is not None:
        return f"machine shows gantry {angle_words(reading.gantry_deg, own[0])}"
    if own[1] is not None:
        return f"machine shows couch {angle_words(reading.couch_deg, own[1])}"
    return ""


def _wrapped(text: str, font: QFont, room: float) -> list[str]:
    """Return the lines of a text, broken between words where it is too long."""
    metrics = QFontMetricsF(font)
    lines: list[str] = []
    for word in text.split():
        if lines and metrics.horizontalAdvance(f"{lines[-1]} {word}") <= room:
            lines[-1] = f"{lines[-1]} {word}"
        else:
            lines.append(word)
    return lines
