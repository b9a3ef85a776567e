import tomllib
from itertools import pairwise
from pathlib import Path

import pytest

from app.saving.toml_edits import with_item, with_value, without_item, without_value
from app.saving.toml_layout import blocks

SAMPLES = sorted(Path("sample_rooms").glob("*/*.toml"))

# Brackets, quotes and signs of comments where they mean nothing.
TRICKY = '''\
a = """
[no.header]
# no comment
\\""" """ # a comment
b = [ # another
  "]", ']',
  { c = "#" },
]
'd # e' = \'\'\'
[x]\'\'\'\'

# of f
[f."g.h"] # header
i = "\\"#" # last
# of i

# alone

# of j
[[j]]
k = 1
[j.l]
m = 2
[[j]]'''


def told(text: str) -> list[tuple[tuple[str, ...], bool, str]]:
    """Return path, kind and text of each block."""
    return [(block.path, block.is_array, text[block.start : block.end]) for block in blocks(text)]


def test_tables_are_found_where_they_stand() -> None:
    assert tomllib.loads(TRICKY)["f"] == {"g.h": {"i": '"#'}}
    found = told(TRICKY)
    assert [path for path, _, _ in found] == [(), ("f", "g.h"), ("j",), ("j", "l"), ("j",)]
    assert [is_array for _, is_array, _ in found] == [False, False, True, False, True]
    assert found[0][2].endswith("[x]''''\n")
    assert found[1][2] == '# of f\n[f."g.h"] # header\ni = "\\"#" # last\n# of i\n'
    assert [text for _, _, text in found[2:]] == ["# of j\n[[j]]\nk = 1\n", "[j.l]\nm = 2\n", "[[j]]"]


@pytest.mark.parametrize("path", SAMPLES, ids=lambda path: path.name)
def test_tables_of_the_samples_are_those_that_a_reader_finds(path: Path) -> None:
    text = path.read_text(encoding="utf-8")
    found = blocks(text)
    content = tomllib.loads(text)
    for key, value in content.items():
        if isinstance(value, list) and isinstance(value[0], dict):
            assert sum(block.path == (key,) and block.is_array for block in found) == len(value)
    for block, after in pairwise(found):
        assert block.start <= block.body <= block.end <= after.start
        between = text[block.end : after.start].splitlines()
        assert all(not line or line.startswith("#") for line in between)


def test_values_are_set_and_taken_away() -> None:
    text = with_value(TRICKY, ("b",), 2)
    text = with_value(text, ("f", "g.h", "n"), [1, 2.5, "x"])
    text = with_value(text, ("j", 0, "l", "m"), "two\nlines")
    text = with_value(text, ("j", 1, "o"), value=True)
    text = with_value(text, ("p", "q"), 3, ("f", "p", "j"))
    text = without_value(text, ("d # e",))
    content = tomllib.loads(text)
    assert content["b"] == 2
    assert content["f"] == {"g.h": {"i": '"#', "n": [1, 2.5, "x"]}}
    assert content["j"] == [{"k": 1, "l": {"m": "two\nlines"}}, {"o": True}]
    assert content["p"] == {"q": 3}
    assert "d # e" not in content
    assert text.index("# of i") < text.index("[p]") < text.index("# alone")
    assert without_value(text, ("r", "s")) == text


def test_items_are_put_in_and_taken_out() -> None:
    text = without_item(TRICKY, ("j",), 0)
    assert tomllib.loads(text)["j"] == [{}]
    assert "# of j" not in text
    assert "# alone" in text
    text = with_item(text, ("j",), 0, {"k": 7})
    text = with_item(text, ("j",), 2, {"k": 8, "t": {"u": [1, 2]}})
    assert tomllib.loads(text)["j"] == [{"k": 7}, {}, {"k": 8, "t": {"u": [1, 2]}}]
    assert tomllib.loads(with_item("a = 1", ("b",), 0, {"c": 1})) == {"a": 1, "b": [{"c": 1}]}
    inline = with_item("b = [ { c = 1 }, { c = 3 } ]", ("b",), 1, {"c": 2})
    assert tomllib.loads(without_item(inline, ("b",), 0)) == {"b": [{"c": 2}, {"c": 3}]}
    assert tomllib.loads(with_item("b = { c = 1 }", ("b", "d"), 0, {"e": 2})) == {"b": {"c": 1, "d": [{"e": 2}]}}
