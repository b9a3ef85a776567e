"""The beam as it is drawn: axis, field and the light cone between them, in the gantry system."""

from dataclasses import dataclass
from typing import Final

import numpy as np

from app.window.room.meshes import plain_mesh
from app.window.room.rendering import Array, DisplayMesh
from geometry.frames import R_gantry_collimator

_BEYOND_MM: Final = 450.0
_BEGINS_AT: Final = 0.98


@dataclass(frozen=True)
class Beam:
    """A field about the beam axis: half its sizes along the collimator's X and Y at the isocentre, mm.

    With `collimator_deg` None it stands at any angle, and the field is the circle that holds it.
    """

    visible: bool = False
    half_sizes_mm: tuple[float, float] = (100.0, 100.0)
    collimator_deg: float | None = 0.0

    def outline(self) -> Array:
        """Return the field's corners at the isocentre, (n, 3), mm, gantry system, in order."""
        half_x, half_y = self.half_sizes_mm
        if self.collimator_deg is None:
            angles = np.linspace(0.0, 2.0 * np.pi, 48, endpoint=False)
            radius = float(np.hypot(half_x, half_y))
            return radius * np.stack([np.cos(angles), np.sin(angles), np.zeros(48)], axis=-1)
        corners = np.array([[1, 1, 0], [-1, 1, 0], [-1, -1, 0], [1, -1, 0]]) * np.array([half_x, half_y, 0.0])
        turned: Array = corners @ R_gantry_collimator(self.collimator_deg).T
        return turned

    def axis(self, source_axis_mm: float) -> Array:
        """Return the ends of the axis, (2, 3), mm, gantry system: the source, and a point beyond the isocentre."""
        return np.array([[0.0, 0.0, source_axis_mm], [0.0, 0.0, -_BEYOND_MM]])

    def mesh(self, source_axis_mm: float) -> DisplayMesh:
        """Return the cone's sides, to be seen from within and without, and the axis and the cone's edges as lines."""
        outline = self.outline()
        source = np.array([0.0, 0.0, source_axis_mm])
        near = source + (1.0 - _BEGINS_AT) * (outline - source)
        far = source + (1.0 + _BEYOND_MM / source_axis_mm) * (outline - source)
        count = len(outline)
        here = np.arange(count)
        after = (here + 1) % count
        sides = np.concatenate(
            [np.stack([here, here + count, after + count], -1), np.stack([here, after + count, after], -1)]
        )
        both = np.concatenate([sides, sides[:, ::-1] + 2 * count])
        points = np.concatenate([near, far, near, far])
        surface = plain_mesh(points, both)
        lines = [self.axis(source_axis_mm)]
        lines += [np.stack([far[i], far[j]]) for i, j in zip(here, after, strict=True)]
        if self.collimator_deg is not None:
            lines += [np.stack([near[i], far[i]]) for i in here]
        return DisplayMesh(surface.points, surface.normals, surface.triangles, np.array(lines).astype(np.float32))
