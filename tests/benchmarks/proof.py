"""The proof against the sweep: `python -m tests.benchmarks.proof` prints one line of JSON.

The C-arm with the tall heavy patient, one thread each: the exact map over the whole travel 1 deg apart, and the proof
of the same plane. With `--tightness` (minutes) instead how much of the plane is permitted in truth, as exact samples
0.1 deg apart have it, and yet not proved: every set-up of the two C-arm rooms, one line for each.
"""

import argparse
import sys
from pathlib import Path

import numpy as np
from numpy.typing import NDArray
from scipy.ndimage import minimum_filter

from app.files.setup_file import read_setup
from geometry.assess import Options, proof_steps, tolerances_of
from geometry.progress import Silent
from geometry.proof import Proof, prove
from geometry.scene import Scene, build_scene
from geometry.spans import Tolerances, permitted_runs
from geometry.sweep import grid_deg, sweep
from tests.benchmarks.timing import SAMPLE_ROOMS, TALL_HEAVY, best_of, line_of

Array = NDArray[np.float64]
Flags = NDArray[np.bool_]

EDGES_DEG = (0.5, 0.25, 0.125)
SAMPLES_DEG = 0.1
# Off every border of cells, so that each sample stands for a square of its own that lies in few cells.
OFFSET_DEG = 0.03
ROWS_AT_ONCE = 64


def options_of(edge_deg: float, tolerance_deg: float) -> Options:
    """Return options with one tolerance for both axes."""
    return Options(edge_deg=edge_deg, gantry_tolerance_deg=tolerance_deg, couch_tolerance_deg=tolerance_deg)


def proof_of(scene: Scene, options: Options, threads: int | None = None) -> Proof:
    """Return the proof of the whole plane."""
    return prove(scene, *proof_steps(scene.setup.room, options), Silent(), threads=threads)


def measure(runs: int) -> dict[str, object]:
    """Return times, numbers of evaluations and how they grow."""
    scene = build_scene(read_setup(TALL_HEAVY))
    room = scene.setup.room
    gantry_deg = grid_deg(room.gantry.low, room.gantry.high, 1.0)
    couch_deg = grid_deg(room.couch.turntable.low, room.couch.turntable.high, 1.0)
    exact = sweep(scene, gantry_deg, couch_deg, threads=1)
    swept = best_of(runs, lambda: sweep(scene, gantry_deg, couch_deg, threads=1))
    found: dict[str, object] = {
        "grid_permitted_share": float((exact.slack_mm >= 0.0).mean()),
        "sweep_s": swept.cpu_s,
    }
    for name, tolerance_deg in (("default", 1.0), ("tolerance_0", 0.0)):
        counts = []
        for edge_deg in EDGES_DEG:
            options = options_of(edge_deg, tolerance_deg)
            proof = proof_of(scene, options, threads=1)
            counts.append(proof.evaluations)
            if edge_deg == Options().edge_deg:
                taken = best_of(runs, lambda options=options: proof_of(scene, options, threads=1))  # type: ignore[misc]
                found[f"{name}_proof_s"] = taken.cpu_s
                found[f"{name}_proof_over_sweep"] = taken.cpu_s / swept.cpu_s
                found[f"{name}_us_an_evaluation"] = taken.cpu_s / proof.evaluations * 1e6
                found[f"{name}_proved_share"] = float((~np.isnan(proof.slack_mm)).mean())
        found[f"{name}_evaluations"] = dict(zip(map(str, EDGES_DEG), counts, strict=True))
        found[f"{name}_growth"] = counts[2] / counts[1]
        found[f"{name}_growth_before"] = counts[1] / counts[0]
    return found


def sampled(low: float, high: float) -> Array:
    """Return sample angles throughout a travel."""
    return np.arange(low + OFFSET_DEG, high, SAMPLES_DEG)


def true_plane(scene: Scene, gantry_deg: Array, couch_deg: Array) -> Flags:
    """Return where exact samples keep the required clearance, (couch, gantry)."""
    return np.concatenate(
        [
            sweep(scene, gantry_deg, couch_deg[k : k + ROWS_AT_ONCE]).slack_mm >= 0.0
            for k in range(0, len(couch_deg), ROWS_AT_ONCE)
        ]
    )


def permitted_plane(proof: Proof, tolerances: Tolerances, gantry_deg: Array, couch_deg: Array) -> Flags:
    """Return which readings are permitted, (couch, gantry)."""
    permitted = np.zeros((len(couch_deg), len(gantry_deg)), dtype=bool)
    for row, couch in enumerate(couch_deg):
        for run in permitted_runs(proof, tolerances, float(couch))[1]:
            permitted[row] |= (gantry_deg >= run.low_deg) & (gantry_deg <= run.high_deg)
    return permitted


def tightness(path: Path) -> dict[str, object]:
    """Return for one set-up which shares of the plane are permitted in truth but not proved."""
    scene = build_scene(read_setup(path))
    room = scene.setup.room
    gantry, couch = room.gantry, room.couch.turntable
    tolerance = Options().gantry_tolerance_deg
    beyond = round(tolerance / SAMPLES_DEG)
    gantry_deg = sampled(gantry.low - tolerance, gantry.high + tolerance)
    couch_deg = sampled(couch.low - tolerance, couch.high + tolerance)
    truth = true_plane(scene, gantry_deg, couch_deg)
    # What lies beyond the samples is not asked of: the readings stop a tolerance before.
    eroded = minimum_filter(truth, 2 * beyond + 1)
    inside = (slice(beyond, len(couch_deg) - beyond), slice(beyond, len(gantry_deg) - beyond))
    found: dict[str, object] = {"setup": path.relative_to(SAMPLE_ROOMS).as_posix(), "samples": truth[inside].size}
    for name, true, tolerance_deg in (("tolerance_0", truth, 0.0), ("tolerance_1", eroded, tolerance)):
        found[f"{name}_true_share"] = float(true[inside].mean())
        for edge_deg in (0.25, 0.1):
            options = options_of(edge_deg, tolerance_deg)
            proof = proof_of(scene, options)
            tolerances = tolerances_of(room, options)
            permitted = permitted_plane(proof, tolerances, gantry_deg[inside[1]], couch_deg[inside[0]])
            found[f"{name}_edge_{edge_deg}_not_proved"] = float((true[inside] & ~permitted).mean())
            found[f"{name}_edge_{edge_deg}_false"] = float((permitted & ~true[inside]).mean())
    return found


def main() -> int:
    """Print the line, or the lines."""
    parser = argparse.ArgumentParser(prog="python -m tests.benchmarks.proof", description=__doc__)
    parser.add_argument("--runs", type=int, default=5, help="the best of so many counts")
    parser.add_argument("--tightness", action="store_true", help="how much is permitted in truth but not proved")
    chosen = parser.parse_args()
    if not chosen.tightness:
        print(line_of(measure(chosen.runs)))
        return 0
    for path in sorted(SAMPLE_ROOMS.glob("c_arm_*/*.setup.toml")):
        print(line_of(tightness(path)), flush=True)
    return 0


if __name__ == "__main__":
    sys.exit(main())
