"""How a body lies: from places along it, and heights above what it lies on, to DICOM patient axes."""

import math
from typing import Final

import numpy as np
from numpy.typing import NDArray

from geometry.body.outline import HalvedOutline
from geometry.frames import moved, rotation_x, transform

Array = NDArray[np.float64]

# Places along the body, as shares of the way from the chin (0) to the soles (1) of an adult. Our own, no source.
NECK: Final = 0.012
CLAVICLE: Final = 0.050
NOTCH: Final = 0.055
SHOULDER: Final = 0.080
AXILLA: Final = 0.140
CHEST: Final = 0.185
XIPHOID: Final = 0.225
FLANK: Final = 0.275
NAVEL: Final = 0.325
HIP: Final = 0.395
SYMPHYSIS: Final = 0.425
CROTCH: Final = 0.460
KNEE: Final = 0.690
CALF: Final = 0.775
ANKLE: Final = 0.955

# Small children have longer trunks: up to this much longer, shrinking to nothing at the taller stature (from memory:
# the sitting height of growth charts, about 0.61 of a stature of 800 mm and 0.52 of an adult's).
_LONGER_TRUNK: Final = 0.08
_LONGER_BELOW_MM: Final = (800.0, 1300.0)
# A section is widest at this share of its depth above what the body lies on; flat below, full above.
_WIDEST: Final = 0.44
_FLAT: Final = 3.0
_FULL: Final = 2.3


class Lying:
    """Places a body that lies on its back or front on a plane, its upper part, if wanted, on a slope.

    `thickest_mm`: how thick trunk and hips are at most. Attributes: `prone`; `soles`, z in mm; `slope`, radians;
    `T_raised`, shape (4, 4), from the body lying flat to the slope.
    """

    def __init__(
        self, stature_mm: float, head_height_mm: float, thickest_mm: float, slope_deg: float, *, prone: bool
    ) -> None:
        self.prone = prone
        self.soles = -stature_mm
        self._chin = -head_height_mm
        self._thickest = thickest_mm
        young = np.interp(stature_mm, _LONGER_BELOW_MM, (_LONGER_TRUNK, 0.0))
        self._crotch = CROTCH * (1.0 + float(young))
        self.slope = math.radians(slope_deg)
        turn = rotation_x(slope_deg)
        # The line where the hips touch the plane.
        pivot = np.array([0.0, self.y(0.0), self.along(HIP)])
        self.T_raised = transform(turn, pivot - turn @ pivot)

    def along(self, share: float) -> float:
        """Return z, mm, of a place along the body, a share of the way from chin to soles."""
        upper = share * self._crotch / CROTCH
        lower = 1.0 - (1.0 - share) * (1.0 - self._crotch) / (1.0 - CROTCH)
        return self._chin + (upper if share <= CROTCH else lower) * (self.soles - self._chin)

    def y(self, height: float) -> float:
        """Return y, mm, of a height above the plane that the body lies on."""
        return height - self._thickest if self.prone else -height

    def point(self, x: float, height: float, z: float) -> Array:
        """Return a point, (3,), mm, of the body lying flat."""
        return np.array([x, self.y(height), z])

    def direction(self, x: float, height: float, z: float) -> Array:
        """Return a direction, (3,), of the body lying flat."""
        return np.array([x, height if self.prone else -height, z])

    def on_slope(self, point: Array) -> Array:
        """Return where a point of the body lying flat comes to lie on a plane with its upper part sloped."""
        return moved(self.T_raised, point) if point[2] > self.along(HIP) else point

    def across(
        self, half_width: float, low: float, high: float, x: float = 0.0, flat: float = _FLAT, full: float = _FULL
    ) -> HalvedOutline:
        """Return an outline across the body, (x, y), from a low to a high height above the plane."""
        widest = _WIDEST * (high - low)
        flat_side, full_side = (widest, flat), (high - low - widest, full)
        below, above = (flat_side, full_side) if self.prone else (full_side, flat_side)
        centre = (x, self.y(low + widest))
        return HalvedOutline(half_width, below[0], above[0], centre, below[1], above[1])
