"""An attack on the proof: `python -m tests.attack --readings 1000000 --rooms 200` prints one line of JSON.

Random readings inside what is permitted (intervals, spans, the permitted region) and random points of proved cells, each
reading moved by a random error within the tolerance, most of them to where it hurts: ends, borders, corners. At the
true angles thus reached the exact slack must not be negative. The exact query here asks each pair of pieces afresh,
with nothing carried from pose to pose; a sample is asked of a library too (tests/reference).
"""

import argparse
import json
import os
import sys
import time
from collections.abc import Iterator
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass, field, replace
from pathlib import Path

import numpy as np
import shapely
from numba import njit
from numpy.typing import NDArray

from app.files.setup_file import read_setup
from geometry.assess import Options, proof_steps, tolerances_of
from geometry.kernel import FAILED, distance
from geometry.machine import Axis, Readout
from geometry.planes import Plane, planes_of
from geometry.proof import Proof, prove
from geometry.scene import Scene, build_scene
from geometry.setup import Setup
from geometry.spans import Tolerances, permitted_region, permitted_runs, spans_at
from geometry.tasks import scratch_for
from tests.reference.distances import LeastDistances
from tests.reference.rooms import random_setup

Array = NDArray[np.float64]
Generator = np.random.Generator

SAMPLE_ROOMS = Path(__file__).resolve().parents[1] / "sample_rooms"
# Angles on a border may be off by rounding: 1e-7 of a step, times the reach of a machine.
ALLOWED_MM = 1e-6
# Poses of one call into compiled code.
CHUNK = 512
# Couch readings that the gantry readings of a room are shared between.
COUCH_READINGS = 60


@njit(nogil=True, cache=True, error_model="numpy")
def _ask(a, b, pairs, turns, memory, bound, clearance, slack):  # type: ignore[no-untyped-def]  # noqa: ANN001, ANN202
    """Lower clearance and slack of each pose, `turns` (n, 9) from b's system to a's, to those of this plane."""
    for pose in range(len(turns)):
        t = turns[pose]
        turn = (t[0], t[1], t[2], t[3], t[4], t[5], t[6], t[7], t[8])
        first = 0
        for p in range(len(pairs.i)):
            i, j = pairs.i[p], pairs.j[p]
            x, y, z = b.centres[j]
            dx = a.centres[i, 0] - (t[0] * x + t[1] * y + t[2] * z)
            dy = a.centres[i, 1] - (t[3] * x + t[4] * y + t[5] * z)
            dz = a.centres[i, 2] - (t[6] * x + t[7] * y + t[8] * z)
            bound[p] = np.sqrt(dx * dx + dy * dy + dz * dz) - a.radii[i] - b.radii[j] - 1e-6
            if bound[p] < bound[first]:
                first = p
        for step in range(-1, len(pairs.i)):
            p = first if step < 0 else step
            required = pairs.required[p]
            if bound[p] >= clearance[pose] and bound[p] - required >= slack[pose]:
                continue
            # Nothing is known of the pair: a query from a cold start.
            memory.size[p] = 0
            low, _, status = distance(a, pairs.i[p], b, pairs.j[p], turn, memory, p, np.inf, 0.0, 0.0)
            if status == FAILED:
                clearance[pose] = np.nan
                slack[pose] = np.nan
                break
            clearance[pose] = min(clearance[pose], low)
            slack[pose] = min(slack[pose], low - required)


class Exact:
    """Exact clearance and slack of a scene at many single pairs of angles."""

    def __init__(self, scene: Scene, threads: int = 1) -> None:
        self.planes = planes_of(scene)
        self.threads = threads

    def at(self, gantry_deg: Array, couch_deg: Array) -> tuple[Array, Array]:
        """Return clearance and slack, mm, at each of n pairs of angles; NaN where a query failed."""
        clearance = np.full(len(gantry_deg), np.inf)
        slack = np.full(len(gantry_deg), np.inf)
        chunks = [slice(k, k + CHUNK) for k in range(0, len(gantry_deg), CHUNK)]
        for plane in self.planes:
            turns = _turns(plane, gantry_deg, couch_deg)

            def work(chunk: slice, plane: Plane = plane, turns: Array = turns) -> None:
                memory, _ = scratch_for(plane.pairs)
                bound = np.empty(len(plane.pairs.i))
                _ask(plane.a, plane.b, plane.pairs, turns[chunk], memory, bound, clearance[chunk], slack[chunk])

            if self.threads == 1:
                for chunk in chunks:
                    work(chunk)
            else:
                with ThreadPoolExecutor(self.threads) as pool:
                    list(pool.map(work, chunks))
        return clearance, slack


def _turns(plane: Plane, gantry_deg: Array, couch_deg: Array) -> Array:
    """Return Ry(-gantry) Rz(couch), row by row, (n, 9), with 0 for an angle that the plane does not turn with."""
    g = np.radians(gantry_deg) * plane.with_gantry
    c = np.radians(couch_deg) * plane.with_couch
    zero, one = np.zeros_like(g), np.ones_like(g)
    back = np.array([[np.cos(g), zero, -np.sin(g)], [zero, one, zero], [np.sin(g), zero, np.cos(g)]])
    turned = np.array([[np.cos(c), -np.sin(c), zero], [np.sin(c), np.cos(c), zero], [zero, zero, one]])
    return np.ascontiguousarray(np.einsum("ijn,jkn->nik", back, turned).reshape(-1, 9))


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
    rng: Generator, setup: Setup, options: Options, readings: int, outcome: Outcome, by_library: int = 0, threads: int = 1
) -> None:
    """Attack the proof of one set-up with about so many readings."""
    scene = build_scene(setup)
    proof = prove(scene, *proof_steps(setup.room, options))
    tolerances = tolerances_of(setup.room, options)
    exact = Exact(scene, threads)
    outcome.rooms += 1
    before = outcome.readings
    library = LeastDistances(setup) if by_library else None

    for kind, angles, promised in _readings(rng, scene, proof, tolerances, readings):
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
    rng: Generator, scene: Scene, proof: Proof, tolerances: Tolerances, count: int
) -> Iterator[tuple[str, Array, Array | None]]:
    """Yield (kind, true angles (n, 2), promised (n, 2) or None): promised clearance and slack, else a slack of 0."""
    share = count // 4
    found = [
        ("interval", _in_intervals(rng, proof, tolerances, share)),
        ("span", _in_spans(rng, scene, proof, tolerances, share)),
        ("region", _in_region(rng, permitted_region(proof, tolerances), share)),
    ]
    for kind, (readings, promised) in found:
        if len(readings):
            yield kind, readings + _errors(rng, tolerances, len(readings)), promised
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
    borders = proof.couch.start_deg + proof.couch.step_deg * rng.integers(proof.couch.count + 1, size=COUCH_READINGS // 2)
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


def sample_setups() -> list[Setup]:
    """Return the set-ups that come with the program."""
    return [read_setup(path) for path in sorted(SAMPLE_ROOMS.glob("*/*.setup.toml"))]


def run(readings: int, rooms: int, by_library: int, seed: int) -> Outcome:
    """Attack every sample set-up and so many random rooms; half of the readings for each of the two."""
    rng = np.random.default_rng(seed)
    outcome = Outcome()
    threads = os.cpu_count() or 1
    samples = sample_setups()
    jobs = [(setup, readings // 2 // len(samples)) for setup in samples]
    jobs += [(any_setup(rng), readings // 2 // max(rooms, 1)) for _ in range(rooms)]
    for done, (setup, count) in enumerate(jobs):
        attack(rng, setup, any_options(rng), count, outcome, by_library, threads)
        if sys.stderr.isatty():
            print(f"\r{done + 1}/{len(jobs)} {outcome.readings}", end="", file=sys.stderr, flush=True)
    return outcome


def main() -> int:
    """Run the attack and print what it found; 1 if a promise was broken."""
    parser = argparse.ArgumentParser(prog="python -m tests.attack", description=__doc__)
    parser.add_argument("--readings", type=int, default=1_000_000)
    parser.add_argument("--rooms", type=int, default=200, help="random rooms, beside every sample set-up")
    parser.add_argument("--by-library", type=int, default=5, help="of each kind of reading of each room")
    parser.add_argument("--seed", type=int, default=1)
    chosen = parser.parse_args()
    start = time.monotonic()
    outcome = run(chosen.readings, chosen.rooms, chosen.by_library, chosen.seed)
    print(json.dumps({**vars(outcome), "seconds": round(time.monotonic() - start, 1)}))
    return 1 if outcome.violations else 0


if __name__ == "__main__":
    sys.exit(main())
