"""The paths that a set-up's text names, and reading such a text where there is no file of it."""

import os
import tempfile
import tomllib
from collections.abc import Iterator
from pathlib import Path
from typing import Any, Final

import tomlkit
from tomlkit.exceptions import TOMLKitError

from app.files.setup_file import read_setup
from geometry.errors import BadInput, Fault, GeometryError
from geometry.setup import Setup

UNNAMED: Final = "the set-up"


def toml_string(text: str) -> str:
    """Return text as TOML writes it, quotes included."""
    return str(tomlkit.string(text).as_string())


def toml_number(value: float) -> str:
    """Return a number as people write it: whole where it is, else every digit that it takes to read the same again."""
    return str(int(value)) if value.is_integer() else repr(value)


def parsed(text: str) -> tomlkit.TOMLDocument:
    """Return a text with its comments and layout. GeometryError where it is no TOML."""
    try:
        return tomlkit.parse(text)
    except (TOMLKitError, ValueError, RecursionError) as error:
        raise GeometryError(f"text of the set-up: {error}; allowed: TOML 1.0") from error


def names_dicom(text: str) -> bool:
    """Tell whether a set-up's text names a structure set or a plan, which may state the patient position."""
    patient = tomllib.loads(text).get("patient")
    return isinstance(patient, dict) and (patient.get("source") == "structure set" or "plan" in patient)


def move_references(content: tomlkit.TOMLDocument, folder: Path, to: Path | None) -> None:
    """Rewrite the relative paths of a set-up in `folder` for a set-up in the folder `to`; None makes them absolute."""
    for table, key in _references(content):
        text = str(table[key])
        if Path(text).is_absolute():
            continue
        target = Path(folder, text)
        # Links among the folders would lead ".." astray; the file's own name stays as it is.
        target = Path(os.path.realpath(target.parent), target.name)
        table[key] = target.as_posix() if to is None else _relative(target, Path(os.path.realpath(to)))


def setup_of_text(text: str, folder: Path) -> Setup:
    """Return the set-up that a text says, its paths relative to `folder`, without a file of it.

    Raises BadInput as `read_setup` does.
    """
    try:
        content = parsed(text)
    except GeometryError as error:
        raise BadInput([Fault(UNNAMED, "", str(error), "TOML 1.0")]) from error
    move_references(content, folder, None)
    with tempfile.TemporaryDirectory(prefix="wideberth-") as scratch:
        path = Path(scratch, "text.setup.toml")
        path.write_text(tomlkit.dumps(content), encoding="utf-8", newline="\n")
        return read_as(path, UNNAMED)


def read_as(path: Path, name: str) -> Setup:
    """Return the set-up of a file that its faults call `name`."""
    try:
        return read_setup(path)
    except BadInput as error:
        faults = [Fault(name if f.file == str(path) else f.file, f.place, f.found, f.allowed) for f in error.faults]
        raise BadInput(faults) from error


def _relative(target: Path, folder: Path) -> str:
    try:
        return Path(os.path.relpath(target, folder)).as_posix()
    except ValueError:  # another drive
        return target.as_posix()


def _references(content: tomlkit.TOMLDocument) -> Iterator[tuple[Any, str]]:
    """Yield each table with a key of it that holds a path."""
    yield from _texts(content, "room")
    patient = content.get("patient")
    for key in ("file", "plan"):
        yield from _texts(patient, key)
    devices = content.get("device")
    for device in devices if isinstance(devices, list) else []:
        yield from _texts(device, "file")


def _texts(table: object, key: str) -> Iterator[tuple[Any, str]]:
    if isinstance(table, dict) and isinstance(table.get(key), str):
        yield table, key
