"""What of the plane of angles a chart shows, where on the picture, and how zooming and panning change that. No Qt."""

from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

# The least that can be zoomed in to, deg.
LEAST_EXTENT_DEG: Final = 4.0
_STEPS_DEG: Final = (0.1, 0.2, 0.5, 1.0, 2.0, 5.0, 10.0, 15.0, 30.0, 45.0, 90.0, 180.0)


@dataclass(frozen=True)
class Window:
    """A part [low, high] of an axis that goes over [least, most]; deg, unwrapped."""

    least: float
    most: float
    low: float
    high: float

    @classmethod
    def whole(cls, least: float, most: float) -> "Window":
        """Return the whole of an axis; half a degree each way is added to one without extent."""
        if most <= least:
            least, most = least - 0.5, most + 0.5
        return cls(least, most, least, most)

    @property
    def extent(self) -> float:
        """How much is shown, deg."""
        return self.high - self.low

    @property
    def is_whole(self) -> bool:
        """Tell whether nothing of the axis is left out."""
        return (self.low, self.high) == (self.least, self.most)

    def zoomed(self, about: float, factor: float) -> "Window":
        """Return `factor` times as much (less than 1: closer), with the angle `about` at the same place."""
        room = self.most - self.least
        extent = min(max(self.extent * factor, min(LEAST_EXTENT_DEG, room)), room)
        share = (about - self.low) / self.extent
        return self._from(about - share * extent, extent)

    def shifted(self, by_deg: float) -> "Window":
        """Return as much of the axis, further along, no further than it goes."""
        return self._from(self.low + by_deg, self.extent)

    def over(self, least: float, most: float) -> "Window":
        """Return the window on an axis that goes over another range: the whole of it, or as much as is left."""
        whole = Window.whole(least, most)
        if self.is_whole or self.high <= whole.least or self.low >= whole.most:
            return whole
        extent = min(self.extent, whole.extent)
        return Window(whole.least, whole.most, self.low, self.low + extent).shifted(0.0)

    def _from(self, low: float, extent: float) -> "Window":
        if extent >= self.most - self.least:
            return Window(self.least, self.most, self.least, self.most)
        low = min(max(low, self.least), self.most - extent)
        return Window(self.least, self.most, low, low + extent)


@dataclass(frozen=True)
class Place:
    """Where a window of angles lies on the picture: from pixel `start` to pixel `stop` (less than `start`: upwards)."""

    window: Window
    start: float
    stop: float

    def pixel(self, angle_deg: float) -> float:
        """Return where an angle is drawn."""
        return self.start + (angle_deg - self.window.low) * self.pixels_per_deg

    def angle_deg(self, pixel: float) -> float:
        """Return which angle is drawn there."""
        return self.window.low + (pixel - self.start) / self.pixels_per_deg

    @property
    def pixels_per_deg(self) -> float:
        """How far one degree reaches; negative upwards."""
        return (self.stop - self.start) / self.window.extent


def ticks_deg(low_deg: float, high_deg: float, most: int) -> tuple[Array, float]:
    """Return round angles within a range, at most so many, and their step."""
    extent = high_deg - low_deg
    step = next((step for step in _STEPS_DEG if extent / step < max(most, 2)), _STEPS_DEG[-1])
    first, last = np.ceil(low_deg / step - 1e-9), np.floor(high_deg / step + 1e-9)
    return np.arange(first, last + 1.0) * step, step


def borders_of(angles_deg: Array) -> Array:
    """Return the borders, (n + 1,), of the cells around n grid angles; the outer ones end with the grid."""
    if len(angles_deg) == 1:
        return np.array([angles_deg[0] - 0.5, angles_deg[0] + 0.5])
    middles = (angles_deg[1:] + angles_deg[:-1]) / 2.0
    return np.concatenate([angles_deg[:1], middles, angles_deg[-1:]])


def cells_at(angles_deg: Array, wanted_deg: Array) -> NDArray[np.intp]:
    """Return, for each wanted angle, the place of the grid angle in whose cell it lies; -1 beyond the grid."""
    borders = borders_of(angles_deg)
    found = np.searchsorted(borders, wanted_deg, side="right") - 1
    found[wanted_deg == borders[-1]] = len(angles_deg) - 1
    found[(wanted_deg < borders[0]) | (wanted_deg > borders[-1])] = -1
    return found
