"""The desk laid out: set-up, room, angles, and what stands in the way. Passes data on; computes nothing."""

from collections.abc import Sequence

from PySide6.QtCore import Qt, QTimer, Signal
from PySide6.QtWidgets import QSplitter, QStackedWidget, QTabWidget, QVBoxLayout, QWidget

from app.document.document import Document
from app.files.readings import clearance_text
from app.live import Stage
from app.window.banner import Banner
from app.window.chart.angle_chart import AngleChart
from app.window.chart.clearance_curve import ClearanceCurve
from app.window.chart.picture import ChartField
from app.window.chart.reading import angle_words
from app.window.chart.span_strip import SpanStrip
from app.window.desk import Desk, Kept
from app.window.discs.direction_discs import DirectionDiscs
from app.window.fields.fields_panel import FieldsPanel
from app.window.fields.time_curve import TimeCurve
from app.window.parts_panel import PartsPanel
from app.window.pose_bar import PoseBar, Proof
from app.window.remedies.remedies_panel import RemediesPanel
from app.window.room.scene_view import SceneView
from app.window.setup.setup_panel import SetupPanel
from app.window.theme import LIGHT, Theme
from geometry.assess import Assessment, Pose, tolerances_of
from geometry.directions.field import field_of, unproved_field
from geometry.legs import Point
from geometry.scene import Scene
from geometry.spans import Span, spans_at
from geometry.states import State

_REFRESH_MS = 40


class Workspace(QWidget):
    """Everything about one set-up.

    `pointed` tells what the pointer is on, in words; `turned_by_hand` that a person chose a pose.
    """

    pointed = Signal(str)
    turned_by_hand = Signal()

    def __init__(self, desk: Desk, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._desk = desk
        self._scene: Scene | None = None
        self._needs_camera = True
        self._with_beam = True
        self._span: Span | None = None
        self._spans_shown: tuple[Assessment, float, bool] | None = None
        self._stale = False
        self._refresh = QTimer(self)
        self._refresh.setSingleShot(True)
        self._refresh.setInterval(_REFRESH_MS)
        self._refresh.timeout.connect(self._show_document)
        self.banner = Banner()
        self.pose_bar = PoseBar()
        self.setup_panel = SetupPanel()
        self.parts_panel = PartsPanel()
        self.scene_view = SceneView(LIGHT)
        self.chart = AngleChart()
        self.curve = ClearanceCurve()
        self.discs = DirectionDiscs()
        self.spans = SpanStrip()
        self.remedies = RemediesPanel()
        self.fields = FieldsPanel()
        self.time_curve = TimeCurve()
        self.time_curve.hide()
        self._lay_out()
        self._connect()

    def _lay_out(self) -> None:
        self.left = QTabWidget()
        self.left.addTab(self.setup_panel, "Set-up")
        self.left.addTab(self.fields, "Fields")
        self.left.addTab(self.parts_panel, "Parts shown")
        self.left.setMinimumWidth(300)
        self.angles = QStackedWidget()
        self.angles.addWidget(self.chart)
        self.angles.addWidget(self.curve)
        # The strip shares the chart's axis, so it shares its page.
        page = QWidget()
        below = QVBoxLayout(page)
        below.setContentsMargins(0, 0, 0, 0)
        below.setSpacing(0)
        below.addWidget(self.angles, 1)
        below.addWidget(self.spans)
        self.right_tabs = QTabWidget()
        self.right_tabs.addTab(page, "Angle chart")
        self.right_tabs.addTab(self.discs, "Directions")
        self.right_tabs.currentChanged.connect(lambda _: self._show_discs())
        self.right = QSplitter(Qt.Orientation.Vertical)
        _fill(self.right, ((self.right_tabs, 5), (self.time_curve, 1), (self.remedies, 2)))
        self.columns = QSplitter(Qt.Orientation.Horizontal)
        _fill(self.columns, ((self.left, 0), (self.scene_view, 4), (self.right, 5)))
        for splitter in (self.right, self.columns):
            splitter.setChildrenCollapsible(False)
        self.columns.setSizes([330, 480, 560])
        self.right.setSizes([480, 130, 190])
        column = QVBoxLayout(self)
        column.setContentsMargins(0, 0, 0, 0)
        column.setSpacing(0)
        column.addWidget(self.banner)
        column.addWidget(self.pose_bar)
        column.addWidget(self.columns, 1)

    def _connect(self) -> None:
        desk = self._desk
        desk.follower.ahead = self.scene_view.prepare
        desk.opened.connect(self._on_opened)
        desk.changed.connect(lambda _: self._on_changed())
        desk.staged.connect(self._on_staged)
        desk.scene_shown.connect(self.show_scene)
        desk.turned.connect(lambda *_: self._show_angles())
        desk.closed.connect(self._on_closed)
        desk.posed.connect(self._on_posed)
        desk.kept_changed.connect(self._on_kept)
        desk.refused.connect(lambda text: self.setup_panel.set_messages((text,)))
        for widget in (self.pose_bar, self.chart, self.curve, self.discs, self.spans):
            widget.pose_wanted.connect(self._turn_by_hand)
        self.spans.span_clicked.connect(self._show_span)
        for widget in (self.chart, self.curve):
            widget.axis_moved.connect(self.spans.set_axis)
            widget.pointed.connect(lambda reading: self.pointed.emit("" if reading is None else reading.line))
        self.setup_panel.edit_wanted.connect(desk.edit)
        self.setup_panel.edit_finished.connect(desk.end_edit)
        self.parts_panel.visibility_changed.connect(self.scene_view.set_visibility)

    def set_theme(self, theme: Theme) -> None:
        """Take over colours everywhere."""
        for widget in (
            self.banner,
            self.pose_bar,
            self.setup_panel,
            self.parts_panel,
            self.scene_view,
            self.chart,
            self.curve,
            self.discs,
            self.spans,
            self.remedies,
            self.fields,
            self.time_curve,
        ):
            widget.set_theme(theme)

    def show_scene(self, scene: Scene) -> None:
        """Show another scene in the room, as a preview does."""
        if scene is not self._scene:
            self.scene_view.set_scene(scene, keep_camera=not self._needs_camera)
            self._needs_camera = False
            self._scene = scene

    def show_beam(self, visible: bool) -> None:
        """Show or hide the beam axis and a field's outline."""
        self._with_beam = visible
        document = self._desk.document
        self.scene_view.set_beam(visible, collimator_deg=document.setup.collimator_deg if document else None)

    def _turn_by_hand(self, gantry_deg: float, couch_deg: float) -> None:
        self.turned_by_hand.emit()
        self._desk.go_to(gantry_deg, couch_deg)

    def _show_span(self, span: Span) -> None:
        """Show where a span begins and ends in the room, until another couch angle or set-up is looked at."""
        ends = span.gantry_from_deg, span.gantry_to_deg
        self._span = span
        self.scene_view.set_arc(*ends, (angle_words(ends[0]), angle_words(ends[1])))

    def _forget_span(self) -> None:
        if self._span is not None:
            self._span = None
            self.scene_view.set_arc(0.0, 0.0, None)

    def show_fields(self, fields: Sequence[tuple[str, tuple[Point, ...], State | None]]) -> None:
        """Show a plan's fields on the chart, and the clearance over time while there are any."""
        self.chart.show_fields([ChartField(*field) for field in fields])
        self.time_curve.setVisible(bool(fields))

    def angle_view(self) -> AngleChart | ClearanceCurve:
        """Return the chart that is in use: the map, or the curve of a couch that cannot turn."""
        return self.chart if self.angles.currentWidget() is self.chart else self.curve

    def _on_opened(self, document: Document) -> None:
        room = document.setup.room
        gantry = room.gantry.low, room.gantry.high
        couch = room.couch.turntable.low, room.couch.turntable.high
        self.angles.setCurrentWidget(self.chart if couch[1] > couch[0] else self.curve)
        self.pose_bar.show_room(room)
        for widget in (self.chart, self.curve):
            widget.set_travel(gantry, couch)
            widget.set_readouts(room.gantry.readout, room.couch.turntable.readout)
            widget.show_map(None, None)
            widget.show_region(None, stale=False)
        self._spans_shown = None
        self.spans.show_spans(self._desk.couch_deg, None, stale=False)
        self.curve.show_spans(self._desk.couch_deg, (), stale=False)
        self.spans.set_travel(gantry)
        self.spans.set_readout(room.gantry.readout)
        self.discs.show_field(None)
        self.discs.set_share(None)
        self._needs_camera = True
        self._stale = False
        self._show_angles()
        self._show_document()

    def _on_closed(self) -> None:
        self._refresh.stop()
        self.chart.show_map(None, None)

    def _on_changed(self) -> None:
        # A hand makes more edits than anybody can read.
        if not self._refresh.isActive():
            self._refresh.start()
        # What is drawn was proved for the set-up before. It is told once, not at every step of a drag.
        stage = self._desk.stage
        if stage is not None and stage.assessment is not None and not self._stale and self._desk.assessment is None:
            self._stale = True
            self._show_region(stage.assessment, stale=True)

    def _show_document(self) -> None:
        document = self._desk.document
        if document is not None:
            self.banner.show_setup(document.setup)
            self.setup_panel.show_document(document)
            self.show_beam(self._with_beam)

    def _on_staged(self, stage: Stage) -> None:
        if stage.assessment is None:
            self._forget_span()
        labels = [part.label for part in stage.scene.parts]
        self.parts_panel.show_scene(stage.scene)
        self.setup_panel.set_messages(stage.scene.no_travel)
        chart = self.angle_view()
        chart.set_part_names(labels)
        self.spans.set_part_names(labels)
        chart.set_no_travel(stage.scene.no_travel)
        chart.show_map(stage.map, None if stage.assessment is None else stage.assessment.state)
        if stage.assessment is not None:
            self._stale = False
            self._show_region(stage.assessment, stale=False)
            self.discs.set_share(stage.share)
        self._show_discs()

    def _show_region(self, assessment: Assessment, *, stale: bool) -> None:
        self.angle_view().show_region(assessment.permitted_region, stale)
        self._show_spans(assessment, stale=stale)

    def _show_spans(self, assessment: Assessment, *, stale: bool) -> None:
        room = assessment.scene.setup.room
        couch_deg = self._desk.couch_deg
        shown = assessment, couch_deg, stale
        if shown == self._spans_shown:
            return
        self._spans_shown = shown
        spans: tuple[Span, ...] = ()
        if not assessment.scene.no_travel:
            tolerances = tolerances_of(room, assessment.options)
            spans = spans_at(assessment.proof, tolerances, assessment.scene, couch_deg, room.gantry.readout)
        self.spans.show_spans(couch_deg, spans, stale)
        self.curve.show_spans(couch_deg, spans, stale)

    def _show_discs(self) -> None:
        """Show the directions, if they are looked at."""
        stage = self._desk.stage
        if stage is None or stage.map is None or self.right_tabs.currentWidget() is not self.discs:
            return
        if stage.assessment is not None:
            self.discs.show_field(field_of(stage.assessment))
        else:
            self.discs.show_field(unproved_field(stage.map))

    def _show_angles(self) -> None:
        gantry_deg, couch_deg = self._desk.gantry_deg, self._desk.couch_deg
        if self._span is not None and self._span.couch_deg != couch_deg:
            self._forget_span()
        self.pose_bar.show_angles(gantry_deg, couch_deg)
        for widget in (self.scene_view, self.chart, self.curve, self.discs, self.spans):
            widget.set_pose(gantry_deg, couch_deg)

    def _on_posed(self, pose: Pose) -> None:
        assessment = self._desk.assessment
        proof = Proof.UNDER_WAY if assessment is None else Proof.DONE
        if not self._desk.is_own_scene:
            proof = Proof.OF_FIELD
        self.pose_bar.show_pose(pose, proof)
        self.show_witness(pose)
        stage = self._desk.stage
        if stage is not None and stage.assessment is not None:
            self._show_spans(stage.assessment, stale=self._stale)

    def show_witness(self, pose: Pose, before: str = "") -> None:
        """Show the nearest places of a pose, or the parts in contact; `before` goes before the words."""
        machine, other = pose.machine_part, pose.couch_part
        if machine is None or other is None or pose.state is State.NO_TRAVEL:
            self.scene_view.mark_parts(())
            self.scene_view.set_witness(None, None)
            return
        in_contact = pose.state is State.CONTACT
        self.scene_view.mark_parts((machine.label, other.label) if in_contact else ())
        words = "contact" if in_contact else clearance_text(pose.clearance_mm, 0)
        text = f"{before}{words}\n{machine.name} – {other.name}"
        self.scene_view.set_witness(pose.machine_point_mm, pose.couch_point_mm, text, pose.state)

    def _on_kept(self, kept: Kept | None) -> None:
        self.chart.show_kept(None if kept is None else kept.region)
        self.curve.show_kept_spans(None if kept is None else kept.spans)


def _fill(splitter: QSplitter, widgets: Sequence[tuple[QWidget, int]]) -> None:
    """Put widgets into a splitter, each with its share of what is left over."""
    for place, (widget, stretch) in enumerate(widgets):
        splitter.addWidget(widget)
        splitter.setStretchFactor(place, stretch)
