"""Random readings on proved paths and in proved rectangles; see tests/reference/attacks.py."""

import numpy as np
from numpy.typing import NDArray

from geometry.paths import PathProver
from geometry.proof import Proof
from geometry.queries import rectangle_permitted
from geometry.scene import Scene
from geometry.spans import Tolerances, permitted_runs
from geometry.states import State

Array = NDArray[np.float64]
Generator = np.random.Generator

# Paths and rectangles that the readings of a room are shared between.
PATHS = 12
RECTANGLES = 40


def in_paths(
    rng: Generator, scene: Scene, proof: Proof, tolerances: Tolerances, count: int
) -> tuple[Array, Array | None]:
    """Return readings (n, 2) on permitted paths, control points among them, with promised clearance and slack."""
    prover = PathProver(scene, tolerances)
    readings, promised = [], []
    for _ in range(PATHS):
        points = _random_path(rng, proof, tolerances)
        verdict = prover.verdict([(float(g), float(c)) for g, c in points])
        if verdict.state is not State.PERMITTED or verdict.least is None or verdict.tightest is None:
            continue
        readings.append(_on_path(rng, points, count // PATHS))
        promised.append(np.tile((verdict.least.clearance_mm, verdict.tightest.slack_mm), (len(readings[-1]), 1)))
    if not readings:
        return np.empty((0, 2)), None
    return np.concatenate(readings), np.concatenate(promised)


def in_rectangles(rng: Generator, proof: Proof, tolerances: Tolerances, count: int) -> tuple[Array, None]:
    """Return readings (n, 2) in permitted rectangles, half of them in corners."""
    readings = [np.empty((0, 2))]
    for _ in range(RECTANGLES):
        middle = _permitted_reading(rng, proof, tolerances)
        if middle is None:
            continue
        half = rng.uniform(0.0, 6.0, 2)
        low = np.maximum(middle - half, [tolerances.gantry_travel_deg[0], tolerances.couch_travel_deg[0]])
        high = np.minimum(middle + half, [tolerances.gantry_travel_deg[1], tolerances.couch_travel_deg[1]])
        if rectangle_permitted(proof, tolerances, (low[0], high[0]), (low[1], high[1])):
            part = rng.uniform(size=(count // RECTANGLES, 2))
            part = np.where(rng.random((len(part), 1)) < 0.5, np.round(part), part)
            readings.append(low + part * (high - low))
    return np.concatenate(readings), None


def _permitted_reading(rng: Generator, proof: Proof, tolerances: Tolerances) -> Array | None:
    couch_deg = float(rng.uniform(*tolerances.couch_travel_deg))
    _, runs = permitted_runs(proof, tolerances, couch_deg)
    if not runs:
        return None
    run = runs[rng.integers(len(runs))]
    return np.array([rng.uniform(run.low_deg, run.high_deg), couch_deg])


def _random_path(rng: Generator, proof: Proof, tolerances: Tolerances) -> Array:
    """Return control points (n, 2) of a beam or an arc of either axis or both, begun where permitted if it can."""
    start = _permitted_reading(rng, proof, tolerances)
    if start is None:
        start = rng.uniform(
            [tolerances.gantry_travel_deg[0], tolerances.couch_travel_deg[0]],
            [tolerances.gantry_travel_deg[1], tolerances.couch_travel_deg[1]],
        )
    steps = rng.uniform((-40.0, -20.0), (40.0, 20.0), (rng.integers(0, 4), 2))
    steps *= [(1.0, 1.0), (1.0, 0.0), (0.0, 1.0)][rng.integers(3)]
    points = np.concatenate([start[None], start + np.cumsum(steps, axis=0)])
    return np.clip(
        points,
        [tolerances.gantry_travel_deg[0], tolerances.couch_travel_deg[0]],
        [tolerances.gantry_travel_deg[1], tolerances.couch_travel_deg[1]],
    )


def _on_path(rng: Generator, points: Array, count: int) -> Array:
    if len(points) == 1:
        return np.repeat(points, max(count, 1), axis=0)
    which = rng.integers(len(points) - 1, size=count)
    share = rng.uniform(size=(count, 1))
    return np.concatenate([points, points[which] + share * (points[which + 1] - points[which])])
