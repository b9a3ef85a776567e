"""How the benchmarks take time: the best of several runs, since whatever else runs on the machine only adds to it."""

import json
import time
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path

SAMPLE_ROOMS = Path(__file__).resolve().parents[2] / "sample_rooms"
TALL_HEAVY = SAMPLE_ROOMS / "c_arm_wide" / "tall_heavy.setup.toml"


@dataclass(frozen=True)
class Taken:
    """Seconds of the fastest run: of all the process's threads together, and by the clock on the wall."""

    cpu_s: float
    wall_s: float


def best_of(runs: int, work: Callable[[], object]) -> Taken:
    """Run `work` so many times and return the least of each time; it should have run once before."""
    taken = []
    for _ in range(runs):
        cpu, wall = time.process_time(), time.perf_counter()
        work()
        taken.append((time.process_time() - cpu, time.perf_counter() - wall))
    return Taken(min(cpu for cpu, _ in taken), min(wall for _, wall in taken))


def line_of(found: Mapping[str, object]) -> str:
    """Return what was found as one line of JSON, numbers to four digits."""
    return json.dumps(
        {key: float(f"{value:.4g}") if isinstance(value, float) else value for key, value in found.items()}
    )
