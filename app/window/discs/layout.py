"""Where everything of the direction discs lies, device-independent pixels."""

from collections.abc import Iterable
from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray
from PySide6.QtCore import QPointF, QRectF, QSizeF
from PySide6.QtGui import QFont, QFontMetricsF, QPainterPath

from app.window.chart.legend import LegendItem
from app.window.chart.paint import font_of
from geometry.directions.discs import Hemisphere

Array = NDArray[np.float64]

EDGE: Final = 8.0
SAMPLE: Final = QSizeF(22.0, 11.0)
RAMP_WIDTH: Final = 132.0
RAMP_WORD: Final = "clearance"
# How far the band reaches to both sides that shows directions which are a line.
BAND: Final = 8.0
_GAP: Final = 14.0
# Narrower than this, the switch stands above the text, and the readout takes a line more.
_NARROW: Final = 560.0
_LEAST_RADIUS: Final = 24.0


@dataclass(frozen=True)
class Disc:
    """A hemisphere on a circle of the picture; letters around it stand `letters` from the centre."""

    hemisphere: Hemisphere
    centre: QPointF
    radius: float
    letters: float

    def pixels(self, directions: Array) -> Array:
        """Return where directions (..., 3) lie on the picture, (..., 2); NaN well beyond the rim."""
        places = self.hemisphere.places(directions) * np.array([self.radius, -self.radius])
        found: Array = places + np.array([self.centre.x(), self.centre.y()])
        return found

    def point(self, direction: Array) -> QPointF | None:
        """Return where a direction (3,) lies, or None where it is on the other disc."""
        if not self.hemisphere.holds(direction):
            return None
        x, y = self.pixels(direction).tolist()
        return QPointF(x, y)

    def direction(self, point: QPointF) -> Array | None:
        """Return the direction (3,) at a point, or None beyond the rim."""
        away = (point - self.centre) / self.radius
        place = np.array([away.x(), -away.y()])
        return self.hemisphere.directions(place) if float(place @ place) <= 1.0 else None

    def path(self, directions: Array) -> QPainterPath:
        """Return a line through directions (n, 3), as far as it runs on this disc: cut at the rim."""
        path = QPainterPath()
        drawn = False
        for (x, y), on in self._cut(directions):
            if on and drawn:
                path.lineTo(x, y)
            elif on:
                path.moveTo(x, y)
            drawn = on
        return path

    def _cut(self, directions: Array) -> Iterable[tuple[list[float], bool]]:
        """Return pixels with whether the line is on the disc there, places on the rim added where it crosses that."""
        depth = directions @ np.array(self.hemisphere.centre)
        on = depth >= 0.0
        crossed = np.flatnonzero(on[1:] != on[:-1])
        share = depth[crossed] / (depth[crossed] - depth[crossed + 1])
        on_rim = directions[crossed] + share[:, None] * (directions[crossed + 1] - directions[crossed])
        on_rim /= np.linalg.norm(on_rim, axis=-1, keepdims=True)
        pixels = np.insert(self.pixels(directions), crossed + 1, self.pixels(on_rim), axis=0)
        return zip(pixels.tolist(), np.insert(on, crossed + 1, True).tolist(), strict=True)

    @property
    def box(self) -> QRectF:
        """The square around the circle."""
        return QRectF(self.centre.x() - self.radius, self.centre.y() - self.radius, 2 * self.radius, 2 * self.radius)

    @property
    def rim(self) -> QPainterPath:
        """The circle."""
        path = QPainterPath()
        path.addEllipse(self.centre, self.radius, self.radius)
        return path


@dataclass(frozen=True)
class Layout:
    """Boxes of the text above, the discs, the ramp, the legend's samples, and the readout below."""

    size: QSizeF
    font: QFont
    share: QRectF
    switch: QRectF
    discs: tuple[Disc, Disc]
    ramp: QRectF
    legend: tuple[tuple[QPointF, LegendItem], ...]
    readout: QRectF

    @property
    def small(self) -> QFont:
        """The font of letters that are many."""
        return font_of(self.font, 0.88)


def layout_of(
    size: QSizeF,
    font: QFont,
    switch: QSizeF,
    hemispheres: tuple[Hemisphere, Hemisphere],
    items: tuple[LegendItem, ...],
    *,
    with_band: bool,
) -> Layout:
    """Return where everything lies on a picture of a size.

    `switch` is what the switch needs (empty for none); `with_band`: a band around the rim needs room as well.
    """
    line = QFontMetricsF(font).height()
    narrow = size.width() < _NARROW
    inner = size.width() - 2.0 * EDGE
    switch_box = QRectF(size.width() - EDGE - switch.width(), EDGE, switch.width(), switch.height())
    if narrow and not switch.isEmpty():
        share = QRectF(EDGE, switch_box.bottom() + 4.0, inner, 2.0 * line)
    else:
        share = QRectF(EDGE, EDGE, inner - switch.width() - EDGE, 2.0 * line)
    lines = 4.0 if size.width() < 440.0 else 3.0 if narrow else 2.0
    readout = QRectF(EDGE, size.height() - EDGE - lines * line, inner, lines * line)
    ramp, legend, top = _legend(items, font_of(font, 0.88), QRectF(EDGE, 0.0, inner, readout.top() - 6.0))
    above = max(share.bottom(), switch_box.bottom() if not switch.isEmpty() else 0.0)
    area = QRectF(EDGE, above + 2.0, inner, max(top - 4.0 - above, 0.0))
    discs = _discs(area, line, BAND if with_band else 0.0, hemispheres)
    return Layout(size, font, share, switch_box, discs, ramp, legend, readout)


def _discs(area: QRectF, line: float, band: float, hemispheres: tuple[Hemisphere, Hemisphere]) -> tuple[Disc, Disc]:
    """Lay two discs side by side or one above the other, whichever makes them larger, with room for letters."""
    around = band + line + 5.0
    aside = min(area.width() / 4.0, area.height() / 2.0) - around
    below = min(area.width() / 2.0, area.height() / 4.0) - around
    radius = max(aside, below, _LEAST_RADIUS)
    x, y = area.center().x(), area.center().y()
    apart = radius + around
    # Side by side not further apart than they need, or one no longer reads them together.
    shift = QPointF(min(area.width() / 4.0, 1.25 * apart), 0.0) if aside >= below else QPointF(0.0, apart)
    letters = radius + band + line / 2.0 + 4.0
    middle = QPointF(x, y)
    first, second = hemispheres
    return Disc(first, middle - shift, radius, letters), Disc(second, middle + shift, radius, letters)


def _legend(
    items: tuple[LegendItem, ...], font: QFont, box: QRectF
) -> tuple[QRectF, tuple[tuple[QPointF, LegendItem], ...], float]:
    """Return the ramp's box, places of the samples, and the legend's top, with its foot at that of a box."""
    metrics = QFontMetricsF(font)
    row_height = metrics.height() + 4.0
    # The ramp has its figures below it, and what they are of beside it.
    head = RAMP_WIDTH + 5.0 + metrics.horizontalAdvance(RAMP_WORD) + _GAP
    # The first two rows begin beside the ramp.
    starts = [box.left() + head] * 2
    x, row = starts[0], 0
    places = []
    for item in items:
        width = SAMPLE.width() + 5.0 + metrics.horizontalAdvance(item.brief)
        while x + width > box.right() and row <= len(starts):
            row += 1
            x = starts[row] if row < len(starts) else box.left()
        places.append((x, row, item))
        x += width + _GAP
    rows = max(row + 1, 2)
    top = box.bottom() - rows * row_height
    legend = tuple((QPointF(at, top + (place + 0.5) * row_height), item) for at, place, item in places)
    return QRectF(box.left(), top + 3.0, RAMP_WIDTH, SAMPLE.height()), legend, top
