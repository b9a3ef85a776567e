"""Nearest-approach shading: asked for in the menu, computed off the GUI's thread, shown in the room."""

import math
from enum import Enum
from functools import partial

import numpy as np
from numpy.typing import NDArray
from PySide6.QtCore import QObject, QTimer, Signal

from app.clearance_scale import EDGES_MM
from app.files.readings import clearance_text
from app.jobs import Job, Publish
from app.window.desk import Desk
from app.window.workspace import Workspace
from geometry.frames import R_fixed_gantry, R_fixed_turntable, normalised_deg
from geometry.near.approach import Along, Approaches, GantryTurn, Over, WholePlane, nearest_approaches, tightest_marks
from geometry.progress import Progress
from geometry.scene import Motion, Scene

Array = NDArray[np.float64]

LANE = "nearest approach"
_REST_MS = 300
_MARKS = 5
# What is farther off keeps a plain colour: the ramp ends there.
_FARTHEST_MM = EDGES_MM[-1]


class Shading(Enum):
    """Over which angles the nearest approach is asked."""

    NONE = "None"
    TURN = "Over the gantry's turn at this couch angle"
    FIELD = "Over the chosen field"
    PLANE = "Over all angles"


class ShadingDesk(QObject):
    """Keeps the shading up to date with set-up and couch angle. `told` (text): what the pointer is on."""

    told = Signal(str)

    def __init__(self, desk: Desk, workspace: Workspace, parent: QObject | None = None) -> None:
        super().__init__(parent)
        self._desk = desk
        self._view = workspace.scene_view
        self._kind = Shading.NONE
        self._field: tuple[tuple[float, float], ...] = ()
        self._asked: object = None
        self._found: Approaches | None = None
        self._timer = QTimer(self)
        self._timer.setSingleShot(True)
        self._timer.setInterval(_REST_MS)
        self._timer.timeout.connect(self._start)
        desk.staged.connect(lambda _: self._start_soon())
        desk.posed.connect(lambda _: self._start_soon())
        desk.opened.connect(lambda _: self._clear())
        desk.closed.connect(self._timer.stop)
        self._view.place_pointed.connect(self._on_pointed)
        self._view.place_clicked.connect(self._on_clicked)

    def choose(self, kind: Shading) -> None:
        """Shade by another kind of nearest approach."""
        self._kind = kind
        self._asked = None
        if kind is Shading.NONE:
            self._desk.jobs.cancel(LANE)
            self._clear()
        else:
            self._start()

    def set_field(self, points_deg: tuple[tuple[float, float], ...]) -> None:
        """Take over the control points (gantry, couch) of the field that is chosen."""
        self._field = points_deg
        self._start_soon()

    def _start_soon(self) -> None:
        if self._kind is not Shading.NONE and self._desk.session is not None:
            self._timer.start()

    def _over(self) -> Over | None:
        if self._kind is Shading.PLANE:
            return WholePlane()
        if self._kind is Shading.FIELD:
            return Along(self._field) if self._field else None
        return GantryTurn(self._desk.couch_deg)

    def _start(self) -> None:
        stage = self._desk.stage
        # While a hand drags, the room moves on before any shading is done.
        if self._kind is Shading.NONE or stage is None or stage.assessment is None:
            return
        over = self._over()
        if over is None:
            self._clear()
            self._view.set_caption("Choose a field of a plan to shade by it")
            return
        asked = (stage.scene, over)
        if asked == self._asked:
            return
        if self._found is not None and not isinstance(over, type(self._found.over)):
            self._clear()
        self._asked = asked
        work = partial(_approaches, stage.scene, over)
        self._desk.jobs.start_instead(Job(LANE, work, self._show, label="nearest approach"))

    def _show(self, found: Approaches) -> None:
        if self._kind is Shading.NONE:
            return
        self._found = found
        self._view.set_shading(
            {label: (part.points_mm, part.triangles, part.distance_mm) for label, part in found.parts.items()}
        )
        self._view.set_caption(_caption(found.over))
        marks = tightest_marks(found, _MARKS)
        self._view.set_tight_marks([(mark.part.label, mark.point_mm, _words(mark.distance_mm)) for mark in marks])

    def _clear(self) -> None:
        self._found = None
        self._asked = None
        self._view.set_shading(None)
        self._view.set_tight_marks([])
        self._view.set_caption("")

    def _place(self, label: str, point: Array) -> tuple[float, float, float] | None:
        """Return distance and angles of the surface point nearest to a place, in the system of the part's motion."""
        part = self._found.parts.get(label) if self._found is not None else None
        if part is None or not len(part.points_mm):
            return None
        at = int(((part.points_mm - point) ** 2).sum(axis=1).argmin())
        found = float(part.distance_mm[at]), float(part.gantry_deg[at]), float(part.couch_deg[at])
        return found if all(math.isfinite(value) for value in found) else None

    def _on_pointed(self, label: str, point_fixed: tuple[float, ...]) -> None:
        part = self._found.parts.get(label) if self._found is not None else None
        found = None
        if part is not None:
            found = self._place(label, np.array(point_fixed) @ self._R_fixed_motion(part.part.motion))
        if found is None:
            self.told.emit(label)
            return
        distance, gantry_deg, couch_deg = found
        at = f"gantry {normalised_deg(gantry_deg):.0f}°, couch {normalised_deg(couch_deg):.0f}°"
        self.told.emit(f"{label}: nearest {_words(distance)}, at {at}. A click goes there.")

    def _on_clicked(self, label: str, point: tuple[float, ...]) -> None:
        found = self._place(label, np.array(point))
        if found is not None:
            self._desk.go_to(found[1], found[2])

    def _R_fixed_motion(self, motion: Motion) -> Array:
        if motion is Motion.GANTRY:
            return R_fixed_gantry(self._desk.gantry_deg)
        return R_fixed_turntable(self._desk.couch_deg) if motion is Motion.TURNTABLE else np.eye(3)


def _caption(over: Over) -> str:
    """Return what the shading is of."""
    if isinstance(over, GantryTurn):
        return f"Nearest approach over the gantry's turn at couch {normalised_deg(over.couch_deg):g}°"
    return "Nearest approach over " + ("the chosen field" if isinstance(over, Along) else "all angles")


def _words(distance_mm: float) -> str:
    """Return a distance for a mark; rounded down, so that it never claims too much."""
    return "contact" if distance_mm == 0.0 else clearance_text(distance_mm, 0)


def _approaches(scene: Scene, over: Over, progress: Progress, _publish: Publish) -> Approaches:
    return nearest_approaches(scene, over, _FARTHEST_MM, progress=progress)
