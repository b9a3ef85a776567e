"""The sweep against the reference at every pose, and what a long computation owes its user."""

import threading
import time
from concurrent.futures import ThreadPoolExecutor

import numpy as np
import pytest
from numpy.typing import NDArray

from geometry.errors import Cancelled
from geometry.scene import Scene, build_scene
from geometry.setup import Setup
from geometry.sweep import ClearanceMap, grid_deg, sweep
from geometry.sweep_kernel import sweep_tiles
from tests.reference.distances import TOLERANCE_MM, LeastDistances
from tests.reference.features import distance_to_hull_mm
from tests.reference.poses import Standing, standing_parts
from tests.reference.rooms import random_setup

Array = NDArray[np.float64]

ARRAYS = (
    "clearance_mm",
    "slack_mm",
    "machine_part",
    "couch_part",
    "machine_point_mm",
    "couch_point_mm",
)


def same(one: ClearanceMap, other: ClearanceMap) -> bool:
    """Tell whether two maps agree in every bit."""
    return all(
        np.array_equal(getattr(one, name), getattr(other, name), equal_nan=name.endswith("mm")) for name in ARRAYS
    )


def invented(seed: int, *, couch_turns: bool = True) -> tuple[Setup, Scene]:
    setup = random_setup(np.random.default_rng(seed), couch_turns=couch_turns)
    return setup, build_scene(setup)


def assert_equals_reference(setup: Setup, found: ClearanceMap) -> tuple[int, int]:
    """Hold every pose of a map against the reference; return how many are in contact and how many are not."""
    reference = LeastDistances(setup)
    for row, couch_deg in enumerate(found.couch_deg):
        for column, gantry_deg in enumerate(found.gantry_deg):
            true = reference.at(float(gantry_deg), float(couch_deg))
            assert found.clearance_mm[row, column] == pytest.approx(true.clearance_mm, abs=TOLERANCE_MM)
            assert found.slack_mm[row, column] == pytest.approx(true.slack_mm, abs=TOLERANCE_MM)
    touching = int(np.count_nonzero(found.clearance_mm == 0.0))
    return touching, found.clearance_mm.size - touching


# Angles that share a block of the sweep, lopsided: most within a twentieth of a degree, the others far off.
CLUSTERS = np.concatenate(
    [start + np.array([*np.arange(8) / 100.0, 20.0, 40.0]) for start in (-180, -100, -30, 50, 130)]
)

# Whole turns in wide steps, edges in narrow ones, ends of the travel, angles of no pattern, one angle of either.
GRIDS: list[tuple[str, Array, Array]] = [
    ("5 deg steps", grid_deg(-60.0, 62.5, 5.0), grid_deg(-20.0, 20.0, 10.0)),
    ("2 deg steps", grid_deg(-185.0, -150.0, 2.0), grid_deg(80.0, 90.0, 2.0)),
    ("0.5 deg steps", grid_deg(100.0, 106.0, 0.5), grid_deg(-90.0, -87.0, 0.5)),
    ("whole turn", grid_deg(-185.0, 185.0, 20.0), grid_deg(-90.0, 90.0, 30.0)),
    ("no pattern", np.array([-180.0, -179.99, -3.0, 0.0, 1e-9, 40.7, 185.0]), np.array([-90.0, -0.1, 0.0, 77.7, 90.0])),
    ("clusters with gaps, their middles at one end", CLUSTERS, CLUSTERS[15:-15] / 2.0),
    ("one gantry angle", np.array([33.3]), grid_deg(-90.0, 90.0, 3.0)),
    ("one couch angle", grid_deg(-185.0, 185.0, 6.0), np.array([-12.0])),
]


@pytest.mark.parametrize(("gantry_deg", "couch_deg"), [grid[1:] for grid in GRIDS], ids=[grid[0] for grid in GRIDS])
def test_every_pose_of_random_rooms_equals_the_reference(gantry_deg: Array, couch_deg: Array) -> None:
    touching, apart = 0, 0
    for seed in range(4):
        setup, scene = invented(1000 + seed)
        counts = assert_equals_reference(setup, sweep(scene, gantry_deg, couch_deg))
        touching, apart = touching + counts[0], apart + counts[1]
    assert touching > 0
    assert apart > 0


def test_a_room_whose_couch_cannot_turn() -> None:
    setup, scene = invented(1100, couch_turns=False)
    assert_equals_reference(setup, sweep(scene, grid_deg(-185.0, 185.0, 5.0), np.zeros(1)))


def test_the_slack_may_belong_to_another_pair_than_the_clearance() -> None:
    """With the patient requiring more, the tightest pair is not always the nearest: both are found."""
    apart = 0
    for seed in range(8):
        _, scene = invented(1200 + seed)
        found = sweep(scene, grid_deg(-180.0, 180.0, 15.0), grid_deg(-90.0, 90.0, 30.0))
        known = found.machine_part >= 0
        required = np.array(
            [
                scene.required_mm(scene.parts[one], scene.parts[other])
                for one, other in zip(found.machine_part[known], found.couch_part[known], strict=True)
            ]
        )
        of_nearest = found.clearance_mm[known] - required
        assert np.all(found.slack_mm[known] <= of_nearest + 1e-12)
        apart += int(np.count_nonzero(found.slack_mm[known] < of_nearest - 1e-6))
    assert apart > 0


def on_part(point: Array, part: Standing, gantry_deg: float, couch_deg: float) -> float:
    return min(distance_to_hull_mm(point, piece) for piece in part.at(gantry_deg, couch_deg))


@pytest.mark.parametrize("seed", range(1300, 1306))
def test_the_witness_lies_on_the_parts_it_names(seed: int) -> None:
    setup, scene = invented(seed)
    standing = standing_parts(setup)
    reference = LeastDistances(setup)
    gantry_deg, couch_deg = np.array([-170.0, -77.0, 5.0, 6.0, 120.0]), np.array([-45.0, 0.0, 80.0])
    found = sweep(scene, gantry_deg, couch_deg)
    for row, couch in enumerate(couch_deg):
        for column, gantry in enumerate(gantry_deg):
            one, other = found.machine_part[row, column], found.couch_part[row, column]
            points = found.machine_point_mm[row, column], found.couch_point_mm[row, column]
            assert on_part(points[0], standing[one], gantry, couch) <= TOLERANCE_MM
            assert on_part(points[1], standing[other], gantry, couch) <= TOLERANCE_MM
            between = float(np.linalg.norm(points[0] - points[1]))
            assert between == pytest.approx(found.clearance_mm[row, column], abs=TOLERANCE_MM)
            assert standing[one].side in ("gantry", "room")
            assert standing[other].side == ("couch" if standing[one].side == "room" else standing[other].side)
            assert reference.at(gantry, couch).clearance_mm == pytest.approx(between, abs=TOLERANCE_MM)


@pytest.mark.parametrize("seed", range(1400, 1404))
def test_a_pose_alone_is_the_same_as_within_a_grid(seed: int) -> None:
    _, scene = invented(seed)
    gantry_deg, couch_deg = grid_deg(-185.0, 185.0, 7.0), grid_deg(-90.0, 90.0, 11.0)
    whole = sweep(scene, gantry_deg, couch_deg)
    for row in range(0, len(couch_deg), 4):
        for column in range(0, len(gantry_deg), 9):
            alone = sweep(scene, gantry_deg[column : column + 1], couch_deg[row : row + 1])
            for name in ("clearance_mm", "slack_mm"):
                expected = getattr(whole, name)[row, column]
                assert getattr(alone, name)[0, 0] == pytest.approx(expected, abs=TOLERANCE_MM)


# Threads, progress, cancel


def test_threads_change_nothing() -> None:
    for seed in range(1500, 1503):
        _, scene = invented(seed)
        angles = grid_deg(-185.0, 185.0, 3.0), grid_deg(-90.0, 90.0, 3.0)
        one = sweep(scene, *angles, threads=1)
        assert all(same(one, sweep(scene, *angles, threads=threads)) for threads in (2, 5))


def test_nothing_is_shared_between_runs() -> None:
    scenes = [invented(seed)[1] for seed in range(1600, 1603)]
    angles = grid_deg(-185.0, 185.0, 2.0), grid_deg(-90.0, 90.0, 6.0)
    alone = [sweep(scene, *angles) for scene in scenes]
    # All at once, twice each, in threads of their own.
    with ThreadPoolExecutor(8) as pool:
        together = list(pool.map(lambda scene: sweep(scene, *angles), scenes * 2))
    assert all(same(one, other) for one, other in zip(alone * 2, together, strict=True))


class Watched:
    """A progress that keeps what it is told; it cancels at the first report where it is asked to."""

    def __init__(self, *, cancels: bool = False) -> None:
        self.fractions: list[float] = []
        self.cancels = cancels
        self.stopped_at: float | None = None

    def report(self, fraction: float, message: str) -> None:
        assert message
        self.fractions.append(fraction)
        if self.cancels and self.stopped_at is None:
            self.stopped_at = time.monotonic()

    def cancelled(self) -> bool:
        return self.stopped_at is not None


@pytest.mark.parametrize("threads", [1, 2])
def test_progress_rises_to_the_end_of_each_plane(threads: int) -> None:
    _, scene = invented(1700)
    watched = Watched()
    sweep(scene, grid_deg(-180.0, 180.0, 30.0), grid_deg(-90.0, 90.0, 1.0), watched, threads)
    # Up to 1 for the first plane, then again from below for the next.
    first_plane = watched.fractions[: watched.fractions.index(1.0) + 1]
    assert len(first_plane) >= 10
    assert np.all(np.diff(first_plane) > 0.0)
    assert watched.fractions[-1] == 1.0
    assert all(0.0 < fraction <= 1.0 for fraction in watched.fractions)


@pytest.mark.parametrize("threads", [1, 2])
def test_cancel_answers_at_once_and_leaves_nothing_behind(threads: int) -> None:
    _, scene = invented(1700)
    angles = grid_deg(-185.0, 185.0, 0.3), grid_deg(-90.0, 90.0, 0.5)
    small = grid_deg(-185.0, 185.0, 5.0), grid_deg(-90.0, 90.0, 5.0)
    before = sweep(scene, *small)
    start = time.monotonic()
    sweep(scene, *angles, threads=threads)
    whole = time.monotonic() - start
    watched = Watched(cancels=True)
    running = threading.active_count()
    with pytest.raises(Cancelled):
        sweep(scene, *angles, watched, threads)
    assert watched.stopped_at is not None
    answered = time.monotonic() - watched.stopped_at
    # 100 ms is meant; the rest is for a busy machine.
    assert answered < 0.5
    assert answered < 0.5 * whole
    assert threading.active_count() <= running
    assert same(before, sweep(scene, *small))


def test_the_kernel_is_compiled_once_for_every_size_of_map() -> None:
    """Compiling takes many seconds: it must not come again with the first finer grid."""
    _, scene = invented(1700)
    for step in (45.0, 5.0, 0.5):
        sweep(scene, grid_deg(-4.0, 4.0, step), grid_deg(-90.0, 90.0, step))
    assert len(sweep_tiles.signatures) == 1


def test_a_run_cancelled_before_it_starts() -> None:
    _, scene = invented(1700)
    watched = Watched()
    watched.stopped_at = 0.0
    with pytest.raises(Cancelled):
        sweep(scene, np.array([0.0]), np.array([0.0]), watched)


@pytest.mark.parametrize(
    ("low", "high", "step", "expected"),
    [
        # Steps count from 0, and the ends of the travel are added.
        (-10.0, 10.0, 5.0, [-10, -5, 0, 5, 10]),
        (-11.0, 12.5, 5.0, [-11, -10, -5, 0, 5, 10, 12.5]),
        (-1.0, 1.0, 0.5, [-1, -0.5, 0, 0.5, 1]),
        (3.0, 4.0, 2.0, [3, 4]),
        (-185.0, -181.0, 2.0, [-185, -184, -182, -181]),
        (0.0, 0.0, 1.0, [0]),
        (1.3, 1.3, 1.0, [1.3]),
    ],
)
def test_grids(low: float, high: float, step: float, expected: list[float]) -> None:
    assert grid_deg(low, high, step) == pytest.approx(expected, abs=1e-12)


@pytest.mark.parametrize("step", [0.1, 0.3, 1.0 / 3.0, 0.7, 7.0])
def test_grids_rise_and_have_their_ends_once(step: float) -> None:
    grid = grid_deg(-182.55, 179.9, step)
    assert grid[0] == -182.55
    assert grid[-1] == 179.9
    assert np.all(np.diff(grid) > 1e-9)
    assert np.all(np.diff(grid) <= step + 1e-9)
    inner = grid[1:-1] / step
    assert inner == pytest.approx(np.round(inner), abs=1e-9)
