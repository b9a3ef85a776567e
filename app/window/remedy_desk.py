"""What stands in the way of the pose, and what would help: computed while the pose rests, shown as it is found."""

from dataclasses import replace
from functools import partial

from PySide6.QtCore import QObject, QTimer

from app.document import Document
from app.fields import Edit
from app.jobs import Job, Publish
from app.window.desk import Desk
from app.window.workspace import Workspace
from geometry.assess import Assessment, Pose
from geometry.progress import Progress
from geometry.remedies import Obstacle, Remedy, find_remedies, obstacles_at
from geometry.scene import build_scene
from geometry.setup import Setup
from geometry.states import State

LANE = "remedies"
_REST_MS = 350


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
        proved = self._desk.assessment is not None
        if pose.state is State.PERMITTED and not proved:
            self._panel.set_busy(True)
            return
        self._panel.show_pose(pose, ())
        if proved and pose.state is not State.PERMITTED:
            self._panel.set_busy(True)
            self._timer.start()
        else:
            self._panel.set_busy(False)

    def _start(self) -> None:
        document, assessment, pose = self._desk.document, self._desk.assessment, self._desk.pose
        if document is None or assessment is None or pose is None:
            return
        work = partial(_look_for, document.setup, self._desk.gantry_deg, self._desk.couch_deg, assessment)
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
        stage = self._desk.stage
        if stage is None:
            return
        if remedy is None:
            self._workspace.show_scene(stage.scene)
            self._workspace.scene_view.set_pose(self._desk.gantry_deg, self._desk.couch_deg)
            return
        same = remedy.setup is stage.setup
        self._workspace.show_scene(stage.scene if same else build_scene(remedy.setup))
        self._workspace.scene_view.set_pose(remedy.gantry_deg, remedy.couch_deg)

    def _apply(self, remedy: Remedy) -> None:
        document = self._desk.document
        if document is None:
            return
        self._preview(None)
        if remedy.setup is not document.setup:
            self._desk.edit(_with_setup(remedy.setup), remedy.text)
        self._desk.go_to(remedy.gantry_deg, remedy.couch_deg)


def _with_setup(setup: Setup) -> Edit:
    def edit(document: Document) -> Document:
        return replace(document, setup=setup)

    return edit


def _look_for(
    setup: Setup, gantry_deg: float, couch_deg: float, assessment: Assessment, progress: Progress, publish: Publish
) -> None:
    publish(obstacles_at(assessment.scene, gantry_deg, couch_deg))
    for remedy in find_remedies(setup, gantry_deg, couch_deg, assessment.options, assessment, progress):
        publish(remedy)
