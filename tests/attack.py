"""The great attack on the proof: `python -m tests.attack --readings 1000000 --rooms 200` prints one line of JSON.

Every sample set-up and so many random rooms, half of the readings for each of the two; see tests/reference/attacks.py.
The exit status is 1 if a promise was broken.
"""

import argparse
import json
import os
import sys
import time
from pathlib import Path

import numpy as np

from app.kernel_cache import choose_kernel_cache

SAMPLE_ROOMS = Path(__file__).resolve().parents[1] / "sample_rooms"


def run(readings: int, rooms: int, by_library: int, seed: int) -> dict[str, object]:
    """Attack every sample set-up and so many random rooms, and return what was found."""
    choose_kernel_cache()
    from app.files.setup_file import read_setup
    from tests.reference.attacks import Outcome, any_options, any_setup, attack

    rng = np.random.default_rng(seed)
    outcome = Outcome()
    samples = [read_setup(path) for path in sorted(SAMPLE_ROOMS.glob("*/*.setup.toml"))]
    jobs = [(setup, readings // 2 // len(samples)) for setup in samples]
    jobs += [(any_setup(rng), readings // 2 // max(rooms, 1)) for _ in range(rooms)]
    for done, (setup, count) in enumerate(jobs):
        attack(rng, setup, any_options(rng), count, outcome, by_library, os.cpu_count() or 1)
        if sys.stderr.isatty():
            print(
                f"\r{done + 1} of {len(jobs)} set-ups, {outcome.readings} readings", end="", file=sys.stderr, flush=True
            )
    return {"sample_setups": len(samples), "random_rooms": rooms, **vars(outcome)}


def main() -> int:
    """Run the attack and print what it found."""
    parser = argparse.ArgumentParser(prog="python -m tests.attack", description=__doc__)
    parser.add_argument("--readings", type=int, default=1_000_000)
    parser.add_argument("--rooms", type=int, default=200, help="random rooms, beside every sample set-up")
    parser.add_argument(
        "--by-library", type=int, default=5, help="readings of each kind and room asked of a library too"
    )
    parser.add_argument("--seed", type=int, default=1)
    chosen = parser.parse_args()
    start = time.monotonic()
    found = run(chosen.readings, chosen.rooms, chosen.by_library, chosen.seed)
    print(json.dumps({**found, "seconds": round(time.monotonic() - start, 1)}))
    return 1 if found["violations"] else 0


if __name__ == "__main__":
    sys.exit(main())
