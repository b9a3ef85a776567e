"""Convex pieces packed into the arrays that the kernel walks."""

from collections.abc import Sequence
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from geometry.errors import GeometryError
from geometry.kernel import WINDS, Hulls
from geometry.pieces import ConvexPiece

Array = NDArray[np.float64]
Indices = NDArray[np.int64]


def packed_hulls(pieces: Sequence[ConvexPiece], parts: Sequence[int], axis: int | None) -> Hulls:
    """Pack convex pieces of one body, in the body's system.

    `parts` gives each piece's part number. `axis` is the coordinate axis about which the body turns (1 for the
    gantry's Y, 2 for the couch's Z), None for a body that stands still. GeometryError for what is not a number.
    """
    vertices = np.concatenate([np.empty((0, 3)), *(piece.vertices for piece in pieces)])
    if not np.isfinite(vertices).all():
        raise GeometryError("a piece has a vertex that is not a number; allowed: finite coordinates")
    counts = np.array([len(piece.vertices) for piece in pieces], dtype=np.int64)
    first = np.concatenate([np.zeros(1, np.int64), np.cumsum(counts)])
    edge_counts = np.concatenate([np.zeros(1, np.int64), *(piece.neighbour_counts for piece in pieces)])
    neighbours = [piece.neighbours + start for piece, start in zip(pieces, first[:-1], strict=True)]
    # All pieces at once: this is on the way from a user's hand to the chart.
    starts = first[:-1]
    centres = np.add.reduceat(vertices, starts) / counts[:, None] if len(pieces) else np.empty((0, 3))
    from_centre = np.linalg.norm(vertices - np.repeat(centres, counts, axis=0), axis=1)
    return Hulls(
        vertices=vertices,
        first=first.astype(np.int32),
        edge_first=np.cumsum(edge_counts).astype(np.int32),
        neighbours=np.concatenate([np.empty(0, np.int64), *neighbours]).astype(np.int32),
        compass=_farthest(vertices, starts, counts).astype(np.int32),
        part=np.array(parts, dtype=np.int32),
        centres=np.ascontiguousarray(centres, dtype=np.float64),
        radii=_greatest(from_centre, starts),
        reach=_greatest(_from_axis(vertices, axis), starts),
    )


def _greatest(values: Array, starts: Indices) -> Array:
    """Return the greatest of the values of each piece, whose first ones are at `starts`."""
    return np.maximum.reduceat(values, starts) if len(starts) else np.empty(0)


def _farthest(vertices: Array, starts: Indices, counts: Indices) -> Indices:
    """Return, for each piece, the vertex farthest along the middle of each wind, (pieces, 6 * WINDS * WINDS)."""
    if not len(starts):
        return np.empty((0, 6 * WINDS * WINDS), np.int64)
    along = vertices @ _winds().T
    is_farthest = along == np.repeat(np.maximum.reduceat(along, starts), counts, axis=0)
    place = np.where(is_farthest, np.arange(len(vertices))[:, None], len(vertices))
    farthest: Indices = np.minimum.reduceat(place, starts)
    return farthest


@lru_cache(maxsize=1)
def _winds() -> Array:
    """Return the directions of the compass in the order of `kernel.wind`, (6 * WINDS * WINDS, 3), of any length."""
    across = (np.arange(WINDS) + 0.5) * 2.0 / WINDS - 1.0
    v, u = np.meshgrid(across, across, indexing="ij")
    sides = []
    for axis in range(3):
        for sign in (1.0, -1.0):
            side = np.empty((WINDS * WINDS, 3))
            side[:, axis] = sign
            side[:, (axis + 1) % 3] = u.ravel()
            side[:, (axis + 2) % 3] = v.ravel()
            sides.append(side)
    return np.concatenate(sides)


def _from_axis(vertices: Array, axis: int | None) -> Array:
    if axis is None:
        return np.zeros(len(vertices))
    distances: Array = np.linalg.norm(np.delete(vertices, axis, axis=1), axis=1)
    return distances
