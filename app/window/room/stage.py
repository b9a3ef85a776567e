"""Everything that stands in the room, ready to be drawn: the parts of a scene in a pose, as they are to be seen."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Final, Literal

import numpy as np
from numpy.typing import NDArray

from app.colours import rgb
from app.window.room.beam import Beam
from app.window.room.colours import clearance_colours, edge_colour, mixed, neutral, part_colour
from app.window.room.floor import Floor, floor_of
from app.window.room.meshes import CRISP_DEG, SOFT_DEG, MeshStore, coloured_mesh
from app.window.room.rendering import Array, Colour, DisplayMesh, DrawnSurface
from app.window.theme import Theme
from geometry.frames import R_fixed_gantry, R_fixed_turntable, moved, transform
from geometry.scene import Motion, Scene, ScenePart, Side

Visibility = Literal["shown", "see-through", "hidden"]
Shading = Mapping[str, tuple[Array, NDArray[np.integer], Array]]

_SEE_THROUGH: Final = 0.26
_BESIDE_SHADING: Final = 0.34
_BEAM_OPACITY: Final = 0.20
_SHADING_LIGHT: Final = 0.45
# Parts that are wider than this say nothing about where to look.
_WALL_MM: Final = 3200.0
_GANTRY_STEP_DEG: Final = 30


@dataclass(frozen=True, eq=False)
class Placed:
    """A part's surface: `T_motion_mesh` (4, 4) brings it into the system of the part's motion."""

    part: ScenePart
    mesh: DisplayMesh
    T_motion_mesh: Array


class Stage:
    """The scene, its pose, and how each part is to be seen. Changed by setters; `surfaces` says what to draw."""

    def __init__(self, theme: Theme) -> None:
        self.theme = theme
        self.scene: Scene | None = None
        self.gantry_deg = 0.0
        self.couch_deg = 0.0
        self.beam = Beam()
        self.parts: tuple[Placed, ...] = ()
        self._store = MeshStore()
        self._visibility: dict[str, Visibility] = {}
        self._side_visibility: dict[str, Visibility] = {}
        self._shading: Shading | None = None
        self._shaded: dict[str, DisplayMesh] = {}
        self._floor: Floor | None = None
        self._beam_mesh: DisplayMesh | None = None
        self._floor_mesh: tuple[tuple[object, ...], DisplayMesh] | None = None

    def set_theme(self, theme: Theme) -> None:
        """Draw in other colours from now on."""
        self.theme = theme
        self.set_shading(self._shading)

    def prepare(self, scene: Scene) -> None:
        """Make the surfaces of a scene that are not known yet. It may be called from any thread."""
        for part in scene.parts:
            self._placed(part)

    def set_scene(self, scene: Scene | None) -> None:
        """Show other parts, or none. Surfaces that are known from before are used again where they now are."""
        self.scene = scene
        self.parts = () if scene is None else tuple(self._placed(part) for part in scene.parts)
        floor = None if scene is None else floor_of(scene)
        self._floor = None if scene is None or floor is None else Floor(scene, floor, self._floor)
        self._floor_mesh = None
        self._beam_mesh = None

    def set_beam(self, beam: Beam) -> None:
        """Show the beam, or not."""
        self.beam = beam
        self._beam_mesh = None

    def set_visibility(self, by_label: Mapping[str, Visibility]) -> None:
        """Say how single parts are seen; those that are not named go by their side."""
        self._visibility = dict(by_label)

    def set_side_visibility(self, by_side: Mapping[Side, Visibility]) -> None:
        """Say how the parts of a side are seen; "shown" where nothing is said."""
        self._side_visibility = {str(side): seen for side, seen in by_side.items()}

    def set_shading(self, shading: Shading | None) -> None:
        """Draw these surfaces, coloured by distance, in place of their parts; None: as usual."""
        self._shading = shading
        self._shaded = {
            label: coloured_mesh(points, triangles, clearance_colours(distances, self.theme), CRISP_DEG)
            for label, (points, triangles, distances) in (shading or {}).items()
        }

    def visibility_of(self, part: ScenePart) -> Visibility:
        """Return how a part is seen."""
        return self._visibility.get(part.label, self._side_visibility.get(part.side, "shown"))

    def T_fixed_motion(self, motion: Motion) -> Array:
        """Return the matrix, (4, 4), that brings a motion's system to the fixed one in the present pose."""
        if motion is Motion.GANTRY:
            return transform(R_fixed_gantry(self.gantry_deg), np.zeros(3))
        if motion is Motion.TURNTABLE:
            return transform(R_fixed_turntable(self.couch_deg), np.zeros(3))
        return np.eye(4)

    def placed_mesh(self, placed: Placed) -> tuple[DisplayMesh, Array]:
        """Return what is drawn of a part, and the matrix, (4, 4), that brings it to the fixed system."""
        T_fixed_motion = self.T_fixed_motion(placed.part.motion)
        shaded = self._shaded.get(placed.part.label)
        if shaded is not None:
            return shaded, T_fixed_motion
        return placed.mesh, T_fixed_motion @ placed.T_motion_mesh

    def surfaces(self, eye: Array) -> tuple[DrawnSurface, ...]:
        """Return all that is to be drawn for an eye at that place, (3,), mm, fixed system; the see-through last."""
        floor = self._floor
        drawn: list[DrawnSurface] = []
        through: list[DrawnSurface] = []
        under: list[DrawnSurface] = []
        for placed in self.parts:
            if floor is not None and placed.part is floor.part:
                under = self._floor_surfaces(floor, eye)
                continue
            surface = self._surface(placed)
            if surface is not None:
                (drawn if surface.opacity >= 1.0 else through).append(surface)
        # Most of the floor is hidden: drawn after what hides it, it costs less.
        return (*drawn, *under, *through, *self._beam_surfaces())

    def fit_points(self) -> Array:
        """Return points, (n, 3), mm, fixed system, that a picture of all should hold, wherever the gantry stands."""
        found = []
        turns = [R_fixed_gantry(angle) for angle in range(0, 360, _GANTRY_STEP_DEG)]
        for placed in self.parts:
            if self.visibility_of(placed.part) == "hidden":
                continue
            points = np.concatenate([piece.vertices for piece in placed.part.pieces])
            if placed.part.side is Side.ROOM and np.ptp(points[:, :2], axis=0).max() > _WALL_MM:
                continue
            if placed.part.motion is Motion.GANTRY:
                found += [points @ turn.T for turn in turns]
            else:
                found.append(moved(self.T_fixed_motion(placed.part.motion), points))
        return np.concatenate(found) if found else np.empty((0, 3))

    def hull_points(self, labels: Sequence[str]) -> list[Array]:
        """Return the vertices of each piece of the named parts, (n, 3), mm, fixed system."""
        found: list[Array] = []
        for placed in self.parts:
            if placed.part.label in labels:
                matrix = self.T_fixed_motion(placed.part.motion)
                found += [moved(matrix, piece.vertices) for piece in placed.part.pieces]
        return found

    def beam_exit_mm(self) -> float:
        """Return how far above the isocentre the gantry's parts about the beam axis end, mm."""
        low = self.source_axis_mm * 0.9
        for placed in self.parts:
            if placed.part.motion is Motion.GANTRY:
                for piece in placed.part.pieces:
                    near = piece.vertices[np.hypot(piece.vertices[:, 0], piece.vertices[:, 1]) < 600.0]
                    above = near[near[:, 2] > 100.0]
                    low = min(low, float(above[:, 2].min(initial=low)))
        return low

    @property
    def source_axis_mm(self) -> float:
        """The distance from source to isocentre, mm."""
        return 1000.0 if self.scene is None else self.scene.setup.room.source_axis_distance_mm

    def _placed(self, part: ScenePart) -> Placed:
        patient = part.kind == "patient"
        mesh, matrix = self._store.mesh_of(part.pieces, SOFT_DEG if patient else CRISP_DEG, with_edges=not patient)
        return Placed(part, mesh, matrix)

    def _surface(self, placed: Placed) -> DrawnSurface | None:
        seen = self.visibility_of(placed.part)
        if seen == "hidden":
            return None
        mesh, matrix = self.placed_mesh(placed)
        if mesh is not placed.mesh:
            opacity = _SEE_THROUGH if seen == "see-through" else 1.0
            return DrawnSurface(mesh, matrix, neutral(self.theme), opacity, light=_SHADING_LIGHT)
        colour = part_colour(placed.part, self.theme)
        opacity = 1.0
        if self._shading is not None:
            colour, opacity = mixed(colour, neutral(self.theme), 0.6), _BESIDE_SHADING
        if seen == "see-through":
            opacity = _SEE_THROUGH
        return DrawnSurface(mesh, matrix, colour, opacity, edge_colour(colour, self.theme))

    def _floor_surfaces(self, floor: Floor, eye: Array) -> list[DrawnSurface]:
        placed = next(placed for placed in self.parts if placed.part is floor.part)
        # From below, the floor would hide the room.
        if eye[2] < floor.ground.height_mm or self.visibility_of(floor.part) != "shown":
            return []
        colour = rgb(self.theme.floor)
        key = (self.gantry_deg, self.couch_deg, colour)
        if self._floor_mesh is None or self._floor_mesh[0] != key:
            self._floor_mesh = key, floor.mesh(self.gantry_deg, self.couch_deg, colour)
        line = mixed(colour, rgb(self.theme.faint), 0.35)
        still = np.eye(4)
        return [
            DrawnSurface(placed.mesh, placed.T_motion_mesh, mixed(colour, (0.0, 0.0, 0.0), 0.08)),
            DrawnSurface(self._floor_mesh[1], still, colour, light=0.0),
            DrawnSurface(floor.ground.lines, still, line, edge_colour=line, light=0.0),
        ]

    def _beam_surfaces(self) -> list[DrawnSurface]:
        if self.scene is None or not self.beam.visible:
            return []
        if self._beam_mesh is None:
            self._beam_mesh = self.beam.mesh(self.source_axis_mm)
        colour: Colour = rgb(self.theme.beam)
        matrix = self.T_fixed_motion(Motion.GANTRY)
        return [DrawnSurface(self._beam_mesh, matrix, colour, _BEAM_OPACITY, edge_colour=colour, light=0.0)]
