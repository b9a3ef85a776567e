"""A closed surface cut into cells, each with the hull of the surface in it. mm.

Why the hulls contain the solid. Let p be a point of the solid at height z, in a cell between two heights. The plane at
z cuts the surface in closed curves, and p is inside because some of these curves wind about it. A curve is connected,
so as long as it stays in the cell it belongs to one connected patch of the surface in the cell, and p lies in that
patch's hull. A cell may also be a strip between two planes along z. Where a curve that winds about p leaves the strip,
what it encloses of the strip is bounded by arcs of the curve and by straight lines on the strip's sides that end on
these arcs; so p lies in the hull of the arcs, all of which reach a side. Hence all patches that reach a side of the
strip count as one. Heights at which a plane only touches the surface follow as limits, since hulls are closed; for the
same reason a patch that lies flat at one height encloses nothing.

Orientation does not matter, surfaces may run through each other, and hollows inside are filled.
"""

from dataclasses import dataclass
from functools import cached_property
from typing import Final

import numpy as np
from numpy.typing import NDArray

from geometry.imported.hulls import Hull, hull_of
from geometry.imported.subdivision import Cell, cut_positions

Array = NDArray[np.float64]
Indices = NDArray[np.int64]

# Two triangles count as connected also where their shared edge misses the cell by this much.
_TOUCHING_MM: Final = 1e-6
# A cell of more triangles is cut across its longest extent without trying the other ways, which would take long.
_MANY: Final = 4000
_FLAT_MM: Final = 1e-9


@dataclass(frozen=True, eq=False)
class Surface:
    """A connected surface of triangles.

    `vertices` (n, 3), mm; `faces` (m, 3); `links` (k, 4): the two vertices of an edge and two faces that share it.
    """

    vertices: Array
    faces: Indices
    links: Indices


@dataclass(frozen=True, eq=False)
class MeshCell:
    """A patch of a surface between two heights and perhaps within a strip.

    `triangles` (k, 3, 3), mm: the patch, clipped; `owners` (k,): the faces that they are of; `links`: numbers of the
    surface's links between these faces. `low` and `high` (3,) bound the cell; of x and y only one may be bounded.
    """

    surface: Surface
    triangles: Array
    owners: Indices
    links: Indices
    low: Array
    high: Array

    @classmethod
    def whole(cls, surface: Surface) -> "MeshCell":
        """Return the cell that holds all of a surface."""
        every, unbounded = np.arange(len(surface.faces)), np.full(3, np.inf)
        triangles = surface.vertices[surface.faces]
        return cls(surface, triangles, every, np.arange(len(surface.links)), -unbounded, unbounded)

    @cached_property
    def hull(self) -> Hull:
        """The hull of the patch."""
        return hull_of(self.triangles.reshape(-1, 3))

    def cuts(self, through: Array) -> "list[list[Cell]]":
        """Return the cells on both sides of a plane near `through`, for each axis along which a cut is allowed."""
        strips = [axis for axis in (0, 1) if np.isfinite([self.low[axis], self.high[axis]]).any()] or [0, 1]
        allowed = [(axis, at) for axis, at in cut_positions(self.hull, through) if axis == 2 or axis in strips]
        if len(self.triangles) > _MANY:
            allowed = allowed[:1]
        return [[*self._side(axis, at, upper=False), *self._side(axis, at, upper=True)] for axis, at in allowed]

    def _side(self, axis: int, at: float, *, upper: bool) -> "list[MeshCell]":
        """Return the patches on one side of a plane across an axis, each as a cell."""
        low, high = self.low.copy(), self.high.copy()
        (low if upper else high)[axis] = at
        triangles, kept = _clipped(self.triangles, axis, at, upper=upper)
        owners, of_triangle = np.unique(self.owners[kept], return_inverse=True)
        ends = self.surface.links[self.links]
        near = _meets(self.surface.vertices[ends[:, :2]], low, high) & np.isin(ends[:, 2:], owners).all(axis=1)
        links, pairs = self.links[near], np.searchsorted(owners, ends[near, 2:])
        at_side = [(triangles[:, :, k] <= low[k]) | (triangles[:, :, k] >= high[k]) for k in (0, 1)]
        together = np.unique(of_triangle[np.any(at_side, axis=(0, 2))])
        patch = connected(len(owners), np.vstack([pairs, np.column_stack([together[:-1], together[1:]])]))
        cells = []
        for number in range(patch.max(initial=-1) + 1):
            mine, own_links = patch[of_triangle] == number, links[patch[pairs[:, 0]] == number]
            if np.ptp(triangles[mine, :, 2]) > _FLAT_MM:
                own_faces = owners[of_triangle[mine]]
                cells.append(MeshCell(self.surface, triangles[mine], own_faces, own_links, low, high))
        return cells


def _clipped(triangles: Array, axis: int, at: float, *, upper: bool) -> tuple[Array, Indices]:
    """Return what lies on one side of a plane across an axis, again as triangles, and which ones they are parts of."""
    heights = triangles[:, :, axis] - at if upper else at - triangles[:, :, axis]
    inside = heights >= 0.0
    count = inside.sum(axis=1)
    one, two = np.flatnonzero(count == 1), np.flatnonzero(count == 2)
    # The vertex that is alone on its side comes first.
    tips = _rolled(triangles[one], inside[one].argmax(axis=1))
    stumps = _rolled(triangles[two], inside[two].argmin(axis=1))
    tips[:, 1], tips[:, 2] = _crossing(tips[:, 0], tips[:, 1], axis, at), _crossing(tips[:, 0], tips[:, 2], axis, at)
    first, second = (_crossing(stumps[:, 0], stumps[:, k], axis, at) for k in (1, 2))
    halves = np.stack([first, stumps[:, 1], stumps[:, 2]], axis=1), np.stack([first, stumps[:, 2], second], axis=1)
    whole = np.flatnonzero(count == 3)
    return np.concatenate([triangles[whole], tips, *halves]), np.concatenate([whole, one, two, two])


def _rolled(triangles: Array, first: Indices) -> Array:
    """Return the triangles with the vertices of these numbers first, the others in any order."""
    order = (first[:, None] + np.arange(3)) % 3
    return np.take_along_axis(triangles, order[:, :, None], axis=1)


def _crossing(start: Array, end: Array, axis: int, at: float) -> Array:
    """Return where lines, ends of shape (n, 3), pass the plane across an axis."""
    part = (at - start[:, axis]) / (end[:, axis] - start[:, axis])
    crossing: Array = start + part[:, None] * (end - start)
    crossing[:, axis] = at
    return crossing


def _meets(edges: Array, low: Array, high: Array) -> NDArray[np.bool_]:
    """Tell which edges, shape (n, 2, 3), pass through a box or within rounding of it; in doubt they do."""
    start, along = edges[:, 0], edges[:, 1] - edges[:, 0]
    level = along == 0.0
    slope = np.where(level, 1.0, along)
    parts = np.sort([(low - _TOUCHING_MM - start) / slope, (high + _TOUCHING_MM - start) / slope], axis=0)
    beside = level & ((start < low - _TOUCHING_MM) | (start > high + _TOUCHING_MM))
    enters = np.where(level, 0.0, parts[0]).max(axis=1, initial=0.0)
    leaves = np.where(level, 1.0, parts[1]).min(axis=1, initial=1.0)
    meets: NDArray[np.bool_] = (enters <= leaves) & ~beside.any(axis=1)
    return meets


def connected(count: int, pairs: Indices) -> Indices:
    """Return the number of the connected part that each of `count` things belongs to, shape (count,), from 0.

    `pairs`, shape (n, 2), are the numbers of things that touch each other.
    """
    from scipy.sparse import coo_array  # noqa: PLC0415 - SciPy takes long to import
    from scipy.sparse.csgraph import connected_components  # noqa: PLC0415

    graph = coo_array((np.ones(len(pairs)), (pairs[:, 0], pairs[:, 1])), shape=(count, count))
    parts: Indices = connected_components(graph, directed=False)[1].astype(np.int64)
    return parts
