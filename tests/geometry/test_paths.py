import math

import numpy as np
import pytest

from geometry import path_kernel, paths
from geometry.assess import Options, proof_steps, tolerances_of
from geometry.errors import Cancelled
from geometry.legs import straight_runs
from geometry.path_kernel import HALVINGS, HALVINGS_OF_ONE
from geometry.paths import PathProver, Verdict, prove_path, with_collimator
from geometry.plane_kernel import DEPTH
from geometry.planes import planes_of
from geometry.proof import prove
from geometry.queries import rectangle_permitted
from geometry.scene import Scene, build_scene
from geometry.setup import Setup
from geometry.spans import Tolerances
from geometry.states import State
from tests.geometry.small_rooms import CORNER_DEG, CORNER_MM, GRAZED_MM, half_width_deg, narrow_pass, post, setup_with
from tests.reference.distances import LeastDistances
from tests.reference.rooms import random_setup

POST_DEG = 60.35


def tolerances(setup: Setup, gantry_deg: float = 1.0, couch_deg: float = 1.0) -> Tolerances:
    return tolerances_of(setup.room, Options(gantry_tolerance_deg=gantry_deg, couch_tolerance_deg=couch_deg))


def names(scene: Scene, machine: int, other: int) -> tuple[str, str]:
    return scene.parts[machine].label, scene.parts[other].label


@pytest.fixture(scope="module")
def grazed() -> Scene:
    return build_scene(setup_with([post("post", POST_DEG, GRAZED_MM)]))


# What grazes


def test_an_arc_that_grazes_a_part_between_its_control_points_is_found_where_it_begins(grazed: Scene) -> None:
    half = half_width_deg(GRAZED_MM)
    assert 0.29 < 2.0 * half < 0.31
    verdict = prove_path(grazed, [(0.0, 0.0), (50.0, 0.0), (120.0, 0.0)], tolerances(grazed.setup))
    assert verdict.state is State.SHORT
    assert math.isnan(verdict.least_clearance_mm)
    first = verdict.first_short
    assert first is not None
    assert first.gantry_deg == pytest.approx(POST_DEG - CORNER_DEG - half, abs=0.004)
    assert first.segment == 1
    assert first.slack_mm < 0.0
    assert names(grazed, first.machine_part, first.couch_part) == ("gantry/head", "room/post")
    assert verdict.nearest is not None
    assert verdict.nearest.clearance_mm == pytest.approx(GRAZED_MM - CORNER_MM, abs=0.1)


def test_an_arc_backwards_first_falls_short_at_the_other_end(grazed: Scene) -> None:
    verdict = prove_path(grazed, [(120.0, 5.0), (0.0, 5.0)], tolerances(grazed.setup))
    assert verdict.state is State.SHORT
    assert verdict.first_short is not None
    expected = POST_DEG + CORNER_DEG + half_width_deg(GRAZED_MM)
    assert verdict.first_short.gantry_deg == pytest.approx(expected, abs=0.004)


@pytest.mark.parametrize("couch_deg", [0.0, 40.0])
def test_the_tolerance_rectangle_about_an_arcs_end_decides_it(grazed: Scene, couch_deg: float) -> None:
    end = POST_DEG - CORNER_DEG - half_width_deg(GRAZED_MM) - 1.0
    start = (-100.0, 0.0)
    allowed = prove_path(grazed, [start, (end - 0.03, couch_deg)], tolerances(grazed.setup))
    assert allowed.state is State.PERMITTED
    refused = prove_path(grazed, [start, (end + 0.03, couch_deg)], tolerances(grazed.setup))
    assert refused.state is State.UNPROVED
    first = refused.first_short
    assert first is not None
    assert first.gantry_deg == pytest.approx(end, abs=0.03)
    assert names(grazed, first.machine_part, first.couch_part) == ("gantry/head", "room/post")
    assert first.slack_mm > 0.0


def test_a_contact_is_a_contact_even_if_short_comes_first() -> None:
    scene = build_scene(setup_with([post("post", 60.0, 500.0)]))
    verdict = prove_path(scene, [(0.0, 0.0), (120.0, 0.0)], tolerances(scene.setup))
    assert verdict.state is State.CONTACT
    assert verdict.first_short is not None
    assert verdict.first_short.clearance_mm == pytest.approx(10.0, abs=0.1)
    assert verdict.nearest is not None
    assert verdict.nearest.clearance_mm == 0.0


# Narrow passes


def test_a_pass_a_tenth_of_a_degree_wider_than_the_tolerances_is_permitted() -> None:
    setup, middle = narrow_pass(2.1)
    scene = build_scene(setup)
    around = tolerances(scene.setup)
    prover = PathProver(scene, around)
    assert prover.verdict([(middle, -60.0), (middle, 60.0)]).state is State.PERMITTED
    assert prover.verdict([(middle - 0.02, -60.0), (middle + 0.02, 60.0)]).state is State.PERMITTED
    assert prover.verdict([(middle, 0.0)]).state is State.PERMITTED
    assert prover.verdict([(middle + 0.06, -60.0), (middle + 0.06, 60.0)]).state is State.UNPROVED
    assert prover.verdict([(middle - 0.02, -60.0), (middle + 0.06, 60.0)]).state is State.UNPROVED
    # The proof of the plane is too coarse for it.
    window = (middle - 1.0, middle + 1.0), (-1.0, 1.0)
    proof = prove(scene, *proof_steps(scene.setup.room, Options()), window=window)
    assert not rectangle_permitted(proof, around, (middle, middle), (0.0, 0.0))


def test_a_pass_narrower_than_the_tolerances_is_refused() -> None:
    setup, middle = narrow_pass(1.98)
    scene = build_scene(setup)
    verdict = prove_path(scene, [(middle, -60.0), (middle, 60.0)], tolerances(scene.setup))
    assert verdict.state is State.UNPROVED
    assert verdict.first_short is not None
    assert verdict.first_short.couch_deg == -60.0


# Bounds, travel, input


def test_the_bound_is_near_the_truth_and_names_place_and_parts(grazed: Scene) -> None:
    verdict = prove_path(grazed, [(-170.0, 0.0), (-20.0, 0.0)], tolerances(grazed.setup, 0.0, 0.0))
    # The patient's corner faces the head when the gantry stands at 45 deg: 450 - 50 * sqrt(2) from it.
    assert verdict.state is State.PERMITTED
    assert verdict.least is not None
    assert 450.0 - 50.0 * math.sqrt(2.0) - 1.0 < verdict.least_clearance_mm <= 450.0 - 50.0 * math.sqrt(2.0)
    assert min(abs(abs(verdict.least.gantry_deg) - at) for at in (45.0, 135.0)) < 8.0
    assert verdict.least.slack_mm == pytest.approx(verdict.least.clearance_mm - 10.0)
    assert names(grazed, verdict.least.machine_part, verdict.least.couch_part) == ("gantry/head", "couch/patient")


def test_a_path_beyond_the_travel_names_the_axis(grazed: Scene) -> None:
    for points, axis in (([(0.0, 0.0), (185.2, 0.0)], "gantry = 185.2"), ([(0.0, -95.5)], "couch = -95.5")):
        verdict = prove_path(grazed, points, tolerances(grazed.setup))
        assert verdict.state is State.NO_TRAVEL
        assert axis in verdict.reason
        assert verdict.nearest is None
    assert prove_path(grazed, [(185.0, 95.0)], tolerances(grazed.setup)).state is State.PERMITTED


@pytest.mark.parametrize("points", [[], [(math.nan, 0.0)], [(0.0, math.inf)], [(0.0, 1e9)]])
def test_what_is_no_path_is_an_error(grazed: Scene, points: list[tuple[float, float]]) -> None:
    with pytest.raises(ValueError, match="control points"):
        prove_path(grazed, points, tolerances(grazed.setup))


def test_resolutions_that_make_no_sense_are_errors(grazed: Scene) -> None:
    for resolution in (0.0, math.nan, 5.0):
        with pytest.raises(ValueError, match="resolution_deg"):
            PathProver(grazed, tolerances(grazed.setup), resolution)


def test_control_points_on_a_line_make_one_run_and_keep_their_numbers() -> None:
    points = np.array([(0.0, 0.0), (0.1, 0.0), (0.3, 0.0), (0.3, 0.0), (5.0, 0.0), (5.0, 2.0), (4.0, 2.0), (5.0, 2.0)])
    runs = straight_runs(points)
    assert [(run.first, run.first + len(run.share) - 1) for run in runs] == [(0, 4), (4, 5), (5, 6), (6, 7)]
    assert [runs[0].segment(place) for place in (0.0, 0.01, 0.04, 0.5, 1.0)] == [0, 0, 1, 3, 3]
    assert [run.first for run in straight_runs(np.array([(1.0, 1.0)]))] == [0]


def test_the_lists_are_deep_enough() -> None:
    assert 2 * HALVINGS_OF_ONE <= HALVINGS < DEPTH - 1


def test_a_turning_collimator_counts_as_all_it_sweeps() -> None:
    setup = setup_with()
    assert with_collimator(setup, [30.0, 30.0]).collimator_deg == 30.0
    assert with_collimator(setup, [30.0, 31.0]).collimator_deg is None


class Impatient:
    """A progress whose user has stopped the work."""

    def report(self, fraction: float, message: str) -> None:
        raise AssertionError(f"{message} went on to {fraction}")

    def cancelled(self) -> bool:
        return True


def test_a_path_can_be_cancelled(grazed: Scene) -> None:
    with pytest.raises(Cancelled):
        prove_path(grazed, [(0.0, 0.0), (50.0, 0.0)], tolerances(grazed.setup), progress=Impatient())


@pytest.mark.slow  # compiles the kernels once more, for the interpreter's types
def test_the_kernels_say_the_same_uncompiled(grazed: Scene, monkeypatch: pytest.MonkeyPatch) -> None:
    around = tolerances(grazed.setup)
    ways = [[(0.0, 0.0), (50.0, 0.0)], [(40.0, 0.0), (60.0, 10.0)], [(-30.0, 20.0), (20.0, -40.0)], [(54.5, 0.0)]]
    compiled = [prove_path(grazed, way, around, 0.1) for way in ways]
    monkeypatch.setattr(paths, "search_line", path_kernel.search_line.py_func)
    monkeypatch.setattr(paths, "prove_band", path_kernel.prove_band.py_func)
    assert [prove_path(grazed, way, around, 0.1) for way in ways] == compiled
    assert [verdict.state for verdict in compiled] == [State.PERMITTED, State.SHORT, State.PERMITTED, State.UNPROVED]


# Random rooms and paths


def random_path(rng: np.random.Generator, setup: Setup) -> list[tuple[float, float]]:
    """Return control points of a beam, an arc of either axis, or of both."""
    gantry = np.cumsum(np.concatenate([rng.uniform(-180, 180, 1), rng.uniform(-40, 40, rng.integers(0, 4))]))
    couch = np.cumsum(np.concatenate([rng.uniform(-90, 90, 1), rng.uniform(-20, 20, len(gantry) - 1)]))
    if rng.random() < 0.4:
        couch[:] = couch[0]
    elif rng.random() < 0.4:
        gantry[:] = gantry[0]
    turntable = setup.room.couch.turntable
    points = np.stack([np.clip(gantry, -185.0, 185.0), np.clip(couch, turntable.low, turntable.high)], axis=1)
    return [(float(g), float(c)) for g, c in points]


def along(points: list[tuple[float, float]], count: int, rng: np.random.Generator) -> np.ndarray:
    """Return places on the path, control points among them, (n, 2)."""
    path = np.array(points)
    if len(path) == 1:
        return np.repeat(path, count, axis=0)
    which = rng.integers(len(path) - 1, size=count)
    share = rng.uniform(size=(count, 1))
    return np.concatenate([path, path[which] + share * (path[which + 1] - path[which])])


def exact_at(prover: PathProver, places: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    found = [prover.exact(0, float(g), float(c)) for g, c in places]
    return np.array([f.clearance_mm for f in found]), np.array([f.slack_mm for f in found])


def check_path(
    rng: np.random.Generator, prover: PathProver, around: Tolerances, points: list[tuple[float, float]]
) -> Verdict:
    verdict = prover.verdict(points)
    places = along(points, 12, rng)
    clearance, slack = exact_at(prover, places)
    assert verdict.nearest is not None
    assert verdict.nearest.clearance_mm <= clearance.min() + 0.11
    if verdict.state is State.PERMITTED:
        error = np.sign(rng.uniform(-1.0, 1.0, places.shape)) * (around.of_gantry_deg, around.of_couch_deg)
        error *= np.where(rng.random((len(places), 1)) < 0.5, 1.0, rng.random(places.shape))
        clearance, slack = exact_at(prover, places + error)
        assert (slack >= -1e-6).all()
        assert verdict.tightest is not None
        assert (clearance >= verdict.least_clearance_mm - 1e-6).all()
        assert (slack >= verdict.tightest.slack_mm - 1e-6).all()
    if (slack < -0.5).any():
        assert verdict.state in {State.SHORT, State.CONTACT}
    if verdict.state in {State.SHORT, State.CONTACT}:
        assert verdict.first_short is not None
        assert verdict.first_short.slack_mm < 0.0
    return verdict


def test_no_permitted_random_path_is_short_anywhere_within_its_tolerances() -> None:
    rng = np.random.default_rng(5)
    states = []
    for _ in range(8):
        setup = random_setup(rng, most_parts=1)
        scene = build_scene(setup)
        if scene.no_travel:
            continue
        around = tolerances(setup, *rng.choice([0.0, 0.5, 1.0], 2))
        prover = PathProver(scene, around, 0.05)
        for _ in range(8):
            points = random_path(rng, setup)
            states.append(check_path(rng, prover, around, points).state)
    assert states.count(State.PERMITTED) >= 8
    assert states.count(State.SHORT) + states.count(State.CONTACT) >= 8


def test_the_exact_approach_agrees_with_a_library() -> None:
    rng = np.random.default_rng(8)
    setup = random_setup(rng, most_parts=1)
    prover = PathProver(build_scene(setup), tolerances(setup))
    library = LeastDistances(setup)
    for gantry_deg, couch_deg in rng.uniform((-180, -90), (180, 90), (6, 2)):
        found = prover.exact(0, float(gantry_deg), float(couch_deg))
        expected = library.at(float(gantry_deg), float(couch_deg))
        assert found.clearance_mm == pytest.approx(expected.clearance_mm, abs=1e-5)
        assert found.clearance_mm == 0.0 or found.slack_mm == pytest.approx(expected.slack_mm, abs=1e-5)


def test_a_scene_without_anything_to_check_is_permitted(grazed: Scene) -> None:
    prover = PathProver(grazed, tolerances(grazed.setup), planes=())
    verdict = prover.verdict([(0.0, 0.0), (90.0, 0.0)])
    assert verdict.state is State.PERMITTED
    assert verdict.least_clearance_mm == math.inf
    assert verdict.least is None
    assert len(planes_of(grazed)) > 0
