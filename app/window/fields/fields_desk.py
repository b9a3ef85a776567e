"""The plan on the desk: read, checked whenever the set-up is proved anew, shown, and played."""

from collections.abc import Callable, Sequence
from dataclasses import replace
from functools import partial
from pathlib import Path
from typing import Final

from PySide6.QtCore import QObject, QTimer, Signal

from app.document.document import Document
from app.jobs import Job
from app.live import Stage
from app.plan.check import TableFrom
from app.plan.gaps import GapRow, MeasuredGap, compare_gaps
from app.plan.timeline_clearance import ClearanceOverTime, curve_of_field
from app.window.desk import Desk
from app.window.fields.fields_panel import FieldsPanel
from app.window.fields.player import FieldsPlayer
from app.window.fields.time_curve import TimeCurve
from app.window.fields.work import Asked, Checked, check_file, curve_of_report, directions_of, is_same_place
from geometry.errors import BadInput
from geometry.scene import Scene
from geometry.treatment.data import CheckReport, FieldCheck
from geometry.treatment.stages import state_of

LANE: Final = "check"
CURVE_LANE: Final = "clearance over time"
_REST_MS: Final = 400

WriteSheet = Callable[[CheckReport, tuple[GapRow, ...]], None]


class FieldsDesk(QObject):
    """Keeps a plan's verdicts up to date and drives the pose while it is played.

    `fields_changed` (list of (name, points (gantry, couch), State or None while not known)) for charts,
    `directions_changed` (list of (name, directions (n, 3), DICOM patient axes)) for the discs.
    `chosen_changed` (points of the chosen field, empty for none) for the shading. `scene_wanted` (Scene or None): what
    the room has to show, because the field that is chosen or played has another set-up than the desk's; None: the
    desk's own. `remedies_wanted` (FieldCheck): its place has been gone to. `gaps_changed` (tuple of MeasuredGap).
    `failed` (list of texts): a plan that cannot be read or checked. `told` (text). `write_sheet` (report, measured
    gaps beside the computed ones) is called when the sheet is asked for.
    """

    fields_changed = Signal(list)
    directions_changed = Signal(list)
    chosen_changed = Signal(tuple)
    scene_wanted = Signal(object)
    remedies_wanted = Signal(object)
    gaps_changed = Signal(tuple)
    failed = Signal(list)
    told = Signal(str)

    def __init__(
        self,
        desk: Desk,
        panel: FieldsPanel,
        curve: TimeCurve,
        write_sheet: WriteSheet | None = None,
        parent: QObject | None = None,
    ) -> None:
        super().__init__(parent)
        self._desk, self._panel, self._curve = desk, panel, curve
        self._write_sheet = write_sheet
        self.checked: Checked | None = None
        self.gaps: tuple[MeasuredGap, ...] = ()
        self.player = FieldsPlayer(self)
        self._whole: ClearanceOverTime | None = None
        self._plays_whole = False
        self._is_stale = False
        self._shown_scene: Scene | None = None
        # What is being read and checked, or waits for the proof.
        self._wanted: Asked | None = None
        self._timer = QTimer(self)
        self._timer.setSingleShot(True)
        self._timer.setInterval(_REST_MS)
        self._timer.timeout.connect(self._start)
        self._connect()

    def _connect(self) -> None:
        desk, panel, player = self._desk, self._panel, self.player
        desk.opened.connect(lambda _: self.close_plan())
        desk.closed.connect(self.close_plan)
        desk.changed.connect(self._on_changed)
        desk.staged.connect(self._on_staged)
        panel.check_wanted.connect(self.check_again)
        panel.sheet_wanted.connect(self._on_sheet)
        panel.field_chosen.connect(self._on_chosen)
        panel.scene_pose_wanted.connect(self._go_to)
        panel.remedies_wanted.connect(self.remedies_wanted)
        panel.fit_said.connect(self._on_fit)
        panel.table_said.connect(self._on_table)
        panel.order_wanted.connect(lambda _: self._start_curve())
        panel.gap_typed.connect(self._on_gap)
        panel.gap_removed.connect(self._on_gap_removed)
        panel.play.play_wanted.connect(lambda play: player.play() if play else player.pause())
        panel.play.whole_wanted.connect(self._on_whole)
        panel.play.speed_wanted.connect(lambda speed: setattr(player, "speed", speed))
        panel.play.pausing_wanted.connect(lambda pausing: setattr(player, "pausing", pausing))
        panel.play.step_wanted.connect(player.step)
        self._curve.time_wanted.connect(player.seek)
        player.moved.connect(self._on_moved)
        player.played.connect(panel.play.show_playing)

    # Plans.

    def open(self, path: Path) -> bool:
        """Read a plan's file and check it; the plan before stays until that has succeeded. False without a set-up."""
        if self._desk.document is None:
            return False
        self._panel.tell(f"Checking {path.name} …")
        self._want(Asked(path))
        return True

    def check_again(self) -> None:
        """Read the plan's file again and check it."""
        if self.checked is not None:
            self._want(replace(self.checked.asked, fields=None))

    def close_plan(self) -> None:
        """Work on no plan."""
        self._timer.stop()
        for lane in (LANE, CURVE_LANE):
            self._desk.jobs.cancel(lane)
        self._wanted = None
        self.checked = None
        self._whole = None
        self._is_stale = False
        self.set_gaps(())
        self._panel.show_report(None)
        self._show_curve()
        self._show_scene(None)
        self._show_fields()
        self.chosen_changed.emit(())

    def set_gaps(self, gaps: Sequence[MeasuredGap]) -> None:
        """Take over gaps that are kept with the set-up."""
        self.gaps = tuple(gaps)
        self._show_gaps()

    def let_go(self) -> None:
        """Look at no field any more: the document's own room again."""
        if not self.player.is_playing and self._shown_scene is not None:
            self._panel.choose_field(None)
            self._show_scene(None)

    def shutdown(self) -> None:
        """Stop every timer."""
        self._timer.stop()
        self.player.pause()

    def _want(self, asked: Asked) -> None:
        self._wanted = asked
        self._start()

    def _start(self) -> None:
        """Check what is wanted, once the set-up is proved: until then its own map comes first."""
        document, assessment, asked = self._desk.document, self._desk.assessment, self._wanted
        if asked is None or document is None or assessment is None:
            return
        if assessment.scene.setup is not document.setup or assessment.options != document.options:
            return
        work = partial(check_file, asked, document.setup, document.options)
        failed = partial(self._on_failed, asked)
        label = f"checking {asked.path.name}"
        self._desk.jobs.start_instead(Job(LANE, work, self._on_checked, on_error=failed, label=label))

    def _on_checked(self, checked: Checked) -> None:
        self._wanted = None
        self.checked = checked
        self._is_stale = not self._holds()
        self._panel.show_report(checked.report, checked.asked.path.name)
        self._panel.show_table(checked.asked.choices.table)
        self._panel.set_stale(self._is_stale)
        self._whole = None
        self._show_gaps()
        self._show_fields()
        self._on_chosen(self._chosen())
        self._start_curve()
        if self._is_stale:
            self._want(checked.asked)

    def _on_failed(self, asked: Asked, error: Exception) -> None:
        """Tell what went wrong; verdicts that are of the set-up before are made anew all the same."""
        self._wanted = None
        texts = [str(fault) for fault in error.faults] if isinstance(error, BadInput) else [str(error)]
        if self.checked is not None and self._is_stale and asked != self.checked.asked:
            self._want(self.checked.asked)
        self._panel.tell("Not checked: " + "; ".join(texts[:3]))
        self.failed.emit(texts)

    def _holds(self) -> bool:
        """Tell whether the report is that of the set-up as it is now."""
        document = self._desk.document
        if document is None or self.checked is None:
            return False
        return document.setup is self.checked.report.setup and document.options == self.checked.report.options

    def _on_changed(self, _: Document) -> None:
        """Mark verdicts of the set-up before; they are made anew once the one that is now is proved."""
        if self.checked is None:
            return
        if not self._holds():
            self._wanted = self._wanted or self.checked.asked
            self._mark(stale=True)
        elif self._is_stale:
            # A step was taken back: what was found holds again.
            if self._wanted == self.checked.asked:
                self._wanted = None
                self._desk.jobs.cancel(LANE)
            self._mark(stale=False)

    def _mark(self, *, stale: bool) -> None:
        if stale == self._is_stale:
            return
        self._is_stale = stale
        self._panel.set_stale(stale)
        # The room of a field of the set-up before would go on saying what no longer holds.
        self._show_scene(None)
        self._show_curve()
        self._show_fields()

    def _on_staged(self, stage: Stage) -> None:
        if stage.assessment is not None and self._wanted is not None:
            self._timer.start()

    def _on_fit(self, place: int, accessory: str) -> None:
        if self.checked is not None:
            choices = self.checked.asked.choices
            fits = {**(choices.fits or {}), str(place + 1): (accessory,) if accessory else ()}
            self._want(replace(self.checked.asked, choices=replace(choices, fits=fits)))

    def _on_table(self, table: TableFrom) -> None:
        if self.checked is not None:
            choices = replace(self.checked.asked.choices, table=table)
            self._want(replace(self.checked.asked, choices=choices))

    def _on_sheet(self) -> None:
        if self._write_sheet is not None and self.checked is not None and not self._is_stale:
            checked = self.checked
            self._write_sheet(checked.report, compare_gaps(self.gaps, checked.report, checked.fingerprint))

    # What is shown.

    def _chosen(self) -> FieldCheck | None:
        place = self._panel.chosen_field()
        return None if place is None or self.checked is None else self.checked.report.fields[place]

    def _on_chosen(self, check: FieldCheck | None) -> None:
        self.chosen_changed.emit(() if check is None else check.points_deg)
        if self._plays_whole and self.player.is_playing:
            return
        self._show_scene(None if check is None or self._is_stale else check.scene)
        if check is not None and not self._is_stale:
            place = check.place
            at = (place.gantry_deg, place.couch_deg) if place is not None else check.points_deg[0]
            self._desk.go_to(*at)
        if not self._plays_whole:
            self._show_curve()

    def _show_fields(self) -> None:
        fields = self.checked.report.fields if self.checked is not None else ()
        self.fields_changed.emit(
            [(check.field.name, check.points_deg, None if self._is_stale else check.state) for check in fields]
        )
        self.directions_changed.emit([(check.field.name, directions_of(check)) for check in fields])

    def _show_scene(self, scene: Scene | None) -> None:
        """Ask for the room of a field where that is another one than the desk's."""
        own = self.checked.report.setup if self.checked is not None else None
        if scene is not None and own is not None and state_of(scene.setup) == state_of(own):
            scene = None
        if scene is not self._shown_scene:
            self._shown_scene = scene
            self.scene_wanted.emit(scene)

    def _go_to(self, scene: Scene, gantry_deg: float, couch_deg: float) -> None:
        self.player.pause()
        self._show_scene(scene)
        self._desk.go_to(gantry_deg, couch_deg)

    # Playing.

    def _start_curve(self) -> None:
        if self.checked is None:
            return
        self._whole = None
        self._show_curve()
        work = partial(curve_of_report, self.checked.report, self._panel.better.isChecked())
        self._desk.jobs.start_instead(Job(CURVE_LANE, work, self._on_curve, label="clearance over time"))

    def _on_curve(self, curve: ClearanceOverTime) -> None:
        self._whole = curve
        self._show_curve()

    def _on_whole(self, whole: bool) -> None:
        self._plays_whole = whole
        self._show_curve()

    def _show_curve(self) -> None:
        """Show and play the whole treatment, or the field that is chosen, from its start on."""
        place = self._panel.chosen_field()
        curve, start_s = None, 0.0
        if self._whole is not None and self._whole.timeline.segments:
            if self._plays_whole:
                curve = self._whole
                start_s = curve.timeline.start_of(place) if place is not None else 0.0
            elif place is not None:
                curve = curve_of_field(self._whole, place)
        self.player.set_curve(None if self._is_stale else curve, start_s)
        self._curve.show_curve(curve, stale=self._is_stale)
        self._curve.set_time(start_s)
        self._panel.show_running(None, None)
        self._show_time()

    def _show_time(self) -> None:
        curve, seconds = self.player.curve, self.player.seconds
        if curve is None:
            self._panel.play.show_time(None, 0.0)
        else:
            self._panel.play.show_time(seconds, curve.timeline.seconds, self._curve.line_at(seconds))

    def _on_moved(self, seconds: float) -> None:
        curve = self.player.curve
        if curve is None:
            return
        segment, gantry_deg, couch_deg = curve.timeline.pose_at(seconds)
        self._curve.set_time(seconds)
        self._panel.show_running(segment.field, segment.move)
        self._show_time()
        if segment.kind != "out of reach":
            self._show_scene(segment.scene)
            self._desk.go_to(gantry_deg, couch_deg)

    # Gaps.

    def _show_gaps(self) -> None:
        checked = self.checked
        if checked is None:
            self._panel.show_gaps((), ())
            return
        self._panel.show_gaps(checked.places, compare_gaps(self.gaps, checked.report, checked.fingerprint))

    def _on_gap(self, gap: MeasuredGap) -> None:
        """Keep a gap that was typed, in the place of one for the same field, angles and set-up."""
        if self.checked is None:
            return
        typed = replace(gap, fingerprint=self.checked.fingerprint)
        self.gaps = (*(one for one in self.gaps if not is_same_place(one, typed)), typed)
        self._show_gaps()
        self.gaps_changed.emit(self.gaps)

    def _on_gap_removed(self, gap: MeasuredGap) -> None:
        self.gaps = tuple(one for one in self.gaps if one != gap)
        self._show_gaps()
        self.gaps_changed.emit(self.gaps)
