"""The colours that stand for a clearance, the same wherever one is shown.

A dark blue for nothing left, over teal and a dull green to a pale straw for plenty: an own ramp, of equal steps in
CIELAB, its lightness rising all the way, so that it survives a grey print and eyes that cannot tell red from green.
It says how far apart things are, and nothing about whether that is enough.
"""

import bisect
import itertools
import math
from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

from app.colours import relative_luminance, rgb

Array = NDArray[np.float64]

# Close together where decisions are made. Beyond the last one nothing changes any more.
EDGES_MM: Final = (0.0, 10.0, 20.0, 30.0, 40.0, 50.0, 75.0, 100.0, 150.0, 200.0, 300.0)
EDGE_COLOURS: Final = (
    "#09245c",
    "#134079",
    "#23598a",
    "#387093",
    "#528697",
    "#6f9998",
    "#8dab96",
    "#abbb92",
    "#cac98d",
    "#f0dd94",
    "#fff1bb",
)


@dataclass(frozen=True)
class Band:
    """Clearances of at least `low_mm`, below `high_mm` (infinite in the last band); `colour` is "#rrggbb"."""

    low_mm: float
    high_mm: float
    colour: str

    @property
    def label(self) -> str:
        """The range in words."""
        if math.isinf(self.high_mm):
            return f"{self.low_mm:g} and more"
        return f"{self.low_mm:g} to {self.high_mm:g}"

    @property
    def is_dark(self) -> bool:
        """Tell whether light letters read better on it (relative luminance of WCAG 2.1)."""
        return relative_luminance(self.colour) < 0.18


def places(clearance_mm: Array) -> Array:
    """Return where clearances stand on the ramp, 0 to 1, any shape; NaN stays NaN. Edges are evenly apart."""
    steps = np.linspace(0.0, 1.0, len(EDGES_MM))
    placed = np.interp(np.nan_to_num(clearance_mm, nan=0.0), EDGES_MM, steps)
    return np.where(np.isnan(clearance_mm), np.nan, placed)


def band_of(clearance_mm: float) -> int:
    """Return the index in `BANDS` of a clearance that is a number of at least 0."""
    return min(bisect.bisect_right(EDGES_MM, clearance_mm) - 1, len(BANDS) - 1)


def _between(first: str, second: str) -> str:
    mixed = (round(255.0 * (a + b) / 2.0) for a, b in zip(rgb(first), rgb(second), strict=True))
    return "#" + "".join(f"{channel:02x}" for channel in mixed)


def _bands() -> tuple[Band, ...]:
    highs = (*EDGES_MM[1:-1], math.inf)
    colours = itertools.pairwise(EDGE_COLOURS)
    return tuple(
        Band(low, high, _between(*pair)) for low, high, pair in zip(EDGES_MM[:-1], highs, colours, strict=True)
    )


BANDS: Final = _bands()
