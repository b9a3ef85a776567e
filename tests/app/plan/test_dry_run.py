"""The rows of a dry run against the JSON of the same report, which is written by other code."""

import math
import re
from dataclasses import replace

import pytest

from app.plan.dry_run import DO_NOT_RUN, NOT_PERMITTED, FieldRow, dry_run, state_words
from app.plan_files.check_json import check_values
from geometry.assess import assess_pose
from geometry.scene import build_scene
from geometry.setup import OnTable
from geometry.states import State
from geometry.treatment.data import CheckReport
from tests.app.files.reports import provenance_for, report_with_scales, small_report


def number_in(text: str) -> float:
    """Return the only number of a text."""
    found = re.findall(r"\d+(?:\.\d+)?", text)
    assert len(found) == 1, text
    return float(found[0])


def pairs(report: CheckReport) -> list[tuple[FieldRow, dict[str, object]]]:
    fields = check_values(report, provenance_for(report))["fields"]
    assert isinstance(fields, list)
    return list(zip(dry_run(report).fields, fields, strict=True))


def test_a_permitted_field_has_the_jsons_bound_rounded_down_and_the_required_clearance_rounded_up() -> None:
    checked = 0
    for row, field in pairs(small_report()):
        assert row.permitted == (field["state"] == "permitted")
        if row.permitted:
            exact = field["least_clearance_mm"]
            assert 0.0 <= exact - number_in(row.least) < 0.1 + 1e-9
            assert row.least.startswith("≥ ")
            wanted = field["least"]["clearance_mm"] - field["least"]["slack_mm"]
            assert 0.0 <= number_in(row.required) - wanted < 0.1
            assert row.parts == (field["least"]["machine_part"], field["least"]["couch_part"])
            checked += 1
    assert checked == 4


def test_angles_and_places_are_the_jsons() -> None:
    for row, field in pairs(small_report()):
        ends = [number_in(text) for text in row.gantry.iec.split(" → ")]
        assert ends[0] == pytest.approx(field["gantry_from_deg"], abs=0.005)
        assert ends[-1] == pytest.approx(field["gantry_to_deg"], abs=0.005)
        assert (
            row.gantry.sense
            == {0.0: "", 1.0: "CW", -1.0: "CC"}[
                float(math.copysign(bool(field["gantry_turn_deg"]), field["gantry_turn_deg"]))
            ]
        )
        assert row.is_setup == field["set_up"]
        look = field["look_at"]
        assert (row.tightest is None) == (look is None)
        if row.tightest is not None:
            assert row.tightest.clearance_mm == look["clearance_mm"]
            assert row.tightest.gantry_deg == pytest.approx(look["gantry_travel_deg"], abs=1e-8)
            assert row.tightest.parts == (look["machine_part"], look["couch_part"])


def test_moves_have_the_jsons_state_bound_and_parts() -> None:
    report = small_report()
    moves = check_values(report, provenance_for(report))["moves"]
    for row, move in zip(dry_run(report).moves, moves, strict=True):
        assert (row.before, row.after) == (move["before"], move["after"])
        assert row.state == state_words(State(move["state"]))
        if row.permitted:
            least = min(step["least_clearance_mm"] for step in move["steps"])
            assert 0.0 <= least - number_in(row.least) < 0.1 + 1e-9
            assert row.steps
        else:
            assert row.steps == ()
            assert row.reason == move["reason"] != ""


def test_a_stop_lies_on_the_path_before_the_tightest_place_with_its_own_exact_gap() -> None:
    report = small_report()
    row = dry_run(report).fields[5]
    assert row.gantry.iec == "181° → 120°"
    assert row.stop is not None
    assert row.tightest is not None
    # Turning counter-clockwise, before is at the greater angle.
    assert row.stop.gantry_deg == math.ceil(row.tightest.gantry_deg + 10.0)
    assert row.stop.clearance_mm == assess_pose(report.fields[5].scene.setup, row.stop.gantry_deg, 0.0).clearance_mm


def test_what_is_not_permitted_says_so_in_words_and_has_no_stop() -> None:
    rows = dry_run(small_report())
    assert rows.verdict == "NOT PERMITTED: 2 of 6 fields, 2 of 5 moves"
    failed = [row for row in rows.fields if not row.permitted]
    assert [row.name for row in failed] == ["couch arc", "beyond"]
    assert [row.state for row in failed] == [f"{NOT_PERMITTED}: contact", f"{NOT_PERMITTED}: no travel"]
    assert all(row.stop is None for row in failed)
    assert "couch = 100 deg is outside its travel" in failed[1].remarks[0]
    assert "local rules" in DO_NOT_RUN


def test_a_field_in_doubt_says_why_and_fails_nowhere_in_particular() -> None:
    report = small_report()
    first = report.fields[0]
    doubted = replace(first, verdict=replace(first.verdict, state=State.UNPROVED, reason="nobody says what is fitted"))
    near = replace(first, verdict=replace(first.verdict, state=State.UNPROVED, first_short=first.verdict.nearest))
    in_doubt, not_proved = dry_run(replace(report, fields=(doubted, near), moves=())).fields
    assert (in_doubt.look, in_doubt.remarks) == ("Nearest at", ("nobody says what is fitted",))
    assert not_proved.look == "Not proved at"
    assert not_proved.remarks == ("not proved within the readouts' tolerances",)
    assert not in_doubt.permitted
    assert in_doubt.stop is None


def test_a_permitted_plan_says_so() -> None:
    rows = dry_run(report_with_scales())
    assert rows.permitted
    assert rows.verdict == "All fields and moves permitted"


def test_own_scales_stand_beside_the_iec_angles() -> None:
    row = dry_run(report_with_scales()).fields[0]
    assert row.gantry.iec == "330° → 20°"
    # 180 − 330 and 180 − 20, as the room's readout says.
    assert row.gantry.own == "210° → 160°"
    assert row.couch.own == "180°"
    assert dry_run(report_with_scales()).moves[0].steps == ("gantry to 331° CC (machine 209°)",)


def test_a_field_with_another_table_place_says_which() -> None:
    report = small_report()
    first = report.fields[0]
    moved = replace(report.setup, on_table=OnTable(from_head_end_mm=40.0, lateral_mm=30.0))
    other = replace(report, fields=(replace(first, scene=build_scene(moved)),), moves=())
    assert dry_run(other).fields[0].remarks[0].startswith("table at lateral -30.0 mm")
    assert dry_run(report).fields[0].remarks == ()


def test_notes_that_fields_share_are_told_once() -> None:
    report = small_report()
    fields = tuple(replace(check, notes=("pitch: none in the plan",)) for check in report.fields[:2])
    assert dry_run(replace(report, fields=fields, moves=report.moves[:1], notes=("All differ.",))).remarks == (
        "All differ.",
        "Field 1, 2: pitch: none in the plan.",
    )


def test_checks_are_the_set_ups_own_values_without_axes_that_cannot_move() -> None:
    report = small_report()
    inputs = check_values(report, provenance_for(report))["inputs"]
    checks = dry_run(report).checks
    assert all([name, text] in inputs for name, text in checks)
    names = [name for name, _ in checks]
    assert "Patient position" in names
    assert "Couch vertical" in names
    assert "Couch pitch" not in names


def test_a_field_that_fails_says_where_it_is_first_short_before_where_it_is_worst() -> None:
    checked = 0
    for row, field in pairs(small_report()):
        if field["state"] not in ("contact", "short"):
            assert row.first is None
            continue
        first = field["first_short"]
        assert row.first is not None
        assert row.first.couch_deg == pytest.approx(first["couch_travel_deg"], abs=1e-8)
        assert row.first.clearance_mm == first["clearance_mm"]
        assert row.first.parts == (first["machine_part"], first["couch_part"])
        assert row.tightest is not None
        assert (row.first.couch_deg, row.first.gantry_deg) != (row.tightest.couch_deg, row.tightest.gantry_deg)
        assert row.look == "Contact (nearest approach) at"
        checked += 1
    assert checked == 1
