"""A solid bounded by a closed surface of triangles. mm."""

from dataclasses import dataclass, field
from functools import cached_property
from typing import Final

import numpy as np
import shapely
from numpy.typing import NDArray

from geometry.decompose import Faceted
from geometry.errors import GeometryError
from geometry.imported.hulls import distance_beyond, hull_of, simpler_hull
from geometry.imported.mesh_cells import MeshCell, Surface, connected
from geometry.imported.sections import section_levels
from geometry.imported.subdivision import enclosing_pieces
from geometry.outlines import LARGEST_MM, checked_excess, number

Array = NDArray[np.float64]
Indices = NDArray[np.int64]
Flags = NDArray[np.bool_]

MOST_TRIANGLES: Final = 200_000
MOST_SURFACES: Final = 100
MOST_PIECES: Final = 2000
SMALLEST_VOLUME_MM3: Final = 1.0
# A surface is convex when its hull has the same volume but for rounding.
_SAME_VOLUME: Final = 1e-9


@dataclass(frozen=True, eq=False)
class ClosedMesh:
    """The solid inside closed surfaces of triangles: whatever one of them winds about.

    `vertices` (n, 3), mm; `faces` (m, 3), numbers of vertices, both sides of every edge turned the same way. Surfaces
    may touch, overlap and be turned inside out; hollows are filled. Cutting into pieces ends where none stands out
    more than `wanted_excess_mm`, or at `most_pieces`.
    """

    vertices: Array = field(repr=False)
    faces: Indices = field(repr=False)
    wanted_excess_mm: float = 5.0
    most_pieces: int = 200

    def __post_init__(self) -> None:
        vertices = _checked_vertices(self.vertices)
        faces = _checked_faces(self.faces, len(vertices))
        object.__setattr__(self, "vertices", vertices)
        object.__setattr__(self, "faces", faces)
        object.__setattr__(self, "wanted_excess_mm", checked_excess(self.wanted_excess_mm))
        object.__setattr__(self, "most_pieces", int(number("most_pieces", self.most_pieces, 1, MOST_PIECES)))
        volume_mm3 = sum(abs(_volume_mm3(surface)) for surface in self._surfaces)
        if volume_mm3 < SMALLEST_VOLUME_MM3:
            raise GeometryError(f"volume = {volume_mm3:g} mm³; allowed: {SMALLEST_VOLUME_MM3:g} mm³ or more")

    def faceted(self, max_excess_mm: float) -> Faceted:
        """Return convex pieces that contain the solid, and their excess over it, measured from above.

        How far they stand out depends on the solid's folds: it is stated, not kept. Pieces have fewer vertices than
        the hulls of what they hold, at the cost of `max_excess_mm` or a quarter of `wanted_excess_mm`, the greater.
        """
        tolerance_mm = max(checked_excess(max_excess_mm), self.wanted_excess_mm / 4.0)
        pieces: list[Array] = []
        excess_mm = 0.0
        folded = []
        for surface in self._surfaces:
            hull = hull_of(surface.vertices[np.unique(surface.faces)])
            if hull.volume_mm3 <= abs(_volume_mm3(surface)) * (1.0 + _SAME_VOLUME):
                simpler = simpler_hull(hull, tolerance_mm)
                if simpler is not hull:
                    excess_mm = max(excess_mm, distance_beyond(hull, simpler.vertices))
                pieces.append(simpler.vertices)
            else:
                folded.append(surface)
        if folded:
            cut = _cut(folded, self.wanted_excess_mm, self.most_pieces, tolerance_mm)
            pieces.extend(cut.pieces)
            excess_mm = max(excess_mm, cut.excess_mm)
        return Faceted(tuple(pieces), excess_mm)

    def contains(self, points: Array) -> Flags:
        """Tell which of `points`, shape (n, 3), mm, lie in the solid; on the surface, rounding decides."""
        inside = np.zeros(len(points), dtype=bool)
        for surface in self._surfaces:
            inside |= _windings(surface, np.asarray(points, dtype=np.float64)) != 0
        return inside

    @cached_property
    def _surfaces(self) -> tuple[Surface, ...]:
        return _connected_surfaces(self.vertices, self.faces)


def _cut(surfaces: list[Surface], wanted_mm: float, most: int, tolerance_mm: float) -> Faceted:
    """Return the pieces of surfaces that are not convex. Levels and strips stand along their longest extent."""
    vertices = surfaces[0].vertices
    extent = np.ptp(vertices[np.unique(np.vstack([surface.faces for surface in surfaces]))], axis=0)
    order = np.argsort(extent, kind="stable")
    turned = [Surface(vertices[:, order], surface.faces, surface.links) for surface in surfaces]
    cells = [MeshCell.whole(surface) for surface in turned]
    faceted = enclosing_pieces(cells, section_levels(turned), wanted_mm, most, tolerance_mm)
    return Faceted(tuple(piece[:, np.argsort(order)] for piece in faceted.pieces), faceted.excess_mm)


def _checked_vertices(values: Array) -> Array:
    vertices = np.array(values, dtype=np.float64)
    if vertices.ndim != 2 or vertices.shape[1] != 3 or len(vertices) < 4:
        raise GeometryError(f"vertices of shape {vertices.shape}; allowed: 4 or more of 3 coordinates")
    wrong = np.flatnonzero(~np.all(np.abs(vertices) <= LARGEST_MM, axis=1))
    if len(wrong):
        first, allowed = vertices[wrong[0]].tolist(), f"numbers from -{LARGEST_MM:g} to {LARGEST_MM:g}"
        raise GeometryError(f"vertex {wrong[0] + 1} = {first} mm; allowed: {allowed}")
    vertices.setflags(write=False)
    return vertices


def _checked_faces(values: Indices, vertex_count: int) -> Indices:
    """Return the faces without those that have no area by their very numbers; refuse what is not closed."""
    given = np.asarray(values)
    if given.ndim != 2 or given.shape[1] != 3 or given.dtype.kind not in "iu":
        raise GeometryError(f"faces of shape {given.shape}, {given.dtype}; allowed: whole numbers, 3 a triangle")
    if not 4 <= len(given) <= MOST_TRIANGLES:
        raise GeometryError(f"{len(given)} triangles; allowed: 4 to {MOST_TRIANGLES}")
    if given.min() < 0 or given.max() >= vertex_count:
        raise GeometryError(f"faces name vertices {given.min()} to {given.max()}; allowed: 0 to {vertex_count - 1}")
    faces: Indices = given.astype(np.int64)
    faces = faces[(faces[:, 0] != faces[:, 1]) & (faces[:, 1] != faces[:, 2]) & (faces[:, 2] != faces[:, 0])]
    start, end = faces.ravel(), np.roll(faces, -1, axis=1).ravel()
    edges, numbers = np.unique(np.sort(np.stack([start, end], axis=1), axis=1), axis=0, return_inverse=True)
    count = np.bincount(numbers.ravel(), minlength=len(edges))
    balance = np.bincount(numbers.ravel(), weights=np.where(start < end, 1.0, -1.0), minlength=len(edges))
    open_edges = int(np.count_nonzero(count % 2))
    if open_edges:
        raise GeometryError(f"a surface with {open_edges} open edges; allowed: a closed surface without holes")
    if np.any(balance):
        turned = int(np.count_nonzero(balance))
        raise GeometryError(f"{turned} edges with triangles turned opposite ways; allowed: all turned the same way")
    faces.setflags(write=False)
    return faces


def _connected_surfaces(vertices: Array, faces: Indices) -> tuple[Surface, ...]:
    """Return the connected parts of a closed surface."""
    edges = np.sort(np.vstack([faces[:, [0, 1]], faces[:, [1, 2]], faces[:, [2, 0]]]), axis=1)
    owners = np.tile(np.arange(len(faces)), 3)
    order = np.lexsort((edges[:, 1], edges[:, 0]))
    edges, owners = edges[order], owners[order]
    same = np.flatnonzero(np.all(edges[:-1] == edges[1:], axis=1))
    links = np.column_stack([edges[same], owners[same], owners[same + 1]])
    part = connected(len(faces), links[:, 2:])
    if part.max() >= MOST_SURFACES:
        raise GeometryError(f"{part.max() + 1} surfaces apart from each other; allowed: at most {MOST_SURFACES}")
    renumbered = np.empty(len(faces), dtype=np.int64)
    surfaces = []
    for number_ in range(part.max() + 1):
        mine = np.flatnonzero(part == number_)
        renumbered[mine] = np.arange(len(mine))
        own = links[part[links[:, 2]] == number_]
        surfaces.append(Surface(vertices, faces[mine], np.column_stack([own[:, :2], renumbered[own[:, 2:]]])))
    return tuple(surfaces)


def _volume_mm3(surface: Surface) -> float:
    """Return the volume that a surface encloses, negative where it is turned inside out."""
    corners = surface.vertices[surface.faces]
    first, second, third = np.moveaxis(corners - corners[0, 0], 1, 0)
    return float(np.einsum("ij,ij->", first, np.cross(second, third))) / 6.0


def _windings(surface: Surface, points: Array) -> Indices:
    """Return how often a surface winds about each point: the crossings of a ray upwards, each with its sign."""
    corners = surface.vertices[surface.faces]
    low, high = corners[:, :, :2].min(axis=1), corners[:, :, :2].max(axis=1)
    tree = shapely.STRtree(shapely.box(low[:, 0], low[:, 1], high[:, 0], high[:, 1]))
    point, face = tree.query(shapely.points(points[:, :2]))
    place, numbers = points[point], surface.faces[face]
    sides, areas = [], []
    for k in range(3):
        # From the lower number to the higher, so that a point beside an edge is on one side of it for both faces.
        first, second = numbers[:, k], numbers[:, (k + 1) % 3]
        start, end = surface.vertices[np.minimum(first, second)], surface.vertices[np.maximum(first, second)]
        area = (end[:, 0] - start[:, 0]) * (place[:, 1] - start[:, 1]) - (end[:, 1] - start[:, 1]) * (
            place[:, 0] - start[:, 0]
        )
        sides.append((area >= 0.0) == (first < second))
        areas.append(np.where(first < second, area, -area))
    total = sum(areas)
    hit = (np.all(sides, axis=0) | ~np.any(sides, axis=0)) & (total != 0.0)
    # The area opposite a corner is that corner's share.
    shares = np.stack([areas[1], areas[2], areas[0]], axis=1)[hit] / total[hit, None]
    heights = np.einsum("ij,ij->i", shares, corners[face[hit], :, 2])
    above = heights >= place[hit, 2]
    signs = np.sign(total[hit][above]).astype(np.int64)
    windings = np.zeros(len(points), dtype=np.int64)
    np.add.at(windings, point[hit][above], signs)
    return windings
