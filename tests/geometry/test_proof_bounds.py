"""The bounds of the proof are as good as they can be and not a hair better.

For each kind of mount a block runs into another one on the straightest way that the mount allows, so that the bound
of a cell is attained in one of its corners. Lengths worked out on paper; exact slacks by a library (tests/reference).
"""

import json
import os
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.spatial.transform import Rotation

from geometry import planes
from geometry.assess import Options, proof_steps, tolerances_of
from geometry.hulls import packed_hulls
from geometry.kernel import Hulls
from geometry.proof import Proof, prove
from geometry.scene import build_scene
from geometry.setup import Setup
from geometry.solids import Placed
from geometry.spans import permitted_runs
from geometry.sweep import sweep
from tests.geometry.made_rooms import block, in_room, made_setup, on_gantry, on_still_couch, on_table, on_turntable
from tests.reference.distances import LeastDistances

Array = NDArray[np.float64]

ROOT = Path(__file__).resolve().parents[2]

# A block of the gantry this high turns about Y as fast, along X, as a block of the couch this far out about Z.
ARM_MM = 800.0
REQUIRED_MM = 5.0
# What moves is nearly a point; what it meets is a plate, long enough for it not to slide off.
POINT_MM = 0.5
PLATE_MM = (1.0, 3.0, 1.0)

TILT = {"pitch_deg": 3.0, "roll_deg": -2.0}
MOUNTS = [
    "gantry",
    "turntable",
    "gantry and turntable",
    "gantry and tilted",
    "gantry and eccentric",
    "gantry and still",
]
BOTH_MOVE = {"gantry and turntable", "gantry and tilted", "gantry and eccentric"}


def nearing(mounts: str, gap_mm: float, cell_deg: float, normal_deg: float) -> Setup:
    """Return two blocks near (0, ARM, ARM) that near each other as the angles fall from 0 to -cell_deg.

    In the middle of that cell they are `gap_mm` apart, with faces square to X turned by `normal_deg` about Z. Both
    travels are one cell.
    """
    turn = Rotation.from_euler("Z", normal_deg, degrees=True)
    where = np.array([0.0, ARM_MM, ARM_MM])
    apart = turn.apply([gap_mm + POINT_MM / 2.0 + PLATE_MM[0] / 2.0, 0.0, 0.0])

    def at_zero(size_mm: tuple[float, float, float], centre: Array, axis: str) -> Placed:
        """Return the block as it stands at angle 0, so that it comes to `centre` in the middle of the cell."""
        back = Rotation.from_euler(axis, cell_deg / 2.0, degrees=True)
        return block(size_mm, tuple(back.apply(centre)), back * turn)

    point = at_zero((POINT_MM,) * 3, where + apart, "Y")
    plate = at_zero(PLATE_MM, where, "Z")
    still_point = block((POINT_MM,) * 3, tuple(where + apart), turn)
    still_plate = block(PLATE_MM, tuple(where), turn)
    parts, stages = {
        "gantry": ((on_gantry(point), in_room(still_plate)), {}),
        "turntable": ((in_room(still_point), on_turntable(plate)), {}),
        "gantry and turntable": ((on_gantry(point), on_turntable(plate)), {}),
        "gantry and tilted": ((on_gantry(point), on_table(plate, **TILT)), TILT),
        "gantry and eccentric": ((on_gantry(point), on_table(plate, eccentric_deg=40.0)), {"eccentric_deg": 40.0}),
        "gantry and still": ((on_gantry(point), on_still_couch(still_plate)), {}),
    }[mounts]
    travel = (-cell_deg, 0.0)
    return made_setup(*parts, gantry=travel, couch=travel, required_mm=REQUIRED_MM, **stages)


def leaving(mounts: str, spare_mm: float, cell_deg: float, normal_deg: float = 0.0) -> Setup:
    """Return blocks so far apart that they keep a slack of about `spare_mm` where they are nearest."""
    nearing_mm = ARM_MM * np.radians(cell_deg / 2.0) * np.cos(np.radians(normal_deg))
    gap = REQUIRED_MM + (2 if mounts in BOTH_MOVE else 1) * nearing_mm + spare_mm
    return nearing(mounts, float(gap), cell_deg, normal_deg)


def one_cell(setup: Setup, cell_deg: float) -> Proof:
    options = Options(edge_deg=cell_deg, gantry_tolerance_deg=0.0, couch_tolerance_deg=0.0)
    proof = prove(build_scene(setup), *proof_steps(setup.room, options), threads=1)
    assert proof.slack_mm.shape == (1, 1)
    return proof


def true_slacks(setup: Setup, cell_deg: float) -> tuple[float, float]:
    """Return the exact slack in the middle of the cell, and the least one on a grid over it, by a library."""
    exact = LeastDistances(setup)
    angles = np.linspace(-cell_deg, 0.0, 5)
    return exact.at(angles[2], angles[2]).slack_mm, min(exact.at(g, c).slack_mm for g in angles for c in angles)


def smaller_reach(pieces: object, parts: object, axis: int | None) -> Hulls:
    packed = packed_hulls(pieces, parts, axis)  # type: ignore[arg-type]
    return packed._replace(reach=packed.reach * 0.95)


@pytest.mark.parametrize("mounts", MOUNTS)
def test_the_bound_of_a_cell_is_attained_within_a_hundredth(mounts: str) -> None:
    setup = leaving(mounts, 1.0, cell_deg=1.0)
    middle, least = true_slacks(setup, 1.0)
    bound = float(one_cell(setup, 1.0).slack_mm[0, 0])
    assert 0.9 < least < 1.1
    assert bound <= least
    assert middle - least >= 0.99 * (middle - bound)


@pytest.mark.parametrize("mounts", MOUNTS)
def test_a_reach_that_is_a_twentieth_too_small_proves_what_is_false(
    mounts: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    setup = leaving(mounts, -0.2, cell_deg=1.0)
    _, least = true_slacks(setup, 1.0)
    assert least < -0.1
    assert np.isnan(one_cell(setup, 1.0).slack_mm[0, 0])
    monkeypatch.setattr(planes, "_packed", smaller_reach)
    assert one_cell(setup, 1.0).slack_mm[0, 0] >= 0.0


# Faces that slant, so that only half of each motion brings them nearer: not the reaches decide then, but the rates
# along the normal. The cell is small enough that the curve of the arcs counts for little.
SLANTING = ["gantry", "turntable", "gantry and turntable", "gantry and tilted", "gantry and eccentric"]
SLANT_CELL_DEG = 0.1
SHORT_MM = -0.004


def slanting(mounts: str, spare_mm: float) -> Setup:
    """Return blocks whose faces slant by 60 deg."""
    return leaving(mounts, spare_mm, SLANT_CELL_DEG, normal_deg=60.0)


@pytest.mark.parametrize("mounts", SLANTING)
def test_the_bound_along_the_normal_is_attained_within_a_hundredth(mounts: str) -> None:
    setup = slanting(mounts, spare_mm=0.1)
    middle, least = true_slacks(setup, SLANT_CELL_DEG)
    bound = float(one_cell(setup, SLANT_CELL_DEG).slack_mm[0, 0])
    assert 0.09 < least < 0.11
    assert bound <= least
    assert middle - least >= 0.99 * (middle - bound)


def test_rates_that_are_a_twentieth_too_small_prove_what_is_false() -> None:
    for mounts in SLANTING:
        setup = slanting(mounts, spare_mm=SHORT_MM)
        _, least = true_slacks(setup, SLANT_CELL_DEG)
        assert least < 0.0
        assert np.isnan(one_cell(setup, SLANT_CELL_DEG).slack_mm[0, 0])
    # Compiled code cannot be changed; the same kernels uncompiled can.
    environment = {**os.environ, "NUMBA_DISABLE_JIT": "1"}
    command = [sys.executable, "-m", "tests.geometry.uncompiled_proof"]
    ended = subprocess.run(command, env=environment, cwd=ROOT, capture_output=True, text=True, check=True)
    found = json.loads(ended.stdout)
    assert found["proved"] == [False] * len(SLANTING)
    assert found["proved with smaller rates"] == [True] * len(SLANTING)
    assert found["proved without convergence"] == [False] * len(SLANTING)
    assert found["swept without convergence"] == ["unknown"] * len(SLANTING)
    # The other way round: with enough room all of them are proved.
    assert found["proved with room"] == [True] * len(SLANTING)
    assert found["swept with room"] == ["known"] * len(SLANTING)


# A thin obstacle

BLADE_MM = 900.0
POST_MM = 850.0
BETWEEN_DEG = 30.5


def thin_obstacle() -> Setup:
    """Return a blade on the gantry, from 700 to 900 mm from the axis, and a thin post at 850 mm between two degrees."""
    where = np.radians(BETWEEN_DEG)
    return made_setup(
        on_gantry(block((0.5, 300.0, 200.0), (0.0, 0.0, BLADE_MM - 100.0))),
        in_room(block((0.5, 100.0, 0.5), (POST_MM * np.sin(where), 0.0, POST_MM * np.cos(where)))),
        couch=(0.0, 0.0),
        required_mm=6.5,
    )


def runs_at_tolerance_0(setup: Setup) -> list[tuple[float, float]]:
    options = Options(gantry_tolerance_deg=0.0, couch_tolerance_deg=0.0)
    proof = prove(build_scene(setup), *proof_steps(setup.room, options))
    _, runs = permitted_runs(proof, tolerances_of(setup.room, options), 0.0)
    return [(run.low_deg, run.high_deg) for run in runs]


def test_a_thin_obstacle_between_two_whole_degrees_is_found() -> None:
    setup = thin_obstacle()
    assert setup.required.fixed_mm < BLADE_MM * np.radians(0.5) - 1.0
    scene = build_scene(setup)
    whole = sweep(scene, np.arange(-180.0, 181.0), np.zeros(1))
    assert (whole.slack_mm >= 0.0).all(), "sampling every degree must see nothing short"
    assert sweep(scene, np.array([BETWEEN_DEG]), np.zeros(1)).clearance_mm[0, 0] == 0.0
    runs = runs_at_tolerance_0(setup)
    assert len(runs) == 2
    (start, before), (after, end) = runs
    assert (start, end) == (-180.0, 180.0)
    # Short within asin((6.5 + 0.5) / 850) = 0.472 deg and a little more of the post; edges are a quarter of a degree.
    assert BETWEEN_DEG - 0.8 <= before < BETWEEN_DEG - 0.4
    assert BETWEEN_DEG + 0.4 < after <= BETWEEN_DEG + 0.8
