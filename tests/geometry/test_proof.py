"""The proof of the angle plane: never wrong, the same however it is run, and never more than is known.

How good its bounds are, and that they cannot be better, is shown in test_proof_bounds.
"""

from dataclasses import replace
from functools import cache
from itertools import pairwise

import numpy as np
import pytest
from numpy.typing import NDArray

from geometry import planes
from geometry.assess import Options, proof_steps
from geometry.errors import Cancelled, GeometryError
from geometry.hulls import packed_hulls
from geometry.kernel import Hulls
from geometry.proof import Proof, prove, steps_over
from geometry.scene import Scene, Side, build_scene
from geometry.sweep import grid_deg, sweep
from tests.geometry.made_rooms import block, made_setup, on_gantry
from tests.reference.attacks import Outcome, any_options, any_setup, attack
from tests.reference.exact import Exact
from tests.reference.rooms import random_setup
from tests.reference.samples import ONE_OF_EACH_ROOM, sample_scene

Array = NDArray[np.float64]

COARSE = Options(edge_deg=1.0)


@cache
def random_scene(seed: int) -> Scene:
    return build_scene(any_setup(np.random.default_rng(seed)))


def proof_of(scene: Scene, options: Options = COARSE, threads: int | None = None) -> Proof:
    return prove(scene, *proof_steps(scene.setup.room, options), threads=threads)


def arrays(proof: Proof) -> tuple[NDArray[np.generic], ...]:
    return proof.slack_mm, proof.clearance_mm, proof.machine_part, proof.couch_part, proof.depth


def same(one: Proof, other: Proof) -> bool:
    """Tell whether two proofs are equal to the bit."""
    return all(a.tobytes() == b.tobytes() for a, b in zip(arrays(one), arrays(other), strict=True))


# Never wrong


@pytest.mark.parametrize("name", ONE_OF_EACH_ROOM)
def test_what_is_permitted_in_a_sample_room_keeps_its_distance(name: str, monkeypatch: pytest.MonkeyPatch) -> None:
    scene = sample_scene(name)
    monkeypatch.setattr("tests.reference.attacks.build_scene", lambda _: scene)
    outcome = Outcome()
    attack(np.random.default_rng(7), scene.setup, Options(edge_deg=0.5), 600, outcome)
    assert outcome.readings >= 300
    assert outcome.examples == []
    assert outcome.violations == 0


def test_what_is_permitted_in_random_rooms_keeps_its_distance() -> None:
    rng = np.random.default_rng(8)
    outcome = Outcome()
    for _ in range(15):
        attack(rng, any_setup(rng), any_options(rng), 300, outcome, by_library=2)
    assert outcome.readings >= 2000
    assert outcome.by_library >= 60
    assert outcome.greatest_difference_mm <= 1e-6
    assert outcome.examples == []
    assert outcome.violations == 0


def test_an_attack_finds_a_proof_that_forgets_the_tolerance() -> None:
    setup = random_setup(np.random.default_rng(1))
    forgetful = Outcome()
    attack(np.random.default_rng(2), setup, Options(edge_deg=0.5), 2000, forgetful, errors=1.5)
    assert forgetful.violations > 0
    assert forgetful.least_margin_mm < -1.0


# The same however it is run


@pytest.mark.parametrize("seed", range(4))
def test_threads_do_not_change_a_bit(seed: int) -> None:
    scene = random_scene(seed)
    assert same(proof_of(scene, threads=1), proof_of(scene, threads=2))


@pytest.mark.parametrize("seed", range(4))
def test_a_window_gives_the_same_as_the_whole_plane(seed: int) -> None:
    rng = np.random.default_rng(100 + seed)
    scene = random_scene(seed)
    gantry, couch = proof_steps(scene.setup.room, replace(COARSE, edge_deg=0.5))
    whole = prove(scene, gantry, couch)
    for _ in range(3):
        windows = []
        slices = []
        for steps in (gantry, couch):
            # Both ends on borders, as readings and tolerances in whole degrees have them.
            low, high = np.sort(rng.integers(steps.count + 1, size=2))
            windows.append(
                (steps.start_deg + float(low) * steps.step_deg, steps.start_deg + float(high) * steps.step_deg)
            )
            # The cells beyond each border hold its angle as well.
            slices.append(slice(max(low - 1, 0), high + 1))
        part = prove(scene, gantry, couch, window=(windows[0], windows[1]))
        for found, expected in zip(arrays(part), arrays(whole), strict=True):
            inside = tuple(reversed(slices))
            assert found[inside].tobytes() == expected[inside].tobytes()


def test_cancelling_stops_the_proof() -> None:
    class Stop:
        def report(self, fraction: float, message: str) -> None: ...

        def cancelled(self) -> bool:
            return True

    with pytest.raises(Cancelled):
        prove(random_scene(0), *proof_steps(random_scene(0).setup.room, COARSE), Stop())


# Edges, travels and tolerances


@pytest.mark.parametrize("edge_deg", [0.25, 0.3, 1.0, 7.0])
@pytest.mark.parametrize("tolerance_deg", [0.0, 0.5, 2.0])
@pytest.mark.parametrize("travel", [(-185.0, 185.0), (-182.55, 177.3), (0.1, 0.2), (-90.1, -31.7)])
def test_steps_cover_the_travel_and_the_tolerance(
    edge_deg: float, tolerance_deg: float, travel: tuple[float, float]
) -> None:
    steps = steps_over(travel, tolerance_deg, edge_deg)
    low, high = steps.span_deg(0, steps.count)
    assert (low, high) == (travel[0] - tolerance_deg, travel[1] + tolerance_deg)
    assert steps.start_deg / edge_deg == pytest.approx(round(steps.start_deg / edge_deg), abs=1e-9)
    borders = [steps.span_deg(k, k + 1) for k in range(steps.count)]
    assert all(0.0 < stop - start <= edge_deg + 1e-9 for start, stop in borders)
    assert all(one[1] == other[0] for one, other in pairwise(borders))


@pytest.mark.parametrize("angle_deg", [0.0, 5.1, -17.25])
def test_an_axis_that_cannot_turn_has_one_step_and_no_tolerance(angle_deg: float) -> None:
    steps = steps_over((angle_deg, angle_deg), 2.0, 0.25)
    assert steps.count == 1
    assert steps.span_deg(0, 1) == (angle_deg, angle_deg)


@pytest.mark.parametrize("angle_deg", [0.0, 30.0, -17.25])
def test_a_couch_that_cannot_turn_is_proved_where_it_stands(angle_deg: float) -> None:
    setup = random_setup(np.random.default_rng(3))
    room = setup.room
    turntable = replace(room.couch.turntable, low=angle_deg, high=angle_deg)
    fixed = build_scene(replace(setup, room=replace(room, couch=replace(room.couch, turntable=turntable))))
    proof = proof_of(fixed, replace(COARSE, gantry_tolerance_deg=0.0))
    middles = proof.gantry.start_deg + (np.arange(proof.gantry.count) + 0.5) * proof.gantry.step_deg
    _, slack = Exact(fixed).at(middles, np.full(len(middles), angle_deg))
    assert proof.slack_mm.shape == (1, len(middles))
    proved = ~np.isnan(proof.slack_mm[0])
    assert 0.1 < proved.mean() < 1.0
    assert (proof.slack_mm[0, proved] <= slack[proved]).all()
    # The couch adds no motion: half a step of the gantry's reach is all that can be given away.
    reach = max(plane.a.reach.max() for plane in planes.planes_of(fixed) if plane.with_gantry)
    assert (slack[~proved] <= reach * np.radians(proof.gantry.step_deg / 2.0) + 1e-6).all()


@pytest.mark.parametrize(("name", "value"), [("edge_deg", 0.0), ("edge_deg", np.nan), ("edge_deg", -1.0)])
def test_an_edge_that_cannot_be_is_refused(name: str, value: float) -> None:
    with pytest.raises(GeometryError, match=name):
        steps_over((-180.0, 180.0), 1.0, value)


@pytest.mark.parametrize("tolerance_deg", [-0.1, np.nan, np.inf])
def test_a_tolerance_that_cannot_be_is_refused(tolerance_deg: float) -> None:
    with pytest.raises(GeometryError, match="tolerance_deg"):
        steps_over((-180.0, 180.0), tolerance_deg, 0.25)


# What is not a number


def test_a_piece_that_is_not_a_number_is_refused() -> None:
    scene = random_scene(0)
    broken = next(part for part in scene.parts if part.side is Side.GANTRY)
    piece = replace(broken.pieces[0], vertices=np.full_like(broken.pieces[0].vertices, np.nan))
    parts = tuple(replace(part, pieces=(piece,)) if part is broken else part for part in scene.parts)
    with pytest.raises(GeometryError, match="not a number"):
        proof_of(replace(scene, parts=parts))


@pytest.mark.parametrize("required_mm", [np.nan, 0.0, -5.0, np.inf])
def test_a_required_clearance_that_cannot_be_is_refused(required_mm: float) -> None:
    setup = made_setup(on_gantry(block((50.0,) * 3, (0.0, 0.0, 400.0))), required_mm=required_mm)
    with pytest.raises(GeometryError, match="required clearance"):
        proof_of(build_scene(setup))


FIELDS = ("vertices", "centres", "radii", "reach")


@pytest.mark.parametrize("broken", [*((name,) for name in FIELDS), FIELDS])
@pytest.mark.parametrize("seed", [1, 5])
def test_a_piece_that_is_not_a_number_behind_the_guards_proves_nothing_false(
    broken: tuple[str, ...], seed: int, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Put in after the pieces were packed, for the kernels alone to deal with."""

    def packed(pieces: object, parts: object, axis: int | None) -> Hulls:
        hulls = packed_hulls(pieces, parts, axis)  # type: ignore[arg-type]
        if axis != 1 or not len(hulls.part):
            return hulls
        wrong = {name: getattr(hulls, name).copy() for name in broken}
        for name, values in wrong.items():
            values[: hulls.first[1] if name == "vertices" else 1] = np.nan
        return hulls._replace(**wrong)

    setup = random_setup(np.random.default_rng(seed), most_parts=2)
    gantry = replace(setup.room.gantry, low=-40.0, high=40.0)
    scene = build_scene(replace(setup, room=replace(setup.room, gantry=gantry)))
    exact = Exact(scene)
    monkeypatch.setattr(planes, "packed_hulls", packed)
    proof = proof_of(scene)
    rows, columns = np.nonzero(~np.isnan(proof.slack_mm))
    _, slack = exact.at(
        *(s.start_deg + s.step_deg * (k + 0.5) for s, k in ((proof.gantry, columns), (proof.couch, rows)))
    )
    assert (slack >= proof.slack_mm[rows, columns]).all()
    grid = grid_deg(-40.0, 40.0, 5.0), grid_deg(-90.0, 90.0, 10.0)
    found = sweep(scene, *grid).slack_mm
    gantry_deg, couch_deg = np.meshgrid(*grid)
    _, slack = exact.at(gantry_deg.ravel(), couch_deg.ravel())
    assert (np.isnan(found) | (found <= slack.reshape(found.shape) + 1e-6)).all()
