"""The floor under the room: which part is one, and the soft shade of what stands on it.

The shade is no light computed by rays: each piece darkens the floor under its own outline and a little around, the less
the higher it hangs. That is enough to see what stands where.
"""

import itertools
from dataclasses import dataclass
from typing import Final

import numpy as np

from app.window.room.rendering import Array, Colour, DisplayMesh, Indices, Singles
from geometry.frames import rotation_y, rotation_z
from geometry.scene import Motion, Scene, ScenePart, Side

_WIDE_MM: Final = 2500.0
_FLAT_MM: Final = 400.0
_STEP_MM: Final = 125.0
_ABOVE_MM: Final = 1.5
_DARKEST: Final = 0.36
_SOFT_MM: Final = 110.0
_SOFTENS: Final = 0.5
_FADES_OVER_MM: Final = 550.0
_HIGHEST_MM: Final = 1300.0
_PLATE_MM: Final = 60.0
_CIRCLES_MM: Final = (500.0, 1000.0, 1500.0, 2000.0)
_EIGHT: Final = np.array(list(itertools.product((0, 1), repeat=3)))


def floor_of(scene: Scene) -> ScenePart | None:
    """Return the part that looks like a floor: still, wide, flat and the lowest of its kind. None without one."""
    found = [part for part in scene.parts if part.side is Side.ROOM and _is_flat(part)]
    return min(found, key=lambda part: float(_bounds(part)[1][2]), default=None)


def _is_flat(part: ScenePart) -> bool:
    low, high = _bounds(part)
    across = high - low
    return bool(across[0] > _WIDE_MM and across[1] > _WIDE_MM and across[2] < _FLAT_MM and high[2] < 0.0)


def _bounds(part: ScenePart) -> tuple[Array, Array]:
    points = np.concatenate([piece.vertices for piece in part.pieces])
    return points.min(axis=0), points.max(axis=0)


@dataclass(frozen=True, eq=False)
class _Shades:
    """Boxes about the pieces of one motion: `corners` (n, 8, 3), mm, in its system."""

    motion: Motion
    corners: Array


class Ground:
    """The floor's surface without anything on it: a grid of points, held within the part's rim."""

    def __init__(self, part: ScenePart) -> None:
        low, high = _bounds(part)
        self.height_mm = float(high[2])
        self.x = np.arange(low[0], high[0] + _STEP_MM, _STEP_MM)
        self.y = np.arange(low[1], high[1] + _STEP_MM, _STEP_MM)
        grid_x, grid_y = np.meshgrid(self.x, self.y, indexing="ij")
        self.flat = np.stack([grid_x, grid_y], axis=-1).reshape(-1, 2)
        self.points = _held_within(part, self.flat, self.height_mm + _ABOVE_MM)
        self.normals = np.tile(np.array([[0.0, 0.0, 1.0]], np.float32), (len(self.points), 1))
        self.triangles = _grid_triangles(len(self.x), len(self.y))
        self.lines = _circles(part, self.height_mm + 4.0 * _ABOVE_MM)
        self._vertices = tuple(piece.vertices for piece in part.pieces)

    def belongs_to(self, part: ScenePart) -> bool:
        """Tell whether it is the surface of that part, which may have been built anew since."""
        return len(part.pieces) == len(self._vertices) and all(
            np.array_equal(piece.vertices, own) for piece, own in zip(part.pieces, self._vertices, strict=True)
        )


class Floor:
    """The upper side of a floor part, shaded by the other parts of its scene.

    What has not changed is taken over from `before`.
    """

    def __init__(self, scene: Scene, part: ScenePart, before: "Floor | None" = None) -> None:
        self.part = part
        same = before is not None and before.ground.belongs_to(part)
        self.ground: Ground = before.ground if before is not None and same else Ground(part)
        found = {motion: _shades(scene, part, motion, self.ground.height_mm) for motion in Motion}
        self._shades = {motion: shade for motion, shade in found.items() if shade is not None}
        self._light: dict[Motion, tuple[float, Array]] = {}

    def mesh(self, gantry_deg: float, couch_deg: float, colour: Colour) -> DisplayMesh:
        """Return the floor's surface in its colour, darker where something stands."""
        light = np.ones(len(self.ground.flat))
        angles = {Motion.GANTRY: gantry_deg, Motion.TURNTABLE: couch_deg, Motion.STILL: 0.0}
        for motion, shade in self._shades.items():
            known = self._light.get(motion)
            if known is None or known[0] != angles[motion]:
                known = self._light[motion] = angles[motion], self._light_under(shade, angles[motion])
            light *= known[1]
        colours = (light[:, None] * np.array(colour)).astype(np.float32)
        return DisplayMesh(
            self.ground.points, self.ground.normals, self.ground.triangles, np.empty((0, 2, 3), np.float32), colours
        )

    def _light_under(self, shade: _Shades, angle_deg: float) -> Array:
        """Return how much light each point of the grid gets, 0 to 1, past the boxes of one motion."""
        if shade.motion is Motion.GANTRY:
            return _light_on_grid(
                shade.corners @ rotation_y(angle_deg).T, self.ground.x, self.ground.y, self.ground.height_mm
            ).ravel()
        if shade.motion is Motion.STILL or angle_deg == 0.0:
            return _light_on_grid(shade.corners, self.ground.x, self.ground.y, self.ground.height_mm).ravel()
        # What turns about the vertical takes its shade along: the grid is turned back into its system.
        reach = float(np.abs(self.ground.flat).max()) * 1.5
        axis = np.arange(-reach, reach + _STEP_MM, _STEP_MM)
        light = _light_on_grid(shade.corners, axis, axis, self.ground.height_mm)
        turned = self.ground.flat @ rotation_z(angle_deg)[:2, :2]
        return _between(light, (turned + reach) / _STEP_MM)


def _light_on_grid(corners: Array, x: Array, y: Array, height_mm: float) -> Array:
    """Return the light, (len(x), len(y)), that gets past boxes with `corners` (n, 8, 3) to a floor at that height."""
    low, high = corners.min(axis=1), corners.max(axis=1)
    above = low[:, 2] - height_mm
    near = above < _HIGHEST_MM
    low, high, above = low[near], high[near], np.maximum(above[near], 0.0)
    soft = (_SOFT_MM + _SOFTENS * above)[:, None]
    along_x = _soft_step((x - low[:, :1]) / soft) * _soft_step((high[:, :1] - x) / soft)
    along_y = _soft_step((y - low[:, 1:2]) / soft) * _soft_step((high[:, 1:2] - y) / soft)
    along_x = along_x * (_DARKEST * np.exp(-above / _FADES_OVER_MM))[:, None]
    darkest = np.zeros((len(x), len(y)))
    # The deepest shade counts, not their sum: pieces of one part overlap.
    for one, other in zip(along_x, along_y, strict=True):
        np.maximum(darkest, one[:, None] * other, out=darkest)
    return np.asarray(1.0 - darkest)


def _soft_step(inwards: Array) -> Array:
    """Return 0 to 1 for -1 to 1, rising smoothly."""
    share = np.clip(0.5 + 0.5 * inwards, 0.0, 1.0)
    stepped: Array = share * share * (3.0 - 2.0 * share)
    return stepped


def _between(values: Array, places: Array) -> Array:
    """Return `values` (n, m) at fractional indices (k, 2), all of them inside."""
    index = np.clip(places.astype(np.int64), 0, np.array(values.shape) - 2)
    u, v = (places - index).T
    i, j = index.T
    low = values[i, j] * (1.0 - v) + values[i, j + 1] * v
    high = values[i + 1, j] * (1.0 - v) + values[i + 1, j + 1] * v
    mean: Array = low * (1.0 - u) + high * u
    return mean


def _shades(scene: Scene, floor: ScenePart, motion: Motion, height_mm: float) -> _Shades | None:
    pieces = [piece for part in scene.parts if part is not floor and part.motion is motion for piece in part.pieces]
    if not pieces:
        return None
    starts = np.cumsum([0, *(len(piece.vertices) for piece in pieces[:-1])])
    vertices = np.concatenate([piece.vertices for piece in pieces])
    ends = np.stack([np.minimum.reduceat(vertices, starts), np.maximum.reduceat(vertices, starts)])
    # A plate that lies on the floor would throw the shade of its box, not its own.
    ends = ends[:, ends[1, :, 2] - height_mm > _PLATE_MM]
    return _Shades(motion, ends[_EIGHT, :, [0, 1, 2]].transpose(2, 0, 1)) if ends.size else None


def _outline(part: ScenePart, directions: Array) -> Array:
    """Return how far the part reaches from the origin's foot point along each of the directions, (n, 2): (n,)."""
    reach = np.zeros(len(directions))
    for piece in part.pieces:
        corners = piece.vertices[piece.faces]
        normals = np.cross(corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0])[:, :2]
        sideways = np.linalg.norm(normals, axis=1) > 1e-6
        offsets = np.einsum("ij,ij->i", normals[sideways], corners[sideways, 0, :2])
        speed = directions @ normals[sideways].T
        leaves = np.where(speed > 1e-9, offsets / np.maximum(speed, 1e-9), np.inf)
        reach = np.maximum(reach, leaves.min(axis=1, initial=np.inf))
    return np.where(np.isfinite(reach), np.maximum(reach, 0.0), 0.0)


def _held_within(part: ScenePart, flat: Array, height_mm: float) -> Singles:
    """Return the grid's points, (n, 3), those beyond the part's rim drawn in to it."""
    away = np.linalg.norm(flat, axis=1)
    directions = flat / np.maximum(away, 1e-9)[:, None]
    reach = np.minimum(_outline(part, directions), away)
    points = np.concatenate([directions * reach[:, None], np.full((len(flat), 1), height_mm)], axis=1)
    return points.astype(np.float32)


def _grid_triangles(count_x: int, count_y: int) -> Indices:
    i, j = (index.ravel() for index in np.meshgrid(np.arange(count_x - 1), np.arange(count_y - 1), indexing="ij"))
    here = i * count_y + j
    one = np.stack([here, here + count_y, here + count_y + 1], axis=-1)
    other = np.stack([here, here + count_y + 1, here + 1], axis=-1)
    return np.concatenate([one, other]).astype(np.int32)


def _circles(part: ScenePart, height_mm: float) -> DisplayMesh:
    """Return circles about the foot point of the isocentre, and the axes through it, as lines."""
    angles = np.linspace(0.0, 2.0 * np.pi, 145)
    directions = np.stack([np.cos(angles), np.sin(angles)], axis=-1)
    reach = _outline(part, directions)
    lines = []
    for radius in _CIRCLES_MM:
        inside = reach > radius
        points = np.concatenate([radius * directions, np.full((len(angles), 1), height_mm)], axis=1)
        pairs = np.stack([points[:-1], points[1:]], axis=1)
        lines.append(pairs[inside[:-1] & inside[1:]])
    for angle in range(0, 360, 90):
        ray = angle * 144 // 360
        end = np.array([*(min(reach[ray], _CIRCLES_MM[-1]) * directions[ray]), height_mm])
        lines.append(np.array([[[0.0, 0.0, height_mm], end]]))
    nothing = np.empty((0, 3), np.float32)
    return DisplayMesh(nothing, nothing, np.empty((0, 3), np.int32), np.concatenate(lines).astype(np.float32))
