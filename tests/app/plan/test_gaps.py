from dataclasses import replace

import pytest

from app.plan.dry_run import dry_run
from app.plan.gaps import MeasuredGap, compare_gaps, places_to_measure
from geometry.assess import assess_pose
from tests.app.files.reports import small_report

# Of whatever set-up: what is compared is text.
FINGERPRINT = "0123456789abcdef" * 4


def gap(
    measured_mm: float, field: str = "down", gantry_deg: float = 130.0, fingerprint: str = FINGERPRINT[:16]
) -> MeasuredGap:
    return MeasuredGap(field, gantry_deg, 0.0, measured_mm, "K", "2026-03-04", fingerprint)


def test_a_gap_is_held_against_the_exact_clearance_at_its_angles() -> None:
    computed_mm = assess_pose(small_report().setup, 130.0, 0.0).clearance_mm
    row = compare_gaps([gap(computed_mm + 2.5)], small_report(), FINGERPRINT)[0]
    assert row.computed_mm == pytest.approx(computed_mm, abs=1e-6)
    assert row.difference_mm == pytest.approx(2.5, abs=1e-6)
    assert row.parts == ("gantry/head", "couch/table top")
    assert row.is_current
    assert not row.is_flagged
    assert row.words == ""


@pytest.mark.parametrize(("missing_mm", "flagged"), [(3.9, False), (4.1, True)])
def test_less_than_the_uncertainties_explain_is_flagged_in_words(missing_mm: float, flagged: bool) -> None:
    # The machine's pairs: 2 × 2 mm of couch sag stand beside the fixed 20 mm.
    computed_mm = assess_pose(small_report().setup, 130.0, 0.0).clearance_mm
    row = compare_gaps([gap(computed_mm - missing_mm)], small_report(), FINGERPRINT)[0]
    assert row.is_flagged == flagged
    assert ("find out why" in row.words) == flagged


def test_less_than_required_is_flagged() -> None:
    row = compare_gaps([gap(23.9)], small_report().scene, FINGERPRINT)[0]
    assert row.is_flagged
    assert "less than the required 24.0 mm" in row.words


@pytest.mark.parametrize(
    ("fingerprint", "is_current", "words"),
    [
        (FINGERPRINT, True, ""),
        (FINGERPRINT[:16].upper(), True, ""),
        (FINGERPRINT[:8], False, "another state"),
        ("0" * 16, False, "another state"),
        ("", None, "nobody stated"),
    ],
)
def test_it_says_for_which_set_up_it_was_measured(fingerprint: str, is_current: bool | None, words: str) -> None:
    row = compare_gaps([gap(100.0, fingerprint=fingerprint)], small_report(), FINGERPRINT)[0]
    assert row.is_current is is_current
    assert words in row.words


def test_angles_out_of_travel_and_fields_that_are_not_there_are_named() -> None:
    beyond = replace(gap(100.0), couch_deg=100.0)
    out, unknown = compare_gaps([beyond, gap(100.0, "lamp")], small_report(), FINGERPRINT)
    assert (out.computed_mm, out.difference_mm) == (None, None)
    assert out.is_flagged
    assert "beyond the travel" in out.words
    assert unknown.computed_mm is not None
    assert "no field of this name" in unknown.words


def test_the_places_to_measure_are_the_stops_and_the_tightest_places_of_permitted_fields() -> None:
    places = places_to_measure(dry_run(small_report()))
    assert [place.field for place in places] == ["AP", "arc", "arc", "kV pair", "down", "down"]
    assert all(0.0 <= place.gantry_deg < 360.0 for place in places)
    assert places[4].gantry_deg == 137.0
