import numpy as np

from app.files.setup_file import read_setup
from app.live import Coarseness, exact_stage, first_stage, proved_stage
from geometry.assess import Options, assess
from geometry.directions.regions import share_of
from geometry.progress import Silent
from tests.window_driver import ROOMS

OPTIONS = Options(gantry_step_deg=6.0, couch_step_deg=6.0, edge_deg=1.0)


def test_the_stages_end_with_what_the_assessment_of_the_set_up_says() -> None:
    setup = read_setup(ROOMS / "particle_snout" / "head.setup.toml")
    whole = assess(setup, OPTIONS)
    first = first_stage(setup, Coarseness())
    exact = exact_stage(first, OPTIONS, Silent())
    proved = proved_stage(exact, OPTIONS, Silent())
    assert (first.is_exact, exact.is_exact, exact.assessment) == (False, True, None)
    assert proved.assessment is not None
    assert np.array_equal(proved.assessment.state, whole.state)
    assert proved.assessment.spans == whole.spans
    assert proved.share == share_of(whole)


def test_a_coarse_map_holds_exact_values_at_its_own_angles() -> None:
    setup = read_setup(ROOMS / "particle_snout" / "head.setup.toml")
    first = first_stage(setup, Coarseness())
    assert first.map is not None
    fine = exact_stage(first, Options(), Silent()).map
    assert fine is not None
    rows = np.isin(fine.couch_deg, first.map.couch_deg)
    columns = np.isin(fine.gantry_deg, first.map.gantry_deg)
    shared = fine.clearance_mm[np.ix_(rows, columns)]
    assert shared.shape == first.map.clearance_mm.shape
    assert np.allclose(shared, first.map.clearance_mm, rtol=0.0, atol=1e-6)


def test_a_slow_machine_gets_coarser_maps_and_a_fast_one_finer_ones() -> None:
    coarseness = Coarseness()
    steps = []
    for seconds in (0.05, 0.5, 0.5, 0.5, 0.5, 0.01, 0.01, 0.01, 0.01, 0.01):
        coarseness.learn(seconds)
        steps.append(coarseness.step_deg)
    assert steps == [2.0, 3.0, 4.0, 6.0, 6.0, 4.0, 3.0, 2.0, 1.0, 1.0]
