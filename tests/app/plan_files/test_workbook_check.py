from pathlib import Path

import pytest
from openpyxl import load_workbook
from openpyxl.worksheet.worksheet import Worksheet

from app.plan.dry_run import dry_run
from app.plan.gaps import MeasuredGap, compare_gaps
from app.plan_files.workbook_check import FIELDS, GAPS, MOVES, write_check_workbook
from tests.app.files.reports import provenance_for, report_with_scales, small_report


def table(sheet: Worksheet) -> list[dict[str, object]]:
    """Return the rows below the row of names, by the names; of two columns of one name, the later."""
    rows = list(sheet.iter_rows(values_only=True))
    first = next(k for k, row in enumerate(rows) if "Remarks" in row)
    return [dict(zip((str(name) for name in rows[first]), row, strict=True)) for row in rows[first + 1 :]]


def test_the_workbook_holds_the_sheets_rows(tmp_path: Path) -> None:
    path = tmp_path / "check.xlsx"
    report = small_report()
    gaps = compare_gaps([MeasuredGap("=down", 130.0, 0.0, 60.0, "K", "2026-03-04")], report)
    write_check_workbook(report, provenance_for(report), path, gaps)
    book = load_workbook(path)
    assert book.sheetnames == [FIELDS, MOVES, GAPS, "Inputs and cautions"]
    rows = dry_run(report)
    for written, row in zip(table(book[FIELDS]), rows.fields, strict=True):
        assert written["Field"] == row.name
        assert written["State"] == row.state
        assert written["Clearance"] == row.least
        assert written["Measured there, mm"] is None
        assert (written["Machine part"] or None) == (row.parts[0] if row.parts else None)
    for written, move in zip(table(book[MOVES]), rows.moves, strict=True):
        assert (written["From"], written["To"]) == (move.before, move.after)
        assert written["State"] == move.state
    measured = table(book[GAPS])[0]
    assert measured["Field"] == "=down"
    assert measured["Measured, mm"] == 60.0
    assert measured["Difference, mm"] == pytest.approx(60.0 - gaps[0].computed_mm, abs=0.05)  # type: ignore[operator]
    top = [row[0] for row in book[FIELDS].iter_rows(max_row=8, values_only=True)]
    assert top[0] == rows.verdict
    assert "DEMONSTRATION: invented room and set-up" in top
    assert any("Do not run" in str(words) for words in top)


def test_places_stand_in_both_scales_and_the_same_report_gives_the_same_bytes(tmp_path: Path) -> None:
    report = report_with_scales()
    paths = [tmp_path / "one.xlsx", tmp_path / "other.xlsx"]
    for path in paths:
        write_check_workbook(report, provenance_for(report), path)
    assert paths[0].read_bytes() == paths[1].read_bytes()
    first = table(load_workbook(paths[0])[FIELDS])[0]
    assert first["Gantry"] == "330° → 20°"
    assert first["Gantry, machine shows"] == "210° → 160°"
    assert GAPS not in load_workbook(paths[0]).sheetnames
