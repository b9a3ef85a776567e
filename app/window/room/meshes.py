"""Convex pieces as a surface that is pleasant to look at: the same faces, less what lies inside the part.

Light is smoothed over facets that meet at a small angle; where they meet at a large one the edge stays crisp.
"""

import math
from collections import OrderedDict
from collections.abc import Sequence
from dataclasses import dataclass
from threading import Lock
from typing import Final

import numpy as np
from numpy.typing import NDArray

from app.window.room.rendering import DisplayMesh
from geometry.frames import transform
from geometry.pieces import ConvexPiece

Array = NDArray[np.float64]
Counts = NDArray[np.int64]

CRISP_DEG: Final = 40.0
SOFT_DEG: Final = 75.0
# Vertices of neighbouring pieces that are nearer than this are one, mm.
_SAME_MM: Final = 0.05
# A face is inside another piece if a point this far before it is, mm.
_BEFORE_MM: Final = 0.5
# Rigidly moved vertices come back within this, mm.
_RIGID_MM: Final = 1e-6


def display_mesh(
    pieces: Sequence[ConvexPiece], smooth_deg: float = CRISP_DEG, *, with_edges: bool = True
) -> DisplayMesh:
    """Return the surface of a part. Facets that meet at less than `smooth_deg` look like one curved surface."""
    vertices = np.concatenate([piece.vertices for piece in pieces])
    starts = np.cumsum([0, *(len(piece.vertices) for piece in pieces)])
    faces = np.concatenate([piece.faces + start for piece, start in zip(pieces, starts, strict=False)])
    owner = np.repeat(np.arange(len(pieces)), [len(piece.faces) for piece in pieces])
    corners = vertices[faces]
    doubled = np.cross(corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0])
    areas = np.linalg.norm(doubled, axis=1)
    normals = doubled / np.maximum(areas, 1e-12)[:, None]
    # A sliver has no direction of its own; it hides nothing and shows nothing.
    owner[areas <= 1e-3] = -1
    shown = (owner >= 0) & ~_inside_another(pieces, corners, normals, owner)
    faces, corners, normals = faces[shown], corners[shown], normals[shown]
    merged = _merged(vertices)[faces]
    smooth = _corner_normals(merged, corners, normals, smooth_deg)
    edges = _feature_edges(merged, corners, normals, smooth_deg) if with_edges else np.empty((0, 2, 3))
    points, shared_normals, triangles, _ = _shared(merged, corners, smooth)
    return DisplayMesh(points, shared_normals, triangles, edges.astype(np.float32))


def coloured_mesh(points: Array, triangles: NDArray[np.integer], colours: Array, smooth_deg: float) -> DisplayMesh:
    """Return a mesh with a colour at each point, (n, 3), crisp where its facets meet at `smooth_deg` or more."""
    corners = np.asarray(points, dtype=np.float64)[triangles]
    doubled = np.cross(corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0])
    normals = doubled / np.maximum(np.linalg.norm(doubled, axis=1), 1e-12)[:, None]
    merged = _merged(points)[triangles]
    places, turned, shared, first = _shared(merged, corners, _corner_normals(merged, corners, normals, smooth_deg))
    colour = np.ascontiguousarray(colours[np.asarray(triangles).ravel()[first]], dtype=np.float32)
    return DisplayMesh(places, turned, shared, np.empty((0, 2, 3), np.float32), colour)


def plain_mesh(points: Array, triangles: NDArray[np.integer]) -> DisplayMesh:
    """Return a mesh, smooth all over: `points` (n, 3) mm, `triangles` (m, 3)."""
    points = np.asarray(points, dtype=np.float64)
    corners = points[triangles]
    doubled = np.cross(corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0])
    vertex = triangles.ravel()
    sums = [np.bincount(vertex, np.repeat(doubled[:, axis], 3), minlength=len(points)) for axis in range(3)]
    normals = np.stack(sums, axis=-1)
    normals = normals / np.maximum(np.linalg.norm(normals, axis=1), 1e-12)[:, None]
    return DisplayMesh(
        points.astype(np.float32),
        normals.astype(np.float32),
        np.ascontiguousarray(triangles, dtype=np.int32),
        np.empty((0, 2, 3), np.float32),
    )


@dataclass(frozen=True, eq=False)
class _Made:
    """A surface with what it was made of: the faces' identity, the vertices, and four of them that span a volume."""

    faces: tuple[NDArray[np.int64], ...]
    vertices: Array
    chosen: NDArray[np.intp]
    inverse: Array
    mesh: DisplayMesh

    def placed(self, pieces: Sequence[ConvexPiece]) -> Array | None:
        """Return the rigid matrix, (4, 4), that moves the surface to `pieces`; None where none does."""
        vertices = np.concatenate([piece.vertices for piece in pieces])
        if vertices.shape != self.vertices.shape:
            return None
        origin = vertices[self.chosen[0]]
        rotation = (self.inverse @ (vertices[self.chosen[1:]] - origin)).T
        if np.abs(rotation @ rotation.T - np.eye(3)).max() > 1e-6:
            return None
        matrix = transform(rotation, origin - rotation @ self.vertices[self.chosen[0]])
        off = np.abs(self.vertices @ rotation.T + matrix[:3, 3] - vertices).max()
        return matrix if off <= _RIGID_MM else None


class MeshStore:
    """Surfaces of parts, made once and found again when the same pieces come back at another place.

    It may be asked from several threads: a worker can have surfaces made before the window needs them.
    """

    def __init__(self, capacity: int = 200) -> None:
        self._made: OrderedDict[tuple[int | float, ...], _Made] = OrderedDict()
        self._capacity = capacity
        self._lock = Lock()

    def mesh_of(
        self, pieces: Sequence[ConvexPiece], smooth_deg: float, *, with_edges: bool
    ) -> tuple[DisplayMesh, Array]:
        """Return a surface and the matrix, (4, 4), that brings it to where `pieces` are."""
        # A piece that is moved keeps its array of faces. The store holds on to the arrays, so no identity comes twice.
        key = (smooth_deg, with_edges, *(id(piece.faces) for piece in pieces))
        with self._lock:
            made = self._made.get(key)
            if made is not None:
                self._made.move_to_end(key)
        if made is not None:
            matrix = made.placed(pieces)
            if matrix is not None:
                return made.mesh, matrix
        mesh = display_mesh(pieces, smooth_deg, with_edges=with_edges)
        with self._lock:
            self._made[key] = _made(pieces, mesh)
            while len(self._made) > self._capacity:
                self._made.popitem(last=False)
        return mesh, np.eye(4)


def _made(pieces: Sequence[ConvexPiece], mesh: DisplayMesh) -> _Made:
    vertices = np.concatenate([piece.vertices for piece in pieces])
    first = vertices[0]
    away = vertices - first
    second = int(np.argmax((away**2).sum(axis=1)))
    third = int(np.argmax((np.cross(away, away[second]) ** 2).sum(axis=1)))
    fourth = int(np.argmax(np.abs(away @ np.cross(away[second], away[third]))))
    chosen = np.array([0, second, third, fourth])
    inverse = np.linalg.inv(away[chosen[1:]])
    return _Made(tuple(piece.faces for piece in pieces), vertices, chosen, inverse, mesh)


def _inside_another(pieces: Sequence[ConvexPiece], corners: Array, normals: Array, owner: Counts) -> NDArray[np.bool_]:
    """Tell which faces lie within another piece, where nobody sees them."""
    inside = np.zeros(len(owner), dtype=bool)
    lows = np.array([piece.vertices.min(axis=0) for piece in pieces]) - _SAME_MM
    highs = np.array([piece.vertices.max(axis=0) for piece in pieces]) + _SAME_MM
    face_low, face_high = corners.min(axis=1), corners.max(axis=1)
    for other in range(len(pieces)):
        within = (face_low >= lows[other]).all(axis=1) & (face_high <= highs[other]).all(axis=1)
        candidates = np.nonzero(within & (owner != other) & ~inside)[0]
        if not len(candidates):
            continue
        own = owner == other
        planes, anchors = normals[own], corners[own, 0]
        offsets = np.einsum("ij,ij->i", planes, anchors)
        ahead = corners[candidates].mean(axis=1) + _BEFORE_MM * normals[candidates]
        tested = np.concatenate([corners[candidates].reshape(-1, 3), ahead])
        beyond = (tested @ planes.T - offsets).max(axis=1)
        at_corners = (beyond[: 3 * len(candidates)].reshape(-1, 3) <= _SAME_MM).all(axis=1)
        inside[candidates] = at_corners & (beyond[3 * len(candidates) :] < 0.0)
    return inside


def _merged(vertices: Array) -> Counts:
    """Return for each vertex a number that it shares with those at the same place."""
    places = np.round((vertices - vertices.min(axis=0)) / _SAME_MM).astype(np.int64)
    packed = (places[:, 0] << 42) | (places[:, 1] << 21) | places[:, 2]
    return np.unique(packed, return_inverse=True)[1].astype(np.int64)


def _corner_normals(merged: Counts, corners: Array, normals: Array, smooth_deg: float) -> Array:
    """Return a normal for each corner of each face, (m, 3, 3): the mean over the faces that it is smooth with."""
    count = len(merged)
    vertex = merged.ravel()
    order = np.argsort(vertex, kind="stable")
    face_of = order // 3
    sizes = np.bincount(vertex)[vertex[order]]
    starts = np.searchsorted(vertex[order], vertex[order])
    # Every corner with every corner at the same place.
    one = np.repeat(np.arange(3 * count), sizes)
    step = np.arange(len(one)) - np.repeat(np.cumsum(sizes) - sizes, sizes)
    other = starts[one] + step
    near = np.einsum("ij,ij->i", normals[face_of[one]], normals[face_of[other]]) > math.cos(math.radians(smooth_deg))
    weights = _corner_angles(corners).ravel()[order]
    sums = np.empty((3 * count, 3))
    for axis in range(3):
        value = normals[face_of, axis] * weights
        sums[order, axis] = np.bincount(one[near], weights=value[other[near]], minlength=3 * count)
    sums /= np.maximum(np.linalg.norm(sums, axis=1), 1e-12)[:, None]
    return sums.reshape(count, 3, 3)


def _corner_angles(corners: Array) -> Array:
    angles = np.empty(corners.shape[:2])
    for corner in range(3):
        one = corners[:, (corner + 1) % 3] - corners[:, corner]
        other = corners[:, (corner + 2) % 3] - corners[:, corner]
        lengths = np.linalg.norm(one, axis=1) * np.linalg.norm(other, axis=1)
        angles[:, corner] = np.arccos(
            np.clip(np.einsum("ij,ij->i", one, other) / np.maximum(lengths, 1e-12), -1.0, 1.0)
        )
    return angles


def _feature_edges(merged: Counts, corners: Array, normals: Array, smooth_deg: float) -> Array:
    """Return the ends, (k, 2, 3), of the edges at which two faces meet at a large angle."""
    faces = np.arange(len(merged))
    ends = np.concatenate([merged[:, [0, 1]], merged[:, [1, 2]], merged[:, [2, 0]]])
    where = np.concatenate([corners[:, [0, 1]], corners[:, [1, 2]], corners[:, [2, 0]]])
    face = np.concatenate([faces, faces, faces])
    key = (ends.min(axis=1) << 32) | ends.max(axis=1)
    order = np.argsort(key, kind="stable")
    key, face, where = key[order], face[order], where[order]
    first = np.nonzero(np.r_[True, key[1:] != key[:-1]])[0]
    paired = first[np.diff(np.r_[first, len(key)]) == 2]
    cosine = np.einsum("ij,ij->i", normals[face[paired]], normals[face[paired + 1]])
    ends_of: Array = where[paired[cosine < math.cos(math.radians(smooth_deg))]]
    return ends_of


def _shared(
    merged: Counts, corners: Array, normals: Array
) -> tuple[NDArray[np.float32], NDArray[np.float32], NDArray[np.int32], NDArray[np.intp]]:
    """Return points, normals and triangles, with one point for corners of the same place and normal.

    Last comes the corner, counted through all faces, that each point is taken from.
    """
    turned = np.round((normals.reshape(-1, 3) + 1.0) * 500.0).astype(np.int64)
    packed = (merged.ravel() << 30) | (turned[:, 0] << 20) | (turned[:, 1] << 10) | turned[:, 2]
    _, first, numbers = np.unique(packed, return_index=True, return_inverse=True)
    points = corners.reshape(-1, 3)[first].astype(np.float32)
    triangles = numbers.reshape(-1, 3).astype(np.int32)
    return points, normals.reshape(-1, 3)[first].astype(np.float32), triangles, first
