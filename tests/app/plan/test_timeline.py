"""When the machine is where, and how much is clear then."""

import math
from dataclasses import replace
from itertools import pairwise

import numpy as np
import pytest

from app.plan.timeline import STATIC_S, UNKNOWN_S, Timeline, timeline_of, timeline_of_field
from app.plan.timeline_clearance import STEP_DEG, ClearanceOverTime, clearance_along, curve_of_field, next_tight
from geometry.errors import Cancelled
from geometry.states import State
from tests.app.checked_plans import curve_of, mixed_report, shifted_report, zigzag_report
from tests.reference.exact import Exact

# The check's nearest approach is exact to this, mm.
NEAREST_MM = 0.1
REPORTS = {"mixed_report": mixed_report, "zigzag_report": zigzag_report, "shifted_report": shifted_report}


def test_times_follow_from_the_speeds() -> None:
    # The room's gantry turns at 6, its couch at 3 deg/s.
    report = mixed_report()
    arc = next(segment for segment in timeline_of(report).segments if segment.text == "Anterior arc")
    assert arc.stop_s - arc.start_s == pytest.approx(70.0 / 6.0)
    assert arc.stop_s - arc.start_s == pytest.approx(report.fields[1].seconds)
    turn = next(segment for segment in timeline_of(report).segments if segment.move == 0)
    # From 50 to -30 at the same couch angle.
    assert turn.stop_s - turn.start_s == pytest.approx(80.0 / 6.0)


def test_both_axes_run_together_in_a_field() -> None:
    timeline = timeline_of_field(shifted_report().fields[2], 2)
    segment, gantry_deg, couch_deg = timeline.pose_at(timeline.seconds / 2.0)
    # 60 deg of the gantry take as long as 20 of the couch, or longer; both arrive together.
    assert (gantry_deg, couch_deg) == (pytest.approx(50.0), pytest.approx(10.0))
    assert timeline.seconds == pytest.approx(shifted_report().fields[2].seconds)
    assert segment.is_timed


def test_an_axis_at_a_time_in_a_move() -> None:
    report = mixed_report()
    timeline = timeline_of(report)
    turn = next(segment for segment in timeline.segments if segment.kind == "turn" and len(segment.points_deg) == 3)
    for seconds in np.linspace(turn.start_s, turn.stop_s, 40):
        gantry_deg, couch_deg = turn.angles_at(float(seconds))
        first, corner, last = turn.points_deg
        assert (gantry_deg in {first[0], corner[0], last[0]}) or (couch_deg in {first[1], corner[1], last[1]})


def test_segments_follow_without_gaps_and_in_the_order_of_the_plan() -> None:
    for report in (mixed_report(), shifted_report()):
        segments = timeline_of(report).segments
        assert segments[0].start_s == 0.0
        assert all(one.stop_s == other.start_s for one, other in pairwise(segments))
        assert [one.field for one in segments if one.field is not None] == list(range(len(report.fields)))


def test_a_static_beam_is_a_stop_of_nominal_length() -> None:
    timeline = timeline_of_field(mixed_report().fields[0])
    assert timeline.seconds == STATIC_S
    assert timeline.segments[0].is_stop
    assert not timeline.segments[0].is_timed
    assert timeline.pose_at(1.0)[1:] == (50.0, 0.0)


def test_what_takes_no_known_time_says_so() -> None:
    report = shifted_report()
    segments = timeline_of(report).segments
    collimator = next(segment for segment in segments if segment.kind == "collimator")
    table = next(segment for segment in segments if segment.kind == "table")
    assert collimator.is_timed
    assert collimator.stop_s - collimator.start_s == pytest.approx(report.moves[0].steps[0].seconds)
    assert table.is_stop
    unknown = replace(report.moves[1], steps=tuple(replace(step, seconds=math.nan) for step in report.moves[1].steps))
    again = timeline_of(replace(report, moves=(report.moves[0], unknown)))
    table = next(segment for segment in again.segments if segment.kind == "table")
    assert not table.is_timed
    assert table.stop_s - table.start_s == UNKNOWN_S


def test_what_cannot_be_reached_is_not_posed_as_if() -> None:
    curve = curve_of("mixed_report")
    behind = next(k for k, one in enumerate(curve.timeline.segments) if one.text == "Behind the stop")
    assert curve.timeline.segments[behind].kind == "out of reach"
    inside = curve.segment == behind
    assert np.isnan(curve.clearance_mm[inside]).all()
    assert {curve.state_at(int(k)) for k in np.nonzero(inside)[0]} == {State.NO_TRAVEL}


def test_the_better_order_is_played_in_its_order() -> None:
    report = zigzag_report()
    better = report.better
    assert better is not None
    plain, other = timeline_of(report), timeline_of(report, better=True)
    assert [one.field for one in other.segments if one.field is not None] == list(better.fields)
    assert plain.seconds - other.seconds == pytest.approx(better.seconds_saved)


def test_a_field_begins_when_it_is_said_to() -> None:
    timeline = timeline_of(mixed_report())
    start = timeline.start_of(3)
    assert timeline.pose_at(start)[0].field == 3
    assert timeline.pose_at(start - 1e-6)[0].field is None
    with pytest.raises(ValueError, match="field = 99"):
        timeline.start_of(99)
    with pytest.raises(ValueError, match="without segments"):
        Timeline(()).segment_at(0.0)


def test_times_beyond_the_ends_are_the_ends() -> None:
    timeline = timeline_of_field(mixed_report().fields[1])
    assert timeline.pose_at(-5.0)[1] == pytest.approx(-30.0)
    assert timeline.pose_at(1e6)[1] == pytest.approx(40.0)


@pytest.mark.parametrize("name", REPORTS)
def test_the_curve_has_the_reports_places_in_it(name: str) -> None:
    """Each field's place is a sample, exactly; no other sample of it is nearer than the check's accuracy."""
    report, curve = REPORTS[name](), curve_of(name)
    found = {curve.timeline.segments[tight.segment].field: tight for tight in curve.tight}
    placed = [k for k, check in enumerate(report.fields) if check.place is not None]
    assert placed
    for field in placed:
        check = report.fields[field]
        tight, place = found[field], check.place
        assert place is not None
        assert curve.clearance_mm[tight.sample] == place.clearance_mm
        assert curve.slack_mm[tight.sample] == place.slack_mm
        assert curve.labels(tight.sample) == check.labels(place)
        _, gantry_deg, couch_deg = curve.timeline.pose_at(tight.seconds)
        if curve.timeline.segments[tight.segment].field == field:
            assert (gantry_deg, couch_deg) == (pytest.approx(place.gantry_deg), pytest.approx(place.couch_deg))
        nearest = check.verdict.nearest
        assert nearest is not None
        own = curve.clearance_mm[curve.segment == tight.segment]
        assert np.nanmin(own) <= nearest.clearance_mm <= np.nanmin(own) + NEAREST_MM


@pytest.mark.parametrize("name", REPORTS)
def test_no_sample_claims_more_than_is_there(name: str) -> None:
    """Samples against distances that are asked afresh, each pair of pieces for itself."""
    curve = curve_of(name)
    checked = 0
    for place, segment in enumerate(curve.timeline.segments):
        inside = np.nonzero((curve.segment == place) & np.isfinite(curve.clearance_mm))[0][::3]
        if segment.kind == "table" or not len(inside):
            continue
        clearance, slack = Exact(segment.scene).at(curve.gantry_deg[inside], curve.couch_deg[inside])
        np.testing.assert_allclose(curve.clearance_mm[inside], clearance, atol=1e-6)
        np.testing.assert_allclose(curve.slack_mm[inside], slack, atol=1e-6)
        checked += len(inside)
    assert checked > 20


@pytest.mark.parametrize("name", REPORTS)
def test_samples_are_a_degree_apart_at_most(name: str) -> None:
    curve = curve_of(name)
    same = np.diff(curve.segment) == 0
    assert (np.diff(curve.seconds)[same] >= 0.0).all()
    for angles in (curve.gantry_deg, curve.couch_deg):
        assert np.abs(np.diff(angles)[same]).max() <= STEP_DEG + 1e-6


@pytest.mark.parametrize("name", REPORTS)
def test_permitted_is_said_only_where_all_of_it_is_proved(name: str) -> None:
    curve = curve_of(name)
    for sample, place in enumerate(curve.segment):
        segment = curve.timeline.segments[int(place)]
        if segment.state is not State.PERMITTED:
            assert curve.state_at(sample) is not State.PERMITTED
    states = {curve.state_at(k) for k in range(len(curve.seconds))}
    assert State.PERMITTED in states
    if name == "mixed_report":
        assert states == set(State)


def test_a_table_move_shows_its_proved_bound() -> None:
    report, curve = shifted_report(), curve_of("shifted_report")
    table = next(k for k, one in enumerate(curve.timeline.segments) if one.kind == "table")
    found = next(step.table for step in report.moves[1].steps if step.kind == "table")
    assert found is not None
    assert set(curve.clearance_mm[curve.segment == table]) == {found.least_clearance_mm}
    assert np.isnan(curve.slack_mm[curve.segment == table]).all()


def test_required_is_that_of_the_nearest_pair() -> None:
    curve = curve_of("mixed_report")
    known = np.nonzero(np.isfinite(curve.required_mm))[0]
    assert len(known)
    for sample in known[::50]:
        scene = curve.timeline.segments[int(curve.segment[sample])].scene
        pair = (scene.parts[int(curve.machine_part[sample])], scene.parts[int(curve.couch_part[sample])])
        assert curve.required_mm[sample] == scene.required_mm(*pair)


def test_one_field_of_the_curve() -> None:
    whole = curve_of("mixed_report")
    part = curve_of_field(whole, 1)
    alone = clearance_along(timeline_of_field(mixed_report().fields[1], 1))
    np.testing.assert_allclose(part.seconds, alone.seconds, atol=1e-9)
    np.testing.assert_allclose(part.clearance_mm, alone.clearance_mm)
    assert [tight.sample for tight in part.tight] == [tight.sample for tight in alone.tight]
    assert part.timeline.segments[0].field == 1
    with pytest.raises(ValueError, match="field = 12"):
        curve_of_field(whole, 12)


def test_the_sample_of_a_time_is_of_its_segment() -> None:
    curve = curve_of("mixed_report")
    for place, segment in enumerate(curve.timeline.segments):
        assert curve.segment[curve.sample_at(segment.start_s)] == place


def test_between_two_samples_the_worse_one_speaks() -> None:
    curve = curve_of("mixed_report")
    for sample in range(0, len(curve.seconds) - 1, 5):
        start, stop = float(curve.seconds[sample]), float(curve.seconds[sample + 1])
        if curve.segment[sample] != curve.segment[sample + 1] or stop - start < 1e-3:
            continue
        for share in (0.2, 0.8):
            found = curve.sample_at(start + share * (stop - start))
            both = curve.clearance_mm[sample : sample + 2]
            assert found in {sample, sample + 1}
            assert np.isnan(both).any() or curve.clearance_mm[found] == both.min()


def test_next_and_last_tight_place() -> None:
    curve = curve_of("mixed_report")
    times = [tight.seconds for tight in curve.tight]
    assert times == sorted(times)
    first = next_tight(curve, -1.0, 1)
    assert first == times[0]
    assert next_tight(curve, times[-1], 1) is None
    assert next_tight(curve, times[0], -1) is None
    assert next_tight(curve, times[-1], -1) == max(time for time in times if time < times[-1] - 1e-6)


def test_the_least_of_all() -> None:
    assert _least_mm(curve_of("mixed_report")) == 0.0
    curve = curve_of("zigzag_report")
    assert _least_mm(curve) == np.nanmin(curve.clearance_mm)


def _least_mm(curve: ClearanceOverTime) -> float:
    assert curve.least is not None
    return float(curve.clearance_mm[curve.least])


def test_it_can_be_cancelled() -> None:
    class Stop:
        def report(self, fraction: float, message: str) -> None:
            raise AssertionError(f"{fraction} {message} after a cancel")

        def cancelled(self) -> bool:
            return True

    with pytest.raises(Cancelled):
        clearance_along(timeline_of(mixed_report()), Stop())
