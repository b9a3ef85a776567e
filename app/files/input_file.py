"""Checks that any file has to pass before a library is trusted with it."""

import re
from pathlib import Path
from typing import Final

from geometry.errors import BadInput, Fault, GeometryError

_ALLOWED: Final = re.compile(r"; allowed(?: is| are|:) ")


def checked_file(path: Path | str, largest_bytes: int) -> Path:
    """Return `path` as a Path. Raises BadInput unless it is a file that is there, not empty and not too large."""
    try:
        file = Path(path)
        if not file.exists():
            raise bad(path, "", "no such file", "an existing file")
        if not file.is_file():
            raise bad(path, "", "not a file", "a file")
        size = file.stat().st_size
    except (OSError, ValueError) as error:
        raise bad(path, "", f"unreadable ({error})", "a file that can be read") from error
    if size == 0:
        raise bad(path, "", "an empty file", "a file with content")
    if size > largest_bytes:
        raise bad(path, "", f"{size} bytes", f"at most {largest_bytes} bytes")
    return file


def bad(path: Path | str, place: str, found: str, allowed: str) -> BadInput:
    """Return the error for one fault of a file."""
    return BadInput([Fault(str(path), place, found, allowed)])


def refused(path: Path | str, place: str, error: GeometryError) -> BadInput:
    """Return the error for a file whose solid cannot be built."""
    found, allowed = [*_ALLOWED.split(str(error), maxsplit=1), "what the message says"][:2]
    return bad(path, place, found, allowed)
