"""The best pair for a direction, against a search through all of them, one direction at a time."""

from dataclasses import replace

import numpy as np
import pytest
from numpy.typing import NDArray

from geometry.assess import Options, assess
from geometry.directions.axes import PatientAxes, angle_pairs, directions_patient
from geometry.directions.discs import BACK, FRONT, Hemisphere, pixel_places
from geometry.directions.field import DirectionField, field_of, unproved_field
from geometry.machine import Axis
from geometry.scene import Scene, build_scene
from geometry.states import CODE_OF, STATES, State
from geometry.sweep import ClearanceMap, grid_deg, sweep
from tests.geometry.small_rooms import post, setup_with

Array = NDArray[np.float64]

SCENE = build_scene(setup_with())
TRAVELS = [((-185.0, 185.0), (-95.0, 95.0)), ((-180.0, 180.0), (-180.0, 180.0)), ((-45.0, 190.0), (-30.0, 62.5))]
AXES = [PatientAxes(), PatientAxes("FFDL", 3.0, -2.0, 15.0)]


def random_field(
    gantry: tuple[float, float], couch: tuple[float, float], axes: PatientAxes, scene: Scene = SCENE
) -> DirectionField:
    rng = np.random.default_rng(5)
    grids = grid_deg(*gantry, 5.0), grid_deg(*couch, 5.0)
    shape = (len(grids[1]), len(grids[0]))
    clearance = np.where(rng.random(shape) < 0.2, 0.0, rng.uniform(1.0, 300.0, shape))
    clearance[rng.random(shape) < 0.05] = np.nan
    state = rng.choice([CODE_OF[State.SHORT], CODE_OF[State.UNPROVED], CODE_OF[State.PERMITTED]], shape)
    state = np.where(clearance == 0.0, CODE_OF[State.CONTACT], state)
    state = np.where(np.isnan(clearance), CODE_OF[State.UNPROVED], state).astype(np.int8)
    nobody, nowhere = np.full(shape, -1, np.int32), np.full((*shape, 3), np.nan)
    exact = ClearanceMap(scene, *grids, clearance, clearance - 20.0, nobody, nobody, nowhere, nowhere)
    return DirectionField(exact, axes, state, proved=True)


def spread(count: int) -> Array:
    vectors = np.random.default_rng(2).normal(size=(count, 3))
    return vectors / np.linalg.norm(vectors, axis=1, keepdims=True)


def slowly(field: DirectionField, direction: Array) -> list[tuple[int, int]]:
    """Return (row, column) of the grid's pairs nearest to each exact pair that gives a direction."""
    gantry, couch = field.exact.gantry_deg, field.exact.couch_deg
    pairs = angle_pairs(direction, field.axes, (gantry[0], gantry[-1]), (couch[0], couch[-1]))
    found = set()
    for pair in pairs:
        column = int(np.argmin(np.abs(gantry - pair.gantry_deg)))
        row = int(np.argmin(np.abs(couch - pair.couch_deg)))
        at_pole = gantry[column] in {-180.0, 0.0, 180.0}
        found |= {(r, column) for r in range(len(couch))} if at_pole else {(row, column)}
    return sorted(found)


@pytest.mark.parametrize(("gantry", "couch"), TRAVELS)
@pytest.mark.parametrize("axes", AXES)
def test_the_best_of_all_pairs(gantry: tuple[float, float], couch: tuple[float, float], axes: PatientAxes) -> None:
    field = random_field(gantry, couch, axes)
    directions = spread(300)
    best = field.over(directions)
    reached = 0
    for place, direction in enumerate(directions):
        pairs = slowly(field, direction)
        if not pairs:
            assert best.state[place] == CODE_OF[State.NO_TRAVEL]
            assert np.isnan([best.clearance_mm[place], best.gantry_deg[place], best.couch_deg[place]]).all()
            assert field.pairs_at(direction) == ()
            continue
        reached += 1
        known = [(field.exact.clearance_mm[pair], STATES[field.state[pair]]) for pair in pairs]
        permitted = [clearance for clearance, state in known if state is State.PERMITTED]
        assert (best.state[place] == CODE_OF[State.PERMITTED]) == bool(permitted)
        candidates = permitted or [clearance for clearance, _ in known]
        expected = np.nan if np.isnan(candidates).all() else np.nanmax(candidates)
        assert best.clearance_mm[place] == pytest.approx(expected, nan_ok=True)
        # What is said is what the map says of the pair that is named.
        row = int(np.flatnonzero(field.exact.couch_deg == best.couch_deg[place])[0])
        column = int(np.flatnonzero(field.exact.gantry_deg == best.gantry_deg[place])[0])
        assert (row, column) in pairs
        assert field.state[row, column] == best.state[place]
        named = field.pairs_at(direction)
        assert sorted((pair.couch_deg, pair.gantry_deg) for pair in named) == sorted(
            (field.exact.couch_deg[r], field.exact.gantry_deg[c]) for r, c in pairs
        )
        assert named[0].clearance_mm == pytest.approx(expected, nan_ok=True)
    assert reached > 50


@pytest.mark.parametrize("half", [FRONT, BACK])
def test_a_disc_says_what_its_directions_say(half: Hemisphere) -> None:
    field = random_field(*TRAVELS[0], AXES[1])
    disc = field.on_disc(half, 24)
    alone = field.over(half.directions(pixel_places(24)))
    assert np.array_equal(disc.clearance_mm, alone.clearance_mm, equal_nan=True)
    assert np.array_equal(disc.state, alone.state)
    # Corners are beyond the rim, the middle is not.
    assert disc.state[0, 0] == CODE_OF[State.NO_TRAVEL]
    assert disc.state[12, 12] != CODE_OF[State.NO_TRAVEL]


def test_another_map_on_the_same_grid_is_not_mistaken_for_the_first() -> None:
    field = random_field(*TRAVELS[0], AXES[0])
    nearer = replace(field.exact, clearance_mm=field.exact.clearance_mm / 2.0)
    first, second = field.on_disc(FRONT, 20), replace(field, exact=nearer).on_disc(FRONT, 20)
    assert np.nanmax(second.clearance_mm) == pytest.approx(np.nanmax(first.clearance_mm) / 2.0)


def test_the_steepest_directions_go_by_any_couch_angle() -> None:
    field = random_field(*TRAVELS[0], PatientAxes())
    column = int(np.flatnonzero(field.exact.gantry_deg == 0.0)[0])
    permitted = field.state[:, column] == CODE_OF[State.PERMITTED]
    expected = field.exact.clearance_mm[permitted, column].max()
    best = field.over(np.array([[0.0, -1.0, 0.0]]))
    assert best.clearance_mm[0] == expected
    assert len(field.pairs_at(np.array([0.0, -1.0, 0.0]))) == len(field.exact.couch_deg)


def test_a_couch_that_cannot_turn_leaves_a_line() -> None:
    scene = build_scene(setup_with([post("post", 40.0, 560.0)], turntable=Axis(0.0, 0.0)))
    field = unproved_field(sweep(scene, grid_deg(-180.0, 180.0, 10.0), np.zeros(1)))
    found = field.along_line()
    assert found is not None
    directions, best = found
    assert directions == pytest.approx(directions_patient(field.exact.gantry_deg, 0.0, PatientAxes()))
    inner = np.abs(field.exact.gantry_deg) < 180.0
    assert np.array_equal(best.clearance_mm[inner], field.exact.clearance_mm[0, inner])
    assert (field.on_disc(FRONT, 40).state == CODE_OF[State.NO_TRAVEL]).all()
    # Steps stay on it.
    stepped = field.stepped(FRONT, directions[20], 10.0, 3.0)
    assert np.abs(directions @ stepped).max() == pytest.approx(1.0)
    assert not np.allclose(stepped, directions[20])
    assert random_field(*TRAVELS[0], PatientAxes()).along_line() is None


def test_before_the_proof_nothing_is_permitted() -> None:
    exact = random_field(*TRAVELS[0], PatientAxes()).exact
    field = unproved_field(exact)
    assert not field.proved
    assert set(np.unique(field.state)) == {CODE_OF[kind] for kind in (State.CONTACT, State.SHORT, State.UNPROVED)}
    assert (field.state[exact.clearance_mm == 0.0] == CODE_OF[State.CONTACT]).all()
    assert (field.state[exact.slack_mm >= 0.0] == CODE_OF[State.UNPROVED]).all()


def test_without_travel_nothing_is_reached() -> None:
    scene = replace(SCENE, no_travel=("lateral is 200 mm beyond its travel",))
    field = random_field(*TRAVELS[0], PatientAxes(), scene)
    assert (field.on_disc(FRONT, 12).state == CODE_OF[State.NO_TRAVEL]).all()
    assert field.pairs_at(np.array([1.0, 0.0, 0.0])) == ()
    assert (unproved_field(field.exact).state == CODE_OF[State.NO_TRAVEL]).all()


def test_an_assessed_setup_brings_states_and_outlines() -> None:
    assessment = assess(setup_with([post("post", 40.0, 560.0)]), Options(10.0, 10.0, 1.0))
    field = field_of(assessment)
    assert field.proved
    assert field.state is assessment.state
    assert field.outlines
    assert (field.on_disc(FRONT, 30).state == CODE_OF[State.PERMITTED]).any()
