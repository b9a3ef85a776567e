"""Where the tables of a TOML text stand, so that what is added or taken out leaves everybody's comments in their place.

For texts that a TOML reader has accepted already.
"""

import re
import tomllib
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Final

_TOKEN: Final = re.compile(
    r'"""(?:\\.|[^\\])*?"{3,5}' + r"|'''.*?'{3,5}" + r'|"(?:\\.|[^"\\\n])*"' + r"|'[^'\n]*'|#[^\n]*|[\[\]{}]|\n",
    re.DOTALL,
)


@dataclass(frozen=True)
class Block:
    """A table with its header, or the keys before the first header, whose `path` is ().

    Positions in the text: `start` of the comments right above the header, `body` of the first line after the header,
    `end` after the last of its keys and the comments that follow without a blank line.
    """

    path: tuple[str, ...]
    is_array: bool
    start: int
    body: int
    end: int


def blocks(text: str) -> list[Block]:
    """Return the tables in the order of the text."""
    found: list[Block] = []
    path: tuple[str, ...] = ()
    is_array, start, body, end, comments = False, 0, 0, 0, -1
    for kind, first, last in _statements(text):
        if kind == "header":
            found.append(Block(path, is_array, start, body, end))
            path, is_array = _path_of(text[first:last])
            start = first if comments < 0 else comments
            body = end = last
            comments = -1
        elif kind == "comment":
            comments = first if comments < 0 else comments
        elif kind == "blank":
            # Comments that touch what stands above them belong to it, unless a header follows at once.
            end = first if comments == end else end
            comments = -1
        else:
            end, comments = last, -1
    found.append(Block(path, is_array, start, body, len(text) if comments == end else end))
    return found


def items_of(text: str, path: tuple[str, ...]) -> list[tuple[int, int, Block]]:
    """Return start, end and block of each [[path]] in the order of the text, the tables below it within."""
    every = blocks(text)
    found = []
    for i, block in enumerate(every):
        if block.path == path and block.is_array:
            end = block.end
            for below in every[i + 1 :]:
                if len(below.path) <= len(path) or below.path[: len(path)] != path:
                    break
                end = below.end
            found.append((block.start, end, block))
    return found


def without(text: str, start: int, end: int) -> str:
    """Return the text without a table and the blank lines that follow it."""
    while end < len(text) and text[end] in " \t\n" and not text[end : text.find("\n", end) + 1].strip():
        end = text.find("\n", end) + 1 or len(text)
    return text[:start] + text[end:]


def with_block(text: str, at: int, lines: str) -> str:
    """Return the text with a table put in after position `at`, the end of another table, blank lines between."""
    before = text[:at] if text[:at].endswith("\n") or not text[:at] else text[:at] + "\n"
    return f"{before}\n{lines}{text[at:]}"


def with_line(text: str, block: Block, line: str) -> str:
    """Return the text with a key put in as the last of a table, indented like the one before."""
    at = _last_key(text, block)
    before = text[:at] if text[:at].endswith("\n") or not text[:at] else text[:at] + "\n"
    return f"{before}{_indent_at(text, block)}{line}\n{text[at:]}"


def _last_key(text: str, block: Block) -> int:
    """Return the end of the last key of a table, or of its header where it has none."""
    ends = [last for kind, first, last in _statements(text) if kind == "key" and block.body <= first < block.end]
    return ends[-1] if ends else block.body


def _indent_at(text: str, block: Block) -> str:
    starts = [first for kind, first, _ in _statements(text) if kind == "key" and block.body <= first < block.end]
    line = text[starts[-1] :] if starts else ""
    return line[: len(line) - len(line.lstrip(" \t"))]


def _statements(text: str) -> Iterator[tuple[str, int, int]]:
    """Yield kind, start and end, line break included, of each blank or comment line, header, and key with its value."""
    at = 0
    while at < len(text):
        line_end = text.find("\n", at) + 1 or len(text)
        line = text[at:line_end].strip()
        if not line:
            kind, end = "blank", line_end
        elif line.startswith("#"):
            kind, end = "comment", line_end
        elif line.startswith("["):
            kind, end = "header", line_end
        else:
            kind, end = "key", _value_end(text, at)
        yield kind, at, end
        at = end


def _value_end(text: str, at: int) -> int:
    """Return where the statement that starts at `at` ends: at a line break outside of strings and brackets."""
    depth = 0
    for token in _TOKEN.finditer(text, at):
        what = token.group()
        if what in "[{":
            depth += 1
        elif what in "]}":
            depth -= 1
        elif what == "\n" and depth == 0:
            return token.end()
    return len(text)


def _path_of(header: str) -> tuple[tuple[str, ...], bool]:
    inner: object = tomllib.loads(header)
    path: list[str] = []
    while isinstance(inner, dict) and inner:
        name, inner = next(iter(inner.items()))
        path.append(name)
    return tuple(path), isinstance(inner, list)
