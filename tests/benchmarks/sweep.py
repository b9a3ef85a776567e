"""The whole map against the libraries: `python -m tests.benchmarks.sweep` prints one line of JSON.

The C-arm with the tall heavy patient; every gantry angle by every couch angle within 90 deg, 1 deg apart, every value
exact. What the map takes counts all that is checked; the libraries are asked only for the gantry against what turns
with the couch, on a random sample of the same pairs, and held against that part of the map.
"""

import argparse
import os
import subprocess
import sys
import tempfile
import time
from dataclasses import replace
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from app.files.setup_file import read_setup
from geometry.frames import R_fixed_gantry, R_fixed_turntable
from geometry.pieces import ConvexPiece, convex_piece
from geometry.planes import planes_of
from geometry.progress import Silent
from geometry.scene import Motion, Scene, ScenePart, build_scene
from geometry.sweep import angles_of, sweep, sweep_plane
from tests.benchmarks.libraries import Query, coal_query, fcl_query
from tests.benchmarks.timing import TALL_HEAVY, best_of, line_of

Array = NDArray[np.float64]

ROOT = Path(__file__).resolve().parents[2]
GANTRY_DEG = np.arange(-180.0, 180.0)
COUCH_DEG = np.arange(-90.0, 91.0)
PAIRS = len(GANTRY_DEG) * len(COUCH_DEG)

FIRST_START = """
import time
from app.kernel_cache import choose_kernel_cache
choose_kernel_cache()
from geometry.prepare import prepare_kernels
from geometry.progress import Silent
wall, cpu = time.perf_counter(), time.process_time()
prepare_kernels(Silent())
print(time.perf_counter() - wall, time.process_time() - cpu)
"""


def by_library(scene: Scene, make: str, sample: int, seed: int) -> dict[str, float]:
    """Return microseconds a pair by a library, and the greatest difference from the map where apart, mm."""
    moved = [piece for part in scene.parts if part.motion is Motion.GANTRY for piece in part.pieces]
    still = [piece for part in scene.parts if part.motion is Motion.TURNTABLE for piece in part.pieces]
    query: Query = {"coal": coal_query, "fcl": fcl_query}[make](moved, still)
    plane = next(plane for plane in planes_of(scene) if plane.with_gantry and plane.with_couch)
    field = sweep_plane(plane, angles_of(GANTRY_DEG), angles_of(COUCH_DEG))
    rng = np.random.default_rng(seed)
    columns, rows = rng.integers(len(GANTRY_DEG), size=sample), rng.integers(len(COUCH_DEG), size=sample)
    turns = [
        R_fixed_turntable(COUCH_DEG[row]).T @ R_fixed_gantry(GANTRY_DEG[column])
        for row, column in zip(rows, columns, strict=True)
    ]
    query(turns[0])
    start = time.process_time()
    found = np.array([query(turn) for turn in turns])
    seconds = time.process_time() - start
    ours = field.clearance[rows, columns]
    apart = ours > 0.0
    return {
        "us_a_pair": seconds / sample * 1e6,
        "greatest_difference_mm": float(np.abs(found - ours)[apart].max()),
        "contact_disagreements": int(np.count_nonzero((found > 1e-6) != apart)),
    }


def cut_in_four(piece: ConvexPiece) -> list[ConvexPiece]:
    """Return four pieces of the same union: cut across its two longest ways, in the middle."""
    _, _, ways = np.linalg.svd(piece.vertices - piece.vertices.mean(axis=0))
    quarters = [piece]
    for way in ways[:2]:
        quarters = [half for part in quarters for half in _halves(part, way, float((piece.vertices @ way).mean()))]
    return quarters


def _halves(piece: ConvexPiece, normal: Array, offset_mm: float) -> list[ConvexPiece]:
    heights = piece.vertices @ normal - offset_mm
    edges = np.concatenate([piece.faces[:, [0, 1]], piece.faces[:, [1, 2]], piece.faces[:, [2, 0]]])
    crossing = edges[heights[edges[:, 0]] * heights[edges[:, 1]] < 0.0]
    start, end = heights[crossing[:, 0], None], heights[crossing[:, 1], None]
    rim = (piece.vertices[crossing[:, 0]] * end - piece.vertices[crossing[:, 1]] * start) / (end - start)
    sides = [piece.vertices[heights <= 0.0], piece.vertices[heights >= 0.0]]
    return [convex_piece(np.concatenate([side, rim])) for side in sides]


def with_patient_in_quarters(scene: Scene) -> Scene:
    """Return the scene with each of the patient's pieces cut into four."""

    def quartered(part: ScenePart) -> ScenePart:
        if part.kind != "patient":
            return part
        return replace(part, pieces=tuple(quarter for piece in part.pieces for quarter in cut_in_four(piece)))

    return replace(scene, parts=tuple(quartered(part) for part in scene.parts))


def start_seconds() -> dict[str, float]:
    """Return how long the kernels take to be ready at a first start on a new machine, and at the second."""
    found: dict[str, float] = {}
    with tempfile.TemporaryDirectory() as folder:
        environment = {**os.environ, "NUMBA_CACHE_DIR": folder}
        command = [sys.executable, "-c", FIRST_START]
        for name in ("first", "second"):
            ended = subprocess.run(command, cwd=ROOT, env=environment, check=True, capture_output=True, text=True)
            found[f"{name}_start_s"], found[f"{name}_start_cpu_s"] = (float(text) for text in ended.stdout.split())
    return found


def measure(runs: int, sample: int) -> dict[str, object]:
    """Return all that the benchmark tells."""
    scene = build_scene(read_setup(TALL_HEAVY))
    quartered = with_patient_in_quarters(scene)
    cores = os.cpu_count() or 1

    def whole(of: Scene, threads: int) -> object:
        return sweep(of, GANTRY_DEG, COUCH_DEG, Silent(), threads)

    exact = sweep(scene, GANTRY_DEG, COUCH_DEG)
    again = sweep(quartered, GANTRY_DEG, COUCH_DEG)
    apart = (exact.clearance_mm > 0.0) & (again.clearance_mm > 0.0)
    single = best_of(runs, lambda: whole(scene, 1))
    several = best_of(runs, lambda: whole(scene, cores))
    fourfold = best_of(runs, lambda: whole(quartered, 1))
    libraries = {"coal": by_library(scene, "coal", sample, 1), "fcl": by_library(scene, "fcl", sample // 3, 2)}
    us_single, us_several = single.cpu_s / PAIRS * 1e6, several.wall_s / PAIRS * 1e6

    def sized(of: Scene) -> dict[str, int]:
        pieces = {
            motion.value: [piece for part in of.parts if part.motion is motion for piece in part.pieces]
            for motion in Motion
        }
        counts = {f"{name}_pieces": len(found) for name, found in pieces.items()}
        return counts | {f"{name}_vertices": sum(len(p.vertices) for p in found) for name, found in pieces.items()}

    return {
        "pairs_of_angles": PAIRS,
        **sized(scene),
        "not_known": int(np.isnan(exact.clearance_mm).sum()),
        "threads": cores,
        "one_thread_us_a_pair": us_single,
        "all_threads_us_a_pair": us_several,
        "one_thread_s": single.cpu_s,
        "all_threads_s": several.wall_s,
        **{f"{name}_{key}": value for name, found in libraries.items() for key, value in found.items()},
        **{f"{name}_ratio_one_thread": found["us_a_pair"] / us_single for name, found in libraries.items()},
        **{f"{name}_ratio_all_threads": found["us_a_pair"] / us_several for name, found in libraries.items()},
        "fourfold_pieces": sum(len(part.pieces) for part in quartered.parts if part.kind == "patient"),
        "fourfold_cost_ratio": fourfold.cpu_s / single.cpu_s,
        "fourfold_greatest_difference_mm": float(np.abs(exact.clearance_mm - again.clearance_mm)[apart].max()),
        **start_seconds(),
    }


def main() -> int:
    """Print the line."""
    parser = argparse.ArgumentParser(prog="python -m tests.benchmarks.sweep", description=__doc__)
    parser.add_argument("--runs", type=int, default=7, help="the best of so many counts")
    parser.add_argument("--sample", type=int, default=600, help="pairs of angles that coal is asked for")
    chosen = parser.parse_args()
    found = measure(chosen.runs, chosen.sample)
    print(line_of(found))
    return 0


if __name__ == "__main__":
    sys.exit(main())
