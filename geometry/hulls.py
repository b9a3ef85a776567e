"""Convex pieces packed into the arrays that the kernel walks."""

from collections.abc import Sequence
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from geometry.errors import GeometryError
from geometry.kernel import WINDS, Hulls
from geometry.pieces import ConvexPiece

Array = NDArray[np.float64]


def packed_hulls(pieces: Sequence[ConvexPiece], parts: Sequence[int], axis: int | None) -> Hulls:
    """Pack convex pieces of one body, in the body's system.

    `parts` gives each piece's part number. `axis` is the coordinate axis about which the body turns (1 for the
    gantry's Y, 2 for the couch's Z), None for a body that stands still. GeometryError for what is not a number.
    """
    if not all(np.isfinite(piece.vertices).all() for piece in pieces):
        raise GeometryError("a piece has a vertex that is not a number; allowed: finite coordinates")
    first = np.cumsum([0, *(len(piece.vertices) for piece in pieces)])
    edge_counts = np.concatenate([np.zeros(1, np.int64), *(piece.neighbour_counts for piece in pieces)])
    neighbours = [piece.neighbours + start for piece, start in zip(pieces, first[:-1], strict=True)]
    centres = [piece.vertices.mean(axis=0) for piece in pieces]
    radii = [
        np.linalg.norm(piece.vertices - centre, axis=1).max() for piece, centre in zip(pieces, centres, strict=True)
    ]
    return Hulls(
        vertices=np.concatenate([np.empty((0, 3)), *(piece.vertices for piece in pieces)]),
        first=first.astype(np.int32),
        edge_first=np.cumsum(edge_counts).astype(np.int32),
        neighbours=np.concatenate([np.empty(0, np.int64), *neighbours]).astype(np.int32),
        compass=np.array(
            [start + _farthest(piece.vertices) for piece, start in zip(pieces, first[:-1], strict=True)], dtype=np.int32
        ).reshape(-1, 6 * WINDS * WINDS),
        part=np.array(parts, dtype=np.int32),
        centres=np.array(centres, dtype=np.float64).reshape(-1, 3),
        radii=np.array(radii, dtype=np.float64),
        reach=np.array([_reach(piece.vertices, axis) for piece in pieces], dtype=np.float64),
    )


def _farthest(vertices: Array) -> NDArray[np.int64]:
    """Return the vertex that is farthest along the middle of each wind of the compass, (6 * WINDS * WINDS,)."""
    farthest: NDArray[np.int64] = np.argmax(_winds() @ vertices.T, axis=1)
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


def _reach(vertices: Array, axis: int | None) -> float:
    if axis is None:
        return 0.0
    across = np.delete(vertices, axis, axis=1)
    return float(np.linalg.norm(across, axis=1).max())
