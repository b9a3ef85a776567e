"""Changing single values of a TOML text, leaving comments, order and layout of the rest as somebody wrote them.

Values are plain Python ones: str, int, float, bool, lists of them, and dicts for inline tables. A place is a path of
keys, with positions counted from 0 for the items of a list of tables: ("required", "component", 2, "sd_mm").
"""

from collections.abc import Mapping, Sequence
from typing import Any, Final

import tomlkit
from tomlkit.items import AoT, Array, InlineTable, Item

from app.files.setup_references import parsed, toml_number
from app.saving.toml_layout import blocks, items_of, with_block, with_line, without

Value = str | float | bool | list[Any] | Mapping[str, Any]
Place = tuple[str | int, ...]

_NOTHING: Final = object()


def with_value(text: str, place: Place, value: Value, order: Sequence[str] = ()) -> str:
    """Return the text with a value at a place, whose table may be missing: it then goes where `order` says."""
    *path, key = place
    content = parsed(text)
    table = _found(content, tuple(path))
    if table is _NOTHING:
        return _with_table(text, tuple(str(step) for step in path), {str(key): value}, order)
    if key not in table:
        block = next((b for b in blocks(text) if b.path == tuple(path) and not b.is_array), None)
        if block is None and len(path) > 1 and isinstance(path[-1], int):
            items = items_of(text, tuple(str(step) for step in path[:-1]))
            block = items[path[-1]][2] if items else None
        if block is not None:
            return with_line(text, block, _line(str(key), value))
    table[key] = _item(value)
    return tomlkit.dumps(content)


def without_value(text: str, place: Place) -> str:
    """Return the text without the key at a place, if it is there."""
    *path, key = place
    content = parsed(text)
    table = _found(content, tuple(path))
    if table is _NOTHING or key not in table:
        return text
    del table[key]
    return tomlkit.dumps(content)


def without_item(text: str, path: tuple[str, ...], index: int) -> str:
    """Return the text without an item of a list of tables, counted from 0."""
    content = parsed(text)
    found = _found(content, path)
    if isinstance(found, AoT):
        start, end, _ = items_of(text, path)[index]
        return without(text, start, end)
    del found[index]
    return tomlkit.dumps(content)


def with_item(text: str, path: tuple[str, ...], index: int, values: Mapping[str, Value]) -> str:
    """Return the text with one more item in a list of tables, at `index`, counted from 0."""
    content = parsed(text)
    found = _found(content, path)
    if isinstance(found, Array):
        found.insert(index, _item(values))
        return tomlkit.dumps(content)
    mother = _found(content, path[:-1])
    if isinstance(mother, InlineTable):
        mother[path[-1]] = _item([values])
        return tomlkit.dumps(content)
    lines = f"[[{_dotted(path)}]]\n" + "".join(f"{_line(key, value)}\n" for key, value in values.items())
    items = items_of(text, path)
    if index < len(items):
        start = items[index][0]
        return f"{text[:start]}{lines}\n{text[start:]}"
    if items:
        return with_block(text, items[-1][1], lines)
    # A list at the top goes to the end of the file, one in a table behind the last of that table.
    above = [block.end for block in blocks(text) if block.path[: len(path) - 1] == path[:-1]]
    return with_block(text, above[-1] if len(path) > 1 and above else len(text), lines)


def _with_table(text: str, path: tuple[str, ...], values: Mapping[str, Value], order: Sequence[str]) -> str:
    content = parsed(text)
    if len(path) > 1 and _found(content, path[:-1]) is not _NOTHING:
        return with_value(text, path, values, order)
    before = list(order[: order.index(path[0])]) if path[0] in order else []
    ends = [block.end for block in blocks(text) if block.path and block.path[0] in before]
    lines = f"[{_dotted(path)}]\n" + "".join(f"{_line(key, value)}\n" for key, value in values.items())
    return with_block(text, ends[-1] if ends else len(text), lines)


def _found(content: Any, path: Place) -> Any:  # noqa: ANN401 - whatever lies there
    for step in path:
        try:
            content = content[step]
        except (KeyError, IndexError, TypeError):
            return _NOTHING
    return content


def _item(value: object) -> Item:
    return tomlkit.value(_text(value))


def _text(value: object) -> str:
    """Return a value as people write it: whole numbers whole, notes over several lines, blanks inside of braces."""
    if isinstance(value, str):
        return str(tomlkit.string(value, multiline="\n" in value).as_string())
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, int | float):
        return toml_number(float(value))
    if isinstance(value, Mapping):
        inside = ", ".join(f"{_dotted((key,))} = {_text(inner)}" for key, inner in value.items())
        return f"{{ {inside} }}" if inside else "{}"
    if isinstance(value, list):
        return "[" + ", ".join(_text(inner) for inner in value) + "]"
    raise TypeError(f"a {type(value).__name__} has no place in a set-up file")


def _line(key: str, value: Value) -> str:
    return f"{_dotted((key,))} = {_text(value)}"


def _dotted(path: tuple[str, ...]) -> str:
    return ".".join(tomlkit.key(step).as_string() for step in path)
