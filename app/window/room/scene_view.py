"""The room in 3D: the parts as they are computed, in the pose that the charts speak of."""

from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Final

import numpy as np
from PySide6.QtCore import QPointF, Signal
from PySide6.QtWidgets import QWidget

from app.window.room.beam import Beam
from app.window.room.camera import Camera
from app.window.room.canvas import WITHOUT_OPENGL
from app.window.room.colours import backdrop
from app.window.room.overlay import Arc, Overlay, Witness
from app.window.room.picking import Hit, nearest_hit
from app.window.room.rendering import Array, Frame
from app.window.room.stage import Shading, Stage, Visibility
from app.window.room.steering import SceneSteering, near_and_far_mm
from app.window.room.views import VIEWS
from app.window.theme import Theme
from geometry.frames import moved, source_direction_fixed
from geometry.scene import Motion, Scene, Side
from geometry.states import State

__all__ = ["VIEWS", "SceneView"]

# How far from the isocentre a span is drawn, mm: about where heads are.
_ARC_MM: Final = 500.0


class SceneView(SceneSteering):
    """Shows a scene in a pose; told everything by setters, tells by signals what was pointed at.

    `place_pointed` brings the label of the part under the pointer, "" for none, and the point (x, y, z), mm, fixed
    system. `place_clicked` brings the label and the point in the system of the part's motion.
    """

    place_pointed = Signal(str, tuple)
    place_clicked = Signal(str, tuple)

    def __init__(self, theme: Theme, parent: QWidget | None = None) -> None:
        super().__init__(theme, parent)
        self._stage = Stage(theme)
        self._witness: Witness | None = None
        self._arc: Arc | None = None
        self._caption = ""
        self._marked: tuple[str, ...] = ()
        self._tight: tuple[tuple[str, Array, str], ...] = ()
        self._pointed = ""
        self.setAccessibleName("Room in 3D")
        self.setAccessibleDescription(
            "The parts in the current pose. Arrow keys turn the view, with Shift they move it; plus and minus zoom, "
            "Home shows all, 1 to 6 are the standard views."
        )

    # ---- what is shown

    def set_theme(self, theme: Theme) -> None:
        """Draw in other colours from now on."""
        self._theme = theme
        self._stage.set_theme(theme)
        self.changed()

    def prepare(self, scene: Scene) -> None:
        """Make what `set_scene` will need: for the thread that built the scene, so that the window need not wait.

        Without it `set_scene` takes as long itself, once for every part whose shape is not known from before.
        """
        self._stage.prepare(scene)

    def set_scene(self, scene: Scene | None, keep_camera: bool = True) -> None:
        """Show another scene, or none. For the first, or unless the camera is kept, all of it comes into view."""
        first = self._stage.scene is None
        self._stage.set_scene(scene)
        if scene is not None and (first or not keep_camera):
            self.fit()
        self.changed()

    def set_pose(self, gantry_deg: float, couch_deg: float) -> None:
        """Turn gantry and couch, IEC 61217."""
        if (gantry_deg, couch_deg) != (self._stage.gantry_deg, self._stage.couch_deg):
            self._stage.gantry_deg, self._stage.couch_deg = gantry_deg, couch_deg
            self.changed()

    def set_witness(
        self,
        machine_point_mm: Array | None,
        couch_point_mm: Array | None,
        text: str = "",
        state: State | None = None,
    ) -> None:
        """Show the nearest two points, (3,), mm, fixed system; the text's first line stands out. None for none."""
        self._witness = None
        if machine_point_mm is not None and couch_point_mm is not None:
            self._witness = Witness(np.asarray(machine_point_mm), np.asarray(couch_point_mm), text, state)
        self.overlay_changed()

    def set_arc(self, gantry_from_deg: float, gantry_to_deg: float, texts: tuple[str, str] | None) -> None:
        """Show a turn of the gantry, unwrapped angles, with a text at either end; None for none."""
        self._arc = None
        if texts is not None:
            steps = max(int(abs(gantry_to_deg - gantry_from_deg) / 3.0), 1)
            angles = np.linspace(gantry_from_deg, gantry_to_deg, steps + 1)
            points = [_ARC_MM * source_direction_fixed(float(angle)) for angle in angles]
            self._arc = Arc(np.array(points), texts)
        self.overlay_changed()

    def set_caption(self, text: str) -> None:
        """Say in the corner what is shown, beyond the room itself; empty for nothing."""
        self._caption = text
        self.overlay_changed()

    def mark_parts(self, labels: Sequence[str]) -> None:
        """Outline and hatch these parts, and no others."""
        self._marked = tuple(labels)
        self.overlay_changed()

    def set_beam(
        self,
        visible: bool,
        field_half_sizes_mm: tuple[float, float] = (100.0, 100.0),
        collimator_deg: float | None = 0.0,
    ) -> None:
        """Show the beam with a field of those half sizes at the isocentre; collimator None stands for any angle."""
        self._stage.set_beam(Beam(visible, field_half_sizes_mm, collimator_deg))
        self.changed()

    def set_visibility(self, by_label: Mapping[str, Visibility]) -> None:
        """Say how parts, by label, are seen: "shown", "see-through" or "hidden"; the others go by their side."""
        self._stage.set_visibility(by_label)
        self.changed()

    def set_side_visibility(self, by_side: Mapping[Side, Visibility]) -> None:
        """Say how the parts of a side are seen; "shown" where nothing is said."""
        self._stage.set_side_visibility(by_side)
        self.changed()

    def set_shading(self, shading: Shading | None) -> None:
        """Draw surfaces coloured by distance in place of parts, by label; other parts fade. None: as usual.

        A surface is points (n, 3), mm, in the system of the part's motion, triangles (m, 3), and distances (n,), mm,
        NaN where there is none.
        """
        self._stage.set_shading(shading)
        self.changed()

    def set_tight_marks(self, marks: Sequence[tuple[str, Sequence[float] | Array, str]]) -> None:
        """Write numbers at places: the label of a part, a point (3,), mm, in the system of its motion, and the text."""
        self._tight = tuple((label, np.asarray(point, dtype=np.float64), text) for label, point, text in marks)
        self.overlay_changed()

    # ---- the picture

    def frame(self, width: int, height: int, *, fine: bool) -> Frame:
        """Return what is to be drawn now, for a picture of that many pixels."""
        camera = self.camera()
        # A picture narrower than the widget is to hold the same width of the room.
        narrower = (width / height) / (max(self.width(), 1) / max(self.height(), 1))
        if narrower < 0.999 and not self._follows_beam:
            camera = replace(camera, distance_mm=camera.distance_mm / narrower)
        near, far = self._near_and_far_mm(camera)
        top, bottom = backdrop(self._theme)
        return Frame(width, height, camera, near, far, top, bottom, self._stage.surfaces(camera.eye()), fine)

    def overlay(self) -> Overlay:
        """Return what is to be painted over the picture now."""
        stage = self._stage
        beam = stage.beam.visible and stage.scene is not None
        T_fixed_gantry = stage.T_fixed_motion(Motion.GANTRY)
        motions = {placed.part.label: placed.part.motion for placed in stage.parts}
        tight = tuple(
            (moved(stage.T_fixed_motion(motions[label]), point), text)
            for label, point, text in self._tight
            if label in motions
        )
        nothing = np.empty((0, 3))
        return Overlay(
            self._witness,
            tuple(stage.hull_points(self._marked)),
            tight,
            moved(T_fixed_gantry, stage.beam.axis(stage.source_axis_mm)) if beam else nothing,
            moved(T_fixed_gantry, stage.beam.outline()) if beam else nothing,
            ". ".join(text for text in (self._caption, WITHOUT_OPENGL if self.draws_without_opengl() else "") if text),
            self._arc,
        )

    def fit_points(self) -> Array:
        """Return points, (n, 3), mm, fixed system, that are to be in view when all is."""
        return self._stage.fit_points()

    def beam_source(self) -> tuple[float, float]:
        """Return the gantry angle, degrees, and the distance from source to isocentre, mm."""
        return self._stage.gantry_deg, self._stage.source_axis_mm

    def _near_and_far_mm(self, camera: Camera) -> tuple[float, float]:
        near, far = near_and_far_mm(camera.eye())
        if self._follows_beam:
            # From the source, whatever the beam has yet to leave is cut away.
            near = max(self._stage.source_axis_mm - self._stage.beam_exit_mm() + 5.0, 10.0)
        return near, far

    # ---- pointing

    def hit_at(self, position: QPointF) -> Hit | None:
        """Return the part at a place of the widget, None for none. See-through parts are pointed through."""
        camera = self.camera()
        candidates = (
            (placed.part.label, *self._stage.placed_mesh(placed))
            for placed in self._stage.parts
            if self._stage.visibility_of(placed.part) == "shown"
        )
        direction = camera.ray(position.x(), position.y(), max(self.width(), 1), max(self.height(), 1))
        # The near plane is a plane, the ray goes aslant.
        near = self._near_and_far_mm(camera)[0] / max(float(-camera.axes()[2] @ direction), 0.1)
        return nearest_hit(candidates, camera.eye(), direction, near)

    def point_at(self, position: QPointF | None) -> None:
        """Tell what is at a place of the widget; None when the pointer has left."""
        hit = None if position is None else self.hit_at(position)
        label = "" if hit is None else hit.label
        if label or self._pointed:
            self.place_pointed.emit(label, () if hit is None else tuple(hit.point.tolist()))
        self._pointed = label

    def click_at(self, position: QPointF) -> None:
        """Tell what was clicked."""
        hit = self.hit_at(position)
        if hit is not None:
            motion = next(placed.part.motion for placed in self._stage.parts if placed.part.label == hit.label)
            rotation = self._stage.T_fixed_motion(motion)[:3, :3]
            self.place_clicked.emit(hit.label, tuple((hit.point @ rotation).tolist()))
