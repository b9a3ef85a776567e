"""What the required clearance is made of, as two bars: for pairs of the machine alone, and with patient or device."""

import math
from dataclasses import dataclass

from PySide6.QtCore import QEvent, QPointF, QRectF, QSize, Qt
from PySide6.QtGui import QColor, QHelpEvent, QPainter, QPaintEvent, QPen
from PySide6.QtWidgets import QSizePolicy, QToolTip, QWidget

from app.files.readings import required_text
from app.window.theme import LIGHT, Theme
from geometry.setup import Required

_BAR = 12
_NAMES = ("Machine alone", "With patient or device")


@dataclass(frozen=True)
class Share:
    """A stretch of a bar, mm, and its part of the sum of squares (None: the fixed part)."""

    name: str
    length_mm: float
    of_squares: float | None


def shares(required: Required, *, with_patient: bool) -> tuple[Share, ...]:
    """Return what a pair's required clearance is made of, the fixed part first, then the components, heaviest first.

    Components add in quadrature: each gets the part of k times the root sum of squares that its square has in the sum.
    """
    counted = [c for c in required.components if with_patient or not c.patient_only]
    squares = sum(c.sd_mm**2 for c in counted)
    found = [Share("fixed part", required.fixed_mm, None)]
    if squares > 0.0 and required.k > 0.0:
        whole = required.k * math.sqrt(squares)
        parts = [(c.name, c.sd_mm**2 / squares) for c in counted if c.sd_mm > 0.0]
        found += [Share(name, whole * part, part) for name, part in sorted(parts, key=lambda p: -p[1])]
    return tuple(found)


class RequiredBar(QWidget):
    """The two bars, on one scale, each with its sum and what weighs most in it."""

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._theme = LIGHT
        self._rows: tuple[tuple[Share, ...], ...] = ()
        self.setSizePolicy(QSizePolicy.Policy.Expanding, QSizePolicy.Policy.Fixed)
        self.setAccessibleName("What the required clearance is made of")

    def set_theme(self, theme: Theme) -> None:
        """Take over colours."""
        self._theme = theme
        self.update()

    def show_required(self, required: Required) -> None:
        """Show another required clearance."""
        rows = tuple(shares(required, with_patient=with_patient) for with_patient in (False, True))
        if rows != self._rows:
            self._rows = rows
            self.setAccessibleDescription(". ".join(self.lines()))
            self.update()

    def lines(self) -> tuple[str, ...]:
        """Return what the bars say, in words."""
        return tuple(
            f"{name}: {required_text(_total_mm(row))}{', most from ' + _heaviest(row) if _heaviest(row) else ''}"
            for name, row in zip(_NAMES, self._rows, strict=False)
        )

    def sizeHint(self) -> QSize:
        """Return room for both bars with their words."""
        return QSize(220, 2 * self._row_height())

    def minimumSizeHint(self) -> QSize:
        """Return the least room."""
        return QSize(160, 2 * self._row_height())

    def event(self, event: QEvent) -> bool:
        """Name the stretch under the pointer."""
        if isinstance(event, QHelpEvent):
            QToolTip.showText(event.globalPos(), self.told_at(QPointF(event.pos())), self)
            return True
        return super().event(event)

    def told_at(self, position: QPointF) -> str:
        """Return what lies at a position, in words; "" beside the bars."""
        for row, rects in zip(self._rows, self._rects(), strict=True):
            for share, rect in zip(row, rects, strict=True):
                if rect.contains(position):
                    part = "" if share.of_squares is None else f", {100.0 * share.of_squares:.0f} % of the squares"
                    return f"{share.name}: {share.length_mm:.1f} mm{part}"
        return ""

    def paintEvent(self, _: QPaintEvent) -> None:
        """Draw the bars."""
        painter = QPainter(self)
        painter.setRenderHint(QPainter.RenderHint.Antialiasing)
        line = self.fontMetrics().height()
        for i, (row, rects) in enumerate(zip(self._rows, self._rects(), strict=True)):
            top = i * self._row_height()
            painter.setPen(self._theme.colour("ink"))
            words = QRectF(0, top, self.width(), line)
            painter.drawText(words, Qt.AlignmentFlag.AlignLeft, _NAMES[i])
            painter.drawText(words, Qt.AlignmentFlag.AlignRight, required_text(_total_mm(row)))
            for share, rect in zip(row, rects, strict=True):
                painter.fillRect(rect, self._colour(share, row))
            painter.setPen(QPen(self._theme.colour("panel"), 1.2))
            for rect in rects[1:]:
                painter.drawLine(rect.topLeft(), rect.bottomLeft())
            painter.setPen(self._theme.colour("faint"))
            heaviest = _heaviest(row)
            told = f"Weighs most: {heaviest}" if heaviest else "No components"
            told = self.fontMetrics().elidedText(told, Qt.TextElideMode.ElideRight, self.width())
            painter.drawText(QRectF(0, rects[0].bottom() + 2, self.width(), line), Qt.AlignmentFlag.AlignLeft, told)
        painter.end()

    def _row_height(self) -> int:
        return 2 * self.fontMetrics().height() + _BAR + 12

    def _rects(self) -> list[list[QRectF]]:
        """Return the stretches of each bar; the longer bar takes the whole width."""
        longest = max((_total_mm(row) for row in self._rows), default=0.0) or 1.0
        found = []
        for i, row in enumerate(self._rows):
            top, left = i * self._row_height() + self.fontMetrics().height() + 3, 0.0
            rects = []
            for share in row:
                width = share.length_mm / longest * self.width()
                rects.append(QRectF(left, top, width, _BAR))
                left += width
            found.append(rects)
        return found

    def _colour(self, share: Share, row: tuple[Share, ...]) -> QColor:
        if share.of_squares is None:
            return self._theme.colour("line")
        colour = self._theme.colour("accent")
        # The heaviest in full, the others fainter the less they weigh.
        place = [s.name for s in row if s.of_squares is not None].index(share.name)
        colour.setAlphaF(max(1.0 - 0.22 * place, 0.3))
        return colour


def _total_mm(row: tuple[Share, ...]) -> float:
    return sum(share.length_mm for share in row)


def _heaviest(row: tuple[Share, ...]) -> str:
    parts = [share for share in row if share.of_squares is not None]
    return f"{parts[0].name}, {100.0 * (parts[0].of_squares or 0.0):.0f} %" if parts else ""
