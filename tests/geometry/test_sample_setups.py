"""Every sample set-up's sweep against a distance library over the same convex pieces, placed by its own kinematics.

Outside: coal (python-fcl on Windows) for distances, SciPy for the turns.
"""

from functools import cache
from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray

from app.files.setup_file import read_setup
from geometry.scene import Scene, build_scene
from geometry.sweep import ClearanceMap, grid_deg, sweep
from tests.reference.distances import TOLERANCE_MM, LeastDistances

SAMPLES = Path(__file__).resolve().parents[2] / "sample_rooms"
SETUPS = sorted(path.relative_to(SAMPLES).as_posix() for path in SAMPLES.glob("*/*.setup.toml"))
# Pairs of angles of a set-up, out of each of two maps. 1,000 of both take 3 s on a quiet machine.
POSES = 300


@cache
def prepared(name: str) -> tuple[Scene, LeastDistances]:
    setup = read_setup(SAMPLES / name)
    return build_scene(setup), LeastDistances(setup)


def assert_agrees(name: str, found: ClearanceMap, poses: int, rng: np.random.Generator) -> None:
    """Hold poses of a map, drawn at random, against the library; print what was found."""
    _, reference = prepared(name)
    rows = rng.integers(len(found.couch_deg), size=poses)
    columns = rng.integers(len(found.gantry_deg), size=poses)
    true = [
        reference.at(float(gantry), float(couch))
        for gantry, couch in zip(found.gantry_deg[columns], found.couch_deg[rows], strict=True)
    ]
    clearance, slack = found.clearance_mm[rows, columns], found.slack_mm[rows, columns]
    touching = np.array([one.clearance_mm == 0.0 for one in true])
    assert np.array_equal(touching, clearance == 0.0)
    off = greatest(clearance - [one.clearance_mm for one in true]), greatest(slack - [one.slack_mm for one in true])
    print(f"{name}: {touching.sum()} in contact, {(~touching).sum()} apart, off by {off[0]:.1e} and {off[1]:.1e} mm")
    assert max(off) <= TOLERANCE_MM


def greatest(differences: NDArray[np.float64]) -> float:
    """Return the greatest absolute difference; NaN if there is one."""
    return float(np.abs(differences).max())


def test_there_are_sample_setups() -> None:
    assert len(SETUPS) >= 10


@pytest.mark.parametrize("name", SETUPS)
def test_angles_of_no_pattern_agree_with_the_library(name: str) -> None:
    scene, _ = prepared(name)
    rng = np.random.default_rng(len(name))
    gantry, couch = scene.setup.room.gantry, scene.setup.room.couch.turntable
    gantry_deg = np.unique(rng.uniform(gantry.low, gantry.high, 40))
    couch_deg = np.unique(rng.uniform(couch.low, couch.high, 40))
    assert_agrees(name, sweep(scene, gantry_deg, couch_deg), POSES, rng)


@pytest.mark.parametrize("name", SETUPS)
def test_the_map_in_whole_degrees_agrees_with_the_library(name: str) -> None:
    scene, _ = prepared(name)
    gantry, couch = scene.setup.room.gantry, scene.setup.room.couch.turntable
    found = sweep(scene, grid_deg(gantry.low, gantry.high, 1.0), grid_deg(couch.low, couch.high, 1.0))
    assert not np.any(np.isnan(found.clearance_mm))
    assert_agrees(name, found, POSES, np.random.default_rng(7 * len(name)))
