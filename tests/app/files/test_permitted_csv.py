"""The permitted-angle table as people paste it."""

import csv
import io
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from app.files.delimited import cell_text
from app.files.permitted_csv import write_permitted_csv
from geometry.assess import Assessment
from geometry.spans import Span
from tests.app.files.assessments import (
    named,
    one_couch_angle,
    plain,
    provenance,
    with_readouts,
    without_travel,
)

# The order is a contract: other people's spreadsheets rely on it.
HEADER = (
    "couch_deg,gantry_from_deg,gantry_to_deg,gantry_extent_deg,least_clearance_mm,machine_part,couch_part,required_mm,"
    "gantry_tolerance_deg,couch_tolerance_deg,edge_deg,version,date,caution,room,setup,fingerprint"
)


def text_of(assessment: Assessment, tmp_path: Path) -> str:
    path = tmp_path / "angles.csv"
    write_permitted_csv(assessment, provenance(assessment), path)
    return path.read_bytes().decode("utf-8")


def rows_of(assessment: Assessment, tmp_path: Path) -> list[dict[str, str]]:
    return list(csv.DictReader(io.StringIO(text_of(assessment, tmp_path), newline="")))


def test_the_header_and_the_line_ends_are_the_contract(tmp_path: Path) -> None:
    text = text_of(plain(), tmp_path)
    assert text.startswith(HEADER + "\r\n")
    assert text.endswith("\r\n")
    assert "\n" not in text.replace("\r\n", "")


def test_every_span_has_a_row_and_every_couch_angle_at_least_one(tmp_path: Path) -> None:
    assessment = plain()
    rows = rows_of(assessment, tmp_path)
    assert len(rows) == len(assessment.spans)
    for row, span in zip(rows, assessment.spans, strict=True):
        assert float(row["couch_deg"]) == span.couch_deg % 360.0
        assert float(row["gantry_from_deg"]) == pytest.approx(span.gantry_from_deg % 360.0, abs=1e-9)
        assert float(row["gantry_to_deg"]) == pytest.approx(span.gantry_to_deg % 360.0, abs=1e-9)
        assert float(row["gantry_extent_deg"]) == pytest.approx(span.extent_deg, abs=1e-9)
    assert {float(row["couch_deg"]) for row in rows} == {angle % 360.0 for angle in assessment.map.couch_deg}


def test_bounds_are_rounded_down_and_not_below_what_is_required(tmp_path: Path) -> None:
    for row, span in zip(rows_of(plain(), tmp_path), plain().spans, strict=True):
        assert span.least_clearance_mm - 0.001 <= float(row["least_clearance_mm"]) <= span.least_clearance_mm + 1e-8
        assert float(row["least_clearance_mm"]) >= float(row["required_mm"])
        assert float(row["required_mm"]) == pytest.approx(span.required_mm, abs=0.001)
        assert row["machine_part"].split("/")[0] in {"gantry", "room"}
        assert row["couch_part"].split("/")[0] in {"couch", "room"}


def test_a_gantry_free_from_minus_185_to_185_reads_175_185_370(tmp_path: Path) -> None:
    assessment = plain()
    whole = replace(assessment, spans=(Span(0.0, -185.0, 185.0, 61.8, 0, 2, 24.0),))
    row = next(row for row in rows_of(whole, tmp_path) if row["couch_deg"] == "0")
    assert (row["gantry_from_deg"], row["gantry_to_deg"], row["gantry_extent_deg"]) == ("175", "185", "370")


def test_a_couch_angle_with_nothing_permitted_has_empty_angles_and_extent_0(tmp_path: Path) -> None:
    assessment = plain()
    blocked = replace(assessment, spans=tuple(span for span in assessment.spans if span.couch_deg != 90.0))
    (row,) = [row for row in rows_of(blocked, tmp_path) if row["couch_deg"] == "90"]
    assert row["gantry_extent_deg"] == "0"
    for column in (
        "gantry_from_deg",
        "gantry_to_deg",
        "least_clearance_mm",
        "machine_part",
        "couch_part",
        "required_mm",
    ):
        assert row[column] == ""
    assert row["edge_deg"] == "1"
    assert row["fingerprint"]


def test_without_travel_nothing_is_permitted_and_every_row_says_why(tmp_path: Path) -> None:
    rows = rows_of(without_travel(), tmp_path)
    assert len(rows) == len(without_travel().map.couch_deg)
    assert {row["gantry_extent_deg"] for row in rows} == {"0"}
    assert all("NO TRAVEL" in row["caution"] for row in rows)


def test_every_row_tells_where_it_comes_from(tmp_path: Path) -> None:
    for row in rows_of(plain(), tmp_path):
        assert row["gantry_tolerance_deg"] == row["couch_tolerance_deg"] == "1"
        assert row["date"] == "2026-03-04"
        assert row["version"] == provenance(plain()).version
        assert row["fingerprint"] == provenance(plain()).fingerprint
        assert "DEMONSTRATION" in row["caution"]


def test_the_rooms_own_scales_follow_the_contract_columns(tmp_path: Path) -> None:
    assessment = with_readouts()
    header = text_of(assessment, tmp_path).split("\r\n", 1)[0]
    assert header == f"{HEADER},couch_readout_deg,gantry_from_readout_deg,gantry_to_readout_deg"
    for row in rows_of(assessment, tmp_path):
        assert float(row["couch_readout_deg"]) == (180.0 + float(row["couch_deg"])) % 360.0
        for end in ("from", "to"):
            shown, iec = float(row[f"gantry_{end}_readout_deg"]), float(row[f"gantry_{end}_deg"])
            assert shown == pytest.approx((180.0 - iec) % 360.0, abs=1e-9)


def test_a_bore_has_one_couch_angle(tmp_path: Path) -> None:
    (row,) = rows_of(one_couch_angle(), tmp_path)
    assert (row["couch_deg"], row["gantry_from_deg"], row["gantry_to_deg"]) == ("0", "180", "180")
    assert row["gantry_extent_deg"] == "360"


def test_where_nothing_had_to_be_checked_no_clearance_is_made_up(tmp_path: Path) -> None:
    assessment = one_couch_angle()
    free = replace(
        assessment, spans=(replace(assessment.spans[0], least_clearance_mm=np.inf, machine_part=-1, couch_part=-1),)
    )
    (row,) = rows_of(free, tmp_path)
    assert (row["least_clearance_mm"], row["machine_part"], row["couch_part"], row["required_mm"]) == ("", "", "", "")


@pytest.mark.parametrize("name", ['=HYPERLINK("x")', "+1", "-1+2", "@SUM(A1)"])
def test_a_name_cannot_become_a_formula(name: str, tmp_path: Path) -> None:
    for row in rows_of(named(plain(), name, name), tmp_path):
        assert row["room"] == row["setup"] == f"'{name}"


def test_names_with_commas_quotes_and_other_letters_come_back(tmp_path: Path) -> None:
    rows = rows_of(named(plain(), 'Kopf, "nah"', "Größe 直線"), tmp_path)
    assert rows[0]["setup"] == 'Kopf, "nah"'
    assert rows[0]["room"] == "Größe 直線"


def test_numbers_are_not_taken_for_formulas() -> None:
    assert [cell_text(cell) for cell in (-3.5, None, 0.1 + 0.2, "plain", "\t=1")] == [
        "-3.5",
        "",
        "0.3",
        "plain",
        "'\t=1",
    ]
