import math

import numpy as np
import pytest

from geometry.proof import Proof, Steps
from geometry.queries import ProvedTable, bound_at, least_bound, rectangle_permitted
from geometry.spans import Tolerances, is_permitted


def proof_of(rng: np.random.Generator, unproved: float = 0.2) -> Proof:
    """Return a made-up proof of gantry -10.3 to 10.3 and couch -5.5 to 5 in steps of a half."""
    gantry, couch = Steps(-10.5, 0.5, -10.3, 10.3, 42), Steps(-5.5, 0.5, -5.5, 5.0, 21)
    shape = (couch.count, gantry.count)
    clearance = rng.uniform(20.0, 90.0, shape).astype(np.float32)
    clearance[rng.random(shape) < unproved] = np.nan
    machine = rng.integers(0, 5, shape).astype(np.int32)
    return Proof(
        gantry, couch, clearance - np.float32(10.0), clearance, machine, machine + 5, np.zeros(shape, np.int8), 1
    )


def test_the_bound_at_a_pair_of_angles_is_its_cells() -> None:
    proof = proof_of(np.random.default_rng(1), 0.0)
    found = bound_at(proof, -10.2, 4.9)
    assert found.clearance_mm == pytest.approx(proof.clearance_mm[20, 0])
    assert found.slack_mm == pytest.approx(proof.slack_mm[20, 0])
    assert (found.machine_part, found.couch_part) == (proof.machine_part[20, 0], proof.couch_part[20, 0])
    assert found.proved


def test_on_a_border_the_better_cell_holds() -> None:
    proof = proof_of(np.random.default_rng(1), 0.0)
    proof.slack_mm[3, 7] = proof.clearance_mm[3, 7] = np.nan
    gantry_deg, couch_deg = -10.5 + 7 * 0.5, -5.5 + 3 * 0.5
    assert bound_at(proof, gantry_deg, couch_deg + 0.1).clearance_mm == pytest.approx(proof.clearance_mm[3, 6])
    corner = proof.clearance_mm[2:4, 6:8]
    assert bound_at(proof, gantry_deg, couch_deg).clearance_mm == pytest.approx(np.nanmax(corner))
    assert not bound_at(proof, gantry_deg + 0.1, couch_deg + 0.1).proved


@pytest.mark.parametrize(("gantry_deg", "couch_deg"), [(10.4, 0.0), (0.0, -5.6), (math.nan, 0.0), (0.0, math.inf)])
def test_beyond_what_was_proved_nothing_is(gantry_deg: float, couch_deg: float) -> None:
    proof = proof_of(np.random.default_rng(1), 0.0)
    assert math.isnan(bound_at(proof, gantry_deg, couch_deg).clearance_mm)
    assert not least_bound(proof, (-1.0, gantry_deg), (-1.0, couch_deg)).proved


def test_the_least_bound_of_a_rectangle_is_that_of_all_its_points() -> None:
    rng = np.random.default_rng(2)
    proof = proof_of(rng, 0.02)
    proved = 0
    for _ in range(60):
        gantry = sorted(rng.uniform(-10.3, 10.3, 2)) if rng.random() < 0.3 else rng.uniform(-8, 8) + np.array([0, 1.3])
        couch = rng.uniform(-5.5, 3.0) + np.array([0.0, 1.7])
        found = least_bound(proof, tuple(gantry), tuple(couch))
        points = rng.uniform((gantry[0], couch[0]), (gantry[1], couch[1]), (60, 2))
        cells = [bound_at(proof, *point) for point in points]
        if any(not cell.proved for cell in cells):
            assert not found.proved
        if found.proved:
            proved += 1
            assert found.clearance_mm <= min(cell.clearance_mm for cell in cells)
            # A cell of which the rectangle holds a sliver may be missed by the points, not by the bound.
            assert found.clearance_mm in proof.clearance_mm
    assert proved >= 10


def test_a_rectangle_upside_down_is_not_permitted() -> None:
    proof = proof_of(np.random.default_rng(1), 0.0)
    around = Tolerances(0.5, 0.5, (-9.8, 9.8), (-5.0, 4.5))
    assert rectangle_permitted(proof, around, (-9.8, 9.8), (-5.0, 4.5))
    assert not rectangle_permitted(proof, around, (-9.8, 9.9), (-5.0, 4.5))
    assert not rectangle_permitted(proof, around, (3.0, 2.0), (0.0, 0.0))
    assert not rectangle_permitted(proof, around, (0.0, math.nan), (0.0, 0.0))


def test_single_readings_agree_with_the_permitted_runs() -> None:
    rng = np.random.default_rng(3)
    proof = proof_of(rng, 0.05)
    around = Tolerances(0.6, 0.3, (-9.7, 9.7), (-5.0, 4.5))
    readings = rng.uniform((-9.7, -5.0), (9.7, 4.5), (500, 2))
    found = [rectangle_permitted(proof, around, (g, g), (c, c)) for g, c in readings]
    assert found == [is_permitted(proof, around, g, c) for g, c in readings]
    assert 20 < sum(found) < 480


def test_the_table_says_what_single_queries_say() -> None:
    rng = np.random.default_rng(4)
    proof = proof_of(rng, 0.05)
    table = ProvedTable(proof)
    # Ends on borders, single angles, and ends beyond what was proved are among them.
    low = np.round(rng.uniform((-10.6, -5.7), (9.0, 4.0), (800, 2)) * 4.0) / 4.0
    high = low + rng.choice([0.0, 0.25, 0.5, 1.0], (800, 2))
    found = table.proved(low[:, 0], high[:, 0], low[:, 1], high[:, 1])
    single = [least_bound(proof, (a, b), (c, d)).proved for a, b, c, d in np.hstack([low, high])[:, [0, 2, 1, 3]]]
    assert found.tolist() == single
    assert 50 < found.sum() < 750
