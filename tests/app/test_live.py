from dataclasses import replace

import numpy as np

from app.files.setup_file import read_setup
from app.live import CARRIED_STEP_DEG, LiveMaps, proved_stage
from geometry.assess import Options, assess, exact_map
from geometry.directions.regions import share_of
from geometry.progress import Silent
from tests.window_driver import ROOMS

OPTIONS = Options(gantry_step_deg=6.0, couch_step_deg=6.0, edge_deg=1.0)


def test_the_stages_end_with_what_the_assessment_of_the_set_up_says() -> None:
    setup = read_setup(ROOMS / "particle_snout" / "head.setup.toml")
    whole = assess(setup, OPTIONS)
    maps = LiveMaps()
    first = maps.first_stage(setup, OPTIONS)
    exact = maps.exact_stage(first, Silent())
    proved = proved_stage(exact, Silent())
    assert (first.is_exact, exact.is_exact, exact.assessment) == (False, True, None)
    assert proved.assessment is not None
    assert np.array_equal(proved.assessment.state, whole.state)
    assert proved.assessment.spans == whole.spans
    assert proved.share == share_of(whole)


def test_a_coarse_map_holds_exact_values_at_its_own_angles() -> None:
    setup = read_setup(ROOMS / "particle_snout" / "head.setup.toml")
    maps = LiveMaps()
    first = maps.first_stage(setup, Options())
    assert first.map is not None
    fine = maps.exact_stage(first, Silent()).map
    assert fine is not None
    rows = np.isin(fine.couch_deg, first.map.couch_deg)
    columns = np.isin(fine.gantry_deg, first.map.gantry_deg)
    shared = fine.clearance_mm[np.ix_(rows, columns)]
    assert shared.shape == first.map.clearance_mm.shape
    assert np.allclose(shared, first.map.clearance_mm, rtol=0.0, atol=1e-6)


def test_a_shifted_set_up_has_its_maps_from_those_before_and_any_other_a_coarse_one() -> None:
    setup = read_setup(ROOMS / "particle_snout" / "head.setup.toml")
    maps = LiveMaps()
    exact = maps.exact_stage(maps.first_stage(setup, OPTIONS), Silent())
    assert not exact.is_carried
    maps.anchor_at(exact.map, exact.scene, OPTIONS, Silent())
    left, head, front = setup.isocentre.offset_mm
    shifted = replace(setup, isocentre=replace(setup.isocentre, offset_mm=(left + 4.0, head - 3.0, front + 1.0)))
    first = maps.first_stage(shifted, OPTIONS)
    then = maps.exact_stage(first, Silent())
    assert (first.is_carried, then.is_carried, first.is_exact, then.is_exact) == (True, True, False, True)
    coarse = Options(gantry_step_deg=CARRIED_STEP_DEG, couch_step_deg=CARRIED_STEP_DEG)
    for stage, options in ((first, coarse), (then, OPTIONS)):
        assert stage.map is not None
        plain = exact_map(stage.scene, options)
        assert np.allclose(stage.map.clearance_mm, plain.clearance_mm, rtol=0.0, atol=1e-6)
        assert np.allclose(stage.map.slack_mm, plain.slack_mm, rtol=0.0, atol=1e-6)
    for other, options in ((replace(setup, pitch_deg=0.5), OPTIONS), (shifted, replace(OPTIONS, edge_deg=2.0))):
        assert not maps.first_stage(other, options).is_carried


def test_a_slow_machine_gets_coarser_maps_and_a_fast_one_finer_ones() -> None:
    maps = LiveMaps()
    steps = []
    for seconds in (0.05, 0.5, 0.5, 0.5, 0.5, 0.01, 0.01, 0.01, 0.01, 0.01):
        maps.learn(seconds)
        steps.append(maps.step_deg)
    assert steps == [2.0, 3.0, 4.0, 6.0, 6.0, 4.0, 3.0, 2.0, 1.0, 1.0]
