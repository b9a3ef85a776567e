"""Every sample set-up's sweep against a distance library over the same convex pieces, placed by its own kinematics.

Outside: coal (python-fcl on Windows) for distances, SciPy for the turns.
"""

from pathlib import Path

import numpy as np
import pytest

from app.files.setup_file import read_setup
from geometry.scene import build_scene
from geometry.sweep import sweep
from tests.reference.distances import TOLERANCE_MM, LeastDistances

SAMPLES = Path(__file__).resolve().parents[2] / "sample_rooms"
SETUPS = sorted(path.relative_to(SAMPLES).as_posix() for path in SAMPLES.glob("*/*.setup.toml"))
# Pairs of angles a set-up. 2,000 take 3 s each on a quiet machine.
POSES = 625


def greatest_differences(setup_path: Path, poses: int) -> tuple[int, int, float, float]:
    """Return how many poses touch and how many do not, and the greatest difference in clearance and in slack, mm.

    The angles have no pattern; as many are drawn for each axis as give `poses` pairs.
    """
    setup = read_setup(setup_path)
    rng = np.random.default_rng(sum(setup_path.name.encode()))
    gantry, couch = setup.room.gantry, setup.room.couch.turntable
    turns = couch.high > couch.low
    rows = round(poses**0.5) if turns else 1
    couch_deg = np.sort(rng.uniform(couch.low, couch.high, rows)) if turns else np.array([couch.low])
    gantry_deg = np.sort(rng.uniform(gantry.low, gantry.high, max(poses // rows, 1)))
    found = sweep(build_scene(setup), gantry_deg, couch_deg)
    reference = LeastDistances(setup)
    true = [[reference.at(float(g), float(c)) for g in gantry_deg] for c in couch_deg]
    clearance = np.array([[one.clearance_mm for one in row] for row in true])
    slack = np.array([[one.slack_mm for one in row] for row in true])
    assert np.array_equal(clearance == 0.0, found.clearance_mm == 0.0)
    touching = int(np.count_nonzero(clearance == 0.0))
    return (
        touching,
        clearance.size - touching,
        float(np.abs(found.clearance_mm - clearance).max()),
        float(np.abs(found.slack_mm - slack).max()),
    )


def test_there_are_sample_setups() -> None:
    assert len(SETUPS) >= 10


@pytest.mark.parametrize("name", SETUPS)
def test_the_sweep_of_a_sample_setup_agrees_with_the_library(name: str) -> None:
    # A single line of the plane where the couch cannot turn.
    poses = POSES if not name.startswith("closed_bore") else POSES // 10
    touching, apart, clearance, slack = greatest_differences(SAMPLES / name, poses)
    print(f"{name}: {touching} in contact, {apart} apart, greatest difference {clearance:.1e} and {slack:.1e} mm")
    assert touching + apart > 0
    assert clearance <= TOLERANCE_MM
    assert slack <= TOLERANCE_MM
