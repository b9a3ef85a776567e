"""Pieces that touch, overlap, hold one another or lie parallel, and how deep the kernel says they overlap."""

import math

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.spatial.transform import Rotation

from geometry.kernel import APART, CONTACT, FAILED, RESOLUTION_MM
from tests.reference.features import separation_mm
from tests.reference.kernel_calls import CUBE, Answers, ask, ask_pair, packed, random_piece, shifted

Array = NDArray[np.float64]
Vector = tuple[float, float, float]

# A cube of half side 1 about the origin, and the same shifted: how features meet, and the distance (closed forms).
SHIFTS: list[tuple[str, Vector, float]] = [
    ("face to face", (5.0, 0.0, 0.0), 3.0),
    ("face to face, half covered", (5.0, 1.0, 0.5), 3.0),
    ("edge to edge, parallel", (5.0, 6.0, 0.0), 5.0),
    ("corner to corner", (4.0, 5.0, 8.0), 7.0),
    ("far apart", (1e4 + 2.0, 0.0, 0.0), 1e4),
    ("far corner to far corner", (1e4 + 2.0, 1e4 + 2.0, 1e4 + 2.0), 1e4 * math.sqrt(3.0)),
    ("a hair apart", (2.0 + 1e-6, 0.0, 0.0), 1e-6),
    ("faces touch", (2.0, 0.0, 0.0), 0.0),
    ("faces touch in part", (2.0, 1.0, -1.5), 0.0),
    ("edges touch", (2.0, 2.0, 0.0), 0.0),
    ("corners touch", (2.0, 2.0, 2.0), 0.0),
    ("overlap by a hair", (2.0 - 1e-6, 0.3, 0.1), 0.0),
    ("overlap", (1.5, 0.2, 0.1), 0.0),
    ("the same twice", (0.0, 0.0, 0.0), 0.0),
]


@pytest.mark.parametrize(("shift", "distance"), [case[1:] for case in SHIFTS], ids=[case[0] for case in SHIFTS])
@pytest.mark.parametrize("turn", [(0.0, 0.0, 0.0), (90.0, 180.0, 0.0), (10.0, 20.0, 30.0)])
def test_two_cubes(shift: Vector, distance: float, turn: Vector) -> None:
    rotation = Rotation.from_euler("XYZ", turn, degrees=True)
    answers = ask_pair(rotation.apply(CUBE), rotation.apply(CUBE + np.array(shift)))
    assert answers.status[0] == (APART if distance else CONTACT)
    assert answers.lower[0] == pytest.approx(distance, abs=2.0 * RESOLUTION_MM)


@pytest.mark.parametrize(
    ("first", "second", "distance"),
    [
        # Closed forms. A cube's edge towards another one's edge, square to it.
        (("Z", 45.0), ("Y", 45.0), 10.0 - 2.0 * math.sqrt(2.0)),
        # An edge towards a face.
        (("Z", 45.0), ("X", 90.0), 10.0 - math.sqrt(2.0) - 1.0),
        # Edges that are parallel.
        (("Z", 45.0), ("Z", -45.0), 10.0 - 2.0 * math.sqrt(2.0)),
    ],
)
def test_turned_cubes_10_apart(first: tuple[str, float], second: tuple[str, float], distance: float) -> None:
    one = Rotation.from_euler(*first, degrees=True).apply(CUBE)
    other = Rotation.from_euler(*second, degrees=True).apply(CUBE) + np.array([10.0, 0.0, 0.0])
    answers = ask_pair(one, other)
    assert answers.lower[0] == pytest.approx(distance, abs=2.0 * RESOLUTION_MM)


@pytest.mark.parametrize("angle_deg", [0.0, 1e-6, 0.01, 1.0, 45.0, 90.0])
@pytest.mark.parametrize("thin", [1e-3, 0.1, 10.0])
def test_two_needles_that_cross(angle_deg: float, thin: float) -> None:
    # Closed form: square needles 2 m long, one above the other, turned about the line that joins their middles.
    needle = CUBE * [1000.0, thin / 2.0, thin / 2.0]
    other = Rotation.from_euler("Z", angle_deg, degrees=True).apply(needle) + np.array([0.0, 0.0, 30.0])
    assert ask_pair(needle, other).lower[0] == pytest.approx(30.0 - thin, abs=2.0 * RESOLUTION_MM)


@pytest.mark.parametrize("gap", [1e-3, 1.0, 250.0])
@pytest.mark.parametrize("slide", [0.0, 300.0, 399.0])
def test_two_parallel_plates(gap: float, slide: float) -> None:
    plate = CUBE * [200.0, 300.0, 5e-4]
    answers = ask_pair(plate, plate + np.array([slide, 17.0, gap + 1e-3]))
    assert answers.lower[0] == pytest.approx(gap, abs=2.0 * RESOLUTION_MM)


@pytest.mark.parametrize("size", [1e-3, 0.5, 0.999])
def test_a_cube_within_a_cube_is_contact(size: float) -> None:
    inner = Rotation.from_euler("XYZ", [30.0, 40.0, 50.0], degrees=True).apply(CUBE * size * 0.5)
    for pair in ((inner, CUBE), (CUBE, inner)):
        assert ask_pair(*pair).status[0] == CONTACT


def test_the_smallest_pieces() -> None:
    # Two tetrahedra, corner to face: the distance of (0, 0, 3) to the plane z = 0.
    flat = np.array([[-1.0, -1.0, 0.0], [2.0, -1.0, 0.0], [-1.0, 2.0, 0.0], [0.0, 0.0, -1.0]])
    standing = np.array([[0.0, 0.0, 3.0], [1.0, 0.0, 5.0], [0.0, 1.0, 5.0], [-1.0, -1.0, 5.0]])
    answers = ask_pair(flat, standing)
    assert answers.lower[0] == pytest.approx(3.0, abs=1e-12)
    assert answers.points[0] == pytest.approx(np.array([[0.0, 0.0, 0.0], [0.0, 0.0, 3.0]]), abs=1e-9)


def overlapping(seed: int, count: int, spread_mm: float) -> list[tuple[Array, Array, float]]:
    """Return corners of pairs in contact, and the depth that the kernel states."""
    rng = np.random.default_rng(seed)
    a, b = ([shifted(rng, random_piece(rng), spread_mm) for _ in range(count)] for _ in range(2))
    each = np.arange(count, dtype=np.int32)
    answers = ask(packed(a, 1), packed(b, 2), each, each, np.tile(np.eye(3), (count, 1, 1)))
    return [(a[k].vertices, b[k].vertices, -float(answers.upper[k])) for k in each if answers.status[k] == CONTACT]


def test_no_stated_depth_exceeds_the_true_one() -> None:
    # Reference: the least overlap on any separating axis.
    found = [case for case in overlapping(4, 500, 30.0) if len(case[0]) * len(case[1]) < 600]
    assert len(found) > 50
    for one, other, depth in found:
        assert depth <= -separation_mm(one, other) + 1e-9
    assert np.median([depth for _, _, depth in found]) > 1e-3


def test_a_shift_by_less_than_the_depth_never_parts_them() -> None:
    rng = np.random.default_rng(6)
    found = [case for case in overlapping(5, 150, 15.0) if case[2] > 1e-6]
    assert len(found) > 50
    for one, other, depth in found:
        for direction in (*rng.normal(size=(6, 3)), other.mean(axis=0) - one.mean(axis=0)):
            shift = direction / np.linalg.norm(direction) * depth * 0.9999
            assert ask_pair(one, other + shift).status[0] == CONTACT


def brought_near(seed: int, count: int, least_mm: float, most_mm: float) -> tuple[Array, Answers]:
    """Bring random pieces to a known distance along the line of their nearest points; return it and the answers."""
    rng = np.random.default_rng(seed)
    a, b = ([shifted(rng, random_piece(rng), 300.0) for _ in range(count)] for _ in range(2))
    each, still = np.arange(count, dtype=np.int32), np.tile(np.eye(3), (count, 1, 1))
    before = ask(packed(a, 1), packed(b, 2), each, each, still)
    wanted = np.exp(rng.uniform(np.log(least_mm), np.log(most_mm), count))
    moved = []
    for piece, (near_a, near_b), distance in zip(b, before.points, wanted, strict=True):
        matrix = np.eye(4)
        line = near_a - near_b
        matrix[:3, 3] = line * (1.0 - distance / np.linalg.norm(line)) if np.any(line) else 0.0
        moved.append(piece.placed(matrix))
    after = ask(packed(a, 1), packed(moved, 2), each, each, still)
    apart = before.status == APART
    return wanted[apart], Answers(**{name: values[apart] for name, values in vars(after).items()})


def test_pieces_some_micrometres_apart() -> None:
    distances, answers = brought_near(21, 2000, 5e-3, 1.0)
    assert np.all(answers.status == APART)
    assert answers.lower == pytest.approx(distances, abs=1e-6)


def test_pieces_all_but_touching_are_unsettled_rather_than_wrong() -> None:
    distances, answers = brought_near(22, 2000, 1e-6, 5e-3)
    settled = answers.status == APART
    assert np.mean(settled) > 0.9
    assert np.all(answers.status[~settled] == FAILED)
    assert answers.lower[settled] == pytest.approx(distances[settled], abs=1e-6)
    # What is certified holds whatever came of the query.
    assert np.all(answers.lower <= distances + 1e-9)
    assert np.all(answers.upper >= distances - 1e-9)
