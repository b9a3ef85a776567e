"""A part's surface as points close enough together to be shaded: its pieces' facets, cut until no edge is long."""

from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from geometry.errors import GeometryError
from geometry.pieces import ConvexPiece
from geometry.scene import ScenePart

Array = NDArray[np.float64]
Indices = NDArray[np.int64]
Flags = NDArray[np.bool_]

# Deeper than this inside another piece a point is not on the part's surface, mm.
INSIDE_MM = 0.01
# Edges of a triangle below this share of its longest one wait until that is halved.
LONG_SHARE = 0.7
# Neighbouring triangles lie in one plane when their unit normals' product is above this (less than 0.01 deg apart).
COPLANAR = 1.0 - 1e-8


def display_mesh(part: ScenePart, max_edge_mm: float) -> tuple[Array, Indices]:
    """Return the surface of a part as points (n, 3), mm, in the system of its motion, and triangles (m, 3).

    The facets of all pieces with no edge longer than `max_edge_mm`; a triangle that lies inside another piece of the
    part is left out. Triangles are counter-clockwise seen from outside. Not to be written to: what does not move is
    remembered. GeometryError for an edge that is not above 0.
    """
    if not 0.0 < max_edge_mm < np.inf:
        raise GeometryError(f"max_edge_mm = {max_edge_mm:g}; allowed: above 0")
    return _mesh_of(part.pieces, max_edge_mm)


@lru_cache(maxsize=128)
def _mesh_of(pieces: tuple[ConvexPiece, ...], max_edge_mm: float) -> tuple[Array, Indices]:
    """Return the mesh of pieces; remembered, since most parts stay as they are while others move."""
    points: list[Array] = []
    triangles: list[Indices] = []
    start = 0
    for k, piece in enumerate(pieces):
        corners, faces = subdivided(piece.vertices, _fair_faces(piece), max_edge_mm)
        faces = faces[~_hidden(corners, faces, pieces[:k] + pieces[k + 1 :])]
        used, renumbered = np.unique(faces, return_inverse=True)
        points.append(corners[used])
        triangles.append(renumbered.reshape(-1, 3).astype(np.int64) + start)
        start += len(used)
    mesh = np.concatenate([np.empty((0, 3)), *points]), np.concatenate([np.empty((0, 3), np.int64), *triangles])
    for array in mesh:
        array.flags.writeable = False
    return mesh


def subdivided(points: Array, triangles: Indices, max_edge_mm: float) -> tuple[Array, Indices]:
    """Return points (n, 3) and triangles (m, 3) of the same surface without an edge longer than `max_edge_mm`."""
    while True:
        edges, of_triangle = edges_of(triangles)
        long = longest_of(lengths_mm(points, edges), of_triangle, max_edge_mm)
        if not long.any():
            return points, triangles
        points, triangles = halved(points, triangles, edges[long], of_triangle, long)


def longest_of(length_mm: Array, of_triangle: Indices, allowed_mm: Array | float) -> Flags:
    """Tell of each edge, (e,), whether to halve it now: longer than allowed, and not far below a triangle's longest.

    Long triangles thus lose their length before their width, and end up fair.
    """
    over = length_mm > allowed_mm
    of_corner = np.where(over, length_mm, 0.0)[of_triangle]
    longest = np.zeros(len(length_mm))
    np.maximum.at(longest, of_triangle, of_corner.max(axis=1, keepdims=True))
    flags: Flags = over & (length_mm > LONG_SHARE * longest)
    return flags


def edges_of(triangles: Indices) -> tuple[Indices, Indices]:
    """Return the edges, (e, 2), each once, and those of each triangle, (m, 3), from each of its corners to the next."""
    ends = np.sort(np.stack([triangles, np.roll(triangles, -1, axis=1)], axis=-1), axis=-1).reshape(-1, 2)
    # As one number each they are sorted many times faster.
    size = int(triangles.max(initial=0)) + 1
    numbers, of_triangle = np.unique(ends[:, 0] * size + ends[:, 1], return_inverse=True)
    return np.stack([numbers // size, numbers % size], axis=1), of_triangle.reshape(-1, 3)


def lengths_mm(points: Array, edges: Indices) -> Array:
    """Return the lengths of edges, (e,), mm."""
    lengths: Array = np.linalg.norm(points[edges[:, 0]] - points[edges[:, 1]], axis=1)
    return lengths


def halved(
    points: Array, triangles: Indices, long_edges: Indices, of_triangle: Indices, long: Flags
) -> tuple[Array, Indices]:
    """Return points and triangles with the edges that `long` (e,) marks halved; their middles come last, in order.

    Each is halved for all its triangles at once, so that no crack opens. `long_edges` are the marked ones' ends,
    `of_triangle` as `edges_of` gives it.
    """
    middle = np.full(len(long), -1)
    middle[long] = len(points) + np.arange(len(long_edges))
    points = np.concatenate([points, points[long_edges].mean(axis=1)])
    return points, _cut(points, triangles, middle[of_triangle])


def _cut(points: Array, triangles: Indices, middle: Indices) -> Indices:
    """Return the triangles, each cut by the middles of its edges (m, 3), -1 for an edge that stays."""
    halved = middle >= 0
    count = halved.sum(axis=1)
    cut = [triangles[count == 0]]
    # Turned so that an only halved edge comes first, and an only whole one last.
    turn = np.where(count == 1, halved.argmax(axis=1), np.where(count == 2, halved.argmin(axis=1) + 1, 0))
    order = (np.arange(3) + turn[:, None]) % 3
    a, b, c = np.take_along_axis(triangles, order, axis=1).T
    ab, bc, ca = np.take_along_axis(middle, order, axis=1).T

    one = count == 1
    cut += [np.stack([a, ab, c], axis=1)[one], np.stack([ab, b, c], axis=1)[one]]
    # Of the quadrangle that two middles leave, the shorter diagonal.
    two = count == 2
    cut.append(np.stack([ab, b, bc], axis=1)[two])
    from_a = np.linalg.norm(points[a] - points[bc], axis=1) < np.linalg.norm(points[c] - points[ab], axis=1)
    cut += [np.stack([a, ab, bc], axis=1)[two & from_a], np.stack([a, bc, c], axis=1)[two & from_a]]
    cut += [np.stack([ab, bc, c], axis=1)[two & ~from_a], np.stack([a, ab, c], axis=1)[two & ~from_a]]
    three = count == 3
    for corners in ((a, ab, ca), (ab, b, bc), (ca, bc, c), (ab, bc, ca)):
        cut.append(np.stack(corners, axis=1)[three])
    return np.concatenate(cut).astype(np.int64)


def _fair_faces(piece: ConvexPiece) -> Indices:
    """Return a piece's triangles, (m, 3), those of its flat facets laid out anew.

    A hull's are fans whose long thin triangles would be cut into far more than the surface needs.
    """
    edges, of_triangle = edges_of(piece.faces)
    normal = _unit_normals(piece.vertices, piece.faces)
    beside = _beside(of_triangle, len(edges))
    flat = np.einsum("ij,ij->i", normal[beside[:, 0]], normal[beside[:, 1]]) > COPLANAR
    facet = _components(len(piece.faces), beside[flat])
    sizes = np.bincount(facet)
    large = np.flatnonzero(sizes > 2)
    laid = [piece.faces[sizes[facet] <= 2]]
    for one in large:
        triangles = piece.faces[facet == one]
        loop = _loop(triangles)
        laid.append(triangles if loop is None else _paired(loop))
    return np.concatenate(laid).astype(np.int64)


def _beside(of_triangle: Indices, edges: int) -> Indices:
    """Return the two triangles of each edge, (edges, 2), of a closed surface."""
    order = np.argsort(of_triangle.ravel(), kind="stable")
    beside: Indices = (order // 3).reshape(edges, 2)
    return beside


def _components(count: int, joined: Indices) -> Indices:
    """Return the number of the connected group of each of `count` things of which `joined` (n, 2) are pairs."""
    # SciPy takes long to import; by then the hulls have done so.
    from scipy.sparse import coo_array  # noqa: PLC0415
    from scipy.sparse.csgraph import connected_components  # noqa: PLC0415

    graph = coo_array((np.ones(len(joined)), (joined[:, 0], joined[:, 1])), shape=(count, count))
    groups: Indices = connected_components(graph, directed=False)[1]
    return groups


def _loop(triangles: Indices) -> list[int] | None:
    """Return the corners around a facet, counter-clockwise; None if its border is not one plain loop."""
    ways = {(int(t[k]), int(t[(k + 1) % 3])) for t in triangles for k in range(3)}
    border = {start: end for start, end in ways if (end, start) not in ways}
    if len(border) != len(triangles) + 2:
        return None
    loop = [next(iter(border))]
    while border[loop[-1]] != loop[0]:
        loop.append(border[loop[-1]])
        if len(loop) > len(border):
            return None
    return loop if len(loop) == len(border) else None


def _paired(loop: list[int]) -> Indices:
    """Return the triangles of a convex polygon: every second corner cut off, again and again."""
    triangles = []
    while len(loop) > 3:
        triangles += [(loop[k], loop[k + 1], loop[(k + 2) % len(loop)]) for k in range(0, len(loop) - 1, 2)]
        loop = loop[::2]
    if len(loop) == 3:
        triangles.append((loop[0], loop[1], loop[2]))
    return np.array(triangles)


def _unit_normals(points: Array, triangles: Indices) -> Array:
    """Return the unit normals of triangles, (m, 3); 0 for one without area."""
    corner = points[triangles]
    normal = np.cross(corner[:, 1] - corner[:, 0], corner[:, 2] - corner[:, 0])
    length = np.linalg.norm(normal, axis=1, keepdims=True)
    unit: Array = normal / np.where(length > 0.0, length, 1.0)
    return unit


def _hidden(points: Array, triangles: Indices, others: tuple[ConvexPiece, ...]) -> Flags:
    """Tell of each triangle whether it lies inside one of the other pieces."""
    hidden = np.zeros(len(triangles), dtype=bool)
    low, high = points.min(axis=0), points.max(axis=0)
    for other in others:
        if (other.vertices.min(axis=0) > high).any() or (other.vertices.max(axis=0) < low).any():
            continue
        hidden |= _inside(points, other)[triangles].all(axis=1)
    return hidden


def _inside(points: Array, piece: ConvexPiece) -> Flags:
    normal = _unit_normals(piece.vertices, piece.faces)
    # A triangle without area has no outside of its own; its neighbours bound the piece.
    real = normal.any(axis=1)
    normal, corner = normal[real], piece.vertices[piece.faces[real, 0]]
    above = points @ normal.T - np.einsum("ij,ij->i", normal, corner)
    inside: Flags = (above < -INSIDE_MM).all(axis=1)
    return inside
