"""Where everything of the clearance over time lies: plot, the lane of fields and moves, scales."""

import math
from dataclasses import dataclass
from typing import Final

import numpy as np
from PySide6.QtCore import QRectF, QSizeF
from PySide6.QtGui import QFont, QFontMetricsF

from app.plan.timeline_clearance import ClearanceOverTime
from app.window.chart.paint import font_of
from app.window.chart.view import Place, Window
from app.window.fields.time_columns import Columns, columns_of

EDGE: Final = 7.0
TICK: Final = 4.0
_GAP: Final = 5.0
_LEAST_TOP_MM: Final = 60.0
# Beyond this, or twice and a half of what is required, a clearance is as good as any other.
_MOST_TOP_MM: Final = 200.0
_STEP_MM: Final = 50.0


@dataclass(frozen=True, eq=False)
class TimeFrame:
    """Where everything lies, device-independent pixels; `across` places seconds, `upwards` mm."""

    curve: ClearanceOverTime
    size: QSizeF
    font: QFont
    plot: QRectF
    lane: QRectF
    across: Place
    upwards: Place
    columns: Columns

    @property
    def small(self) -> QFont:
        """The font of ticks and stretches."""
        return font_of(self.font, 0.88)

    def height_at(self, seconds: float) -> float | None:
        """Return how high the curve is drawn at a time, as a pixel; None where nothing is known."""
        column = int(np.argmin(np.abs(self.columns.seconds - seconds)))
        return self.pixel(float(self.columns.clearance_mm[column]))

    def pixel(self, clearance_mm: float) -> float | None:
        """Return how high a clearance is drawn; None for none."""
        if math.isnan(clearance_mm):
            return None
        return self.upwards.pixel(min(clearance_mm, self.upwards.window.high))


def time_frame(size: QSizeF, font: QFont, curve: ClearanceOverTime, window: Window, ratio: float) -> TimeFrame:
    """Return where everything of a curve lies in a widget of a size."""
    metrics = QFontMetricsF(font_of(font, 0.88))
    line = metrics.height()
    left = EDGE + line + metrics.horizontalAdvance("≥ 200") + TICK
    top = EDGE + QFontMetricsF(font).height() + _GAP
    bottom = line + TICK + 2.0 * _GAP + line + 4.0
    plot = QRectF(
        round(left), round(top), max(size.width() - left - EDGE, 40.0), max(size.height() - top - bottom, 24.0)
    )
    lane = QRectF(plot.left(), plot.bottom() + _GAP, plot.width(), line + 4.0)
    most = _top_mm(curve)
    columns = columns_of(curve, window.low, window.high, max(round(plot.width() * ratio), 2))
    return TimeFrame(
        curve,
        size,
        font,
        plot,
        lane,
        Place(window, plot.left(), plot.right()),
        Place(Window(0.0, most, 0.0, most), plot.bottom(), plot.top()),
        columns,
    )


def _top_mm(curve: ClearanceOverTime) -> float:
    required = curve.required_mm[np.isfinite(curve.required_mm)]
    needed = 2.5 * float(required.max(initial=0.0))
    known = curve.clearance_mm[np.isfinite(curve.clearance_mm)]
    most = min(1.08 * float(known.max(initial=0.0)), max(_MOST_TOP_MM, needed))
    return math.ceil(max(_LEAST_TOP_MM, 1.2 * needed / 2.5, most) / _STEP_MM) * _STEP_MM
