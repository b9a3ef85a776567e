"""Spans: permitted gantry readings at one couch angle, their ends rounded to the readout, their least clearance."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from geometry.assess import Options, proof_steps, tolerances_of
from geometry.frames import normalised_deg
from geometry.machine import Readout
from geometry.proof import Steps, prove, steps_over
from geometry.scene import build_scene
from geometry.spans import Tolerances, permitted_runs, rounded_inwards, spans_at
from tests.geometry.made_rooms import block, in_room, made_proof, made_setup, on_gantry, plain_scene
from tests.reference.attacks import any_options, any_setup
from tests.reference.exact import Exact

FINE = Readout(resolution=1e-6)


def test_a_span_of_one_angle_has_the_bound_of_its_own_cell() -> None:
    gantry, couch = Steps(-0.25, 0.25, -0.25, 0.75, 4), Steps(0.0, 0.25, 0.0, 0.25, 1)
    proved = np.array([[True, False, False, False]])
    proof = made_proof(proved, gantry, couch)
    tolerances = Tolerances(0.0, 0.0, (-5.0, 1.0), (0.0, 0.25))
    (span,) = spans_at(proof, tolerances, plain_scene(), 0.1, Readout(resolution=0.5))
    assert (span.gantry_from_deg, span.gantry_to_deg, span.extent_deg) == (0.0, 0.0, 0.0)
    assert span.least_clearance_mm == proof.clearance_mm[0, 0]
    assert span.machine_part == 0


def test_a_gantry_that_is_free_everywhere_has_one_span() -> None:
    gantry, couch = steps_over((-185.0, 185.0), 1.0, 0.25), steps_over((-90.0, 90.0), 1.0, 0.25)
    proof = made_proof(np.ones((couch.count, gantry.count), dtype=bool), gantry, couch)
    tolerances = Tolerances(1.0, 1.0, (-185.0, 185.0), (-90.0, 90.0))
    (span,) = spans_at(proof, tolerances, plain_scene(), 30.0, Readout())
    assert (span.gantry_from_deg, span.gantry_to_deg, span.extent_deg) == (-185.0, 185.0, 370.0)


# Readouts


def shown_steps(readout: Readout, iec_deg: float) -> float:
    """Return what the readout shows, in whole turns of its own, over its resolution."""
    return (readout.zero + readout.sense * iec_deg) / readout.resolution


@given(
    low=st.floats(-184.9, 184.9),
    length=st.floats(0.0, 300.0),
    zero=st.sampled_from([0.0, 180.0, 90.0, 0.04, 359.95]),
    sense=st.sampled_from([1, -1]),
    resolution=st.sampled_from([0.1, 0.05, 0.5, 1.0, 0.01, 0.25]),
)
def test_ends_are_rounded_inwards_to_the_nearest_angle_that_is_shown(
    low: float, length: float, zero: float, sense: int, resolution: float
) -> None:
    readout = Readout(zero, 1 if sense > 0 else -1, resolution)
    high = min(low + length, 184.95)
    start, stop = rounded_inwards((low, high), (-185.0, 185.0), readout)
    assert low - 2e-9 <= start < low + resolution + 2e-9
    assert high - resolution - 2e-9 < stop <= high + 2e-9
    for end in (start, stop):
        steps = shown_steps(readout, end)
        assert steps == pytest.approx(round(steps), abs=1e-5)
        shown = readout.shown_deg(end) / resolution
        assert shown == pytest.approx(round(shown), abs=1e-5)


@pytest.mark.parametrize("sense", [1, -1])
def test_a_travel_end_stays_where_it_is(sense: int) -> None:
    readout = Readout(180.0, 1 if sense > 0 else -1, 0.5)
    travel = (-182.55, 177.3)
    assert rounded_inwards(travel, travel, readout) == travel
    assert rounded_inwards((-182.55, 10.2), travel, readout) == (-182.55, 10.0)
    assert rounded_inwards((10.2, 177.3), travel, readout) == (10.5, 177.3)


@pytest.mark.parametrize("seed", range(6))
def test_spans_lie_in_what_is_permitted_and_end_on_angles_that_are_shown(seed: int) -> None:
    rng = np.random.default_rng(seed)
    setup, options = any_setup(rng), any_options(rng)
    scene = build_scene(setup)
    proof = prove(scene, *proof_steps(setup.room, options))
    tolerances = tolerances_of(setup.room, options)
    readout = Readout(float(rng.choice([0.0, 180.0, 33.3])), rng.choice([1, -1]), float(rng.choice([0.1, 0.5, 1.0])))
    ends = tolerances.gantry_travel_deg
    for couch_deg in (float(b) for b in rng.uniform(*tolerances.couch_travel_deg, 15)):
        _, runs = permitted_runs(proof, tolerances, couch_deg)
        for span in spans_at(proof, tolerances, scene, couch_deg, readout):
            assert ends[0] <= span.gantry_from_deg <= span.gantry_to_deg <= ends[1]
            assert any(
                run.low_deg - 2e-9 <= span.gantry_from_deg and span.gantry_to_deg <= run.high_deg + 2e-9 for run in runs
            )
            for end in (span.gantry_from_deg, span.gantry_to_deg):
                shown = shown_steps(readout, end)
                assert end in ends or shown == pytest.approx(round(shown), abs=1e-5)
            assert span.required_mm == scene.required_mm(scene.parts[span.machine_part], scene.parts[span.couch_part])


@pytest.mark.parametrize("seed", range(6))
def test_the_least_clearance_of_a_span_holds_over_its_tolerance(seed: int) -> None:
    rng = np.random.default_rng(seed)
    setup, options = any_setup(rng), any_options(rng)
    scene = build_scene(setup)
    exact = Exact(scene)
    proof = prove(scene, *proof_steps(setup.room, options))
    tolerances = tolerances_of(setup.room, options)
    low, high = tolerances.couch_travel_deg
    for couch_deg in (float(b) for b in [low, high, *rng.uniform(low, high, 4)]):
        for span in spans_at(proof, tolerances, scene, couch_deg, FINE):
            around = tolerances.of_gantry_deg
            gantry_deg = np.linspace(span.gantry_from_deg - around, span.gantry_to_deg + around, 80)
            gantry_deg = np.concatenate([gantry_deg, gantry_deg])
            couch = couch_deg + rng.choice([-1.0, 0.0, 1.0], len(gantry_deg)) * tolerances.of_couch_deg
            clearance, slack = exact.at(gantry_deg, couch)
            assert span.least_clearance_mm <= clearance.min() + 1e-6
            assert slack.min() >= -1e-6


# The gantry's travel does not wrap


def test_an_angle_that_is_reached_on_two_branches_is_judged_on_each() -> None:
    # A post that the gantry meets at 180 deg alone: permitted neither at 180 nor at -180, and spans never cross them.
    setup = made_setup(
        on_gantry(block((60.0, 200.0, 60.0), (0.0, 0.0, 700.0))),
        in_room(block((60.0, 200.0, 60.0), (0.0, 0.0, -700.0))),
        gantry=(-185.0, 185.0),
    )
    options = Options(couch_tolerance_deg=0.0)
    scene = build_scene(setup)
    proof = prove(scene, *proof_steps(setup.room, options))
    tolerances = tolerances_of(setup.room, options)
    (span,) = spans_at(proof, tolerances, scene, 0.0, Readout())
    assert -175.0 < span.gantry_from_deg < -170.0
    assert 170.0 < span.gantry_to_deg < 175.0
    assert span.extent_deg == pytest.approx(span.gantry_to_deg - span.gantry_from_deg)
    assert span.gantry_from_deg == pytest.approx(-span.gantry_to_deg, abs=1e-9)
    # At 176 deg, and at -184 on the other branch, it leaves a span beyond each of the two.
    where = np.radians(176.0)
    setup = made_setup(
        on_gantry(block((6.0, 20.0, 6.0), (0.0, 0.0, 700.0))),
        in_room(block((6.0, 20.0, 6.0), (700.0 * np.sin(where), 0.0, 700.0 * np.cos(where)))),
        gantry=(-190.0, 190.0),
    )
    scene = build_scene(setup)
    proof = prove(scene, *proof_steps(setup.room, options))
    tolerances = tolerances_of(setup.room, options)
    spans = spans_at(proof, tolerances, scene, 0.0, Readout())
    assert [round(normalised_deg(span.gantry_from_deg)) for span in spans] == [170, 178, 178]
    assert [round(normalised_deg(span.gantry_to_deg)) for span in spans] == [174, 174, 190]
    assert sum(span.extent_deg for span in spans) < 380.0
