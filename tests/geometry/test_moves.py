import math
from dataclasses import replace
from itertools import permutations, product

import numpy as np
import pytest

from geometry.assess import Options, proof_steps, tolerances_of
from geometry.field_order import Node, order_cost, quickest_order
from geometry.machine import Axis, Mount, Part
from geometry.moves import Field, MovePlanner, branches_of
from geometry.proof import prove
from geometry.scene import build_scene
from geometry.setup import Setup
from geometry.solids import Box
from geometry.spans import Tolerances
from geometry.states import State
from geometry.sweep import sweep
from geometry.table_moves import table_move
from tests.geometry.small_rooms import moved_isocentre, narrow_pass, post, setup_with

# Coarser than usual: what is asked here does not hang on it.
OPTIONS = Options(edge_deg=1.0)


def planner_of(setup: Setup, options: Options = OPTIONS) -> MovePlanner:
    scene = build_scene(setup)
    return MovePlanner(scene, prove(scene, *proof_steps(setup.room, options)), tolerances_of(setup.room, options))


def static(name: str, gantry_deg: float, couch_deg: float = 0.0) -> Field:
    return Field(name, ((gantry_deg, couch_deg),))


@pytest.fixture(scope="module")
def free() -> MovePlanner:
    return planner_of(setup_with())


@pytest.fixture(scope="module")
def with_arm() -> MovePlanner:
    """A device stands where the head passes, at couch 90 and gantry 270, and at couch 270 and gantry 90."""
    device = Part("arm", Mount.COUCH, Box((60.0, 60.0, 60.0), (0.0, 450.0, 50.0)), kind="device")
    return planner_of(setup_with(devices=[device]))


# Ways


def test_a_move_turns_one_axis_after_the_other_and_takes_its_time(free: MovePlanner) -> None:
    plan = free.plan([static("one", 10.5), static("other", 70.5, 30.25)])
    (move,) = plan.moves
    assert move.verdict.state is State.PERMITTED
    assert move.seconds == pytest.approx(60.0 / 6.0 + 30.25 / 3.0)
    assert plan.speeds.assumed == ("gantry", "couch")
    assert move.points_deg in (
        ((10.5, 0.0), (70.5, 0.0), (70.5, 30.25)),
        ((10.5, 0.0), (10.5, 30.25), (70.5, 30.25)),
    )
    assert plan.permitted
    assert plan.seconds == move.seconds


def test_speeds_of_the_room_count() -> None:
    quick = planner_of(setup_with(gantry=Axis(-185.0, 185.0, 12.0), turntable=Axis(-95.0, 95.0, 5.0)))
    plan = quick.plan([static("one", 0.0), static("other", 60.0, 50.0)])
    assert plan.speeds.assumed == ()
    assert plan.seconds == pytest.approx(60.0 / 12.0 + 50.0 / 5.0)


def test_a_wall_in_the_plane_is_walked_round(with_arm: MovePlanner) -> None:
    plan = with_arm.plan([static("before", -40.0, 90.0), static("behind", -140.0, 90.0)])
    (move,) = plan.moves
    assert move.verdict.state is State.PERMITTED
    assert move.points_deg[0] == (-40.0, 90.0)
    assert move.points_deg[-1] == (-140.0, 90.0)
    assert min(couch for _, couch in move.points_deg) < 85.0
    assert move.seconds > 100.0 / 6.0 + 1.0
    assert all(
        sum(a != b for a, b in zip(p, q, strict=True)) == 1
        for p, q in zip(move.points_deg, move.points_deg[1:], strict=False)
    )
    assert with_arm._prover.verdict([(-40.0, 90.0), (-140.0, 90.0)]).state is State.CONTACT


@pytest.mark.parametrize(("come_from", "branch"), [(170.0, 182.0), (-170.0, -178.0)])
def test_a_field_at_182_is_reached_on_the_nearer_branch(free: MovePlanner, come_from: float, branch: float) -> None:
    plan = free.plan([static("one", come_from), static("beyond", 182.0)])
    assert plan.points_deg[1] == ((branch, 0.0),)
    assert plan.seconds == pytest.approx(abs(branch - come_from) / 6.0)
    assert plan.permitted


def test_the_branch_is_chosen_for_all_moves_together(free: MovePlanner) -> None:
    # Nearest to the first field is 182; the arc that follows starts at -170.
    fields = [static("one", 5.0), static("beyond", 182.0), Field("arc", ((-170.0, 0.0), (-60.0, 0.0)))]
    assert free.plan(fields).points_deg[1] == ((-178.0, 0.0),)


def test_without_a_way_the_parts_in_it_are_named() -> None:
    # The gantry cannot go round the other way.
    planner = planner_of(setup_with([post("post", 60.0, 500.0), post("other", 100.0, 700.0)]))
    (move,) = planner.plan([static("one", 0.0), static("behind", 130.0)]).moves
    assert move.verdict.state is State.CONTACT
    assert math.isnan(move.seconds)
    assert move.in_the_way is not None
    labels = [planner._scene.parts[part].label for part in move.in_the_way]
    assert labels == ["gantry/head", "room/post"]
    assert "'one' to 'behind'" in move.verdict.reason
    assert "room/post" in move.verdict.reason


def test_a_pass_too_narrow_for_the_plane_is_still_taken() -> None:
    # Between two posts the gantry has just more than its tolerances; the couch turns there.
    setup, middle = narrow_pass(2.1)
    planner = planner_of(setup)
    (move,) = planner.plan([static("one", middle), static("turned", middle, 40.0)]).moves
    assert move.verdict.state is State.PERMITTED
    assert move.points_deg == ((middle, 0.0), (middle, 40.0))
    assert move.seconds == pytest.approx(40.0 / 3.0)


def test_a_field_beyond_the_travel_is_said_to_be(free: MovePlanner) -> None:
    plan = free.plan([static("one", 0.0), static("gone", 0.0, 120.0), static("last", 30.0)])
    assert [move.verdict.state for move in plan.moves] == [State.NO_TRAVEL, State.NO_TRAVEL]
    assert "'gone'" in plan.moves[0].verdict.reason
    assert plan.points_deg[1] is None
    assert not plan.permitted
    assert math.isnan(plan.seconds)


def test_branches_keep_an_arc_in_one_piece() -> None:
    travels = (-185.0, 185.0), (-95.0, 95.0)
    assert branches_of(Field("arc", ((181.0, 350.0), (-179.0, 350.0))), *travels) == (
        ((181.0, -10.0), (-179.0, -10.0)),
    )
    assert branches_of(Field("arc", ((541.0, 0.0), (545.0, 0.0))), *travels) == (
        ((-179.0, 0.0), (-175.0, 0.0)),
        ((181.0, 0.0), (185.0, 0.0)),
    )
    assert branches_of(Field("long", ((0.0, 0.0), (400.0, 0.0))), *travels) == ()


@pytest.mark.parametrize("points", [(), ((math.nan, 0.0),), ((0.0, 1e6),)])
def test_a_field_without_angles_is_an_error(free: MovePlanner, points: tuple[tuple[float, float], ...]) -> None:
    with pytest.raises(ValueError, match="control points"):
        free.plan([static("one", 0.0), Field("none", points)])


def test_no_fields_have_no_moves(free: MovePlanner) -> None:
    assert free.plan([]).moves == ()
    assert free.suggest_order([]).fields == ()


# Orders


def test_a_better_order_is_suggested(free: MovePlanner) -> None:
    fields = [static(f"{gantry}", gantry) for gantry in (0.0, 120.0, 30.0, 90.0, 60.0)]
    order = free.suggest_order(fields)
    assert order.exact
    assert order.fields in ((0, 2, 4, 3, 1), (1, 3, 4, 2, 0))
    assert order.seconds == pytest.approx(20.0)
    held = free.suggest_order(fields, first=4)
    assert held.fields[0] == 4
    assert held.seconds == pytest.approx((60.0 + 120.0) / 6.0)


def test_up_to_eight_visits_no_order_is_quicker() -> None:
    rng = np.random.default_rng(6)
    for count in (1, 2, 4, 5):
        branches = rng.integers(1, 3, count).tolist()
        table = rng.uniform(1.0, 100.0, (count, 2, count, 2))

        def cost(one: Node, other: Node, table: np.ndarray = table) -> float:
            return float(table[(*one, *other)])

        for first in (None, count - 1):
            order, exact = quickest_order(branches, cost, first)
            assert exact
            assert first is None or order[0] == first
            best = min(
                sum(cost((a, p), (b, q)) for a, p, b, q in zip(every, chosen, every[1:], chosen[1:], strict=False))
                for every in permutations(range(count))
                if first is None or every[0] == first
                for chosen in product(*(range(branches[k]) for k in every))
            )
            assert order_cost(branches, cost, order) == pytest.approx(best)


def test_beyond_eight_visits_a_good_order_is_found() -> None:
    rng = np.random.default_rng(7)
    places = rng.permutation(14) * 10.0

    def cost(one: Node, other: Node) -> float:
        return abs(float(places[one[0]] - places[other[0]]))

    order, exact = quickest_order([1] * 14, cost)
    assert not exact
    assert sorted(order) == list(range(14))
    assert order_cost([1] * 14, cost, order) == pytest.approx(130.0)
    assert quickest_order([1] * 14, cost, first=5)[0][0] == 5


# The table


CEILING = Part("ceiling", Mount.FIXED, Box((300.0, 300.0, 20.0), (0.0, 0.0, 310.0)))
HIGH = (0.0, 150.0, 0.0)  # isocentre 150 mm to the back: the patient stands 150 mm higher


def none_of(setup: Setup) -> Tolerances:
    return tolerances_of(setup.room, Options(gantry_tolerance_deg=0.0, couch_tolerance_deg=0.0))


def test_a_table_move_is_proved_with_its_least_clearance() -> None:
    setup = setup_with([CEILING])
    found = table_move(setup, moved_isocentre(setup, HIGH), 180.0, 0.0, none_of(setup))
    assert found.state is State.PERMITTED
    assert found.length_mm == pytest.approx(150.0)
    # Patient's upper side from 50 to 200 mm, the ceiling at 300 mm.
    assert 0.0 < found.least_clearance_mm <= 100.0
    toward = table_move(setup, moved_isocentre(setup, (0.0, 188.0, 0.0)), 180.0, 0.0, none_of(setup))
    assert toward.state is State.PERMITTED
    assert 10.0 <= toward.least_clearance_mm <= 62.0


def test_a_table_move_falls_short_where_the_formula_says() -> None:
    setup = setup_with([CEILING])
    found = table_move(setup, moved_isocentre(setup, (0.0, 245.0, 0.0)), 180.0, 0.0, none_of(setup))
    assert found.state is State.SHORT
    assert found.first_share is not None
    # Short from 240 mm on.
    assert found.first_share * 245.0 == pytest.approx(240.0, abs=0.6)


def test_a_table_move_through_a_plate_is_in_contact_though_both_ends_are_free() -> None:
    plate = Part("plate", Mount.FIXED, Box((300.0, 300.0, 2.0), (0.0, 0.0, 120.0)))
    setup = setup_with([plate])
    beyond = moved_isocentre(setup, (0.0, 250.0, 0.0))
    still = none_of(setup)
    for end in (setup, beyond):
        assert table_move(end, end, 180.0, 0.0, still).state is State.PERMITTED
    found = table_move(setup, beyond, 180.0, 0.0, still)
    assert found.state is State.CONTACT
    assert found.first_short is not None
    assert found.first_short.clearance_mm == pytest.approx(10.0, abs=0.6)


def test_random_table_moves_that_are_permitted_are_clear_all_the_way() -> None:
    rng = np.random.default_rng(9)
    setup = setup_with([CEILING, Part("side", Mount.FIXED, Box((20.0, 300.0, 300.0), (260.0, 0.0, 0.0)))])
    states = []
    for _ in range(12):
        start, stop = rng.uniform(-210.0, 210.0, (2, 3))
        one, other = (moved_isocentre(setup, (float(p[0]), float(p[1]), float(p[2]))) for p in (start, stop))
        found = table_move(one, other, -160.0, 20.0, tolerances_of(setup.room, Options()))
        states.append(found.state)
        if found.state is State.PERMITTED:
            for share in rng.uniform(size=6):
                x, y, z = (float(value) for value in start + share * (stop - start))
                between = clearance_near(moved_isocentre(setup, (x, y, z)), rng)
                assert between >= found.least_clearance_mm - 1e-6
    assert states.count(State.PERMITTED) >= 2
    assert len(set(states)) >= 2


def clearance_near(setup: Setup, rng: np.random.Generator) -> float:
    gantry, couch = np.array([-160.0, 20.0]) + rng.uniform(-1.0, 1.0, 2)
    return float(sweep(build_scene(setup), np.array([gantry]), np.array([couch]), threads=1).clearance_mm[0, 0])


def test_set_ups_that_differ_otherwise_are_not_joined_by_a_table_move() -> None:
    setup = setup_with()
    for other in (replace(setup, pitch_deg=2.0), replace(setup, eccentric_deg=5.0), setup_with([CEILING])):
        found = table_move(setup, other, 0.0, 0.0, none_of(setup))
        assert found.state is State.UNPROVED
        assert "differ" in found.reason
