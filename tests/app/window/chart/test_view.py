"""What of the plane of angles is shown, and where."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from app.window.chart.view import LEAST_EXTENT_DEG, Place, Window, borders_of, cells_at, ticks_deg

WHOLE = Window.whole(-185.0, 185.0)


@given(
    about=st.floats(-185.0, 185.0),
    steps=st.lists(st.tuples(st.floats(0.2, 4.0), st.floats(-400.0, 400.0)), max_size=8),
)
def test_zooming_and_panning_never_leave_the_axis(about: float, steps: list[tuple[float, float]]) -> None:
    window = WHOLE
    for factor, shift in steps:
        window = window.zoomed(about, factor).shifted(shift)
        assert window.least <= window.low < window.high <= window.most
        assert LEAST_EXTENT_DEG - 1e-9 <= window.extent <= 370.0 + 1e-9


def test_zooming_keeps_the_angle_under_the_pointer_in_its_place() -> None:
    before = Place(WHOLE, 40.0, 600.0)
    about = before.angle_deg(200.0)
    after = Place(WHOLE.zoomed(about, 0.5), 40.0, 600.0)
    assert after.window.extent == pytest.approx(185.0)
    assert after.angle_deg(200.0) == pytest.approx(about)


def test_zooming_out_ends_with_the_whole() -> None:
    assert not WHOLE.zoomed(20.0, 0.3).is_whole
    assert WHOLE.zoomed(20.0, 0.3).zoomed(-100.0, 10.0).is_whole


def test_an_axis_without_extent_still_has_a_place() -> None:
    window = Window.whole(0.0, 0.0)
    assert (window.low, window.high) == (-0.5, 0.5)
    assert window.zoomed(0.0, 0.1) == window


@pytest.mark.parametrize(
    ("window", "travel", "expected"),
    [
        (WHOLE, (-180.0, 180.0), (-180.0, 180.0)),
        (WHOLE.zoomed(0.0, 0.1), (-180.0, 180.0), (-18.5, 18.5)),
        (Window(-185.0, 185.0, 100.0, 185.0), (-180.0, 90.0), (-180.0, 90.0)),
        (Window(-185.0, 185.0, 60.0, 120.0), (-180.0, 90.0), (30.0, 90.0)),
    ],
)
def test_another_travel_keeps_what_is_looked_at_where_it_can(
    window: Window, travel: tuple[float, float], expected: tuple[float, float]
) -> None:
    kept = window.over(*travel)
    assert (kept.low, kept.high) == pytest.approx(expected)
    assert (kept.least, kept.most) == travel


def test_a_place_that_runs_upwards() -> None:
    place = Place(Window.whole(-90.0, 90.0), 300.0, 30.0)
    assert (place.pixel(-90.0), place.pixel(90.0)) == (300.0, 30.0)
    assert place.angle_deg(165.0) == pytest.approx(0.0)


@given(low=st.floats(-360.0, 300.0), extent=st.floats(2.0, 400.0), most=st.integers(2, 20))
def test_ticks_are_round_and_not_too_many(low: float, extent: float, most: int) -> None:
    ticks, step = ticks_deg(low, low + extent, most)
    assert len(ticks) <= max(most, 3)
    assert np.all((ticks >= low - 1e-6) & (ticks <= low + extent + 1e-6))
    assert np.allclose(ticks / step, np.round(ticks / step))


def test_cells_reach_half_way_to_their_neighbours_and_end_with_the_grid() -> None:
    grid = np.array([-182.5, -180.0, -176.0, -172.0])
    assert borders_of(grid).tolist() == [-182.5, -181.25, -178.0, -174.0, -172.0]
    wanted = np.array([-182.6, -182.5, -181.3, -181.2, -178.1, -177.9, -172.0, -171.9])
    assert cells_at(grid, wanted).tolist() == [-1, 0, 0, 1, 1, 2, 3, -1]


def test_a_single_grid_angle_has_a_cell_of_one_degree() -> None:
    assert cells_at(np.array([0.0]), np.array([-0.6, -0.4, 0.5, 0.6])).tolist() == [-1, 0, 0, -1]
