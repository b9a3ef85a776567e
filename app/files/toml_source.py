"""TOML files as plain values, with limits that hold before anything in them is trusted."""

import re
import tomllib
from pathlib import Path
from typing import Final

from app.files.input_file import bad, checked_file
from app.files.wording import described

LARGEST_FILE_BYTES: Final = 2_000_000

# tomllib takes time that grows with the square of a key's depth, which a hostile file could turn into hours.
_DEEP_KEY: Final = re.compile(r"""(?<![\w"'-])(?:(?:[\w-]++|"[^"\n]*+"|'[^'\n]*+')[ \t]*+\.[ \t]*+){17}""")
_POSITION: Final = re.compile(r"\s*\(at (?P<where>[^()]*)\)$")


def parsed_toml(path: Path, newest_format: int) -> dict[str, object]:
    """Return the values of a TOML file whose `format` is one that this version reads.

    Raises BadInput, with the line for an error of syntax, and at once for a format that is newer than
    `newest_format`: its other keys may mean something else by then.
    """
    try:
        values: dict[str, object] = tomllib.loads(_text(path))
    except tomllib.TOMLDecodeError as error:
        message = str(error)
        position = _POSITION.search(message)
        place = position["where"] if position else ""
        raise bad(path, place, _POSITION.sub("", message), "TOML 1.0") from error
    except RecursionError as error:
        raise bad(path, "", "lists or tables nested too deep", "a few levels") from error
    except ValueError as error:
        raise bad(path, "", f"a value that cannot be read ({str(error)[:100]})", "TOML 1.0") from error
    _check_format(path, values, newest_format)
    return values


def _text(path: Path) -> str:
    """Return the text of a file that is not too large."""
    try:
        content = checked_file(path, LARGEST_FILE_BYTES).read_bytes()
    except OSError as error:
        raise bad(path, "", f"unreadable ({error})", "a file that can be read") from error
    try:
        text = content.decode("utf-8-sig").replace("\r\n", "\n")
    except UnicodeDecodeError as error:
        line = content[: error.start].count(b"\n") + 1
        raise bad(path, f"line {line}", "bytes that are not UTF-8 text", "UTF-8 text") from error
    deep = _DEEP_KEY.search(text)
    if deep:
        line = text.count("\n", 0, deep.start()) + 1
        raise bad(path, f"line {line}", "a key of more than 16 levels", "a few levels")
    return text


def _check_format(path: Path, values: dict[str, object], newest: int) -> None:
    """Raise BadInput unless the format number is one that is read here."""
    allowed = str(newest) if newest == 1 else f"1 to {newest}"
    if "format" not in values:
        raise bad(path, "format", "nothing", allowed)
    number = values["format"]
    if isinstance(number, bool) or not isinstance(number, int) or number < 1:
        raise bad(path, "format", described(number), allowed)
    if number > newest:
        raise bad(path, "format", f"format {described(number)}, written by a newer version", allowed)
