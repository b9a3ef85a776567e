"""What the window works on: a session, the stages of its set-up, and the pose that is looked at."""

from dataclasses import dataclass

import shapely
from PySide6.QtCore import QObject, QTimer, Signal

from app.document.document import Document
from app.document.fields import Edit
from app.document.session import Session
from app.jobs import Jobs
from app.live import Stage
from app.window.follower import Follower
from geometry.assess import Assessment, Pose, exact_pose, pose_on_grid, proved_pose
from geometry.errors import GeometryError
from geometry.scene import Scene
from geometry.spans import Span


@dataclass(frozen=True, eq=False)
class Kept:
    """A map kept to compare with; of a couch that cannot turn the spans count, its region has no area."""

    name: str
    region: shapely.Geometry
    spans: tuple[Span, ...]


class Desk(QObject):
    """Holds what is open; widgets listen to it and ask it for changes.

    `opened` (Document): another document; `closed`: none any more. `changed` (Document): the document or whether it is
    saved. `staged` (Stage). `turned` (gantry, couch): the pose looked at is another; `posed` (Pose): what is known of
    it, PERMITTED before the proof meaning that only the proof is still to come. `kept_changed` (Kept or None).
    `refused` (text): an edit that is not allowed, or a set-up that cannot be built. `scene_shown` (Scene): the room is
    another one to look at: that of the latest stage or, while `show_instead` says so, of a field or a preview.
    """

    opened = Signal(object)
    closed = Signal()
    turned = Signal(float, float)
    changed = Signal(object)
    staged = Signal(object)
    posed = Signal(object)
    kept_changed = Signal(object)
    refused = Signal(str)
    scene_shown = Signal(object)

    def __init__(self, jobs: Jobs, parent: QObject | None = None) -> None:
        super().__init__(parent)
        self.jobs = jobs
        self.session: Session | None = None
        self.stage: Stage | None = None
        self.pose: Pose | None = None
        self._pose_is_proved = False
        self._instead: Scene | None = None
        self.kept: Kept | None = None
        self.gantry_deg = 0.0
        self.couch_deg = 0.0
        self._followed: object = None
        self.follower = Follower(jobs, self)
        self.follower.staged.connect(self._on_stage)
        self.follower.failed.connect(lambda error: self.refused.emit(str(error)))
        # A pose costs some milliseconds: of many in one go only the last counts.
        self._pose_timer = QTimer(self)
        self._pose_timer.setSingleShot(True)
        self._pose_timer.setInterval(0)
        self._pose_timer.timeout.connect(self._look_at_pose)

    @property
    def document(self) -> Document | None:
        """The document that is open, None on the start screen."""
        return self.session.document if self.session is not None else None

    @property
    def assessment(self) -> Assessment | None:
        """All that is known of the set-up as it is now; None while something is still being computed."""
        document, stage = self.document, self.stage
        if document is None or stage is None or stage.setup is not document.setup or stage.options != document.options:
            return None
        return stage.assessment

    @property
    def scene(self) -> Scene | None:
        """The room that is looked at, to which `pose` belongs."""
        return self._instead or (self.stage.scene if self.stage is not None else None)

    @property
    def is_own_scene(self) -> bool:
        """Whether the room that is looked at is that of the document's set-up."""
        return self._instead is None

    def show_instead(self, scene: Scene | None) -> None:
        """Look at another room than the document's, as a field has it; with None at the document's again."""
        if scene is not self._instead:
            self._instead = scene
            if self.scene is not None:
                self.scene_shown.emit(self.scene)
            self._look_at_pose()

    def open(self, document: Document, *, saved: bool = True) -> None:
        """Work on another document."""
        self.session = Session(document, saved=saved)
        self.session.listen(self._on_session)
        self._followed = None
        self.stage = None
        self.pose = None
        self._instead = None
        self.keep(None)
        turntable = document.setup.room.couch.turntable
        gantry = document.setup.room.gantry
        self.gantry_deg = min(max(0.0, gantry.low), gantry.high)
        self.couch_deg = min(max(0.0, turntable.low), turntable.high)
        self.opened.emit(document)
        self._on_session()

    def close(self) -> None:
        """Work on nothing."""
        self.follower.forget()
        self._pose_timer.stop()
        self.session = None
        self.stage = None
        self.pose = None
        self.closed.emit()

    def edit(self, edit: Edit, text: str, merge_key: str | None = None) -> None:
        """Change the document; what is not allowed is told by `refused`."""
        if self.session is None:
            return
        try:
            self.session.apply(edit, text, merge_key)
        except GeometryError as error:
            self.refused.emit(str(error))

    def end_edit(self) -> None:
        """Let the next edit be an undo step of its own."""
        if self.session is not None:
            self.session.end_merge()

    def undo(self) -> None:
        """Take the last step back."""
        if self.session is not None:
            self.session.undo()

    def redo(self) -> None:
        """Take a step that was taken back again."""
        if self.session is not None:
            self.session.redo()

    def go_to(self, gantry_deg: float, couch_deg: float) -> None:
        """Look at a pose, unwrapped angles, as near to it as the travel allows."""
        document = self.document
        if document is None:
            return
        gantry, couch = document.setup.room.gantry, document.setup.room.couch.turntable
        self.gantry_deg = min(max(gantry_deg, gantry.low), gantry.high)
        self.couch_deg = min(max(couch_deg, couch.low), couch.high)
        self.turned.emit(self.gantry_deg, self.couch_deg)
        self._pose_timer.start()

    def keep(self, kept: Kept | None) -> None:
        """Keep a map to compare with, or none."""
        self.kept = kept
        self.kept_changed.emit(kept)

    def keep_this(self) -> None:
        """Keep the map of the set-up as it is now, if it is proved."""
        if self.assessment is not None:
            name = self.assessment.scene.setup.name
            self.keep(Kept(name, self.assessment.permitted_region, self.assessment.spans))

    def _known_pose(self) -> Pose | None:
        """Return the pose from the map, where it is one of its angles: while a hand drags, that is the quick way."""
        if self.stage is None or self.stage.map is None or not self.is_own_scene:
            return None
        return pose_on_grid(self.stage.map, self.gantry_deg, self.couch_deg)

    def _on_session(self) -> None:
        document = self.document
        if document is None:
            return
        self.changed.emit(document)
        followed = (document.setup, document.options)
        if self._followed != followed:
            self._followed = followed
            self.follower.follow(*followed)
            # What was said of the pose was said of the set-up before; said once, not at every step of a drag.
            if self._pose_is_proved:
                self._pose_timer.start()

    def _on_stage(self, stage: Stage) -> None:
        self.stage = stage
        if self._instead is None:
            self.scene_shown.emit(stage.scene)
        self.staged.emit(stage)
        self._look_at_pose()

    def _look_at_pose(self) -> None:
        scene = self.scene
        if scene is None:
            return
        pose = self._known_pose() or exact_pose(scene, self.gantry_deg, self.couch_deg)
        assessment = self.assessment if self.is_own_scene else None
        self._pose_is_proved = assessment is not None
        self.pose = pose if assessment is None else proved_pose(assessment, pose)
        self.posed.emit(self.pose)


def permitted_share(assessment: Assessment) -> float:
    """Return which share of the readings within the travel is permitted, 0 to 1."""
    room = assessment.scene.setup.room
    gantry, couch = room.gantry, room.couch.turntable
    if couch.high > couch.low:
        area = (gantry.high - gantry.low) * (couch.high - couch.low)
        return float(assessment.permitted_region.area) / area
    extent = gantry.high - gantry.low
    return sum(span.extent_deg for span in assessment.spans) / extent if extent > 0.0 else 0.0
