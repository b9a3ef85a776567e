"""The bound that outlives the pose: how near two pieces can come when their bodies turn on from where they were asked.

Everything between the samples rests on it, so it is attacked: random pieces, turns from below a readout's step to 30
deg, and pairs of angles chosen so that the bound is nearly reached.
"""

import itertools

import numpy as np
import pytest
from numpy.typing import NDArray

from geometry.kernel import APART, CONTACT, FAILED, Hulls, fall
from geometry.plane_kernel import _rise
from tests.reference.kernel_calls import Answers, ask, packed, random_piece, relative_turns, shifted

Array = NDArray[np.float64]
Indices = NDArray[np.int32]

COUNT = 8000
SCALES_RAD = [1e-5, 1e-3, 1e-2, 0.1, np.radians(30.0)]


class Queries:
    """Random pairs of pieces of two bodies at random pairs of angles, and as many turns on from there."""

    def __init__(self, seed: int, apart_mm: float, limit: float = np.inf) -> None:
        self.rng = np.random.default_rng(seed)
        self.a, self.b = (
            packed([shifted(self.rng, random_piece(self.rng), apart_mm) for _ in range(150)], axis) for axis in (1, 2)
        )
        self.i, self.j = self.rng.integers(150, size=(2, COUNT)).astype(np.int32)
        self.gantry, self.couch = self.rng.uniform(-np.pi, np.pi, (2, COUNT))
        self.before = self.asked(self.gantry, self.couch, limit)

    def asked(self, gantry_rad: Array, couch_rad: Array, limit: float = np.inf) -> Answers:
        return ask(self.a, self.b, self.i, self.j, relative_turns(gantry_rad, couch_rad), limit=limit)

    def turned_on(self, scale_rad: float) -> tuple[Array, Array, Answers]:
        """Turn the gantry, the couch or both by up to `scale_rad`; return the turns and what is found there."""
        by = self.rng.uniform(-scale_rad, scale_rad, (2, COUNT))
        by *= np.array([[1, 1], [1, 0], [0, 1]]).T[:, self.rng.integers(3, size=COUNT)]
        return by[0], by[1], self.asked(self.gantry + by[0], self.couch + by[1])

    def bound(self, by_gantry: Array, by_couch: Array, rates: float = 1.0, reach: float = 1.0) -> Array:
        """Return lower - rate_a |g| - rate_b |c| - (reach_a g² + reach_b c²) / 2, its terms scaled."""
        g, c = np.abs(by_gantry), np.abs(by_couch)
        first = self.before.rate_a * g + self.before.rate_b * c
        second = 0.5 * (self.a.reach[self.i] * g * g + self.b.reach[self.j] * c * c)
        bound: Array = self.before.lower - rates * first - reach * second
        return bound


@pytest.mark.parametrize("scale_rad", SCALES_RAD)
@pytest.mark.parametrize("apart_mm", [3.0, 300.0])
@pytest.mark.parametrize("limit", [np.inf, 40.0])
def test_the_bound_holds_after_random_turns(scale_rad: float, apart_mm: float, limit: float) -> None:
    queries = Queries(int(apart_mm), apart_mm, limit)
    by_gantry, by_couch, after = queries.turned_on(scale_rad)
    assert not np.any(after.status == FAILED)
    true = np.maximum(after.upper, 0.0)
    assert np.all(queries.bound(by_gantry, by_couch) <= true + 1e-9)


def test_the_bound_is_nearly_reached_and_smaller_terms_are_wrong() -> None:
    """Were the rates or the reach 5 % too small, the bound would not hold: so the test above can fail."""
    slow, short = 0, 0
    for seed in range(3):
        queries = Queries(seed, 300.0)
        for scale_rad in SCALES_RAD:
            by_gantry, by_couch, after = queries.turned_on(scale_rad)
            true = np.maximum(after.upper, 0.0)
            slow += np.count_nonzero(queries.bound(by_gantry, by_couch, rates=0.95) > true + 1e-9)
            short += np.count_nonzero(queries.bound(by_gantry, by_couch, reach=0.0) > true + 1e-9)
    assert slow > 20
    assert short > 20


@pytest.mark.parametrize("apart_mm", [3.0, 300.0])
def test_the_fall_of_a_bound_is_never_less_than_the_fall_of_the_distance(apart_mm: float) -> None:
    queries = Queries(17, apart_mm)
    for scale_rad in (1e-3, 0.05, 0.5):
        by_gantry, by_couch, after = queries.turned_on(scale_rad)
        falls = np.array(
            [
                fall(queries.a.reach[i], queries.b.reach[j], rate_a, rate_b, abs(g), abs(c))
                for i, j, rate_a, rate_b, g, c in zip(
                    queries.i,
                    queries.j,
                    queries.before.rate_a,
                    queries.before.rate_b,
                    by_gantry,
                    by_couch,
                    strict=True,
                )
            ]
        )
        assert np.all(queries.before.lower - falls <= np.maximum(after.upper, 0.0))


def test_the_rise_of_a_distance_is_never_less_than_the_truth() -> None:
    """An upper bound that is too small would drop a pair that matters."""
    slid = 0
    for apart_mm, scale_rad in itertools.product((3.0, 30.0, 300.0), (1e-4, 1e-2, 0.3)):
        queries = Queries(23, apart_mm)
        a, b, before = queries.a, queries.b, queries.before
        by_gantry, by_couch, after = queries.turned_on(scale_rad)
        falls = before.lower - queries.bound(by_gantry, by_couch)
        chords = 2.0 * np.sin(np.abs([by_gantry, by_couch]) / 2.0)
        motion = a.reach[queries.i] * chords[0] + b.reach[queries.j] * chords[1]
        apart, touching = before.status == APART, before.status == CONTACT
        rises = np.array([_rise(*values) for values in zip(before.lower, before.upper, falls, motion, strict=True)])
        assert np.all(after.lower[apart] <= np.minimum(before.upper + motion, rises)[apart] + 1e-9)
        assert np.all(after.lower[touching] <= np.maximum(before.upper + motion, 0.0)[touching] + 1e-9)
        # Motion across the line between the nearest points counts too.
        slid += np.count_nonzero(after.lower[apart] > (before.upper + falls)[apart] + 1e-9)
    assert slid > 0


def farthest_moves(body: Hulls, axis: int, angle_rad: float) -> Array:
    """Return how far the farthest corner of each piece gets when the body turns, by moving every corner."""
    u, v = (axis + 1) % 3, (axis + 2) % 3
    turned = body.vertices.copy()
    cos, sin = np.cos(angle_rad), np.sin(angle_rad)
    turned[:, u], turned[:, v] = (
        cos * body.vertices[:, u] - sin * body.vertices[:, v],
        sin * body.vertices[:, u] + cos * body.vertices[:, v],
    )
    return np.maximum.reduceat(np.linalg.norm(turned - body.vertices, axis=1), body.first[:-1])


@pytest.mark.parametrize(("axis", "angle_rad"), [(1, 0.01), (1, 1.0), (2, 0.2), (2, 3.0)])
def test_reach_is_that_of_the_farthest_corner(axis: int, angle_rad: float) -> None:
    rng = np.random.default_rng(3)
    body = packed([shifted(rng, random_piece(rng), 300.0) for _ in range(100)], axis)
    chord = 2.0 * np.sin(angle_rad / 2.0)
    assert body.reach * chord == pytest.approx(farthest_moves(body, axis, angle_rad), abs=1e-9)


def test_spheres_hold_their_pieces() -> None:
    rng = np.random.default_rng(4)
    body = packed([shifted(rng, random_piece(rng), 300.0) for _ in range(100)], None)
    piece_of = np.repeat(np.arange(100), np.diff(body.first))
    from_centre = np.linalg.norm(body.vertices - body.centres[piece_of], axis=1)
    assert np.all(from_centre <= body.radii[piece_of] + 1e-9)
    assert np.all(body.reach == 0.0)


def test_in_contact_the_bound_is_nothing() -> None:
    queries = Queries(9, 3.0)
    touching = queries.before.status == CONTACT
    assert touching.any()
    assert (queries.before.status == APART).any()
    assert np.all(queries.before.lower[touching] == 0.0)
    assert np.array_equal(queries.before.rate_a[touching], queries.a.reach[queries.i[touching]])
    assert np.array_equal(queries.before.rate_b[touching], queries.b.reach[queries.j[touching]])
