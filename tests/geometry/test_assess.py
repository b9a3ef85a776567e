"""The grid's states, a single pose and the spans say the same of the same angles."""

from dataclasses import replace
from itertools import pairwise

import numpy as np
import pytest

from geometry import assess as assessing
from geometry.assess import Assessment, Options, assess, assess_pose, exact_map, exact_pose, pose_on_grid
from geometry.states import CODE_OF, STATES, State
from tests.reference.attacks import any_options, any_setup
from tests.reference.samples import SETUPS, sample_scene


def chosen_poses(found: Assessment, rng: np.random.Generator, count: int) -> list[tuple[int, int]]:
    """Return (row, column) of grid angles, most of them beside one of another state."""
    beside = np.argwhere(found.state[:, 1:] != found.state[:, :-1])
    picked = [tuple(beside[k]) for k in rng.integers(len(beside), size=count)] if len(beside) else []
    rows, columns = found.state.shape
    anywhere = (int(rng.integers(rows)), int(rng.integers(columns)))
    # The ends of the travel are where rounding shows.
    return [*picked, anywhere, (0, 0), (rows - 1, columns - 1)]


def assert_pose_and_grid_agree(found: Assessment, monkeypatch: pytest.MonkeyPatch, rng: np.random.Generator) -> None:
    setup, exact = found.scene.setup, found.map
    # A scene is the same each time it is built; building it is what takes time.
    monkeypatch.setattr(assessing, "build_scene", lambda _: found.scene)
    for row, column in chosen_poses(found, rng, 2):
        gantry_deg, couch_deg = float(exact.gantry_deg[column]), float(exact.couch_deg[row])
        pose = assess_pose(setup, gantry_deg, couch_deg, found.options)
        # An angle that the travel reaches on two branches is permitted if it is on one of them.
        branches = np.isclose((exact.gantry_deg - gantry_deg + 180.0) % 360.0, 180.0)
        states = {STATES[code] for code in found.state[row, branches]}
        if State.PERMITTED in states:
            assert pose.state is State.PERMITTED
        else:
            assert states == {pose.state}
        assert pose.clearance_mm == pytest.approx(exact.clearance_mm[row, column], abs=1e-7)
        assert pose.slack_mm == pytest.approx(exact.slack_mm[row, column], abs=1e-7)


def assert_spans_and_grid_agree(found: Assessment) -> None:
    resolution = found.scene.setup.room.gantry.readout.resolution
    permitted = found.state == CODE_OF[State.PERMITTED]
    for row, couch_deg in enumerate(found.map.couch_deg):
        spans = [span for span in found.spans if span.couch_deg == couch_deg]
        assert all(one.gantry_to_deg < other.gantry_from_deg for one, other in pairwise(spans))
        inside = np.zeros(found.map.gantry_deg.shape, dtype=bool)
        nearly = inside.copy()
        for span in spans:
            low, high = span.gantry_from_deg, span.gantry_to_deg
            inside |= (found.map.gantry_deg >= low) & (found.map.gantry_deg <= high)
            # Ends are rounded inwards to what the readout shows.
            nearly |= (found.map.gantry_deg > low - resolution) & (found.map.gantry_deg < high + resolution)
        assert permitted[row, inside].all()
        assert nearly[permitted[row]].all() or not spans


@pytest.mark.parametrize("name", SETUPS)
def test_grid_pose_and_spans_agree_in_a_sample_room(name: str, monkeypatch: pytest.MonkeyPatch) -> None:
    scene = sample_scene(name)
    monkeypatch.setattr(assessing, "build_scene", lambda _: scene)
    found = assess(scene.setup, Options(gantry_step_deg=5.0, couch_step_deg=10.0, edge_deg=0.5))
    assert_spans_and_grid_agree(found)
    assert_pose_and_grid_agree(found, monkeypatch, np.random.default_rng(3))


@pytest.mark.parametrize("seed", range(6))
def test_grid_pose_and_spans_agree_in_random_rooms(seed: int, monkeypatch: pytest.MonkeyPatch) -> None:
    rng = np.random.default_rng(seed)
    options = replace(any_options(rng), gantry_step_deg=4.0, couch_step_deg=6.0)
    found = assess(any_setup(rng), options)
    assert_spans_and_grid_agree(found)
    assert_pose_and_grid_agree(found, monkeypatch, rng)


def test_a_pose_that_a_map_knows_is_that_pose() -> None:
    scene = sample_scene("c_arm_close/breast.setup.toml")
    exact = exact_map(scene, Options(gantry_step_deg=15.0, couch_step_deg=15.0))
    for gantry, couch in ((0.0, 0.0), (45.0, -30.0), (-90.0, 60.0)):
        known, plain = pose_on_grid(exact, gantry, couch), exact_pose(scene, gantry, couch)
        assert known is not None
        assert (known.gantry_deg, known.couch_deg, known.state) == (plain.gantry_deg, plain.couch_deg, plain.state)
        assert known.clearance_mm == pytest.approx(plain.clearance_mm, abs=1e-6)
        assert known.slack_mm == pytest.approx(plain.slack_mm, abs=1e-6)
    assert pose_on_grid(exact, 45.1, -30.0) is None
