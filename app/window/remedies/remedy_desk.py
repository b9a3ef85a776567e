"""What stands in the way of the pose, and what would help: computed while the pose rests, shown as it is found."""

from dataclasses import fields, replace
from functools import partial

from PySide6.QtCore import QObject, QTimer

from app.document.document import Document
from app.document.fields import Edit
from app.jobs import Job, Publish
from app.window.desk import Desk
from app.window.workspace import Workspace
from geometry.assess import Assessment, Options, Pose, exact_pose
from geometry.progress import Progress
from geometry.remedies.find import Obstacle, Remedy, find_remedies, obstacles_at
from geometry.scene import Scene, build_scene
from geometry.setup import Setup
from geometry.states import State

LANE = "remedies"
_REST_MS = 350
# Where nothing is in the way, parts are named that have less to spare than this, mm.
_NEARLY_MM = 150.0


class RemedyDesk(QObject):
    """Fills the panel, shows what a remedy would look like, and applies the one that is chosen."""

    def __init__(self, desk: Desk, workspace: Workspace, parent: QObject | None = None) -> None:
        super().__init__(parent)
        self._desk = desk
        self._workspace = workspace
        self._panel = workspace.remedies
        self._asked: object = None
        self._timer = QTimer(self)
        self._timer.setSingleShot(True)
        self._timer.setInterval(_REST_MS)
        self._timer.timeout.connect(self._start)
        desk.posed.connect(self._on_posed)
        desk.opened.connect(lambda _: self._forget())
        desk.closed.connect(self._forget)
        self._panel.preview_wanted.connect(self._preview)
        self._panel.apply_wanted.connect(self._apply)

    def _forget(self) -> None:
        self._timer.stop()
        self._desk.jobs.cancel(LANE)
        self._asked = None
        self._panel.clear()

    def _on_posed(self, pose: Pose) -> None:
        """Show the pose; what helps is looked for once it rests and everything is proved."""
        asked = (pose.scene, pose.gantry_deg, pose.couch_deg, self._desk.assessment is not None)
        if asked == self._asked:
            return
        self._forget()
        self._asked = asked
        own = self._desk.is_own_scene
        proved = self._desk.assessment is not None or not own
        if pose.state is State.PERMITTED and not (proved and own):
            # Enough by itself, and the proof is still to come; of a field's own set-up it is the field that is proved.
            self._panel.set_busy(own)
            return
        self._panel.show_pose(pose, ())
        self._panel.set_busy(proved and pose.state is not State.PERMITTED)
        if proved:
            self._timer.start()

    def _start(self) -> None:
        document, scene = self._desk.document, self._desk.scene
        if document is None or scene is None:
            return
        assessment = self._desk.assessment if self._desk.is_own_scene else None
        at = self._desk.gantry_deg, self._desk.couch_deg
        work = partial(_look_for, scene, at, document.options, assessment)
        self._desk.jobs.start_instead(
            Job(
                LANE,
                work,
                on_done=lambda _: self._panel.set_busy(False),
                on_part=self._show,
                on_error=lambda _: self._panel.set_busy(False),
                label="what would help",
            )
        )

    def _show(self, part: tuple[Obstacle, ...] | Remedy) -> None:
        if isinstance(part, Remedy):
            self._panel.add_remedy(part)
        elif self._desk.pose is not None:
            self._panel.show_pose(self._desk.pose, part)

    def _preview(self, remedy: Remedy | None) -> None:
        """Show the room as a remedy would have it, or as it is."""
        scene = self._desk.scene
        if scene is None:
            return
        if remedy is None:
            self._workspace.show_scene(scene)
            self._workspace.scene_view.set_pose(self._desk.gantry_deg, self._desk.couch_deg)
            if self._desk.pose is not None:
                self._workspace.show_witness(self._desk.pose)
            return
        previewed = scene if remedy.setup is scene.setup else build_scene(remedy.setup)
        self._workspace.show_scene(previewed)
        self._workspace.scene_view.set_pose(remedy.gantry_deg, remedy.couch_deg)
        self._workspace.show_witness(exact_pose(previewed, remedy.gantry_deg, remedy.couch_deg), "Preview: ")

    def _apply(self, remedy: Remedy) -> None:
        scene = self._desk.scene
        if scene is None:
            return
        self._preview(None)
        if remedy.setup is not scene.setup:
            self._desk.edit(_with_change(scene.setup, remedy.setup), remedy.text)
        self._desk.go_to(remedy.gantry_deg, remedy.couch_deg)


def _with_change(before: Setup, after: Setup) -> Edit:
    """Return the edit that changes in a document what a remedy changed, even one tried on a field's own set-up."""
    changes = {
        field.name: getattr(after, field.name)
        for field in fields(Setup)
        if getattr(after, field.name) is not getattr(before, field.name)
    }

    def edit(document: Document) -> Document:
        return replace(document, setup=replace(document.setup, **changes))

    return edit


def _look_for(
    scene: Scene,
    at_deg: tuple[float, float],
    options: Options,
    assessment: Assessment | None,
    progress: Progress,
    publish: Publish,
) -> None:
    obstacles = obstacles_at(scene, *at_deg)
    publish(obstacles or obstacles_at(scene, *at_deg, _NEARLY_MM))
    for remedy in find_remedies(scene.setup, *at_deg, options, assessment, progress):
        publish(remedy)
