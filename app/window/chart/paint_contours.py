"""Lines of equal clearance: found on the grid, drawn and labelled on the picture."""

import math
from dataclasses import dataclass
from typing import Final

import numpy as np
import shapely
from numpy.typing import NDArray
from PySide6.QtCore import QPointF, QRectF, Qt
from PySide6.QtGui import QColor, QFont, QFontMetricsF, QPainter, QPainterPath, QPen, QTransform

from app.window.chart.paint import cased_stroke, cased_text, dashed, polygon_of
from app.window.chart.view import Place
from app.window.theme import LIGHT, Theme
from geometry.sweep import ClearanceMap

Array = NDArray[np.float64]

LEVELS_MM: Final = (50.0, 100.0, 150.0, 200.0, 300.0)
# Between grid angles further apart a contour says nothing.
COARSEST_DEG: Final = 2.0
# A gap that no angle changes is a round number of mm as a rule; a contour just there would trace rounding errors.
_BELOW_ROUND_MM: Final = 0.01
# Points of a contour that change it by less are left out, deg.
_SIMPLER_DEG: Final = 0.08
# The colours of clearance are the same in both themes, and so is what is written on them.
_INK: Final = LIGHT.ink
_HALO: Final = LIGHT.halo


@dataclass(frozen=True, eq=False)
class Contours:
    """Lines on the plane (x gantry, unwrapped, y couch, deg): of equal clearance by level, and of slack 0."""

    levels: tuple[tuple[float, tuple[Array, ...]], ...]
    required: tuple[Array, ...]


NONE: Final = Contours((), ())


def is_fine(found: ClearanceMap) -> bool:
    """Tell whether contours between the grid angles say something."""
    steps = [float(np.diff(angles).max(initial=0.0)) for angles in (found.gantry_deg, found.couch_deg)]
    return min(found.clearance_mm.shape) > 1 and max(steps) <= COARSEST_DEG + 1e-9


def contours_of(found: ClearanceMap) -> Contours:
    """Return the contours of a map; none of a coarse one."""
    if not is_fine(found):
        return NONE
    # Here, because it takes a while, and the window should be there first.
    from contourpy import contour_generator  # noqa: PLC0415

    def lines(values: Array, levels: tuple[float, ...]) -> list[tuple[Array, ...]]:
        known = np.ma.masked_invalid(values)
        maker = contour_generator(found.gantry_deg, found.couch_deg, known, name="serial", line_type="Separate")
        return [tuple(_simpler(np.asarray(line)) for line in maker.lines(level)) for level in levels]

    drawn = lines(found.clearance_mm, tuple(level - _BELOW_ROUND_MM for level in LEVELS_MM))
    return Contours(tuple(zip(LEVELS_MM, drawn, strict=True)), lines(found.slack_mm, (0.0,))[0])


def paint_contours(painter: QPainter, contours: Contours, across: Place, upwards: Place, theme: Theme) -> None:
    """Draw the contours within the places of the axes."""
    to_picture = QTransform(
        across.pixels_per_deg, 0.0, 0.0, upwards.pixels_per_deg, across.pixel(0.0), upwards.pixel(0.0)
    )
    painter.setBrush(Qt.BrushStyle.NoBrush)
    painter.setPen(QPen(QColor(_INK), 0.9))
    for _, lines in contours.levels:
        painter.drawPath(to_picture.map(_joined(lines)))
    bold = QPen(theme.colour("required"), 1.4)
    bold.setJoinStyle(Qt.PenJoinStyle.RoundJoin)
    cased_stroke(painter, to_picture.map(_joined(contours.required)), dashed(bold, 4.0, 2.2), theme.colour("halo"), 1.8)


def _joined(lines: tuple[Array, ...]) -> QPainterPath:
    path = QPainterPath()
    for line in lines:
        path.addPolygon(polygon_of(line))
    return path


def _simpler(line: Array) -> Array:
    return np.asarray(shapely.get_coordinates(shapely.simplify(shapely.linestrings(line), _SIMPLER_DEG)))


def paint_contour_labels(painter: QPainter, contours: Contours, across: Place, upwards: Place, font: QFont) -> None:
    """Write on each contour that is long enough which clearance it is."""
    plot = QRectF(QPointF(across.start, upwards.stop), QPointF(across.stop, upwards.start))
    scale, origin = (across.pixels_per_deg, upwards.pixels_per_deg), (across.pixel(0.0), upwards.pixel(0.0))
    taken: list[QRectF] = []
    metrics = QFontMetricsF(font)
    for level, lines in contours.levels:
        text = f"{level:g} mm"
        size = (metrics.horizontalAdvance(text) + 4.0, metrics.height())
        for line in lines:
            found = _label_place(line * scale + origin, size, plot, taken)
            if found is None:
                continue
            centre, slope = found
            taken.append(_box(centre, slope, size))
            painter.save()
            painter.translate(centre)
            painter.rotate(slope)
            cased_text(painter, text, font, QColor(_INK), QColor(_HALO))
            painter.restore()


def _label_place(
    points: Array, size: tuple[float, float], plot: QRectF, taken: list[QRectF]
) -> tuple[QPointF, float] | None:
    """Return where, and how steeply, a label lies best on a line: straight, within the plot, off other labels."""
    steps = np.hypot(*np.diff(points, axis=0).T)
    along = np.concatenate([[0.0], np.cumsum(steps)])
    if along[-1] < 2.5 * size[0]:
        return None
    middles = np.linspace(0.12, 0.88, 16) * along[-1]
    at = middles[:, None] + np.array([-0.5, 0.0, 0.5]) * size[0]
    x, y = np.interp(at, along, points[:, 0]), np.interp(at, along, points[:, 1])
    chords = np.hypot(x[:, 2] - x[:, 0], y[:, 2] - y[:, 0])
    slopes = (np.degrees(np.arctan2(y[:, 2] - y[:, 0], x[:, 2] - x[:, 0])) + 90.0) % 180.0 - 90.0
    # A crooked place bends the text off its line, a steep one is hard to read.
    costs = 1.0 - chords / size[0] + np.abs(slopes) / 180.0 + 0.1 * np.abs(middles / along[-1] - 0.5)
    for place in np.argsort(costs):
        centre, slope = QPointF(float(x[place, 1]), float(y[place, 1])), float(slopes[place])
        box = _box(centre, slope, size)
        if plot.contains(box) and not any(box.intersects(other) for other in taken):
            return centre, slope
    return None


def _box(centre: QPointF, slope_deg: float, size: tuple[float, float]) -> QRectF:
    cos, sin = abs(math.cos(math.radians(slope_deg))), abs(math.sin(math.radians(slope_deg)))
    width, height = size[0] * cos + size[1] * sin, size[0] * sin + size[1] * cos
    return QRectF(centre.x() - width / 2.0, centre.y() - height / 2.0, width, height)
