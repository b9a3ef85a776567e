"""The permitted region: the proved plane eroded by the tolerances, held against a plain erosion by loops.

On planes made up cell by cell, and on proved rooms.
"""

import numpy as np
import pytest
import shapely
from numpy.typing import NDArray

from geometry.assess import proof_steps, tolerances_of
from geometry.proof import Proof, Steps, prove, steps_over
from geometry.scene import build_scene
from geometry.spans import Tolerances, is_permitted, permitted_region, permitted_runs
from tests.geometry.made_rooms import made_proof
from tests.reference.attacks import any_options, any_setup

Array = NDArray[np.float64]


def random_plane(rng: np.random.Generator) -> tuple[Proof, Tolerances]:
    """Return a small plane of blots, with travels, edges and tolerances of every kind."""
    edge = float(rng.choice([0.25, 0.3, 0.5, 1.0]))
    gantry_deg, couch_deg = rng.choice([0.0, 0.5, 1.0, 0.7], size=2)
    travel_a = [(-6.0, 6.0), (-5.55, 4.3)][rng.integers(2)]
    travel_b = [(-3.0, 3.0), (-3.1, 2.45), (0.0, 0.0), (1.1, 1.1)][rng.integers(4)]
    tolerances = Tolerances(float(gantry_deg), float(couch_deg), travel_a, travel_b)
    gantry, couch = steps_over(travel_a, float(gantry_deg), edge), steps_over(travel_b, float(couch_deg), edge)
    proved = np.ones((couch.count, gantry.count), dtype=bool)
    for _ in range(rng.integers(1, 6)):
        proved[rng.integers(couch.count), rng.integers(gantry.count)] = False
    return made_proof(proved, gantry, couch), tolerances


def cells_that_hold(steps: Steps, low_deg: float, high_deg: float) -> list[list[int]]:
    """Return choices of cells, slow and plain, whose union holds a closed interval.

    Cells are closed: an interval that begins or ends on a border needs only the cell on its own side of it; a single
    angle on a border is held by the cell on either side.
    """
    near = 1e-6
    spans = [steps.span_deg(k, k + 1) for k in range(steps.count)]
    over = [k for k, (low, high) in enumerate(spans) if low < high_deg - near and high > low_deg + near]
    if over:
        return [over]
    return [[k] for k, (low, high) in enumerate(spans) if low - near <= low_deg and high_deg <= high + near]


def permitted_slowly(proof: Proof, tolerances: Tolerances, gantry_deg: float, couch_deg: float) -> bool:
    """Tell, cell by cell, whether all of a reading's tolerance rectangle is proved."""
    around_a, around_b = tolerances.of_gantry_deg, tolerances.of_couch_deg
    return any(
        all(not np.isnan(proof.slack_mm[j, i]) for i in columns for j in rows)
        for columns in cells_that_hold(proof.gantry, gantry_deg - around_a, gantry_deg + around_a)
        for rows in cells_that_hold(proof.couch, couch_deg - around_b, couch_deg + around_b)
    )


@pytest.mark.parametrize("seed", range(40))
def test_a_reading_is_permitted_where_its_whole_rectangle_is_proved(seed: int) -> None:
    rng = np.random.default_rng(seed)
    proof, tolerances = random_plane(rng)
    (low_a, high_a), (low_b, high_b) = tolerances.gantry_travel_deg, tolerances.couch_travel_deg
    on_borders = proof.gantry.start_deg + proof.gantry.step_deg * rng.integers(proof.gantry.count + 1, size=6)
    readings_a = [low_a, high_a, *rng.uniform(low_a, high_a, 6), *on_borders, *(on_borders + tolerances.of_gantry_deg)]
    on_borders = proof.couch.start_deg + proof.couch.step_deg * rng.integers(proof.couch.count + 1, size=4)
    readings_b = [low_b, high_b, *rng.uniform(low_b, high_b, 3), *on_borders, *(on_borders + tolerances.of_couch_deg)]
    for couch_deg in (float(b) for b in readings_b if low_b <= b <= high_b):
        for gantry_deg in (float(a) for a in readings_a if low_a <= a <= high_a):
            expected = permitted_slowly(proof, tolerances, gantry_deg, couch_deg)
            assert is_permitted(proof, tolerances, gantry_deg, couch_deg) == expected, (gantry_deg, couch_deg)


def eroded_slowly(proof: Proof, tolerances: Tolerances) -> list[tuple[float, float, float, float]]:
    """Return, by loops, the cells (x0, y0, x1, y1) within the travel all of whose points are permitted."""
    found = []
    (low_a, high_a), (low_b, high_b) = tolerances.gantry_travel_deg, tolerances.couch_travel_deg
    for i in range(proof.gantry.count):
        x0, x1 = proof.gantry.span_deg(i, i + 1)
        x0, x1 = max(x0, low_a), min(x1, high_a)
        for j in range(proof.couch.count):
            y0, y1 = proof.couch.span_deg(j, j + 1)
            y0, y1 = max(y0, low_b), min(y1, high_b)
            if x1 - x0 < 1e-9 or y1 - y0 < 1e-9:
                continue
            around_a, around_b = tolerances.of_gantry_deg, tolerances.of_couch_deg
            columns = cells_that_hold(proof.gantry, x0 - around_a, x1 + around_a)[0]
            rows = cells_that_hold(proof.couch, y0 - around_b, y1 + around_b)[0]
            if not np.isnan(proof.slack_mm[np.ix_(rows, columns)]).any():
                found.append((x0, y0, x1, y1))
    return found


def whole_steps(tolerances: Tolerances, proof: Proof) -> bool:
    """Tell whether both tolerances are whole numbers of steps: only then is a partial cell no matter."""
    steps = [tolerances.gantry_deg / proof.gantry.step_deg, tolerances.couch_deg / proof.couch.step_deg]
    return bool(np.allclose(steps, np.round(steps)))


@pytest.mark.parametrize("seed", range(20))
def test_the_region_is_the_cells_that_are_permitted_throughout(seed: int) -> None:
    proof, tolerances = random_plane(np.random.default_rng(seed))
    region = permitted_region(proof, tolerances)
    cells = eroded_slowly(proof, tolerances)
    expected = shapely.union_all([shapely.box(*cell) for cell in cells])
    assert region.is_valid
    assert region.geom_type in {"Polygon", "MultiPolygon"}
    # Never more than is permitted; a cell that the travel's end cuts may be left out.
    assert region.difference(expected.buffer(1e-9)).area == pytest.approx(0.0, abs=1e-9)
    if whole_steps(tolerances, proof):
        assert region.area == pytest.approx(expected.area, abs=1e-6)
    else:
        assert region.area >= 0.5 * expected.area - 4.0 * proof.gantry.step_deg


def test_a_plane_that_is_proved_throughout_is_one_polygon_of_the_travel() -> None:
    gantry, couch = steps_over((-185.0, 185.0), 1.0, 0.25), steps_over((-90.0, 90.0), 1.0, 0.25)
    tolerances = Tolerances(1.0, 1.0, (-185.0, 185.0), (-90.0, 90.0))
    proof = made_proof(np.ones((couch.count, gantry.count), dtype=bool), gantry, couch)
    region = permitted_region(proof, tolerances)
    assert region.equals(shapely.box(-185.0, -90.0, 185.0, 90.0))
    assert region.area == pytest.approx(370.0 * 180.0)
    _, (run,) = permitted_runs(proof, tolerances, 30.0)
    assert (run.low_deg, run.high_deg) == (-185.0, 185.0)


def test_a_hole_in_the_middle_is_widened_by_the_tolerances() -> None:
    gantry, couch = steps_over((-10.0, 10.0), 1.0, 0.5), steps_over((-5.0, 5.0), 0.5, 0.5)
    tolerances = Tolerances(1.0, 0.5, (-10.0, 10.0), (-5.0, 5.0))
    proved = np.ones((couch.count, gantry.count), dtype=bool)
    # The cell [2, 2.5] by [1, 1.5]: steps begin at -11 and -5.5.
    proved[13, 26] = False
    region = permitted_region(made_proof(proved, gantry, couch), tolerances)
    assert region.equals(shapely.box(-10.0, -5.0, 10.0, 5.0).difference(shapely.box(1.0, 0.5, 3.5, 2.0)))


@pytest.mark.parametrize("seed", range(6))
def test_span_ends_lie_in_the_region_but_for_an_edge(seed: int) -> None:
    rng = np.random.default_rng(seed)
    setup, options = any_setup(rng), any_options(rng)
    proof = prove(build_scene(setup), *proof_steps(setup.room, options))
    tolerances = tolerances_of(setup.room, options)
    region = permitted_region(proof, tolerances)
    low, high = tolerances.couch_travel_deg
    for couch_deg in (float(b) for b in rng.uniform(low, high, 20)):
        _, runs = permitted_runs(proof, tolerances, couch_deg)
        line = shapely.LineString([(-400.0, couch_deg), (400.0, couch_deg)])
        inside = region.intersection(line)
        covered = shapely.union_all(
            [shapely.LineString([(r.low_deg, couch_deg), (r.high_deg, couch_deg)]) for r in runs]
        )
        # Whatever the region holds at this couch angle lies in spans.
        assert inside.difference(covered.buffer(1e-7)).length == pytest.approx(0.0, abs=1e-6)
        # Nowhere is the region nearer to a cell that is not proved than a span may be; it is cut to whole cells.
        reach = 2.0 * options.edge_deg
        for run in runs:
            if region.area and run.high_deg - run.low_deg > 2.0 * reach:
                ends = shapely.points([(run.low_deg, couch_deg), (run.high_deg, couch_deg)])
                rows = permitted_around(proof, tolerances, run.low_deg + reach, run.high_deg - reach, couch_deg)
                assert not rows or shapely.distance(ends, region).max() <= reach + 1e-6


def permitted_around(proof: Proof, tolerances: Tolerances, low_deg: float, high_deg: float, couch_deg: float) -> bool:
    """Tell whether a span goes on a whole step to both sides in couch angle."""
    step = proof.couch.step_deg
    low, high = tolerances.couch_travel_deg
    beside = [b for b in (couch_deg - step, couch_deg + step) if low <= b <= high]
    runs = [permitted_runs(proof, tolerances, b)[1] for b in beside]
    return all(any(r.low_deg <= low_deg and high_deg <= r.high_deg for r in found) for found in runs)


# Borders, where a step too far would be permitted


def test_the_last_couch_angle_rests_on_a_cell_that_holds_it() -> None:
    gantry, couch = Steps(0.0, 0.25, 0.0, 1.0, 4), Steps(0.0, 0.25, 0.0, 0.5, 2)
    tolerances = Tolerances(0.0, 0.0, (0.0, 1.0), (0.0, 0.5))
    proved = np.ones((2, 4), dtype=bool)
    proved[1] = False
    _, runs = permitted_runs(made_proof(proved, gantry, couch), tolerances, 0.5)
    assert runs == []
    _, runs = permitted_runs(made_proof(proved[::-1], gantry, couch), tolerances, 0.5)
    assert [(run.low_deg, run.high_deg) for run in runs] == [(0.0, 1.0)]
    # A border between two rows is held by either.
    _, runs = permitted_runs(made_proof(proved, gantry, couch), tolerances, 0.25)
    assert [(run.low_deg, run.high_deg) for run in runs] == [(0.0, 1.0)]
