"""Attacks on the proof: random readings inside what is permitted, moved by random errors within the tolerance.

Readings lie in intervals, spans, the permitted region, rectangles and on paths, most of them where it hurts: at ends,
borders, corners. At the true angles that they lead to the exact slack must not be negative. Points of proved cells
must keep the bounds that the cells state.
"""

from collections.abc import Iterator
from dataclasses import dataclass, field, replace

import numpy as np
import shapely
from numpy.typing import NDArray

from geometry.assess import Options, proof_steps, tolerances_of
from geometry.machine import Axis, Readout
from geometry.proof import Proof, prove
from geometry.scene import Scene, build_scene
from geometry.setup import Setup
from geometry.spans import Tolerances, permitted_region, permitted_runs, spans_at
from tests.reference.distances import LeastDistances
from tests.reference.exact import Exact
from tests.reference.path_attacks import in_paths, in_rectangles
from tests.reference.rooms import random_setup

Array = NDArray[np.float64]
Generator = np.random.Generator

# Angles on a border may be off by rounding: 1e-7 of a step, times the reach of a machine.
ALLOWED_MM = 1e-6
# Couch readings that the gantry readings of a room are shared between.
COUCH_READINGS = 60


@dataclass
class Outcome:
    """What an attack found: `least_margin_mm` is the least of exact - promised over all readings."""

    readings: int = 0
    rooms: int = 0
    rooms_without_permission: int = 0
    violations: int = 0
    least_margin_mm: float = np.inf
    by_library: int = 0
    greatest_difference_mm: float = 0.0
    examples: list[str] = field(default_factory=list)

    def judge(self, kind: str, setup: Setup, options: Options, angles: Array, margin_mm: Array) -> None:
        """Count readings, `angles` (n, 2) the true angles that they led to, by their margins (n,), mm."""
        # A distance that was not found breaks the promise as well.
        bad = ~(margin_mm >= -ALLOWED_MM)
        self.readings += len(margin_mm)
        self.violations += int(bad.sum())
        self.least_margin_mm = min(self.least_margin_mm, float(margin_mm.min(initial=np.inf)))
        for k in np.flatnonzero(bad)[:2]:
            self.examples.append(f"{setup.name} {options} {kind}: {angles[k].tolist()} {margin_mm[k]}")


def attack(
    rng: Generator,
    setup: Setup,
    options: Options,
    readings: int,
    outcome: Outcome,
    by_library: int = 0,
    threads: int = 1,
    errors: float = 1.0,
) -> None:
    """Attack the proof of one set-up with about so many readings, whose errors are `errors` times the tolerance."""
    scene = build_scene(setup)
    proof = prove(scene, *proof_steps(setup.room, options))
    tolerances = tolerances_of(setup.room, options)
    exact = Exact(scene, threads)
    outcome.rooms += 1
    before = outcome.readings
    library = LeastDistances(setup) if by_library else None

    for kind, angles, promised in _readings(rng, scene, proof, tolerances, readings, errors):
        clearance, slack = exact.at(angles[:, 0], angles[:, 1])
        if promised is None:
            outcome.judge(kind, setup, options, angles, slack)
        else:
            outcome.judge(kind, setup, options, angles, np.minimum(slack - promised[:, 1], clearance - promised[:, 0]))
        if library is not None:
            for k in rng.integers(len(angles), size=by_library):
                found = library.at(*angles[k])
                outcome.by_library += 1
                difference = max(abs(found.slack_mm - slack[k]), abs(found.clearance_mm - clearance[k]))
                outcome.greatest_difference_mm = max(outcome.greatest_difference_mm, float(difference))
    outcome.rooms_without_permission += outcome.readings == before


def _readings(
    rng: Generator, scene: Scene, proof: Proof, tolerances: Tolerances, count: int, errors: float
) -> Iterator[tuple[str, Array, Array | None]]:
    """Yield (kind, true angles (n, 2), promised (n, 2) or None): promised clearance and slack, else a slack of 0."""
    share = count // 6
    found = [
        ("interval", _in_intervals(rng, proof, tolerances, share)),
        ("span", _in_spans(rng, scene, proof, tolerances, share)),
        ("region", _in_region(rng, permitted_region(proof, tolerances), share)),
        ("path", in_paths(rng, scene, proof, tolerances, share)),
        ("rectangle", in_rectangles(rng, proof, tolerances, share)),
    ]
    for kind, (readings, promised) in found:
        if len(readings):
            yield kind, readings + errors * _errors(rng, tolerances, len(readings)), promised
    points, promised = _in_cells(rng, proof, share)
    if len(points):
        yield "cell", points, promised


def _in_intervals(rng: Generator, proof: Proof, tolerances: Tolerances, count: int) -> tuple[Array, None]:
    found = []
    for couch_deg in _couch_readings(rng, proof, tolerances):
        _, runs = permitted_runs(proof, tolerances, float(couch_deg))
        found += [(couch_deg, run.low_deg, run.high_deg) for run in runs]
    return _spread(rng, np.array(found).reshape(-1, 3), count)[0], None


def _in_spans(
    rng: Generator, scene: Scene, proof: Proof, tolerances: Tolerances, count: int
) -> tuple[Array, Array | None]:
    readout = Readout(float(rng.uniform(0, 360)), rng.choice([-1, 1]), float(rng.choice([0.1, 0.5, 1.0, 0.07])))
    spans = [
        (span.couch_deg, span.gantry_from_deg, span.gantry_to_deg, span.least_clearance_mm)
        for couch_deg in _couch_readings(rng, proof, tolerances)
        for span in spans_at(proof, tolerances, scene, float(couch_deg), readout)
    ]
    table = np.array(spans).reshape(-1, 4)
    readings, chosen = _spread(rng, table[:, :3], count)
    return readings, np.stack([table[chosen, 3], np.zeros(len(chosen))], axis=1)


def _spread(rng: Generator, intervals: Array, count: int) -> tuple[Array, NDArray[np.int64]]:
    """Return gantry and couch readings (n, 2) in intervals (couch, from, to), and of which each is; half at ends."""
    if not len(intervals):
        return np.empty((0, 2)), np.empty(0, np.int64)
    chosen = rng.integers(len(intervals), size=count)
    part = rng.uniform(size=count)
    part = np.where(rng.random(count) < 0.5, np.round(part), part)
    couch, low, high = intervals[chosen].T
    return np.stack([np.clip(low + part * (high - low), low, high), couch], axis=1), chosen


def _couch_readings(rng: Generator, proof: Proof, tolerances: Tolerances) -> Array:
    """Return couch readings: any at all, those whose rectangles end on borders of cells, and the travel's ends."""
    low, high = tolerances.couch_travel_deg
    anywhere = rng.uniform(low, high, COUCH_READINGS // 2)
    borders = proof.couch.start_deg + proof.couch.step_deg * rng.integers(
        proof.couch.count + 1, size=COUCH_READINGS // 2
    )
    borders = borders + rng.choice([-1, 0, 1], size=len(borders)) * tolerances.of_couch_deg
    return np.concatenate([anywhere, borders[(borders >= low) & (borders <= high)], [low, high]])


def _in_region(rng: Generator, region: shapely.Geometry, count: int) -> tuple[Array, None]:
    """Return readings of the region's inside, of its border and, as many as there are, of its corners."""
    if region.area == 0.0:
        return np.empty((0, 2)), None
    shapely.prepare(region)
    x0, y0, x1, y1 = region.bounds
    points = rng.uniform((x0, y0), (x1, y1), (4 * count, 2))
    inside = points[shapely.contains_xy(region, points)][: count // 2]
    corners, ring = shapely.get_coordinates(shapely.get_rings(shapely.get_parts(region)), return_index=True)
    start = rng.choice(np.flatnonzero(ring[:-1] == ring[1:]), size=count // 2)
    part = np.maximum(0.0, rng.uniform(-1.0, 1.0, (count // 2, 1)))
    return np.concatenate([inside, corners[start] + part * (corners[start + 1] - corners[start])]), None


def _in_cells(rng: Generator, proof: Proof, count: int) -> tuple[Array, Array | None]:
    """Return true angles in proved cells, many in their corners, with the clearance and slack that are promised."""
    rows, columns = np.nonzero(~np.isnan(proof.slack_mm))
    if not len(rows):
        return np.empty((0, 2)), None
    chosen = rng.integers(len(rows), size=count)
    rows, columns = rows[chosen], columns[chosen]
    part = rng.uniform(size=(count, 2))
    part = np.where(rng.random((count, 1)) < 0.6, np.round(part), part)
    gantry, couch = proof.gantry, proof.couch
    x = np.clip(gantry.start_deg + (columns + part[:, 0]) * gantry.step_deg, gantry.low_deg, gantry.high_deg)
    y = np.clip(couch.start_deg + (rows + part[:, 1]) * couch.step_deg, couch.low_deg, couch.high_deg)
    promised = np.stack([proof.clearance_mm[rows, columns], proof.slack_mm[rows, columns]], axis=1)
    return np.stack([x, y], axis=1), promised.astype(np.float64)


def _errors(rng: Generator, tolerances: Tolerances, count: int) -> Array:
    """Return errors (n, 2) within the tolerances; half of them in a corner of the rectangle."""
    error = rng.uniform(-1.0, 1.0, (count, 2))
    corner = rng.random((count, 1)) < 0.5
    error = np.where(corner, np.where(error < 0.0, -1.0, 1.0), error)
    return error * (tolerances.of_gantry_deg, tolerances.of_couch_deg)


def any_options(rng: Generator) -> Options:
    """Return edges and tolerances of every kind: that divide the travel or do not, 0 and more."""
    tolerances = (0.0, 0.5, 1.0, 2.0)
    return Options(
        edge_deg=float(rng.choice([0.25, 0.3, 0.5, 1.0, 2.0])),
        gantry_tolerance_deg=float(rng.choice(tolerances)),
        couch_tolerance_deg=float(rng.choice(tolerances)),
    )


def any_setup(rng: Generator) -> Setup:
    """Return an invented set-up whose travels are of every kind."""
    setup = random_setup(rng)
    gantry = ((-185.0, 185.0), (-180.0, 180.0), (-182.55, 177.3), (-95.0, 31.7))[rng.integers(4)]
    couch = ((-90.0, 90.0), (-95.0, 95.0), (-12.3, 61.7), (0.0, 0.0), (5.1, 5.1))[rng.integers(5)]
    room = setup.room
    turntable = replace(room.couch, turntable=Axis(*couch))
    return replace(setup, room=replace(room, gantry=Axis(*gantry), couch=turntable))
