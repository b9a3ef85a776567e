"""The check of a large plan against the sweep: `python -m tests.benchmarks.check` prints one line of JSON.

40 arcs of 180 control points each, everything compiled before: `clear`, all permitted, with a collimator angle of its
own for each (head set-up); `couch`, the tall heavy patient at couch angles up to 30 deg, where most is in contact. The
bar for these two is 5 s or 20 sweeps of the same run, the longer. Beside it, without a bar, `jagged`: arcs whose couch
goes to and fro by 0.4 deg at every control point, so that no two control points share a straight run. `read_s` is what
reading the clear plan from an RT Plan takes.
"""

import argparse
import sys
import tempfile
from collections.abc import Callable
from pathlib import Path

from app.files.setup_file import read_setup
from app.plan.check import check_plan
from app.plan_files.plan_dicom import read_plan_fields
from geometry.assess import Options
from geometry.prepare import prepare_path_kernels
from geometry.progress import Silent
from geometry.scene import build_scene
from geometry.setup import Setup
from geometry.sweep import grid_deg, sweep
from geometry.treatment.data import CheckReport, PlanField
from tests.app.made_plans import beam, point, write_plan
from tests.benchmarks.timing import SAMPLE_ROOMS, TALL_HEAVY, best_of, line_of

ARCS, POINTS = 40, 180
HEAD = SAMPLE_ROOMS / "c_arm_wide" / "head.setup.toml"
SECONDS, SWEEPS = 5.0, 20.0


def arcs(jag_deg: float, couch_deg: Callable[[int], float], extent_deg: float = 358.0) -> list[PlanField]:
    """Return arcs that take turns in sense and collimator angle; `jag_deg` bends each at every other control point."""
    fields = []
    for k in range(ARCS):
        sense = 1.0 if k % 2 == 0 else -1.0
        gantry = [sense * extent_deg * (i / (POINTS - 1) - 0.5) for i in range(POINTS)]
        points = tuple((angle, couch_deg(k) + jag_deg * (i % 2)) for i, angle in enumerate(gantry))
        fields.append(PlanField(f"arc {k + 1}", points, collimator_deg=(30.0 if k % 2 else 330.0 - k,)))
    return fields


def swept_s(setup: Setup, runs: int) -> float:
    """Return the time of the exact map 1 deg apart on all cores, by the clock on the wall."""
    scene = build_scene(setup)
    gantry, couch = setup.room.gantry, setup.room.couch.turntable
    grids = grid_deg(gantry.low, gantry.high, 1.0), grid_deg(couch.low, couch.high, 1.0)
    sweep(scene, *grids)
    return best_of(runs, lambda: sweep(scene, *grids)).wall_s


def measure(runs: int) -> dict[str, object]:
    """Return times and what was found."""
    prepare_path_kernels(Silent())
    plans = {
        "clear": (HEAD, arcs(0.0, lambda _: 0.0)),
        "jagged": (HEAD, arcs(0.4, lambda k: float(k % 5), extent_deg=300.0)),
        "couch": (TALL_HEAVY, arcs(0.0, lambda k: 10.0 * (k % 7) - 30.0, extent_deg=200.0)),
    }
    found: dict[str, object] = {}
    worst = 0.0
    for name, (path, fields) in plans.items():
        setup = read_setup(path)
        reports: list[CheckReport] = []
        taken = best_of(runs, lambda: reports.append(check_plan(setup, fields, Options())))  # noqa: B023
        sweeps = swept_s(setup, 3 * runs)
        bar = max(SECONDS, SWEEPS * sweeps)
        if name != "jagged":
            worst = max(worst, taken.wall_s / bar)
        report = reports[-1]
        states = [check.state.value for check in report.fields], [move.state.value for move in report.moves]
        found |= {
            f"{name}_s": taken.wall_s,
            f"{name}_sweep_s": sweeps,
            f"{name}_sweeps": taken.wall_s / sweeps,
            f"{name}_fields_permitted": states[0].count("permitted"),
            f"{name}_moves_permitted": states[1].count("permitted"),
            f"{name}_better": report.better is not None,
        }
    return {**found, "read_s": read_s(plans["clear"][1]), "worst_share_of_bar": worst}


def read_s(fields: list[PlanField]) -> float:
    """Return the time of reading these fields from an RT Plan."""
    beams = []
    for field in fields:
        way = "CW" if field.points_deg[-1] > field.points_deg[0] else "CC"
        points = [point(gantry % 360.0, couch % 360.0) for gantry, couch in field.points_deg]
        points[0].GantryRotationDirection = way
        beams.append(beam(field.name, points))
    with tempfile.TemporaryDirectory() as folder:
        path = write_plan(Path(folder) / "plan.dcm", beams)
        return best_of(1, lambda: read_plan_fields(path)).wall_s


def main() -> int:
    """Print the line."""
    parser = argparse.ArgumentParser(prog="python -m tests.benchmarks.check", description=__doc__)
    parser.add_argument("--runs", type=int, default=3, help="the best of so many counts")
    print(line_of(measure(parser.parse_args().runs)))
    return 0


if __name__ == "__main__":
    sys.exit(main())
