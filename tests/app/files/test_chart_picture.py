"""The angle chart as a picture: what is drawn, where, and what is written on it."""

import re
from dataclasses import replace
from functools import cache
from pathlib import Path

import numpy as np
import pytest
import shapely
from matplotlib.collections import QuadMesh
from matplotlib.contour import ContourSet
from matplotlib.figure import Figure
from matplotlib.patches import PathPatch, Rectangle
from matplotlib.text import Text
from PIL import Image
from scipy.interpolate import RegularGridInterpolator

from app.cautions import CAUTIONS
from app.files import chart_picture
from app.files.chart_frame import angle_ticks
from app.files.chart_picture import chart_page, write_chart_picture
from geometry.assess import Assessment, Options, assess
from geometry.errors import BadInput
from geometry.machine import Axis
from geometry.states import CODE_OF, State
from tests.app.files.assessments import (
    OPTIONS,
    SETUP,
    named,
    one_couch_angle,
    plain,
    provenance,
    room_with,
    setup_in,
    unsurveyed,
    with_readouts,
    without_travel,
)


@pytest.fixture(autouse=True)
def coarse_pictures(monkeypatch: pytest.MonkeyPatch) -> None:
    """Draw fewer dots: what is on the page does not depend on them."""
    monkeypatch.setattr(chart_picture, "_PNG_DOTS_PER_INCH", 40)
    monkeypatch.setattr(chart_picture, "_PDF_DOTS_PER_INCH", 40)


@cache
def page_of(assessment: Assessment) -> Figure:
    return chart_page(assessment, provenance(assessment))


def texts_of(page: Figure) -> str:
    return "\n".join(text.get_text() for text in page.findobj(Text))


def unescaped(pdf: bytes) -> bytes:
    """Return the content with the backslashes of PDF strings undone."""
    return re.sub(rb"\\(.)", rb"\1", pdf, flags=re.DOTALL)


@cache
def fine() -> Assessment:
    """Return an assessment whose grid is fine enough for contours."""
    return assess(SETUP, Options(gantry_step_deg=5.0, couch_step_deg=5.0, edge_deg=1.0))


def picture(assessment: Assessment, tmp_path: Path, suffix: str = ".png") -> Path:
    path = tmp_path / f"chart{suffix}"
    write_chart_picture(assessment, provenance(assessment), path)
    return path


def test_gantry_runs_from_180_over_0_to_180_and_couch_along_its_travel() -> None:
    axes = page_of(plain()).axes[0]
    assert axes.get_xlim() == (-185.0, 185.0)
    assert axes.get_ylim() == (-95.0, 95.0)
    labels = [label.get_text() for label in axes.get_xticklabels()]
    assert (labels[0], labels[3], labels[6], labels[-1]) == ("180°", "270°", "0°", "180°")
    assert {"270°", "0°", "90°"} <= {label.get_text() for label in axes.get_yticklabels()}


def test_each_pair_has_the_colour_of_its_own_clearance() -> None:
    mesh = page_of(plain()).axes[0].findobj(QuadMesh)[0]
    shown = np.ma.filled(mesh.get_array(), np.nan).reshape(plain().state.shape)
    clearance = plain().map.clearance_mm
    assert np.array_equal(np.isnan(shown), clearance == 0.0)
    order = np.argsort(clearance[clearance > 0.0])
    assert (np.diff(shown[clearance > 0.0][order]) >= 0.0).all()


def test_the_permitted_region_is_outlined_where_it_is() -> None:
    axes = page_of(plain()).axes[0]
    (outline,) = [patch for patch in axes.patches if isinstance(patch, PathPatch) and not patch.get_hatch()]
    region = plain().permitted_region
    drawn = outline.get_path().vertices
    assert set(map(tuple, shapely.get_coordinates(region))) == set(map(tuple, drawn))


def test_title_marks_provenance_and_cautions_are_written() -> None:
    text = " ".join(texts_of(page_of(plain())).split())
    for caution in CAUTIONS:
        assert caution in text
    for words in (
        "Small room",
        "Small set-up",
        "2026-03-04",
        provenance(plain()).short_fingerprint,
        "DEMONSTRATION",
        "the rule of a test",
        "drum with stand",
        "grid 10° × 30°, edges 1°, readouts ±1° and ±1°",
    ):
        assert words in text
    assert "UNSURVEYED" in texts_of(page_of(unsurveyed()))


def test_the_legend_tells_every_state_and_the_required_contour() -> None:
    legend = page_of(fine()).axes[0].get_legend()
    assert legend is not None
    words = " ".join(text.get_text() for text in legend.get_texts())
    for state in ("permitted", "short", "unproved", "contact", "no travel", "clearance equals what is required"):
        assert state in words


def test_the_contour_of_the_required_clearance_lies_between_kept_and_short() -> None:
    (contour,) = (
        lines
        for lines in page_of(fine()).axes[0].findobj(ContourSet)
        if isinstance(lines, ContourSet) and list(lines.levels) == [0.0]
    )
    exact = fine().map
    points = contour.get_paths()[0].vertices
    assert len(points) > 50
    # Bilinear between the grid angles around each point, which is what a contour follows along grid lines.
    slack = RegularGridInterpolator((exact.couch_deg, exact.gantry_deg), exact.slack_mm)(points[:, ::-1])
    assert np.abs(slack).max() < 1e-6


def test_a_coarse_grid_gets_no_contours() -> None:
    page = page_of(plain())
    assert not [child for child in page.axes[0].collections if isinstance(child, ContourSet)]
    legend = page.axes[0].get_legend()
    assert legend is not None
    assert "equals" not in " ".join(text.get_text() for text in legend.get_texts())


def test_every_state_but_permitted_is_hatched_over_its_own_cells() -> None:
    hatched = {patch.get_hatch(): patch.get_path() for patch in page_of(plain()).axes[0].patches if patch.get_hatch()}
    exact, state = plain().map, plain().state
    grid = np.array([(x, y) for y in exact.couch_deg for x in exact.gantry_deg])
    inner = (np.abs(grid[:, 0]) < 185.0) & (np.abs(grid[:, 1]) < 95.0)
    for pattern, kind in (("xxxx", State.CONTACT), ("////", State.SHORT), ("......", State.UNPROVED)):
        covered = hatched[pattern].contains_points(grid)
        assert np.array_equal(covered[inner], (state.ravel() == CODE_OF[kind])[inner])


def test_the_machines_own_scales_stand_on_the_other_sides() -> None:
    axes = page_of(with_readouts()).axes[0]
    by_label = {}
    for child in axes.child_axes:
        axis = child.xaxis if child.get_xlabel() else child.yaxis
        by_label[axis.get_label_text()] = [tick.get_text() for tick in axis.get_ticklabels()]
    assert by_label["Gantry, as the machine shows it"][:4] == ["0°", "330°", "300°", "270°"]
    assert by_label["Couch, as the machine shows it"][0] == "90°"
    assert not [child for child in page_of(plain()).axes[0].child_axes if "machine shows" in child.get_xlabel()]


def test_what_the_gantry_cannot_reach_is_hatched() -> None:
    partial = replace(plain(), scene=replace(plain().scene, setup=setup_in(room_with(gantry=Axis(-45.0, 185.0)))))
    boxes = [patch for patch in page_of(partial).axes[0].patches if isinstance(patch, Rectangle)]
    assert [(box.get_x(), box.get_width()) for box in boxes] == [(-180.0, 135.0)]
    assert boxes[0].get_hatch()


def test_without_travel_the_whole_chart_is_hatched_and_says_why() -> None:
    page = page_of(without_travel())
    boxes = [patch for patch in page.axes[0].patches if isinstance(patch, Rectangle)]
    assert [(box.get_x(), box.get_width(), box.get_height()) for box in boxes] == [(-185.0, 370.0, 190.0)]
    text = " ".join(texts_of(page).split())
    assert "couch lateral = -400.0 mm is 170.0 mm outside its travel -230 to 230" in text
    assert not page.axes[0].collections


def test_a_couch_that_cannot_turn_is_drawn_as_a_curve_with_its_spans_as_a_bar() -> None:
    axes = page_of(one_couch_angle()).axes[0]
    exact = one_couch_angle().map
    (clearance,) = (line for line in axes.lines if len(line.get_xdata()) == len(exact.gantry_deg))
    assert np.array_equal(clearance.get_ydata(), exact.clearance_mm[0])
    levels = [line.get_ydata()[0] for line in axes.lines if line.get_linestyle() == "--"]
    required = one_couch_angle().scene.setup.required
    assert levels == [required.of_pair_mm(with_patient) for with_patient in (True, False)]
    bars = [
        (patch.get_x(), patch.get_width())
        for patch in axes.patches
        if isinstance(patch, Rectangle) and not patch.get_hatch()
    ]
    assert bars == [(-180.0, 360.0)]
    assert "Couch fixed at 0°" in texts_of(axes.figure)
    assert f"least {exact.clearance_mm.min():.1f} mm" in texts_of(axes.figure)


def test_a_curve_tells_where_it_is_short_and_where_parts_touch() -> None:
    exact, state = one_couch_angle().map, one_couch_angle().state.copy()
    state[0, 3:6], state[0, 6:9] = CODE_OF[State.SHORT], CODE_OF[State.CONTACT]
    axes = page_of(replace(one_couch_angle(), state=state)).axes[0]
    hatched = {patch.get_hatch(): (patch.get_x(), patch.get_width()) for patch in axes.patches if patch.get_hatch()}
    assert hatched["////"] == (exact.gantry_deg[3] - 5.0, 30.0)
    assert hatched["xxxx"] == (exact.gantry_deg[6] - 5.0, 30.0)


@pytest.mark.parametrize("missing", [np.nan, np.inf])
def test_a_curve_without_any_distance_is_no_curve(missing: float, tmp_path: Path) -> None:
    exact = one_couch_angle().map
    nothing = np.full_like(exact.clearance_mm, missing)
    blank = replace(one_couch_angle(), map=replace(exact, clearance_mm=nothing, slack_mm=nothing))
    axes = page_of(blank).axes[0]
    assert not any(np.isfinite(line.get_ydata()).any() for line in axes.lines if len(line.get_xdata()) > 2)
    assert picture(blank, tmp_path).stat().st_size > 0


def test_missing_distances_leave_no_colour(tmp_path: Path) -> None:
    clearance = plain().map.clearance_mm.copy()
    clearance[4, 10:20] = np.nan
    holed = replace(plain(), map=replace(plain().map, clearance_mm=clearance))
    shown = page_of(holed).axes[0].findobj(QuadMesh)[0].get_array()
    assert np.ma.getmaskarray(shown).reshape(clearance.shape)[4, 10:20].all()
    assert picture(holed, tmp_path).stat().st_size > 0


def test_a_png_is_a_page_across_holds_its_provenance_and_is_the_same_each_time(tmp_path: Path) -> None:
    path = picture(without_travel(), tmp_path)
    with Image.open(path) as image:
        width, height = image.size
        assert width / height == pytest.approx(297.0 / 210.0, rel=5e-3)
        assert provenance(without_travel()).fingerprint in image.info["Description"]
    first = path.read_bytes()
    assert picture(without_travel(), tmp_path).read_bytes() == first


def test_a_pdf_is_a_page_across_holds_its_provenance_and_is_the_same_each_time(tmp_path: Path) -> None:
    first = picture(without_travel(), tmp_path, ".pdf").read_bytes()
    # A4 in points of 1/72 inch.
    assert b"/MediaBox [ 0 0 841" in first
    assert b"D:20260304120000" in first
    assert provenance(without_travel()).fingerprint.encode("utf-16-be") in unescaped(first)
    assert picture(without_travel(), tmp_path, ".pdf").read_bytes() == first


@pytest.mark.parametrize("name", ["$x^{$", "直線 %s \\alpha", "n" * 200])
def test_any_name_can_be_written(name: str, tmp_path: Path) -> None:
    assert picture(named(one_couch_angle(), name, name), tmp_path).stat().st_size > 0


def test_everything_stays_on_the_page() -> None:
    for assessment in (with_readouts(), named(unsurveyed(), "n" * 200, "m" * 200), without_travel()):
        page = page_of(assessment)
        page.canvas.draw()
        edges = page.bbox
        assert len(page.texts) > 8
        for text in page.texts:
            box = text.get_window_extent()
            assert box.x0 >= edges.x0, text.get_text()
            assert box.x1 <= edges.x1, text.get_text()
            assert box.y0 >= edges.y0, text.get_text()


def test_another_suffix_is_refused(tmp_path: Path) -> None:
    with pytest.raises(BadInput, match=r"found the suffix '\.jpg'; allowed: one of \.png, \.pdf"):
        write_chart_picture(plain(), provenance(plain()), tmp_path / "chart.jpg")
    assert not list(tmp_path.iterdir())


@pytest.mark.parametrize(("low", "high"), [(-185.0, 185.0), (-95.0, 95.0), (-3.0, 3.0), (0.0, 0.0), (-200.0, 200.0)])
def test_ticks_are_few_round_and_within(low: float, high: float) -> None:
    ticks = angle_ticks(low, high)
    assert 0 < len(ticks) <= 14
    assert (ticks >= low).all()
    assert (ticks <= high).all()
    assert 0.0 in ticks


def test_the_assessment_was_made_with_a_grid_that_shows_something() -> None:
    assert OPTIONS.gantry_step_deg == 10.0
    assert len(np.unique(plain().state)) >= 4
