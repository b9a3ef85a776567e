"""Distance of two convex polytopes by trying every pair of features, and their overlap by every separating axis.

No iteration, hence nothing that can fail to converge: the slowest and plainest way, for small pieces. Two disjoint
polytopes are nearest between a corner and a face or between two edges; two that overlap are parted along a face's
normal or a direction square to an edge of each (the separating axis theorem), the shortest shift being the least
overlap along those.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import ConvexHull

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Features:
    """Corners (n, 3), triangles (m, 3, 3), edges (k, 2, 3) and face normals (m, 3) of a convex hull, mm."""

    corners: Array
    triangles: Array
    edges: Array
    normals: Array


def features_of(points: Array) -> Features:
    """Return the features of the convex hull of points, (n, 3)."""
    hull = ConvexHull(points)
    pairs = np.unique(np.sort(hull.simplices[:, [[0, 1], [1, 2], [2, 0]]].reshape(-1, 2), axis=1), axis=0)
    return Features(points[hull.vertices], points[hull.simplices], points[pairs], hull.equations[:, :3])


def separation_mm(first: Array, second: Array) -> float:
    """Return the distance of the hulls of two point sets, (n, 3), mm; where they overlap, minus the depth."""
    a, b = features_of(first), features_of(second)
    gap = _greatest_gap(a, b)
    if gap <= 0.0:
        return gap
    return min(
        _corner_to_face(a.corners, b.triangles),
        _corner_to_face(b.corners, a.triangles),
        _edge_to_edge(a.edges, b.edges),
    )


def distance_to_hull_mm(point: Array, hull_points: Array) -> float:
    """Return the distance of a point, (3,), to the hull of points, (n, 3); 0 inside."""
    hull = features_of(hull_points)
    if np.all(ConvexHull(hull_points).equations @ np.append(point, 1.0) <= 0.0):
        return 0.0
    to_face = _corner_to_face(point[None], hull.triangles)
    return min(to_face, _edge_to_edge(np.stack([point, point])[None], hull.edges))


def _greatest_gap(a: Features, b: Features) -> float:
    """Return the greatest gap of the shadows on any separating axis; negative where the bodies overlap."""
    along_a, along_b = a.edges[:, 1] - a.edges[:, 0], b.edges[:, 1] - b.edges[:, 0]
    crosses = np.cross(along_a[:, None], along_b[None]).reshape(-1, 3)
    sizes = np.linalg.norm(crosses, axis=1)
    longest = np.outer(np.linalg.norm(along_a, axis=1), np.linalg.norm(along_b, axis=1)).ravel()
    keep = sizes > 1e-9 * longest
    axes = np.concatenate([a.normals, b.normals, crosses[keep] / sizes[keep, None]])
    shadow_a, shadow_b = axes @ a.corners.T, axes @ b.corners.T
    gaps = np.maximum(shadow_a.min(axis=1) - shadow_b.max(axis=1), shadow_b.min(axis=1) - shadow_a.max(axis=1))
    return float(gaps.max())


def _corner_to_face(corners: Array, triangles: Array) -> float:
    """Return the least distance of corners to triangles that they stand above; infinite if none does."""
    a, b, c = triangles[None, :, 0], triangles[None, :, 1], triangles[None, :, 2]
    p = corners[:, None]
    normal = np.cross(b - a, c - a)
    size = np.linalg.norm(normal, axis=-1)
    above = np.ones(np.broadcast_shapes(p.shape, a.shape)[:2], dtype=bool)
    for start, end in ((a, b), (b, c), (c, a)):
        above &= np.einsum("...i,...i", np.cross(end - start, p - start), normal) >= 0.0
    heights = np.abs(np.einsum("...i,...i", p - a, normal)) / np.where(size > 0.0, size, 1.0)
    return float(heights[above & (size > 0.0)].min(initial=np.inf))


def _edge_to_edge(first: Array, second: Array) -> float:
    """Return the least distance of any of the segments `first`, (n, 2, 3), to any of `second`, (m, 2, 3)."""
    p, q = first[:, None], second[None]
    u, v, w = p[..., 1, :] - p[..., 0, :], q[..., 1, :] - q[..., 0, :], p[..., 0, :] - q[..., 0, :]
    uu, uv, vv = (np.einsum("...i,...i", *both) for both in ((u, u), (u, v), (v, v)))
    uw, vw = np.einsum("...i,...i", u, w), np.einsum("...i,...i", v, w)
    square = uu * vv - uv * uv
    skew = square > 1e-14 * uu * vv
    safe = np.where(skew, square, 1.0)
    s, t = (uv * vw - vv * uw) / safe, (uu * vw - uv * uw) / safe
    within = skew & (s >= 0.0) & (s <= 1.0) & (t >= 0.0) & (t <= 1.0)
    between_lines = np.linalg.norm(w + s[..., None] * u - t[..., None] * v, axis=-1)
    least = float(between_lines[within].min(initial=np.inf))
    for end in (0, 1):
        least = min(least, _ends_to_edges(first[:, end], second), _ends_to_edges(second[:, end], first))
    return least


def _ends_to_edges(points: Array, segments: Array) -> float:
    start = segments[None, :, 0]
    along = segments[None, :, 1] - start
    lengths2 = np.einsum("...i,...i", along, along)
    reached = np.einsum("...i,...i", points[:, None] - start, along) / np.where(lengths2 > 0.0, lengths2, 1.0)
    nearest = start + np.clip(reached, 0.0, 1.0)[..., None] * along
    return float(np.linalg.norm(points[:, None] - nearest, axis=-1).min())
