"""The distance kernel against closed forms and libraries, on stout pieces and on awkward ones."""

import json
import math
import os
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.spatial.transform import Rotation

from geometry.kernel import APART, BEYOND, CONTACT, FAILED, RESOLUTION_MM
from geometry.pieces import ConvexPiece
from tests.reference.distances import TOLERANCE_MM, Coal, Fcl, Library, coal, hull_distance_mm, library
from tests.reference.features import separation_mm
from tests.reference.kernel_calls import (
    CUBE,
    Answers,
    ask,
    ask_pair,
    packed,
    random_piece,
    shifted,
    small_cases,
)

Array = NDArray[np.float64]
LIBRARIES = [Fcl] if coal is None else [Coal, Fcl]


def turned(points: Array, axis: str, angle_deg: float, shift: tuple[float, float, float] = (0.0, 0.0, 0.0)) -> Array:
    moved: Array = Rotation.from_euler(axis, angle_deg, degrees=True).apply(points) + np.array(shift)
    return moved


def random_pairs(
    seed: int, count: int, apart_mm: float
) -> tuple[list[ConvexPiece], list[ConvexPiece], NDArray[np.int32], NDArray[np.int32], Array]:
    """Return pieces of two bodies, pairs of them and how b's is turned."""
    rng = np.random.default_rng(seed)
    pieces = [[shifted(rng, random_piece(rng), apart_mm) for _ in range(200)] for _ in range(2)]
    first, second = rng.integers(200, size=(2, count)).astype(np.int32)
    return pieces[0], pieces[1], first, second, Rotation.random(count, random_state=rng).as_matrix()


def distance_of(answers: Answers) -> float:
    """Return the distance of a single query that must be settled."""
    assert answers.status[0] in (APART, CONTACT)
    return float(answers.lower[0])


@pytest.mark.parametrize("angle_deg", [0.0, 10.0, 30.0, 45.0, 60.0, 77.7, 90.0, 135.0])
@pytest.mark.parametrize("axis", ["Y", "Z"])
def test_two_boxes_one_turned(angle_deg: float, axis: str) -> None:
    # Closed form: half sides of 50, centres 200 apart: 150 - 50 (|cos| + |sin|). At 45 deg 79.289.
    c, s = abs(math.cos(math.radians(angle_deg))), abs(math.sin(math.radians(angle_deg)))
    found = distance_of(ask_pair(50.0 * CUBE, turned(50.0 * CUBE, axis, angle_deg, (200.0, 0.0, 0.0))))
    assert found == pytest.approx(150.0 - 50.0 * (c + s), abs=1e-9)


def ball(radius: float, centre: tuple[float, float, float], rings: int = 40) -> tuple[Array, float]:
    """Return corners of a polytope about a ball, and how far it stands out."""
    heights = (np.arange(rings) + 0.5) * math.pi / rings
    around = np.arange(2 * rings) * math.pi / rings
    theta, phi = np.meshgrid(heights, around, indexing="ij")
    unit = np.stack([np.sin(theta) * np.cos(phi), np.sin(theta) * np.sin(phi), np.cos(theta)], axis=-1).reshape(-1, 3)
    from scipy.spatial import ConvexHull

    # Planes of the hull lie this near to the centre; blown up by that, the polytope holds the ball.
    nearest = -ConvexHull(unit).equations[:, 3].max()
    return unit * radius / nearest + np.array(centre), radius / nearest - radius


def test_two_balls() -> None:
    # Closed form: radii of 100 and 50, centres 300 apart: 150, less what the facets stand out.
    first, first_excess = ball(100.0, (0.0, 0.0, 0.0))
    second, second_excess = ball(50.0, (0.0, 180.0, 240.0))
    found = distance_of(ask_pair(first, second))
    assert 150.0 - first_excess - second_excess <= found <= 150.0
    assert first_excess + second_excess < 0.5


def test_a_ball_within_a_ball_is_contact() -> None:
    # A triangle-mesh distance would give about 79.6 for radii of 100 and 20.
    answers = ask_pair(ball(100.0, (0.0, 0.0, 0.0))[0], ball(20.0, (0.1, -0.2, 0.3))[0])
    assert answers.status[0] == CONTACT
    assert answers.lower[0] == 0.0
    # The nearest face of the outer one is 100 from its centre: at most 120 parts them.
    assert 0.0 < -answers.upper[0] <= 120.5


@pytest.mark.parametrize("apart_mm", [3.0, 40.0, 400.0, 1e4])
def test_random_pairs_are_as_far_apart_as_the_library_says(apart_mm: float) -> None:
    # Outside: coal (python-fcl on Windows) over convex hulls.
    by = library()
    a, b, first, second, turns = random_pairs(int(apart_mm), 4000, apart_mm)
    answers = ask(packed(a, 1), packed(b, 2), first, second, turns)
    hulls_a, hulls_b = [by.hull(p.vertices) for p in a], [by.hull(p.vertices) for p in b]
    still = by.turned(Rotation.identity())
    for k, (i, j) in enumerate(zip(first, second, strict=True)):
        true = by.distance_mm(hulls_a[i], hulls_b[j], still, by.turned(Rotation.from_matrix(turns[k])))
        assert answers.status[k] in (APART, CONTACT)
        if abs(answers.lower[k] - max(true, 0.0)) > TOLERANCE_MM:
            # The libraries err too, on needles and flats: then every pair of features decides.
            true = separation_mm(a[i].vertices, b[j].vertices @ turns[k].T)
        assert answers.lower[k] == pytest.approx(max(true, 0.0), abs=TOLERANCE_MM)


@pytest.mark.parametrize("by", [one() for one in LIBRARIES], ids=lambda by: type(by).__name__)
def test_the_libraries_agree_with_every_pair_of_features(by: Library) -> None:
    # So that the references do not all lean on one library.
    rng = np.random.default_rng(5)
    for _ in range(60):
        one, other = (rng.normal(size=(int(rng.integers(4, 14)), 3)) * 60.0 for _ in range(2))
        other = other + rng.normal(size=3) * 150.0
        true = separation_mm(one, other)
        assert hull_distance_mm(one, other, by) == pytest.approx(max(true, 0.0), abs=TOLERANCE_MM)
        assert distance_of(ask_pair(one, other)) == pytest.approx(max(true, 0.0), abs=1e-9)


@pytest.mark.parametrize("apart_mm", [2.0, 20.0, 300.0, 1e4])
def test_no_query_of_25000_fails_and_each_answer_is_consistent(apart_mm: float) -> None:
    """Flats and needles of 1 µm, lattices with many equal distances, far and near: 100,000 in all."""
    a, b, first, second, turns = random_pairs(77 + int(apart_mm), 25_000, apart_mm)
    answers = ask(packed(a, 1), packed(b, 2), first, second, turns)
    assert set(np.unique(answers.status)) <= {APART, CONTACT}
    apart = answers.status == APART
    assert apart.any()
    assert np.all(answers.lower[apart] > 0.0)
    # But for rounding, far below the tolerance.
    assert np.all(answers.upper[apart] >= answers.lower[apart] - 1e-9)
    assert np.all(answers.upper[apart] - answers.lower[apart] <= TOLERANCE_MM)
    assert np.all(answers.lower[~apart] == 0.0)
    between = np.linalg.norm(answers.points[:, 0] - answers.points[:, 1], axis=1)
    assert between[apart] == pytest.approx(answers.upper[apart], abs=TOLERANCE_MM)
    assert np.all(between[~apart] <= TOLERANCE_MM)


def test_a_query_that_starts_warm_ends_at_the_same_distance() -> None:
    rng = np.random.default_rng(8)
    for _ in range(60):
        a, b = (packed([shifted(rng, random_piece(rng), 150.0)], axis) for axis in (1, 2))
        only = np.zeros(40, np.int32)
        # Steps from far below a readout's to half a turn, back and forth.
        steps = rng.choice([1e-9, 1e-4, 1.0, 30.0, 180.0]) * rng.normal(size=40)
        turns = Rotation.from_euler("Z", np.cumsum(steps)[:, None], degrees=True).as_matrix()
        cold, warm = ask(a, b, only, only, turns), ask(a, b, only, only, turns, warm=True)
        assert not np.any(warm.status == FAILED)
        assert warm.lower == pytest.approx(cold.lower, abs=TOLERANCE_MM)


@pytest.mark.parametrize("limit", [0.0, 25.0, 300.0])
def test_a_query_with_a_limit_ends_beyond_it_or_with_the_distance(limit: float) -> None:
    a, b, first, second, turns = random_pairs(9, 5000, 200.0)
    bodies = packed(a, 1), packed(b, 2)
    exact = ask(*bodies, first, second, turns)
    limited = ask(*bodies, first, second, turns, limit=limit)
    beyond = limited.status == BEYOND
    assert beyond.any()
    assert np.all(limited.lower[beyond] > limit)
    assert np.all(limited.lower <= np.maximum(exact.upper, 0.0) + RESOLUTION_MM)
    assert np.all(limited.upper[beyond] >= exact.lower[beyond])
    assert limited.lower[~beyond] == pytest.approx(exact.lower[~beyond], abs=TOLERANCE_MM)


def test_uncompiled_kernels_give_the_same() -> None:
    compiled = small_cases()
    root = Path(__file__).resolve().parents[2]
    printed = subprocess.run(
        [sys.executable, "-m", "tests.reference.kernel_calls"],
        env={**os.environ, "NUMBA_DISABLE_JIT": "1"},
        cwd=root,
        capture_output=True,
        check=True,
        text=True,
    ).stdout
    uncompiled = json.loads(printed)
    assert compiled.keys() == uncompiled.keys()
    for name, values in compiled.items():
        assert uncompiled[name] == pytest.approx(values, abs=1e-9)
        assert np.all(np.isfinite(values))
