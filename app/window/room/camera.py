"""From where the room is looked at, and where its points fall in the picture."""

import math
from dataclasses import dataclass, replace
from typing import Final

import numpy as np
from numpy.typing import NDArray

from geometry.frames import cos_sin

Array = NDArray[np.float64]

VIEW_ANGLE_DEG: Final = 26.0
NEAREST_MM: Final = 150.0
FURTHEST_MM: Final = 40_000.0


@dataclass(frozen=True, eq=False)
class Camera:
    """An eye that turns about a point of the fixed system, as one walks round a model on a table.

    `focus` (3,), mm, fixed system. At azimuth 0 the eye looks along +Y, from the foot end to the gantry; it rises
    towards +X. The elevation rises towards +Z. `roll_deg` turns the picture. `view_angle_deg` is that of the picture's
    height.
    """

    focus: Array
    distance_mm: float
    azimuth_deg: float
    elevation_deg: float
    roll_deg: float = 0.0
    view_angle_deg: float = VIEW_ANGLE_DEG

    def axes(self) -> Array:
        """Return the picture's right and up and the way back to the eye, unit vectors in rows, shape (3, 3)."""
        cos_a, sin_a = cos_sin(self.azimuth_deg)
        cos_e, sin_e = cos_sin(self.elevation_deg)
        cos_r, sin_r = cos_sin(self.roll_deg)
        back = np.array([sin_a * cos_e, -cos_a * cos_e, sin_e])
        right = np.array([cos_a, sin_a, 0.0])
        up = np.cross(back, right)
        return np.array([cos_r * right + sin_r * up, cos_r * up - sin_r * right, back])

    def eye(self) -> Array:
        """Return where the eye is, shape (3,), mm, fixed system."""
        position: Array = self.focus + self.distance_mm * self.axes()[2]
        return position

    def mm_per_pixel(self, height: int) -> float:
        """Return the length that a pixel spans at the focus, for a picture of `height` pixels."""
        return 2.0 * self.distance_mm * math.tan(math.radians(self.view_angle_deg) / 2.0) / height

    def projected(self, points: Array, width: float, height: float) -> Array:
        """Return pixels from the top left corner and the depth before the eye, mm: shape (..., 3).

        Points behind the eye, and those less than a millimetre before it, get NaN as pixels.
        """
        seen = (np.asarray(points, dtype=np.float64) - self.eye()) @ self.axes().T
        depth = -seen[..., 2]
        before = np.where(depth > 1.0, depth, np.nan)
        scale = height / 2.0 / math.tan(math.radians(self.view_angle_deg) / 2.0)
        x = width / 2.0 + scale * seen[..., 0] / before
        y = height / 2.0 - scale * seen[..., 1] / before
        return np.stack([x, y, depth], axis=-1)

    def ray(self, x: float, y: float, width: float, height: float) -> Array:
        """Return the unit direction, shape (3,), fixed system, in which the pixel lies from the eye."""
        tangent = math.tan(math.radians(self.view_angle_deg) / 2.0) * 2.0 / height
        right, up, back = self.axes()
        along = (x - width / 2.0) * tangent * right - (y - height / 2.0) * tangent * up - back
        direction: Array = along / np.linalg.norm(along)
        return direction

    def orbited(self, azimuth_deg: float, elevation_deg: float) -> "Camera":
        """Return the eye turned about the focus. A rolled picture comes upright by as much as it is turned."""
        plain = self._plain()
        settle = 2.0 * math.hypot(azimuth_deg, elevation_deg)
        roll = math.copysign(max(abs(plain.roll_deg) - settle, 0.0), plain.roll_deg)
        elevation = min(max(plain.elevation_deg + elevation_deg, -89.9), 90.0)
        return replace(plain, azimuth_deg=plain.azimuth_deg + azimuth_deg, elevation_deg=elevation, roll_deg=roll)

    def panned(self, right_px: float, down_px: float, height: int) -> "Camera":
        """Return the eye moved so that what is at the focus follows the pointer."""
        step = self.mm_per_pixel(height)
        right, up, _ = self.axes()
        return replace(self, focus=self.focus + step * (down_px * up - right_px * right))

    def zoomed(self, factor: float) -> "Camera":
        """Return the eye nearer by the factor, within limits."""
        return replace(self, distance_mm=min(max(self.distance_mm / factor, NEAREST_MM), FURTHEST_MM))

    def fitted(self, points: Array, width: int, height: int, margin: float = 0.06) -> "Camera":
        """Return the eye at the least distance from which all `points`, (n, 3), mm, lie within the margins."""
        if not len(points):
            return self
        tangent_up = math.tan(math.radians(self.view_angle_deg) / 2.0) * (1.0 - margin)
        tangent_right = tangent_up * width / max(height, 1)
        axes = self.axes()
        right, up, back = (points @ axes.T).T
        # Each point asks for distance >= back + |right - centre| / tangent; the best centre makes both sides equal.
        distances, centres = [], []
        for along, tangent in ((right, tangent_right), (up, tangent_up)):
            low, high = float((back - along / tangent).max()), float((back + along / tangent).max())
            distances.append((low + high) / 2.0)
            centres.append(tangent * (high - low) / 2.0)
        focus = centres[0] * axes[0] + centres[1] * axes[1]
        return replace(self, focus=focus, distance_mm=min(max(*distances, NEAREST_MM), FURTHEST_MM))

    def _plain(self) -> "Camera":
        """Return an eye that sees much the same, its elevation within a right angle, its view angle the usual."""
        elevation = (self.elevation_deg + 180.0) % 360.0 - 180.0
        azimuth, roll = self.azimuth_deg, self.roll_deg
        if abs(elevation) > 90.0:
            elevation = math.copysign(180.0, elevation) - elevation
            azimuth, roll = azimuth + 180.0, roll + 180.0
        tangents = math.tan(math.radians(self.view_angle_deg) / 2.0) / math.tan(math.radians(VIEW_ANGLE_DEG) / 2.0)
        roll = (roll + 180.0) % 360.0 - 180.0
        return Camera(self.focus, self.distance_mm * tangents, azimuth % 360.0, elevation, roll)
