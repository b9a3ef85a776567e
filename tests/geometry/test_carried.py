"""Maps carried from an anchor against the sweep of the same scene."""

import json
import os
import subprocess
import sys
from dataclasses import replace
from functools import cache
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.typing import NDArray

from app.files.setup_file import read_setup
from geometry import carried
from geometry.anchor_kernel import anchor_tiles
from geometry.carried import LIMIT_MM, Anchor, anchor_of, carried_map, prepare_carry_kernel
from geometry.carry_kernel import carry_tiles
from geometry.errors import Cancelled
from geometry.machine import Part
from geometry.scene import build_scene
from geometry.setup import Component, Required, Setup
from geometry.sweep import grid_deg, sweep
from tests.geometry.carried_cases import (
    SMALL_GRID,
    assert_same,
    random_shift,
    small_maps,
    with_isocentre_off,
    with_patient_off,
    worst_difference_mm,
)
from tests.geometry.made_rooms import BEAN_MM, block, made_setup, on_gantry, on_still_couch, on_table, on_turntable
from tests.reference.distances import TOLERANCE_MM, LeastDistances
from tests.reference.features import distance_to_hull_mm
from tests.reference.poses import standing_parts
from tests.reference.rooms import random_setup

Array = NDArray[np.float64]

ROOT = Path(__file__).resolve().parents[2]
SAMPLES = (
    "c_arm_wide/head",
    "c_arm_wide/tall_heavy",
    "particle_snout/child_spine",
    "cobalt/neck",
    "closed_bore/chest_wing_board",
)
# Just within the limit: what is put together of several turns is off by rounding.
MOST_MM = LIMIT_MM - 1e-6


@cache
def sample(name: str) -> tuple[Setup, Anchor]:
    setup = read_setup(ROOT / "sample_rooms" / f"{name}.setup.toml")
    scene = build_scene(setup)
    gantry, couch = scene.setup.room.gantry, scene.setup.room.couch.turntable
    # Wide steps with a cluster of narrow ones.
    near = np.arange(-3.0, 3.0, 0.7)
    gantry_deg = np.unique(np.concatenate([grid_deg(gantry.low, gantry.high, 7.0), near + 41.0]))
    couch_deg = np.unique(np.clip(np.concatenate([grid_deg(couch.low, couch.high, 9.0), near]), couch.low, couch.high))
    return setup, anchor_of(sweep(scene, gantry_deg, couch_deg))


def assert_carried(anchor: Anchor, setup: Setup, *, ties: bool = False) -> None:
    scene = build_scene(setup)
    exact = anchor.exact
    assert_same(carried_map(anchor, scene), sweep(scene, exact.gantry_deg, exact.couch_deg), ties=ties)


@pytest.mark.parametrize("length_mm", [0.1, 5.0, MOST_MM])
@pytest.mark.parametrize("name", SAMPLES)
def test_sample_setups_with_the_isocentre_elsewhere(name: str, length_mm: float) -> None:
    setup, anchor = sample(name)
    rng = np.random.default_rng(len(name))
    assert_carried(anchor, with_isocentre_off(setup, random_shift(rng, length_mm)))


@pytest.mark.parametrize("name", SAMPLES)
def test_sample_setups_with_the_patient_elsewhere_on_the_table(name: str) -> None:
    setup, anchor = sample(name)
    rng = np.random.default_rng(len(name))
    assert_carried(anchor, with_patient_off(setup, random_shift(rng, 12.0)))


def test_the_scene_of_the_anchor_itself() -> None:
    setup, anchor = sample(SAMPLES[0])
    assert_carried(anchor, setup)


@given(
    st.tuples(*[st.floats(-MOST_MM, MOST_MM)] * 3).filter(lambda shift: np.linalg.norm(shift) < MOST_MM),
    st.booleans(),
)
def test_any_shift(shift: tuple[float, float, float], of_isocentre: bool) -> None:
    setup, anchor = sample("particle_snout/child_spine")
    off = with_isocentre_off if of_isocentre else with_patient_off
    assert_carried(anchor, off(setup, np.array(shift)))


# Random rooms

GRID = grid_deg(-180.0, 180.0, 10.0), np.concatenate([grid_deg(-90.0, 90.0, 15.0)[:-1], [76.0, 77.0, 78.5, 90.0]])


@cache
def invented(seed: int) -> tuple[Setup, Anchor]:
    setup = random_setup(np.random.default_rng(seed))
    return setup, anchor_of(sweep(build_scene(setup), *GRID))


@pytest.mark.parametrize("seed", range(2000, 2010))
def test_random_rooms(seed: int) -> None:
    """Couch parts follow any of the stages here, and what the patient requires is more than what the machine does."""
    setup, anchor = invented(seed)
    rng = np.random.default_rng(seed)
    for length_mm in (1.0, 10.0, MOST_MM):
        assert_carried(anchor, with_isocentre_off(setup, random_shift(rng, length_mm)))
        assert_carried(anchor, with_patient_off(setup, random_shift(rng, 0.5 * length_mm)))


def test_contact_comes_and_goes() -> None:
    came, went = 0, 0
    for seed in range(2000, 2006):
        setup, anchor = invented(seed)
        touched = anchor.exact.clearance_mm == 0.0
        found = carried_map(anchor, build_scene(with_isocentre_off(setup, np.array([0.0, 13.0, -15.0]))))
        assert found is not None
        came += int(np.count_nonzero((found.clearance_mm == 0.0) & ~touched))
        went += int(np.count_nonzero((found.clearance_mm > 0.0) & touched))
    assert came > 10
    assert went > 10


def test_the_witness_lies_on_the_parts_it_names() -> None:
    setup, anchor = invented(2001)
    moved = with_isocentre_off(setup, np.array([9.0, -4.0, 12.0]))
    found = carried_map(anchor, build_scene(moved))
    assert found is not None
    standing, reference = standing_parts(moved), LeastDistances(moved)
    for row in range(0, len(found.couch_deg), 5):
        for column in range(0, len(found.gantry_deg), 6):
            gantry, couch = float(found.gantry_deg[column]), float(found.couch_deg[row])
            for parts, points in (
                (found.machine_part, found.machine_point_mm),
                (found.couch_part, found.couch_point_mm),
            ):
                pieces = standing[parts[row, column]].at(gantry, couch)
                assert min(distance_to_hull_mm(points[row, column], piece) for piece in pieces) <= TOLERANCE_MM
            true = reference.at(gantry, couch)
            assert found.clearance_mm[row, column] == pytest.approx(true.clearance_mm, abs=TOLERANCE_MM)
            assert found.slack_mm[row, column] == pytest.approx(true.slack_mm, abs=TOLERANCE_MM)


@pytest.mark.parametrize("patient_mm", [3.0, 60.0])
@pytest.mark.parametrize("seed", range(2100, 2108))
def test_what_the_patient_requires_more(seed: int, patient_mm: float) -> None:
    """The least slack then often belongs to another pair than the nearest, in contact too."""
    setup = random_setup(np.random.default_rng(seed))
    more = Component("patient motion", patient_mm, patient_only=True)
    setup = replace(setup, required=Required(1.0, "invented", 2.0, (more,)))
    anchor = anchor_of(sweep(build_scene(setup), *GRID))
    rng = np.random.default_rng(seed)
    for _ in range(2):
        assert_carried(anchor, with_isocentre_off(setup, random_shift(rng, MOST_MM)))
        assert_carried(anchor, with_patient_off(setup, random_shift(rng, 0.5 * MOST_MM)))


def without_lists(anchor: Anchor) -> Anchor:
    """Return the anchor with nothing kept of any pose: all are searched among what can matter in their block."""
    assert anchor.turning is not None
    size = np.full_like(anchor.turning.kept.size, -1)
    return replace(anchor, turning=replace(anchor.turning, kept=anchor.turning.kept._replace(size=size)))


@pytest.mark.parametrize("name", [name for name in SAMPLES if name != "closed_bore/chest_wing_board"])
def test_poses_of_which_nothing_is_kept(name: str) -> None:
    setup, _ = sample(name)
    rng = np.random.default_rng(len(name))
    # Small blocks, so that their bounds are tight.
    steps = np.arange(0.0, 0.6, 0.1)
    for _ in range(4):
        grid = rng.uniform(-180.0, 179.0) + steps, rng.uniform(-90.0, 89.0) + steps
        bare = without_lists(anchor_of(sweep(build_scene(setup), *grid)))
        for _ in range(2):
            assert_carried(bare, with_isocentre_off(setup, random_shift(rng, MOST_MM)), ties=True)


@pytest.mark.parametrize("bare", [False, True])
def test_one_block_above_the_table_and_a_farther_one_beside_it(bare: bool) -> None:
    """A shift sideways leaves the distance to the one above and brings the table nearer to the other: 65 to 45 mm."""
    setup = made_setup(
        *_named(
            [
                on_gantry(block((100.0, 100.0, 50.0), (0.0, 0.0, 10.0 + 50.0 + 25.0))),
                on_gantry(block((50.0, 100.0, 100.0), (100.0 + 65.0 + 25.0, 0.0, 0.0))),
            ]
        ),
        on_table(block((200.0, 200.0, 20.0), (0.0, 0.0, 0.0))),
    )
    near_zero = np.array([-0.1, 0.0, 0.1])
    anchor = anchor_of(sweep(build_scene(setup), near_zero, near_zero))
    anchor = without_lists(anchor) if bare else anchor
    found = []
    for shift in ([MOST_MM, 0.0, 0.0], [-MOST_MM, 0.0, 0.0]):
        moved = with_isocentre_off(setup, np.array(shift))
        assert_carried(anchor, moved)
        there = carried_map(anchor, build_scene(moved))
        assert there is not None
        found.append(there.clearance_mm[1, 1])
    assert sorted(found) == pytest.approx([65.0 - MOST_MM, 50.0], abs=TOLERANCE_MM)


def test_the_least_slack_passes_from_one_pair_to_another_while_a_third_is_in_contact() -> None:
    """The table stands in a block throughout; the patient goes from 10 mm off one block to 15 mm off another."""
    setup = made_setup(
        *_named(
            [
                on_gantry(block((100.0, 100.0, 100.0), (0.0, 600.0, 0.0))),
                on_gantry(block((20.0, 20.0, 20.0), (BEAN_MM / 2.0 + 10.0 + 10.0, 0.0, 0.0))),
                on_gantry(block((20.0, 20.0, 20.0), (-BEAN_MM / 2.0 - 35.0 - 10.0, 0.0, 0.0))),
            ]
        ),
        on_table(block((100.0, 100.0, 100.0), (0.0, 600.0, 0.0))),
    )
    for_patient = Component("patient motion", 60.0, patient_only=True)
    setup = replace(setup, required=Required(1.0, "invented", 2.0, (for_patient,)))
    near_zero = np.array([-0.1, 0.0, 0.1])
    anchor = anchor_of(sweep(build_scene(setup), near_zero, near_zero))
    found = []
    for shift in ([MOST_MM, 0.0, 0.0], [-MOST_MM, 0.0, 0.0]):
        moved = with_isocentre_off(setup, np.array(shift))
        assert_carried(anchor, moved)
        there = carried_map(anchor, build_scene(moved))
        assert there is not None
        assert (there.clearance_mm == 0.0).all()
        found.append(there.slack_mm[1, 1] + setup.required.of_pair_mm(True))
    # Shifted the other way, the patient is in contact too.
    assert sorted(found) == pytest.approx([0.0, 35.0 - MOST_MM], abs=TOLERANCE_MM)


def test_a_map_that_was_carried_is_an_anchor_too() -> None:
    setup, anchor = invented(2002)
    step = np.array([5.0, 11.0, -14.0])
    carried_once = carried_map(anchor, build_scene(with_isocentre_off(setup, step)))
    assert carried_once is not None
    assert_carried(anchor_of(carried_once), with_isocentre_off(setup, 1.9 * step))


def test_more_pairs_at_a_pose_than_are_kept() -> None:
    """A row of rods, all as near."""
    rods = [on_table(block((4.0, 4.0, 400.0), (10.0 * k - 100.0, 0.0, -260.0))) for k in range(20)]
    setup = made_setup(on_gantry(block((600.0, 300.0, 50.0), (0.0, 0.0, 520.0))), *_named(rods))
    angles = grid_deg(176.0, 180.0, 0.5), grid_deg(-3.0, 3.0, 1.0)
    anchor = anchor_of(sweep(build_scene(setup), *angles))
    assert anchor.turning is not None
    assert (anchor.turning.kept.size == -1).any()
    assert_carried(anchor, with_isocentre_off(setup, np.array([3.0, 5.0, -7.0])), ties=True)


def test_parts_that_stand_still_while_others_shift() -> None:
    """A column on the turntable and a pedestal do not slide with the table; the nearest is now this, now that."""
    setup = made_setup(
        on_gantry(block((300.0, 60.0, 60.0), (0.0, 0.0, 300.0))),
        on_turntable(block((80.0, 80.0, 80.0), (0.0, 120.0, -225.0))),
        on_still_couch(block((80.0, 80.0, 80.0), (0.0, -180.0, -230.0))),
        on_table(block((200.0, 80.0, 20.0), (0.0, 0.0, -245.0))),
    )
    anchor = anchor_of(sweep(build_scene(setup), grid_deg(-180.0, 180.0, 3.0), grid_deg(-90.0, 90.0, 6.0)))
    found = set()
    for shift in ([0.0, 0.0, 19.9], [0.0, 0.0, -19.9], [10.0, -10.0, 13.0]):
        moved = with_isocentre_off(setup, np.array(shift))
        assert_carried(anchor, moved)
        there = carried_map(anchor, build_scene(moved))
        assert there is not None
        found |= {there.scene.parts[k].name for k in np.unique(there.couch_part)}
    assert found >= {"column", "pedestal", "table"}


def _named(parts: list[Part]) -> list[Part]:
    return [replace(part, name=f"{part.name} {k}") for k, part in enumerate(parts)]


# A bound that is too good is noticed


def test_half_of_the_shift_would_be_noticed(monkeypatch: pytest.MonkeyPatch) -> None:
    exact = carried.carry_tiles

    def too_little(*arguments: object) -> None:
        *before, shift, kept, memory, lists, field = arguments
        exact(*before, 0.5 * shift, kept, memory, lists, field)  # type: ignore[operator]

    monkeypatch.setattr(carried, "carry_tiles", too_little)
    worst = []
    for seed in range(2000, 2004):
        setup, anchor = invented(seed)
        scene = build_scene(with_isocentre_off(setup, np.array([9.0, 12.0, -12.0])))
        found = carried_map(anchor, scene)
        assert found is not None
        worst.append(worst_difference_mm(found, sweep(scene, *GRID)))
    assert max(worst) > 0.1


def test_uncompiled_kernels_give_the_same_and_nothing_where_nothing_converges() -> None:
    compiled = small_maps()
    assert compiled["carried"] == pytest.approx(compiled["swept"], abs=TOLERANCE_MM)
    printed = subprocess.run(
        [sys.executable, "-m", "tests.geometry.carried_cases"],
        env={**os.environ, "NUMBA_DISABLE_JIT": "1"},
        cwd=ROOT,
        capture_output=True,
        check=True,
        text=True,
    ).stdout
    uncompiled = json.loads(printed)
    assert uncompiled["carried"] == pytest.approx(compiled["carried"], abs=1e-9)
    assert max(uncompiled["hasty"]) <= TOLERANCE_MM
    assert uncompiled["unknown"] == {"sound": True, "unsound": True}


# What cannot be carried


def test_what_differs_by_more_than_shifts_is_left_alone() -> None:
    setup, anchor = invented(2003)
    device = replace(setup.room.parts[0], name="another", kind="device")
    for other in (
        replace(setup, pitch_deg=setup.pitch_deg + 0.5),
        replace(setup, eccentric_deg=setup.eccentric_deg - 1.0),
        replace(setup, collimator_deg=17.0),
        replace(setup, required=replace(setup.required, fixed_mm=setup.required.fixed_mm + 1.0)),
        replace(setup, devices=(*setup.devices, device)),
        replace(setup, room=replace(setup.room, joined=())),
        replace(setup, arm_positions=(("panel", "parked"), ("snout", 7.0))),
    ):
        assert carried_map(anchor, build_scene(other)) is None


def test_a_shift_beyond_the_limit_is_left_alone() -> None:
    setup, _ = sample(SAMPLES[0])
    anchor = anchor_of(sweep(build_scene(setup), *SMALL_GRID), limit_mm=4.0)
    assert_carried(anchor, with_isocentre_off(setup, np.array([0.0, 3.99, 0.0])))
    assert carried_map(anchor, build_scene(with_isocentre_off(setup, np.array([0.0, 4.01, 0.0])))) is None


# What long work owes its user


class Stopping:
    """A progress that cancels after so many reports."""

    def __init__(self, after: int) -> None:
        self.left = after

    def report(self, fraction: float, message: str) -> None:
        assert 0.0 < fraction <= 1.0
        assert message
        self.left -= 1

    def cancelled(self) -> bool:
        return self.left <= 0


@pytest.mark.parametrize("after", [0, 2])
@pytest.mark.parametrize("threads", [1, 2])
def test_both_can_be_stopped(threads: int, after: int) -> None:
    _, anchor = sample(SAMPLES[0])
    with pytest.raises(Cancelled):
        anchor_of(anchor.exact, Stopping(after), threads)
    with pytest.raises(Cancelled):
        carried_map(anchor, anchor.exact.scene, Stopping(after), threads)


def test_threads_change_nothing() -> None:
    setup, anchor = sample(SAMPLES[1])
    scene = build_scene(with_isocentre_off(setup, np.array([3.0, -6.0, 7.0])))
    one = carried_map(anchor_of(anchor.exact, threads=1), scene, threads=1)
    other = carried_map(anchor_of(anchor.exact, threads=3), scene, threads=3)
    assert one is not None
    assert other is not None
    for name in ("clearance_mm", "slack_mm", "machine_part", "couch_part", "machine_point_mm", "couch_point_mm"):
        assert np.array_equal(getattr(one, name), getattr(other, name), equal_nan=name.endswith("mm"))


def test_the_kernels_are_compiled_once() -> None:
    prepare_carry_kernel()
    setup, anchor = invented(2000)
    assert carried_map(anchor, build_scene(setup)) is not None
    assert len(anchor_tiles.signatures) == 1
    assert len(carry_tiles.signatures) == 1
