import csv
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from app.plan.dry_run import dry_run
from app.plan.gaps import MeasuredGap
from app.plan_files.gaps_csv import (
    COLUMNS,
    MOST_GAPS,
    gaps_path,
    keep_gaps,
    read_gaps,
    read_kept_gaps,
    write_gaps_template,
)
from geometry.errors import BadInput
from tests.app.files.reports import provenance_for, small_report

HEADER = "field,gantry_deg,couch_deg,measured_mm,by,on,fingerprint\r\n"
GAP = MeasuredGap("arc", 181.0, 350.0, 43.5, "K. M.", "2026-03-04", "0123456789abcdef")


def written(tmp_path: Path, text: str) -> Path:
    path = tmp_path / "some.gaps.csv"
    path.write_bytes(text.encode())
    return path


def test_a_list_is_read_in_its_order_angles_in_a_turn(tmp_path: Path) -> None:
    text = HEADER + "arc,-179,-10,43.5,K. M.,2026-03-04,0123456789ABCDEF\r\nstop,0,0,20,,,\r\n"
    assert read_gaps(written(tmp_path, text)) == (GAP, MeasuredGap("stop", 0.0, 0.0, 20.0))


def test_only_four_columns_are_needed_and_blank_ones_wait(tmp_path: Path) -> None:
    text = "field,gantry_deg,couch_deg,measured_mm\nA,1,2,3\nB,4,5,\n,,,\n"
    assert read_gaps(written(tmp_path, text)) == (MeasuredGap("A", 1.0, 2.0, 3.0),)


@pytest.mark.parametrize(
    ("row", "place", "found"),
    [
        ("A,x,0,1,,,", "row 2, gantry_deg", "'x'"),
        ("A,0,900,1,,,", "row 2, couch_deg", "'900'"),
        ("A,0,0,-1,,,", "row 2, measured_mm", "'-1'"),
        ("A,0,0,nan,,,", "row 2, measured_mm", "'nan'"),
        ("A,0,0,inf,,,", "row 2, measured_mm", "'inf'"),
        ('A,0,0,"12,5",,,', "row 2, measured_mm", "'12,5'"),
        (",0,0,1,,,", "row 2, field", "nothing"),
        ("A,0,0,1,,4.3.26,", "row 2, on", "'4.3.26'"),
        ("A,0,0,1,,,xyz", "row 2, fingerprint", "'xyz'"),
        (f"{'A' * 300},0,0,1,,,", "row 2, field", "300 characters"),
        ("A,0,0,1,,,,too many", "row 2", "8 cells"),
    ],
)
def test_a_bad_cell_is_named_with_its_place(tmp_path: Path, row: str, place: str, found: str) -> None:
    with pytest.raises(BadInput) as error:
        read_gaps(written(tmp_path, HEADER + row + "\r\n"))
    fault = error.value.faults[0]
    assert (fault.place, fault.found) == (place, found)
    assert fault.allowed


@pytest.mark.parametrize(
    "text",
    [
        "",
        "\n\n",
        "field,gantry_deg\n",
        "field,gantry_deg,couch_deg,measured_mm,gap\n",
        "field,field,gantry_deg,couch_deg,measured_mm\n",
    ],
)
def test_a_file_without_the_columns_is_refused(tmp_path: Path, text: str) -> None:
    with pytest.raises(BadInput):
        read_gaps(written(tmp_path, text))


def test_what_is_no_text_and_what_is_not_there_is_refused(tmp_path: Path) -> None:
    path = tmp_path / "x.gaps.csv"
    path.write_bytes(b"\xff\xfe\x00field")
    with pytest.raises(BadInput, match="UTF-8"):
        read_gaps(path)
    with pytest.raises(BadInput, match="no such file"):
        read_gaps(tmp_path / "missing.csv")


@given(st.text(max_size=300))
def test_no_text_whatever_raises_anything_else(tmp_path_factory: pytest.TempPathFactory, text: str) -> None:
    path = tmp_path_factory.getbasetemp() / "any.gaps.csv"
    path.write_bytes((HEADER + text).encode("utf-8", "surrogatepass"))
    try:
        gaps = read_gaps(path)
    except BadInput:
        return
    assert all(0.0 <= gap.measured_mm <= 10_000.0 for gap in gaps)


@pytest.mark.parametrize(
    ("name", "beside"),
    [("head.setup.toml", "head.gaps.csv"), ("head.toml", "head.gaps.csv"), ("head", "head.gaps.csv")],
)
def test_gaps_are_kept_beside_the_set_up(tmp_path: Path, name: str, beside: str) -> None:
    assert gaps_path(tmp_path / name) == tmp_path / beside


def test_kept_gaps_add_up_and_none_is_lost_or_written_twice(tmp_path: Path) -> None:
    setup = tmp_path / "head.setup.toml"
    assert read_kept_gaps(setup) == ()
    first = MeasuredGap("=SUM(A1)", 0.1, 0.2, 0.3, "@K", "2026-03-04")
    assert keep_gaps(setup, [first], "f" * 16)[0].fingerprint == "f" * 16
    kept = keep_gaps(setup, [GAP, first, GAP], "f" * 16)
    assert [gap.field for gap in kept] == ["=SUM(A1)", "arc"]
    assert read_kept_gaps(setup) == kept
    # A spreadsheet must not take a name for a formula.
    assert b"'=SUM(A1)" in gaps_path(setup).read_bytes()
    assert keep_gaps(setup, [], "f" * 16) == kept


def test_a_kept_file_that_cannot_be_read_stays_as_it_is(tmp_path: Path) -> None:
    setup = tmp_path / "head.setup.toml"
    gaps_path(setup).write_text("scribble")
    with pytest.raises(BadInput):
        keep_gaps(setup, [GAP])
    assert gaps_path(setup).read_text() == "scribble"


def test_more_gaps_than_anybody_measures_are_refused(tmp_path: Path) -> None:
    setup = tmp_path / "head.setup.toml"
    many = [MeasuredGap("A", 0.0, 0.0, float(k)) for k in range(MOST_GAPS + 1)]
    with pytest.raises(BadInput, match="at most"):
        keep_gaps(setup, many)
    assert not gaps_path(setup).exists()


def test_the_template_holds_the_sheets_places_and_reads_back_once_filled_in(tmp_path: Path) -> None:
    rows = dry_run(small_report())
    path = tmp_path / "to fill in.csv"
    write_gaps_template(rows, provenance_for(small_report()).short_fingerprint, path)
    with path.open(newline="", encoding="utf-8") as stream:
        table = list(csv.DictReader(stream))
    assert [row["field"] for row in table] == ["AP", "arc", "arc", "kV pair", "down", "down"]
    assert tuple(table[0])[: len(COLUMNS)] == COLUMNS
    assert read_gaps(path) == ()
    tightest = rows.fields[5].tightest
    assert tightest is not None
    assert 0.0 <= tightest.clearance_mm - float(table[5]["computed_mm"]) < 0.1
    table[5]["measured_mm"] = "88"
    with path.open("w", newline="", encoding="utf-8") as stream:
        writer = csv.DictWriter(stream, list(table[0]))
        writer.writeheader()
        writer.writerows(table)
    (gap,) = read_gaps(path)
    assert (gap.field, gap.measured_mm, gap.gantry_deg) == ("down", 88.0, 126.3)
    assert gap.fingerprint == provenance_for(small_report()).short_fingerprint
