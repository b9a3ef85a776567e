"""Shares of the sphere against counting, and the lines around them."""

import math
from dataclasses import replace

import numpy as np
import pytest
import shapely
from hypothesis import given
from hypothesis import strategies as st

from geometry.assess import Options, assess
from geometry.directions.axes import PatientAxes, angle_pairs, directions_patient
from geometry.directions.regions import SPHERE_SR, Share, folded, outlines, share_of, solid_angle_sr
from geometry.machine import Axis
from tests.geometry.small_rooms import post, setup_with

OPTIONS = Options(gantry_step_deg=10.0, couch_step_deg=10.0, edge_deg=1.0)


@st.composite
def regions(draw: st.DrawFn) -> shapely.Geometry:
    """Return some rectangles of the plane of angles."""
    boxes = []
    for _ in range(draw(st.integers(1, 4))):
        x, y = draw(st.integers(-190, 170)), draw(st.integers(-180, 160))
        boxes.append(shapely.box(x, y, x + draw(st.integers(5, 200)), y + draw(st.integers(5, 100))))
    return shapely.union_all(boxes)


@given(regions())
def test_a_share_is_what_counting_directions_gives(region: shapely.Geometry) -> None:
    vectors = np.random.default_rng(4).normal(size=(400, 3))
    x0, y0, x1, y1 = region.bounds
    hits = sum(
        any(
            shapely.contains_xy(region, pair.gantry_deg, pair.couch_deg)
            for pair in angle_pairs(vector, PatientAxes(), (x0, x1), (y0, y1))
        )
        for vector in vectors
    )
    share = solid_angle_sr(folded(region)) / SPHERE_SR
    # Five standard deviations of such a count.
    assert hits / 400 == pytest.approx(share, abs=5.0 * math.sqrt(max(share * (1.0 - share), 0.005) / 400))


@given(regions(), st.sampled_from([-360, 360]))
def test_a_whole_turn_changes_nothing(region: shapely.Geometry, turn: int) -> None:
    once = solid_angle_sr(folded(region))
    assert solid_angle_sr(folded(shapely.transform(region, lambda xy: np.add(xy, [turn, 0])))) == pytest.approx(once)
    assert solid_angle_sr(folded(shapely.transform(region, lambda xy: np.add(xy, [0, turn])))) == pytest.approx(once)
    twin = shapely.transform(region, lambda xy: np.add(xy * [-1, 1], [0, 180]))
    assert solid_angle_sr(folded(twin)) == pytest.approx(once)
    both = shapely.union_all([region, twin])
    assert solid_angle_sr(folded(both)) == pytest.approx(once)


def test_a_slanted_border_in_closed_form() -> None:
    # Between couch 0 and couch = gantry: the integral of g sin g from 0 to pi is pi.
    triangle = shapely.Polygon([(0.0, 0.0), (180.0, 0.0), (180.0, 180.0)])
    assert solid_angle_sr(triangle) == pytest.approx(math.pi)


def test_nothing_has_no_share_and_no_outline() -> None:
    assert solid_angle_sr(folded(shapely.MultiPolygon())) == 0.0
    assert outlines(shapely.MultiPolygon(), PatientAxes()) == ()


@pytest.mark.parametrize(
    "region",
    [shapely.box(-185, -95, 185, 95), shapely.box(-180, -90, 180, 90), shapely.box(0, -180, 180, 180)],
)
def test_the_whole_sphere_has_no_outline(region: shapely.Geometry) -> None:
    assert solid_angle_sr(folded(region)) == pytest.approx(SPHERE_SR)
    assert outlines(region, PatientAxes()) == ()


def test_the_outline_of_a_zone_is_two_circles() -> None:
    lines = outlines(shapely.box(60, -180, 120, 180), PatientAxes())
    # Height above the level of the isocentre, cos 60 and cos 120, is -y of a patient on the back.
    heights = {round(float(-line[:, 1].mean()), 9) for line in lines}
    assert heights == {0.5, -0.5}
    for line in lines:
        assert np.ptp(line[:, 1]) < 1e-9
        assert np.linalg.norm(line, axis=1) == pytest.approx(1.0)
        assert np.linalg.norm(np.diff(line, axis=0), axis=1).max() < 0.02


def test_an_outline_that_crosses_the_seam_has_no_gap_and_nothing_along_it() -> None:
    # Couch 170 to 190 is cut by the fold at 180.
    lines = outlines(shapely.box(40, 170, 50, 190), PatientAxes())
    length = sum(float(np.linalg.norm(np.diff(line, axis=0), axis=1).sum()) for line in lines)
    around = math.radians(20.0) * (math.sin(math.radians(40.0)) + math.sin(math.radians(50.0)))
    assert length == pytest.approx(2.0 * math.radians(10.0) + around, rel=1e-3)


def test_pitch_turns_the_outline_with_the_patient() -> None:
    box = shapely.box(30, -20, 60, 20)
    plain, tilted = (outlines(box, PatientAxes(pitch_deg=pitch)) for pitch in (0.0, 3.0))
    corner = directions_patient(30.0, -20.0, PatientAxes(pitch_deg=3.0))
    assert min(np.linalg.norm(line - corner, axis=1).min() for line in tilted) < 1e-9
    assert min(np.linalg.norm(line - corner, axis=1).min() for line in plain) > 0.01


def test_the_share_of_a_setup() -> None:
    setup = setup_with([post("post", 40.0, 560.0)])
    found = share_of(assess(setup, OPTIONS))
    assert found.reachable_sr == pytest.approx(SPHERE_SR)
    assert 0.0 < found.permitted_sr < SPHERE_SR
    assert found.of_reachable == pytest.approx(found.of_sphere)
    assert found.coplanar_reachable_deg == 360.0
    # The post takes away, at every couch angle, what it does at couch 0; -140 at couch 180 stays out of the travel.
    assert 320.0 < found.coplanar_permitted_deg < 355.0


def test_the_share_of_a_setup_is_what_counting_directions_gives() -> None:
    assessment = assess(setup_with([post("post", 40.0, 560.0)]), Options(2.0, 5.0, 0.5))
    vectors = np.random.default_rng(3).normal(size=(300, 3))
    region = assessment.permitted_region
    hits = sum(
        any(
            shapely.contains_xy(region, pair.gantry_deg, pair.couch_deg)
            for pair in angle_pairs(vector, PatientAxes(), (-185.0, 185.0), (-95.0, 95.0))
        )
        for vector in vectors
    )
    share = share_of(assessment).of_sphere
    assert hits / 300 == pytest.approx(share, abs=4.0 * math.sqrt(share * (1.0 - share) / 300 + 1e-4))


def test_a_bore_has_a_circle_and_no_solid_angle() -> None:
    found = share_of(assess(setup_with(gantry=Axis(-180.0, 180.0), turntable=Axis(0.0, 0.0)), OPTIONS))
    assert found == Share(0.0, 0.0, 360.0, 360.0)
    assert math.isnan(found.of_reachable)


def test_a_gantry_that_does_not_turn_all_the_way() -> None:
    found = share_of(assess(setup_with(gantry=Axis(-30.0, 190.0), turntable=Axis(-90.0, 90.0)), OPTIONS))
    assert found.coplanar_reachable_deg == 220.0
    assert found.coplanar_permitted_deg == 220.0


def test_a_couch_that_turns_right_round_gives_coplanar_beams_at_180_as_well() -> None:
    found = share_of(assess(setup_with(gantry=Axis(-10.0, 90.0), turntable=Axis(-180.0, 180.0)), OPTIONS))
    # -10 to 90 at couch 0, and -90 to 10 at couch 180.
    assert found.coplanar_reachable_deg == 180.0


def test_a_couch_that_cannot_reach_zero_has_no_coplanar_beam() -> None:
    found = share_of(assess(setup_with(turntable=Axis(10.0, 60.0)), OPTIONS))
    assert found.coplanar_reachable_deg == 0.0
    assert found.permitted_sr > 0.0


def test_without_travel_there_is_no_share() -> None:
    assessment = assess(setup_with(), OPTIONS)
    stuck = replace(assessment, scene=replace(assessment.scene, no_travel=("vertical",)))
    assert share_of(stuck) == Share(0.0, 0.0, 0.0, 0.0)
