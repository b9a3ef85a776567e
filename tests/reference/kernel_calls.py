"""Many queries of the distance kernel at once, and its answers in plain form.

`python -m tests.reference.kernel_calls` prints `small_cases` as JSON: with NUMBA_DISABLE_JIT=1 in the environment by
the very same kernels uncompiled.
"""

import json
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numba import njit
from numpy.typing import NDArray
from scipy.spatial.transform import Rotation

from geometry.errors import GeometryError
from geometry.hulls import packed_hulls
from geometry.kernel import Hulls, distance
from geometry.pieces import ConvexPiece, convex_piece
from geometry.plane_kernel import Pairs
from geometry.scene import build_scene
from geometry.sweep import sweep
from geometry.tasks import scratch_for
from tests.reference.rooms import random_setup

Array = NDArray[np.float64]
Indices = NDArray[np.int32]


@dataclass(frozen=True, eq=False)
class Answers:
    """The kernel's answers to n queries, each (n,): see `geometry.kernel.distance`. `points` (n, 2, 3): the witness.

    The witness is in a's system; it is that of the last simplex, so of no use where `status` is FAILED.
    """

    lower: Array
    upper: Array
    status: NDArray[np.int64]
    rate_a: Array
    rate_b: Array
    points: Array


def ask(
    a: Hulls,
    b: Hulls,
    first: Indices,
    second: Indices,
    turns: Array,
    *,
    limit: float = np.inf,
    warm: bool = False,
) -> Answers:
    """Ask for the distances of pieces `first` of a and `second` of b, b's turned by `turns`, (n, 3, 3).

    With `warm` each query starts where the one before ended, which makes sense for one pair only.
    """
    count = len(first)
    answers = Answers(
        np.zeros(count), np.zeros(count), np.zeros(count, np.int64), *np.zeros((2, count)), np.zeros((count, 2, 3))
    )
    memory, _ = scratch_for(Pairs(np.zeros(1, np.int32), np.zeros(1, np.int32), np.zeros(1)))
    rows = np.ascontiguousarray(turns.reshape(count, 9))
    _ask(a, b, first, second, np.zeros(1, np.int32), rows, float(limit), warm, memory, *vars(answers).values())
    return answers


@njit
def _ask(a, b, first, second, only, turns, limit, warm, memory, lower, upper, status, rate_a, rate_b, points):  # type: ignore[no-untyped-def] # noqa: ANN001, ANN202
    for k in range(len(first)):
        pair = only[0]
        if not warm:
            memory.size[pair] = 0
        t = turns[k]
        turn = (t[0], t[1], t[2], t[3], t[4], t[5], t[6], t[7], t[8])
        lower[k], upper[k], status[k] = distance(a, first[k], b, second[k], turn, memory, pair, limit, 0.0, 0.0)
        rate_a[k] = memory.rate_a[pair]
        rate_b[k] = memory.rate_b[pair]
        for c in range(memory.size[pair]):
            weight = memory.weights[pair, c]
            q = b.vertices[memory.corners[pair, c, 1]]
            for axis in range(3):
                points[k, 0, axis] += weight * a.vertices[memory.corners[pair, c, 0], axis]
                points[k, 1, axis] += weight * (t[3 * axis] * q[0] + t[3 * axis + 1] * q[1] + t[3 * axis + 2] * q[2])


def ask_pair(first: Array, second: Array) -> Answers:
    """Ask for the distance of the hulls of two point sets, (n, 3), mm."""
    zero = np.zeros(1, np.int32)
    return ask(packed([convex_piece(first)], 1), packed([convex_piece(second)], 2), zero, zero, np.eye(3)[None])


def packed(pieces: Sequence[ConvexPiece], axis: int | None) -> Hulls:
    """Pack pieces as parts of their own; `axis` as in `packed_hulls`."""
    return packed_hulls(pieces, range(len(pieces)), axis)


def random_piece(rng: np.random.Generator, *, least_mm: float = 1e-3) -> ConvexPiece:
    """Return a piece about the origin: a cloud, flat, needle, box, prism, lattice or ball, of 1 to 1000 mm.

    It is nowhere thinner than about `least_mm`, which is what rooms allow.
    """
    while True:
        size = 10.0 ** rng.uniform(0.0, 3.0)
        thin = max(10.0 ** rng.uniform(-4.0, -1.0), least_mm / size)
        kind = rng.integers(7)
        points = rng.normal(size=(int(rng.integers(4, 40)), 3))
        if kind == 1:
            points *= [1.0, 1.0, thin]
        elif kind == 2:
            points *= [1.0, thin, thin]
        elif kind == 3:
            points = CUBE * rng.uniform(0.05, 2.0, 3)
        elif kind == 4:
            around = np.linspace(0.0, 2.0 * np.pi, int(rng.integers(3, 60)), endpoint=False)
            rim = np.column_stack([np.cos(around), np.sin(around)])
            points = np.vstack([np.insert(rim, 2, z, axis=1) for z in (-thin, thin)])
        elif kind == 5:
            points, size = rng.integers(-2, 3, size=(len(points) + 4, 3)).astype(float), 10.0
        elif kind == 6:
            points = rng.normal(size=(120, 3))
            points /= np.linalg.norm(points, axis=1)[:, None]
        try:
            return convex_piece(points * size)
        except GeometryError:  # lattice points in one plane
            continue


CUBE = np.array([[x, y, z] for x in (-1.0, 1.0) for y in (-1.0, 1.0) for z in (-1.0, 1.0)])


def shifted(rng: np.random.Generator, piece: ConvexPiece, by_mm: float) -> ConvexPiece:
    """Return the piece turned at random and shifted by about `by_mm`."""
    matrix = np.eye(4)
    if rng.random() < 0.7:
        matrix[:3, :3] = Rotation.random(random_state=rng).as_matrix()
    matrix[:3, 3] = rng.normal(size=3) * by_mm
    return piece.placed(matrix)


def relative_turns(gantry_rad: Array, couch_rad: Array) -> Array:
    """Return Ry(-gantry) @ Rz(couch), shape (n, 3, 3): from the couch's system to the gantry's (IEC 61217)."""
    gantry = Rotation.from_euler("Y", gantry_rad[:, None])
    turns: Array = (gantry.inv() * Rotation.from_euler("Z", couch_rad[:, None])).as_matrix()
    return turns


def small_cases() -> dict[str, list[float]]:
    """Return answers to a few queries, and the map of a small room at a few angles."""
    rng = np.random.default_rng(11)
    count = 40
    a = packed([shifted(rng, random_piece(rng), 200.0) for _ in range(count)], 1)
    b = packed([shifted(rng, random_piece(rng), 200.0) for _ in range(count)], 2)
    each = np.arange(count, dtype=np.int32)
    answers = ask(a, b, each, each, Rotation.random(count, random_state=rng).as_matrix())
    found = sweep(build_scene(random_setup(rng, most_parts=1)), np.array([-90.0, 30.0, 31.0]), np.array([-20.0, 0.0]))
    return {
        "lower": answers.lower.tolist(),
        "upper": answers.upper.tolist(),
        "status": answers.status.astype(float).tolist(),
        "clearance": found.clearance_mm.ravel().tolist(),
        "slack": found.slack_mm.ravel().tolist(),
    }


if __name__ == "__main__":
    print(json.dumps(small_cases()))
