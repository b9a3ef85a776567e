"""The plan on the desk: opened, checked anew with every set-up, played, and given back."""

import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field, replace
from pathlib import Path

import numpy as np
import pytest
from PySide6.QtCore import QTimer
from PySide6.QtTest import QSignalSpy
from PySide6.QtWidgets import QWidget
from pytestqt.qtbot import QtBot

from app.document.document import open_document
from app.document.edits import set_value
from app.jobs import Jobs
from app.plan.gaps import MeasuredGap
from app.plan.timeline_clearance import curve_of_field
from app.window.desk import Desk
from app.window.fields.fields_desk import CURVE_LANE, LANE, FieldsDesk
from app.window.fields.fields_panel import FieldsPanel
from app.window.fields.player import FieldsPlayer
from app.window.fields.time_curve import TimeCurve
from geometry.assess import Options
from geometry.states import State
from tests.app.checked_plans import BREAST, PROSTATE, curve_of, mixed_report

PLAN = """\
field,gantry_from_deg,gantry_to_deg,direction,couch_from_deg,couch_to_deg,collimator_deg,fitted
Medial tangent,50,,,0,,,
Anterior arc,330,40,CW,0,,10,
Couch arc,30,75,CW,30,,,
"""
PATIENCE_MS = 60_000


@dataclass
class Bench:
    """A desk with a plan's panel and curve, as the window has them."""

    host: QWidget
    jobs: Jobs
    desk: Desk
    panel: FieldsPanel
    curve: TimeCurve
    fields: FieldsDesk
    qtbot: QtBot
    sheets: list[tuple[object, ...]] = field(default_factory=list)

    def wait(self, done: Callable[[], bool]) -> None:
        self.qtbot.waitUntil(done, timeout=PATIENCE_MS)

    def rest(self) -> None:
        self.wait(lambda: self.desk.assessment is not None and not self.jobs.is_busy())


@pytest.fixture
def bench(qtbot: QtBot) -> Iterator[Bench]:
    host = QWidget()
    qtbot.addWidget(host)
    host.resize(800, 800)
    jobs = Jobs()
    desk = Desk(jobs)
    panel, curve = FieldsPanel(host), TimeCurve(host)
    panel.resize(320, 760)
    sheets: list[tuple[object, ...]] = []
    fields = FieldsDesk(desk, panel, curve, lambda *what: sheets.append(what))
    made = Bench(host, jobs, desk, panel, curve, fields, qtbot, sheets)
    host.show()
    # Coarsely, for the sake of time.
    options = Options(gantry_step_deg=3.0, couch_step_deg=3.0, edge_deg=1.0)
    desk.open(replace(open_document(BREAST), options=options))
    made.rest()
    yield made
    fields.shutdown()
    desk.close()
    jobs.shutdown()
    assert not any(timer.isActive() for timer in fields.findChildren(QTimer))


@pytest.fixture
def plan(tmp_path: Path) -> Path:
    path = tmp_path / "breast.csv"
    path.write_text(PLAN, encoding="utf-8")
    return path


def _opened(bench: Bench, plan: Path) -> Bench:
    bench.fields.open(plan)
    bench.wait(lambda: bench.fields.checked is not None)
    bench.wait(lambda: not bench.jobs.is_busy(LANE) and not bench.jobs.is_busy(CURVE_LANE))
    return bench


def test_a_plan_is_opened_checked_and_shown(bench: Bench, plan: Path) -> None:
    spy, ways = QSignalSpy(bench.fields.fields_changed), QSignalSpy(bench.fields.directions_changed)
    _opened(bench, plan)
    assert bench.panel.name.text() == "breast.csv"
    assert bench.panel.summary.text().startswith("2 of 3 fields permitted, 1 contact")
    told = spy.at(spy.count() - 1)[0]
    assert [(name, state) for name, _, state in told] == [
        ("Medial tangent", State.PERMITTED),
        ("Anterior arc", State.PERMITTED),
        ("Couch arc", State.CONTACT),
    ]
    assert told[1][1] == ((-30.0, 0.0), (40.0, 0.0))
    # Head first on the back, the beam at gantry 50 comes from the front and the left: x to the left, y to the back.
    name, directions = ways.at(ways.count() - 1)[0][0]
    assert name == "Medial tangent"
    np.testing.assert_allclose(directions, [[np.sin(np.radians(50.0)), -np.cos(np.radians(50.0)), 0.0]], atol=1e-9)
    assert len(ways.at(ways.count() - 1)[0][1][1]) == 36
    bench.panel.sheet.click()
    assert bench.sheets[0][0] is bench.fields.checked.report
    assert bench.sheets[0][1] == (), "nobody has measured anything"


def test_another_set_up_makes_the_verdicts_stale_and_then_new(bench: Bench, plan: Path) -> None:
    _opened(bench, plan)
    before = bench.fields.checked
    assert before is not None
    spy = QSignalSpy(bench.fields.fields_changed)
    bench.desk.edit(set_value("isocentre.left_mm", 70.0), "isocentre", None)
    # At once, long before anything is proved.
    assert not bench.panel.sheet.isEnabled()
    assert "has changed" in bench.panel.message.text()
    assert {state for _, _, state in spy.at(0)[0]} == {None}
    assert bench.fields.player.curve is None
    bench.wait(lambda: bench.fields.checked is not before)
    bench.rest()
    assert bench.fields.checked.report.setup is bench.desk.document.setup
    assert bench.panel.message.isHidden()
    assert bench.panel.sheet.isEnabled()
    assert None not in {state for _, _, state in spy.at(spy.count() - 1)[0]}


def test_a_step_taken_back_brings_the_verdicts_back(bench: Bench, plan: Path) -> None:
    _opened(bench, plan)
    before = bench.fields.checked
    bench.panel.choose_field(1)
    bench.desk.edit(set_value("isocentre.left_mm", 70.0), "isocentre", None)
    assert bench.fields.player.curve is None
    bench.desk.undo()
    assert bench.panel.sheet.isEnabled()
    assert bench.fields.player.curve is not None
    bench.rest()
    assert bench.fields.checked is before


def test_a_plan_that_cannot_be_read_leaves_the_one_before(bench: Bench, plan: Path, tmp_path: Path) -> None:
    _opened(bench, plan)
    before = bench.fields.checked
    bad = tmp_path / "bad.csv"
    bad.write_text("field,gantry_from_deg\nA,north\n", encoding="utf-8")
    spy = QSignalSpy(bench.fields.failed)
    bench.fields.open(bad)
    bench.wait(lambda: spy.count() == 1)
    assert any("north" in text for text in spy.at(0)[0])
    assert bench.panel.summary.text().startswith("2 of 3")
    assert "north" in bench.panel.message.text()
    assert bench.fields.checked is before
    bench.desk.edit(set_value("isocentre.left_mm", 81.0), "isocentre", None)
    bench.wait(lambda: bench.fields.checked is not before)
    assert bench.panel.name.text() == "breast.csv"


def test_a_field_with_another_set_up_is_shown_in_its_own(bench: Bench, plan: Path) -> None:
    """The arc has the collimator at 10 degrees, the desk at any angle."""
    _opened(bench, plan)
    scenes, chosen = QSignalSpy(bench.fields.scene_wanted), QSignalSpy(bench.fields.chosen_changed)
    bench.panel.choose_field(1)
    scene = scenes.at(scenes.count() - 1)[0]
    assert scene.setup.collimator_deg == 10.0
    assert chosen.at(0)[0] == ((-30.0, 0.0), (40.0, 0.0))
    bench.panel.choose_field(0)
    assert scenes.at(scenes.count() - 1)[0] is None


def test_playing_a_field_drives_the_pose(bench: Bench, plan: Path) -> None:
    _opened(bench, plan)
    bench.panel.choose_field(1)
    assert bench.panel.play.isEnabled()
    bench.panel.play.speed_wanted.emit(10)
    bench.panel.play.play_wanted.emit(True)
    bench.wait(lambda: bench.desk.gantry_deg > -10.0)
    assert bench.fields.player.is_playing
    # All of the arc takes 70/6 s, and 1.2 s at ten times that.
    bench.wait(lambda: not bench.fields.player.is_playing)
    assert bench.desk.gantry_deg == pytest.approx(40.0)
    assert bench.panel.play.time.text() == "0:11 of 0:11"
    assert bench.panel.play.play.accessibleName() == "Play"


def test_the_whole_treatment_runs_through_every_field(bench: Bench, plan: Path) -> None:
    _opened(bench, plan)
    bench.panel.play.whole_wanted.emit(True)
    curve = bench.fields.player.curve
    assert curve is not None
    seen = []
    for segment in curve.timeline.segments:
        bench.fields.player.seek((segment.start_s + segment.stop_s) / 2.0)
        gantry_deg, couch_deg = segment.angles_at((segment.start_s + segment.stop_s) / 2.0)
        assert (bench.desk.gantry_deg, bench.desk.couch_deg) == (pytest.approx(gantry_deg), pytest.approx(couch_deg))
        seen.append(segment.field)
    assert [place for place in seen if place is not None] == [0, 1, 2]
    bench.curve.time_wanted.emit(1.0)
    assert bench.fields.player.seconds == 1.0


def test_a_place_is_gone_to_in_the_fields_own_scene(bench: Bench, plan: Path) -> None:
    _opened(bench, plan)
    asked = QSignalSpy(bench.fields.remedies_wanted)
    bench.panel.choose_field(2)
    bench.panel.detail.remedies.click()
    place = bench.fields.checked.report.fields[2].place
    assert (bench.desk.gantry_deg, bench.desk.couch_deg) == (place.gantry_deg, place.couch_deg)
    assert asked.count() == 1


def test_what_is_said_of_accessories_and_tables_is_checked(bench: Bench, plan: Path) -> None:
    _opened(bench, plan)
    before = bench.fields.checked
    bench.panel.fit_said.emit(0, "cone")
    bench.wait(lambda: bench.fields.checked is not before)
    assert bench.fields.checked.report.fields[0].scene.setup.fitted == ("cone",)
    before = bench.fields.checked
    bench.panel.table_said.emit("setup")
    bench.wait(lambda: bench.fields.checked is not before)
    assert bench.panel.table.currentData() == "setup"
    # What was said before still holds.
    assert bench.fields.checked.report.fields[0].scene.setup.fitted == ("cone",)


def test_gaps_are_kept_for_the_set_up(bench: Bench, plan: Path) -> None:
    _opened(bench, plan)
    checked = bench.fields.checked
    place = checked.places[0]
    spy = QSignalSpy(bench.fields.gaps_changed)
    for measured in (180.0, 190.0):
        bench.panel.gap_typed.emit(MeasuredGap(place.field, place.gantry_deg, place.couch_deg, measured))
    # The second one stands in the place of the first.
    (gap,) = spy.at(1)[0]
    assert (gap.measured_mm, gap.fingerprint) == (190.0, checked.fingerprint)
    other = MeasuredGap(place.field, place.gantry_deg, place.couch_deg, 170.0, fingerprint="of another set-up")
    bench.fields.set_gaps((other, gap))
    bench.panel.gap_typed.emit(MeasuredGap(place.field, place.gantry_deg, place.couch_deg, 191.0))
    assert [one.measured_mm for one in bench.fields.gaps] == [170.0, 191.0]
    bench.panel.gap_removed.emit(bench.fields.gaps[1])
    assert bench.fields.gaps == (other,)


def test_without_a_set_up_there_is_no_plan(bench: Bench, plan: Path) -> None:
    _opened(bench, plan)
    bench.desk.close()
    assert bench.fields.checked is None
    assert not bench.fields.open(plan)
    assert not bench.jobs.is_busy(LANE)


def test_another_document_leaves_the_plan(bench: Bench, plan: Path) -> None:
    _opened(bench, plan)
    spy = QSignalSpy(bench.fields.fields_changed)
    bench.desk.open(open_document(PROSTATE))
    assert bench.fields.checked is None
    assert spy.at(0)[0] == []
    assert "Open a treatment plan" in bench.panel.summary.text()


# The player by itself.


def test_the_player_pauses_at_the_tightest_place(qtbot: QtBot) -> None:  # noqa: ARG001 - there has to be an application
    curve = curve_of_field(curve_of("mixed_report"), 3)
    tight = curve.tight[0].seconds
    player = FieldsPlayer()
    player.set_curve(curve)
    player.pausing = True
    player.play()
    for _ in range(200):
        if not player.is_playing:
            break
        player.advance(0.1)
    assert player.seconds == pytest.approx(tight)
    # And goes on from there.
    player.play()
    player.advance(0.1)
    assert player.seconds == pytest.approx(tight + 0.1)
    player.pause()
    assert not player.is_playing


def test_the_player_steps_and_stays_within_its_time(qtbot: QtBot) -> None:  # noqa: ARG001 - as above
    curve = curve_of("mixed_report")
    player = FieldsPlayer()
    spy = QSignalSpy(player.moved)
    player.seek(5.0)
    assert spy.count() == 0
    player.set_curve(curve)
    player.step(1)
    assert player.seconds == min(tight.seconds for tight in curve.tight if tight.seconds > 0.0)
    player.seek(1e9)
    assert player.seconds == curve.timeline.seconds
    player.step(-1)
    assert player.seconds == max(tight.seconds for tight in curve.tight if tight.seconds < curve.timeline.seconds)
    assert mixed_report().fields


def test_the_players_clock_is_the_walls(qtbot: QtBot) -> None:
    player = FieldsPlayer()
    player.set_curve(curve_of("mixed_report"))
    player.speed = 4
    start = time.perf_counter()
    player.play()
    qtbot.waitUntil(lambda: player.seconds > 1.0, timeout=5000)
    took = time.perf_counter() - start
    player.pause()
    # A slow machine may show fewer pictures, and never runs ahead of the clock.
    assert player.seconds <= 4.0 * took + 0.2
