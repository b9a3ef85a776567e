"""A convex piece: vertices, faces and the edges that the kernel walks along."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from geometry.errors import GeometryError
from geometry.frames import moved

Array = NDArray[np.float64]
Indices = NDArray[np.int64]


@dataclass(frozen=True, eq=False)
class ConvexPiece:
    """A convex polytope.

    `vertices` (n, 3), mm. `faces` (m, 3): triangles, counter-clockwise seen from outside. `neighbour_counts` (n,) and
    `neighbours`: for each vertex in turn the vertices with which it shares an edge of a face.
    """

    vertices: Array
    faces: Indices
    neighbour_counts: Indices
    neighbours: Indices

    def placed(self, matrix: Array) -> "ConvexPiece":
        """Return the piece moved by a rigid homogeneous matrix, shape (4, 4)."""
        return ConvexPiece(moved(matrix, self.vertices), self.faces, self.neighbour_counts, self.neighbours)


def convex_piece(points: Array) -> ConvexPiece:
    """Return the convex hull of `points`, (n, 3), mm. GeometryError when they span no volume."""
    # SciPy takes 0.6 s to import; the command line's help should not wait for it.
    from scipy.spatial import ConvexHull, QhullError  # noqa: PLC0415

    try:
        hull = ConvexHull(points)
    except (QhullError, ValueError) as error:
        raise GeometryError(
            f"piece of {len(points)} points spans no volume; allowed: 4 or more points apart"
        ) from error
    renumbered = np.full(len(points), -1)
    renumbered[hull.vertices] = np.arange(len(hull.vertices))
    vertices = np.ascontiguousarray(points[hull.vertices])
    faces = renumbered[hull.simplices]
    corner = vertices[faces]
    normal = np.cross(corner[:, 1] - corner[:, 0], corner[:, 2] - corner[:, 0])
    inward = np.einsum("ij,ij->i", normal, hull.equations[:, :3]) < 0.0
    faces[inward] = faces[inward][:, ::-1]
    counts, neighbours = _edges(len(vertices), faces)
    return ConvexPiece(vertices, faces, counts, neighbours)


def _edges(size: int, faces: Indices) -> tuple[Indices, Indices]:
    joined = np.zeros((size, size), dtype=bool)
    for one, other in ((0, 1), (1, 2), (2, 0)):
        joined[faces[:, one], faces[:, other]] = True
        joined[faces[:, other], faces[:, one]] = True
    # Qhull lists a vertex on a flat face without a triangle of its own now and then. Joined to all, it cannot end a
    # walk wrongly.
    alone = ~joined.any(axis=1)
    joined[alone, :] = True
    joined[:, alone] = True
    np.fill_diagonal(joined, val=False)
    return joined.sum(axis=1).astype(np.int64), np.nonzero(joined)[1].astype(np.int64)
