"""Fields, moves between them and their order, in rooms so small that what is short follows from a formula."""

import math
from collections.abc import Sequence
from dataclasses import replace

import pytest

from geometry import path_kernel
from geometry.assess import Options
from geometry.errors import Cancelled
from geometry.machine import Accessory, Arm, ArmPosition, Axis, Mount, Part
from geometry.prepare import prepare_path_kernels
from geometry.progress import Silent
from geometry.setup import Setup
from geometry.solids import Box
from geometry.states import State
from geometry.treatment.check import Planned, check_fields
from geometry.treatment.data import CheckReport, PlanField
from tests.geometry.small_rooms import (
    CORNER_DEG,
    CORNER_MM,
    GRAZED_MM,
    REQUIRED_MM,
    half_width_deg,
    moved_isocentre,
    post,
    setup_with,
)

OPTIONS = Options(edge_deg=1.0)
# A bar on the collimator: lying across it meets a post that it passes when turned by a quarter.
BAR = Part("bar", Mount.COLLIMATOR, Box((240.0, 20.0, 20.0), (0.0, 0.0, 400.0)))
PIN = Part("pin", Mount.FIXED, Box((10.0, 10.0, 10.0), (300.0, 100.0, 260.0)))


def field(name: str, *points: tuple[float, float], is_setup: bool = False) -> PlanField:
    return PlanField(name, points, is_setup=is_setup)


def check(setup: Setup, *fields: PlanField | Planned, options: Options = OPTIONS) -> CheckReport:
    planned = [one if isinstance(one, Planned) else Planned(one, setup) for one in fields]
    return check_fields(setup, planned, options)


def states(found: Sequence[object]) -> list[State]:
    return [one.state for one in found]  # type: ignore[attr-defined]


# Fields


def test_an_arc_that_grazes_a_thin_pin_between_two_control_points_is_found() -> None:
    """The head is short of the pin for 0.3 deg of an arc whose control points are 60 deg apart."""
    setup = setup_with([post("pin", 60.35, GRAZED_MM)])
    assert 0.29 < 2.0 * half_width_deg(GRAZED_MM) < 0.31
    report = check(setup, field("arc", (30.0, 0.0), (90.0, 0.0), (120.0, 0.0)))
    (found,) = report.fields
    assert found.state is State.SHORT
    assert not report.permitted
    assert found.place is not None
    assert found.labels(found.place) == ("gantry/head", "room/pin")
    assert found.place.clearance_mm == pytest.approx(GRAZED_MM - CORNER_MM, abs=0.1)
    assert found.shortfall_mm == pytest.approx(REQUIRED_MM - (GRAZED_MM - CORNER_MM), abs=0.1)
    first = found.verdict.first_short
    assert first is not None
    assert first.gantry_deg == pytest.approx(60.35 - CORNER_DEG - half_width_deg(GRAZED_MM), abs=0.004)


def test_each_verdict_is_told_with_its_place() -> None:
    near_mm = CORNER_MM + 3.0
    setup = setup_with([post("post", 60.0, 500.0), post("near", -60.0, near_mm)])
    end = -60.0 + CORNER_DEG + half_width_deg(near_mm) + 0.5
    report = check(
        setup,
        field("clear", (0.0, 0.0)),
        field("contact", (0.0, 0.0), (60.0, 0.0)),
        field("within", (0.0, 0.0), (end, 0.0)),
        field("gone", (0.0, 0.0), (0.0, 120.0)),
    )
    clear, contact, within, gone = report.fields
    assert states(report.fields) == [State.PERMITTED, State.CONTACT, State.UNPROVED, State.NO_TRAVEL]
    assert clear.place is clear.verdict.nearest
    assert math.isnan(clear.shortfall_mm)
    assert contact.place is not None
    assert contact.place.clearance_mm == 0.0
    # The path has room enough; half a degree further, within the tolerances, has not.
    assert within.place is not None
    assert within.place.slack_mm > 0.0
    assert within.within is not None
    assert within.shortfall_mm == -within.within.slack_mm > 0.0
    assert gone.place is None
    assert "couch = 120" in gone.verdict.reason


def test_a_doubt_is_never_permitted_and_hides_no_contact() -> None:
    setup = setup_with([post("post", 60.0, 500.0)])
    doubts = ("nobody knows",)
    report = check(
        setup,
        Planned(field("clear", (0.0, 0.0)), setup, doubts),
        Planned(field("contact", (60.0, 0.0)), setup, doubts),
        Planned(field("blocked", (0.0, 0.0)), setup, blocked="another patient"),
        field("known", (-30.0, 0.0)),
        field("last", (-60.0, 0.0)),
    )
    assert states(report.fields) == [State.UNPROVED, State.CONTACT, State.UNPROVED, State.PERMITTED, State.PERMITTED]
    assert report.fields[0].verdict.reason == "nobody knows"
    assert report.fields[0].verdict.least is None
    assert report.fields[2].verdict.reason == "another patient"
    assert report.fields[2].verdict.nearest is None
    assert [move.state is State.PERMITTED for move in report.moves] == [False, False, False, True]
    assert report.moves[2].reason == "another patient"
    assert report.better is None


def test_times_are_those_of_both_axes_together_in_fields() -> None:
    setup = setup_with(gantry=Axis(-185.0, 185.0, 6.0), turntable=Axis(-95.0, 95.0, 3.0))
    report = check(setup, field("arc", (0.0, 0.0), (60.0, 15.0), (60.0, 30.0)), field("static", (60.0, 30.0)))
    assert [one.seconds for one in report.fields] == [10.0 + 5.0, 0.0]
    assert report.seconds == 15.0
    assert report.speeds.assumed == ()
    assert report.moves[0].steps == ()
    assert report.permitted


# Moves


def test_a_move_goes_the_plain_way_where_that_is_proved() -> None:
    report = check(setup_with(), field("one", (10.0, 0.0)), field("other", (70.0, 30.0)))
    (move,) = report.moves
    assert move.state is State.PERMITTED
    assert move.seconds == pytest.approx(60.0 / 6.0 + 30.0 / 3.0)
    assert move.turns in ((((10.0, 0.0), (70.0, 0.0), (70.0, 30.0)),), (((10.0, 0.0), (10.0, 30.0), (70.0, 30.0)),))
    assert report.permitted


def test_a_move_finds_its_way_round_what_stands_in_it() -> None:
    device = Part("arm", Mount.COUCH, Box((60.0, 60.0, 60.0), (0.0, 450.0, 50.0)), kind="device")
    report = check(setup_with(devices=[device]), field("before", (-40.0, 90.0)), field("behind", (-140.0, 90.0)))
    (move,) = report.moves
    assert move.state is State.PERMITTED
    (corners,) = move.turns
    assert corners[0] == (-40.0, 90.0)
    assert corners[-1] == (-140.0, 90.0)
    assert min(couch for _, couch in corners) < 85.0


def test_a_move_without_a_way_names_what_is_in_it() -> None:
    setup = setup_with([post("post", 60.0, 500.0), post("other", 100.0, 700.0)])
    report = check(setup, field("one", (0.0, 0.0)), field("behind", (130.0, 0.0)))
    (move,) = report.moves
    assert states(report.fields) == [State.PERMITTED, State.PERMITTED]
    assert move.state is State.CONTACT
    assert move.in_the_way == ("gantry/head", "room/post")
    assert "room/post" in move.reason
    assert math.isnan(move.seconds)
    assert not report.permitted


def test_branches_are_chosen_for_the_whole_plan() -> None:
    fields = [field("one", (5.0, 0.0)), field("beyond", (182.0, 0.0)), field("arc", (190.0, 0.0), (300.0, 0.0))]
    report = check(setup_with(), *fields)
    assert [one.points_deg[0][0] for one in report.fields] == [5.0, -178.0, -170.0]
    assert report.permitted


def test_a_collimator_that_turns_between_fields_is_proved_wherever_it_turns() -> None:
    setup = replace(setup_with([BAR, PIN]), collimator_deg=0.0)
    across = replace(setup, collimator_deg=90.0)
    # At gantry 49 the bar passes the pin only when it lies across.
    report = check(
        setup,
        Planned(field("along", (0.0, 0.0)), setup),
        Planned(field("across", (0.0, 0.0)), across),
        Planned(field("at the pin", (49.0, 0.0)), setup),
    )
    one, other = report.moves
    assert one.state is State.PERMITTED
    assert [step.kind for step in one.steps] == ["collimator"]
    assert one.seconds == pytest.approx(90.0 / 6.0)
    assert report.fields[2].state is State.PERMITTED
    # All that it can sweep meets the pin, so that it must turn before the gantry does.
    assert other.state is State.PERMITTED
    assert [step.kind for step in other.steps] == ["collimator", "turn"]


def test_a_field_at_another_isocentre_needs_a_table_move() -> None:
    setup = setup_with()
    away = moved_isocentre(setup, (0.0, 0.0, 60.0))
    report = check(setup, Planned(field("one", (0.0, 0.0)), setup), Planned(field("two", (90.0, 0.0)), away))
    (move,) = report.moves
    assert move.state is State.PERMITTED
    assert [step.kind for step in move.steps] == ["table", "turn"]
    table = move.steps[0].table
    assert table is not None
    assert table.length_mm == pytest.approx(60.0)
    assert "longitudinal" in move.steps[0].text
    assert "60.0 mm" in move.steps[0].text
    # The table's speed is not known.
    assert math.isnan(move.seconds)
    assert report.fields[0].scene is not report.fields[1].scene


def test_a_table_move_is_made_where_there_is_room_for_it() -> None:
    """At gantry 0 the patient would be lifted to the head; at gantry 180 there is nothing above."""
    setup = setup_with()
    # Raised by 395 mm the patient is 5 mm below the head at gantry 0.
    raised = moved_isocentre(setup, (0.0, 395.0, 0.0))
    report = check(setup, Planned(field("top", (0.0, 0.0)), setup), Planned(field("raised", (180.0, 0.0)), raised))
    (move,) = report.moves
    assert move.state is State.PERMITTED
    assert [step.kind for step in move.steps] == ["turn", "table"]


def test_what_is_fitted_by_hand_is_a_step_and_what_an_arm_does_is_not_proved() -> None:
    plain = setup_with([Part("tube", Mount.GANTRY, Box((50.0, 50.0, 50.0), (700.0, 0.0, 0.0)), arm="arm")])
    cone = Part("cone tube", Mount.GANTRY, Box((50.0, 50.0, 100.0), (0.0, 0.0, 400.0)), accessory="cone")
    arm = Arm("arm", (ArmPosition("parked", (0.0, 500.0, 0.0)), ArmPosition("out")))
    room = replace(plain.room, accessories=(Accessory("cone"),), arms=(arm,), parts=(*plain.room.parts, cone))
    setup = replace(plain, room=room)
    fitted = replace(setup, fitted=("cone",))
    out = replace(setup, arm_positions=(("arm", "out"),))
    report = check(
        setup,
        Planned(field("bare", (0.0, 0.0)), setup),
        Planned(field("cone", (30.0, 0.0)), fitted),
        Planned(field("imaging", (30.0, 0.0)), out),
    )
    assert states(report.fields) == [State.PERMITTED] * 3
    by_hand, by_arm = report.moves
    assert by_hand.state is State.PERMITTED
    assert [step.kind for step in by_hand.steps] == ["fit", "turn"]
    assert by_hand.steps[0].text == "fit 'cone'"
    assert math.isnan(by_hand.seconds)
    assert by_arm.state is State.UNPROVED
    assert "arm 'arm' from 'parked' to 'out'" in by_arm.reason
    assert "take off 'cone'" in by_arm.steps[0].text
    tilted = replace(setup, pitch_deg=2.0)
    (tilt,) = check(
        setup, Planned(field("flat", (0.0, 0.0)), setup), Planned(field("tilted", (0.0, 0.0)), tilted)
    ).moves
    assert tilt.state is State.UNPROVED
    assert "pitch from 0 to 2 deg" in tilt.reason


# Orders


def test_a_better_order_is_told_and_set_up_fields_stay_ahead() -> None:
    setup = setup_with()
    angles = (0.0, 120.0, 30.0, 90.0, 60.0)
    fields = [field(f"{angle}", (angle, 0.0)) for angle in angles]
    better = check(setup, *fields).better
    assert better is not None
    assert better.fields in ((0, 2, 4, 3, 1), (1, 3, 4, 2, 0))
    assert better.exact
    assert better.seconds_saved == pytest.approx((120 + 90 + 60 + 30) / 6.0 - 20.0)
    assert [points[0][0] for points in better.points_deg] == [angles[k] for k in better.fields]
    images = [field("image", (120.0, 0.0), is_setup=True), *fields]
    held = check(setup, *images).better
    assert held is not None
    assert held.fields == (0, 2, 4, 5, 3, 1)
    assert check(setup, *sorted(fields, key=lambda one: one.points_deg[0])).better is None
    assert check(setup, *fields, field("image", (0.0, 0.0), is_setup=True)).better is None


def test_fields_of_one_isocentre_are_put_together() -> None:
    setup = setup_with()
    away = moved_isocentre(setup, (0.0, 0.0, 60.0))
    where = (setup, away, setup, away)
    planned = [Planned(field(f"{k}", (10.0 * k, 0.0)), at) for k, at in enumerate(where)]
    better = check(setup, *planned).better
    assert better is not None
    assert better.changes_saved == 2
    assert [where[k] is setup for k in better.fields] in ([True, True, False, False], [False, False, True, True])


def test_an_order_with_a_way_is_found_where_the_plans_own_has_none() -> None:
    """A post parts the gantry's travel for the fitted set-up: it has to be left before the fitting."""
    tall = Part("tall", Mount.GANTRY, Box((20.0, 20.0, 60.0), (0.0, 0.0, 420.0)), accessory="tall")
    plain = setup_with([post("post", 60.0, 420.0), tall])
    setup = replace(plain, room=replace(plain.room, accessories=(Accessory("tall"),)))
    fitted = replace(setup, fitted=("tall",))
    planned = [
        Planned(field("fitted", (0.0, 0.0)), fitted),
        Planned(field("bare, beyond", (120.0, 0.0)), setup),
        Planned(field("fitted, beyond", (130.0, 0.0)), fitted),
        Planned(field("bare", (10.0, 0.0)), setup),
    ]
    report = check(setup, *planned)
    assert states(report.fields) == [State.PERMITTED] * 4
    assert report.permitted
    assert report.better is not None
    assert report.better.changes_saved == 1


# All of it


def test_a_field_that_fits_no_travel_is_told_within_the_travel_of_the_axis_that_it_fits() -> None:
    (found,) = check(setup_with(), field("gone", (250.0, 120.0))).fields
    assert found.state is State.NO_TRAVEL
    assert found.points_deg == ((-110.0, 120.0),)


def test_devices_elsewhere_on_the_table_are_another_state_of_the_room() -> None:
    device = Part("rest", Mount.COUCH, Box((60.0, 60.0, 60.0), (0.0, 450.0, 50.0)), kind="device")
    setup = setup_with(devices=[device])
    moved = replace(setup, devices=(replace(device, solid=Box((60.0, 60.0, 60.0), (0.0, 250.0, 50.0))),))
    report = check(setup, Planned(field("one", (0.0, 0.0)), setup), Planned(field("two", (0.0, 0.0)), moved))
    assert report.fields[0].scene is not report.fields[1].scene
    assert [step.kind for step in report.moves[0].steps] == ["table"]


def test_no_fields_are_an_error_and_a_wish_to_stop_is_obeyed() -> None:
    class Stopped(Silent):
        def cancelled(self) -> bool:
            return True

    setup = setup_with()
    with pytest.raises(ValueError, match="no fields"):
        check_fields(setup, [], OPTIONS)
    with pytest.raises(Cancelled):
        check_fields(setup, [Planned(field("one", (0.0, 0.0)), setup)], OPTIONS, Stopped())


def test_progress_rises_to_the_end() -> None:
    class Told(Silent):
        def __init__(self) -> None:
            self.fractions: list[float] = []

        def report(self, fraction: float, message: str) -> None:
            assert message
            self.fractions.append(fraction)

    told = Told()
    setup = setup_with()
    angles = (0.0, 80.0, 40.0)
    report = check_fields(setup, [Planned(field(f"{a}", (a, 0.0)), setup) for a in angles], OPTIONS, told)
    assert report.better is not None
    assert told.fractions == sorted(told.fractions)
    assert told.fractions[-1] == 1.0


def test_preparing_leaves_nothing_of_a_check_to_be_compiled() -> None:
    prepare_path_kernels(Silent())
    kernels = path_kernel.search_line, path_kernel.prove_band
    before = [list(kernel.signatures) for kernel in kernels]
    assert all(before)
    check(setup_with(), field("arc", (0.0, 0.0), (50.0, 10.0)), field("static", (60.0, 0.0)))
    assert [list(kernel.signatures) for kernel in kernels] == before
