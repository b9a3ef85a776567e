"""Which part lies under the pointer: the ray from the eye against the surfaces that are drawn."""

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np

from app.window.room.rendering import Array, DisplayMesh


@dataclass(frozen=True, eq=False)
class Hit:
    """The nearest surface that a ray meets, and where: (3,), mm, fixed system."""

    label: str
    point: Array
    distance_mm: float


def nearest_hit(
    candidates: Iterable[tuple[str, DisplayMesh, Array]], eye: Array, direction: Array, near_mm: float = 0.0
) -> Hit | None:
    """Return what a ray from `eye` (3,) along the unit `direction` (3,), fixed system, meets first beyond `near_mm`.

    Each candidate has a label, a mesh and the matrix, (4, 4), that brings the mesh to the fixed system. Only faces that
    look towards the eye count, as they do in the picture.
    """
    best: Hit | None = None
    for label, mesh, matrix in candidates:
        rotation = matrix[:3, :3]
        start, along = (eye - matrix[:3, 3]) @ rotation, direction @ rotation
        distance = _first_crossing(mesh, start, along, near_mm)
        if distance is not None and (best is None or distance < best.distance_mm):
            best = Hit(label, eye + distance * direction, distance)
    return best


def _first_crossing(mesh: DisplayMesh, start: Array, along: Array, near_mm: float) -> float | None:
    """Return the least distance beyond `near_mm` at which a ray enters the mesh, mm; None where it does not."""
    points = mesh.points.astype(np.float64)
    if not len(mesh.triangles) or not _passes_near(points, start, along):
        return None
    first, second, third = points[mesh.triangles].transpose(1, 0, 2)
    # Moeller and Trumbore, Fast, minimum storage ray/triangle intersection, 1997.
    one, other = second - first, third - first
    across = np.cross(along, other)
    determinant = np.einsum("ij,ij->i", one, across)
    facing = determinant > 1e-9
    inverse = 1.0 / np.where(facing, determinant, 1.0)
    to_start = start - first
    u = np.einsum("ij,ij->i", to_start, across) * inverse
    turned = np.cross(to_start, one)
    v = (turned @ along) * inverse
    distance = np.einsum("ij,ij->i", other, turned) * inverse
    met = facing & (u >= 0.0) & (v >= 0.0) & (u + v <= 1.0) & (distance > near_mm)
    return float(distance[met].min()) if met.any() else None


def _passes_near(points: Array, start: Array, along: Array) -> bool:
    """Tell whether the ray's line passes through the box about the points, a little widened."""
    low, high = points.min(axis=0) - 1.0, points.max(axis=0) + 1.0
    centre, half = (low + high) / 2.0, float(np.linalg.norm(high - low)) / 2.0
    away = centre - start
    return float(away @ away - (away @ along) ** 2) <= half * half
