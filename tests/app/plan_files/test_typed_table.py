from pathlib import Path

import pytest

from app.files.delimited import write_table
from app.plan_files.typed_table import LARGEST_FILE_BYTES, read_table
from geometry.errors import BadInput

COLUMNS = ("name", "value")


def file_with(tmp_path: Path, content: bytes) -> Path:
    path = tmp_path / "table.csv"
    path.write_bytes(content)
    return path


def test_rows_keep_their_number_and_blank_ones_are_passed_over(tmp_path: Path) -> None:
    path = file_with(tmp_path, b"\xef\xbb\xbfvalue,name\r\n\r\n 1 , a \r\n,\r\n2,b\r\n")
    assert read_table(path, COLUMNS, COLUMNS) == [(3, {"value": "1", "name": "a"}), (5, {"value": "2", "name": "b"})]


def test_what_was_made_harmless_for_spreadsheets_reads_back(tmp_path: Path) -> None:
    path = tmp_path / "table.csv"
    write_table(path, COLUMNS, [["=1+1", -2.5], ["'tis", None]])
    rows = read_table(path, COLUMNS, COLUMNS)
    assert [cells["name"] for _, cells in rows] == ["=1+1", "'tis"]
    assert rows[0][1]["value"] == "-2.5"


@pytest.mark.parametrize(
    ("content", "found"),
    [
        (b"", "an empty file"),
        (b"\n , \n", "no rows"),
        (b"name\na\n", "the column 'value' 0 times"),
        (b"name,value,name\n", "the column 'name' 2 times"),
        (b"name,vlaue\n", "the column 'vlaue'"),
        (b"name,value\na,1,2\n", "3 cells"),
        (b"\xff\xff", "content that is no text (UnicodeDecodeError)"),
        (b'name,value\n"a,1\n', "unexpected end of data"),
        (b"x" * (LARGEST_FILE_BYTES + 1), f"{LARGEST_FILE_BYTES + 1} bytes"),
    ],
)
def test_what_is_no_such_table_is_refused_in_words(tmp_path: Path, content: bytes, found: str) -> None:
    with pytest.raises(BadInput) as error:
        read_table(file_with(tmp_path, content), COLUMNS, COLUMNS)
    assert error.value.faults[0].found == found
