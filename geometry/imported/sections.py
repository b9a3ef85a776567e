"""Plane sections of closed surfaces, as levels to measure excess by. mm."""

from collections.abc import Sequence
from itertools import pairwise
from typing import Final

import numpy as np
import shapely
from numpy.typing import NDArray

from geometry.imported.levels import Level
from geometry.imported.mesh_cells import Surface

Array = NDArray[np.float64]
Indices = NDArray[np.int64]

_LEVELS: Final = 700
_FINEST_MM: Final = 1.0


def section_levels(surfaces: Sequence[Surface]) -> list[Level]:
    """Return levels from the lowest to the highest point of closed surfaces, each with the sections at both its ends.

    A point of a section has the solid at it, so that from any height of the level the solid is at most the level's
    own height away.
    """
    lowest = min(float(surface.vertices[surface.faces, 2].min()) for surface in surfaces)
    highest = max(float(surface.vertices[surface.faces, 2].max()) for surface in surfaces)
    steps = int(np.clip((highest - lowest) / _FINEST_MM, 1, _LEVELS))
    heights = np.linspace(lowest, highest, steps + 1)
    by_surface = [_sections(surface, heights) for surface in surfaces]
    regions = [shapely.union_all(shapely.make_valid(list(at_height))) for at_height in zip(*by_surface, strict=True)]
    return [
        Level(low, high, ((shapely.union(below, above), high - low),))
        for (low, below), (high, above) in pairwise(zip(heights.tolist(), regions, strict=True))
    ]


def _sections(surface: Surface, heights: Array) -> list[shapely.Geometry]:
    """Return the region that the plane at each height cuts out of a surface: where its winding is odd.

    A vertex at a plane's height counts as below it, which leaves every section closed.
    """
    z = surface.vertices[surface.faces, 2]
    first = np.searchsorted(heights, z.min(axis=1), side="left")
    last = np.searchsorted(heights, z.max(axis=1), side="left")
    # Each face once for every plane that it crosses: lowest vertex at or below the plane, highest above it.
    crossings = last - first
    face = np.repeat(np.arange(len(z)), crossings)
    plane = np.arange(len(face)) - np.repeat(np.cumsum(crossings) - crossings - first, crossings)
    segments = _segments(surface, face, heights[plane])
    long_enough = np.any(segments[:, 0] != segments[:, 1], axis=1)
    order = np.argsort(plane[long_enough], kind="stable")
    lines = shapely.linestrings(segments[long_enough][order])
    bounds = np.searchsorted(plane[long_enough][order], np.arange(len(heights) + 1))
    # Where a surface runs through itself, its lines have to be broken at the crossings first.
    return [shapely.build_area(shapely.union_all(lines[start:end])) for start, end in pairwise(bounds)]


def _segments(surface: Surface, face: Indices, height: Array) -> Array:
    """Return where faces cross planes, shape (n, 2, 2)."""
    corners = surface.faces[face]
    above = surface.vertices[corners, 2] > height[:, None]
    # The corner that is alone on its side of the plane, and the other two.
    alone = np.where(above.sum(axis=1) == 1, above.argmax(axis=1), above.argmin(axis=1))
    ends = []
    for k in (1, 2):
        pair = np.take_along_axis(corners, np.stack([alone, (alone + k) % 3], axis=1), axis=1)
        # From the lower number to the higher, so that both faces at an edge find the very same point.
        start, end = (surface.vertices[index] for index in np.sort(pair, axis=1).T)
        part = (height - start[:, 2]) / (end[:, 2] - start[:, 2])
        ends.append((start + part[:, None] * (end - start))[:, :2])
    return np.stack(ends, axis=1)
