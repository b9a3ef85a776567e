"""Typed lists of fields."""

from pathlib import Path

import pytest

from app.plan_files import fields_csv
from app.plan_files.fields_csv import read_field_rows
from geometry.errors import BadInput
from geometry.treatment.data import PlanField

HEADER = "field,gantry_from_deg,gantry_to_deg,direction,couch_from_deg,couch_to_deg,collimator_deg,fitted\n"


def read(folder: Path, content: str | bytes) -> tuple[PlanField, ...]:
    path = folder / "fields.csv"
    path.write_bytes(content if isinstance(content, bytes) else content.encode())
    return read_field_rows(path)


def fault_of(folder: Path, content: str | bytes) -> str:
    with pytest.raises(BadInput) as caught:
        read(folder, content)
    assert all(fault.file.endswith("fields.csv") and fault.found and fault.allowed for fault in caught.value.faults)
    return str(caught.value)


@pytest.mark.parametrize(
    ("row", "points"),
    [
        ("a,0,,,,,,", ((0.0, 0.0),)),
        ("a,-90,-90,none,330,330,,", ((270.0, 330.0),)),
        ("a,181,179,CW,0,0,,", ((181.0, 0.0), (539.0, 0.0))),
        ("a,179,181,cc,0,,,", ((179.0, 0.0), (-179.0, 0.0))),
        ("a,180,180,CW,,,,", ((180.0, 0.0), (540.0, 0.0))),
        ("a,30,,,20,340,,", ((30.0, 20.0), (30.0, -20.0))),
        ("a,0,90,CW,80,-80,,", ((0.0, 80.0), (90.0, -80.0))),
    ],
)
def test_rows_are_paths(row: str, points: tuple[tuple[float, float], ...], tmp_path: Path) -> None:
    (field,) = read(tmp_path, HEADER + row)
    assert field.points_deg == points
    assert field.fitted is None
    assert field.collimator_deg == ()
    assert field.place == "row 2"


def test_a_list_with_all_that_it_can_hold(tmp_path: Path) -> None:
    text = HEADER + '\n"kV, turn",180,180,CW,0,0,90,"cone; kV source = extended"\r\nplain,0,,,,,,none\n'
    one, other = read(tmp_path, b"\xef\xbb\xbf" + text.encode())
    assert one.name == "kV, turn"
    assert one.collimator_deg == (90.0,)
    assert one.fitted == ("cone", "kV source = extended")
    assert one.place == "row 3"
    assert other.fitted == ("none",)


def test_columns_may_be_left_out_and_come_in_any_order(tmp_path: Path) -> None:
    (field,) = read(tmp_path, "gantry_from_deg,field\n90,a\n")
    assert field.points_deg == ((90.0, 0.0),)


@pytest.mark.parametrize(
    ("content", "words"),
    [
        (HEADER + ",0,,,,,,\n", ("row 2, field", "nothing")),
        (HEADER + "a,,,,,,,\n", ("row 2, gantry_from_deg", "nothing")),
        (HEADER + "a,wide,,,,,,\n", ("row 2, gantry_from_deg", "'wide'")),
        (HEADER + 'a,"1,5",,,,,,\n', ("row 2, gantry_from_deg", "'1,5'", "decimal point")),
        (HEADER + "a,nan,,,,,,\n", ("row 2, gantry_from_deg", "'nan'")),
        (HEADER + "a,1e9,,,,,,\n", ("row 2, gantry_from_deg",)),
        (HEADER + "a,0,90,,,,,\n", ("row 2, direction", "'CW' or 'CC'")),
        (HEADER + "a,0,90,left,,,,\n", ("row 2, direction", "'left'")),
        (HEADER + "a,0,,CW,,,,\n", ("row 2, gantry_to_deg",)),
        (HEADER + "a,0,,,0,180,,\n", ("row 2, couch_to_deg", "two rows")),
        (HEADER + "a,0,,,,,,\nb,x,,,,,,\na,0,,,,,,\n", ("row 3", "row 4, field", "as in row 2")),
        (HEADER + "a,0,,,,,,,,,extra\n", ("row 2", "11 cells")),
        (HEADER, ("no fields",)),
        ("feild,gantry_from_deg\na,0\n", ("'feild'", "did you mean 'field'")),
        ("field\na\n", ("'gantry_from_deg' 0 times",)),
        ("field,field,gantry_from_deg\na,b,0\n", ("'field' 2 times",)),
        ("\n\n", ("no rows",)),
        (b"\xff\xfe\x00a", ("no text", "UTF-8")),
        (HEADER + 'a,"0\n', ("comma-separated",)),
        ("field;gantry_from_deg\na;0\n", ("row 1", "semicolons", "commas")),
        ("field\tgantry_from_deg\na\t0\n", ("tabs", "commas")),
        (HEADER + "a,1_0,,,,,,\n", ("row 2, gantry_from_deg", "'1_0'")),
        (HEADER + "a,0,90,CCW,,,,\n", ("row 2, direction", "did you mean 'CC'?")),
    ],
)
def test_faults_are_told_with_row_and_column(content: str | bytes, words: tuple[str, ...], tmp_path: Path) -> None:
    told = fault_of(tmp_path, content)
    assert all(word in told for word in words)


def test_huge_lists_are_refused(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    rows = "".join(f"f{k},0,,,,,,\n" for k in range(4))
    monkeypatch.setattr(fields_csv, "MOST_FIELDS", 3)
    assert "more than 3 fields" in fault_of(tmp_path, HEADER + rows)
    assert "200 entries" in fault_of(tmp_path, HEADER + f"a,0,,,,,,{'c;' * 199}c\n")
    assert "1001 characters" in fault_of(tmp_path, HEADER + f"{'n' * 1001},0,,,,,,\n")
    assert len(fault_of(tmp_path, HEADER + "a,x,,,,,,\n" * 5000).splitlines()) == 20
    monkeypatch.setattr(fields_csv, "LARGEST_FILE_BYTES", 50)
    assert "bytes" in fault_of(tmp_path, HEADER + rows)
