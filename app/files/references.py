"""Paths that one file names another by."""

import unicodedata
from pathlib import Path

from app.files.wording import did_you_mean, printable


class NoSuchReference(Exception):
    """A path that leads to no file: `found` and `allowed` in words."""

    def __init__(self, found: str, allowed: str) -> None:
        self.found = found
        self.allowed = allowed
        super().__init__(found)


def referenced_file(folder: Path, text: str) -> Path:
    """Return the file that `text` names, relative to `folder`.

    Upper and lower case must be as on disk on every system, so that a folder that works on one works on all.
    Raises NoSuchReference.
    """
    if "\\" in text:
        raise NoSuchReference(f"'{printable(text)}'", "a path with / between folders")
    path = folder / text
    try:
        if not path.exists():
            raise NoSuchReference(f"'{printable(text)}', no such file", _nearest(path))
        if not path.is_file():
            raise NoSuchReference(f"'{printable(text)}', not a file", "a file")
        for entry in _steps_within(folder, text):
            _check_case(entry, text)
    except (OSError, ValueError) as error:
        raise NoSuchReference(f"'{printable(text)}', unreadable ({error})", "a file that can be read") from error
    return path


def _steps_within(folder: Path, text: str) -> list[Path]:
    """Return the path after each named step of a relative `text`; nothing for an absolute one."""
    relative = Path(text)
    if relative.is_absolute():
        return []
    steps = []
    path = folder
    for part in relative.parts:
        path = path / part
        if part != "..":
            steps.append(path)
    return steps


def _check_case(path: Path, text: str) -> None:
    """Raise NoSuchReference where the folder lists the name in another case only."""
    name = _composed(path.name)
    names = [_composed(entry.name) for entry in path.parent.iterdir()]
    if name in names:
        return
    for other in names:
        if other.casefold() == name.casefold():
            raise NoSuchReference(f"'{printable(text)}'", f"'{printable(other)}' as on disk, case included")


def _nearest(path: Path) -> str:
    """Return what the missing path may have meant."""
    folder = path.parent
    if not folder.is_dir():
        return f"an existing file; the folder {printable(str(folder))} does not exist either"
    of_kind = sorted(entry.name for entry in folder.iterdir() if entry.suffix.casefold() == path.suffix.casefold())
    return did_you_mean(path.name, of_kind) if of_kind else "an existing file"


def _composed(name: str) -> str:
    """Return the name with accents composed: some file systems list them taken apart."""
    return unicodedata.normalize("NFC", name)
