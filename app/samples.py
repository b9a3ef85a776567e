"""The sample rooms that come with the program: which there are, in words, without building any of them."""

import sys
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

import app
from app.files.toml_source import parsed_toml
from geometry.errors import BadInput

_FOLDER = "sample_rooms"
_FORMAT = 1


@dataclass(frozen=True)
class Sample:
    """A set-up file with what it says of itself."""

    path: Path
    name: str
    notes: str


@dataclass(frozen=True)
class SampleRoom:
    """A room file with the set-ups beside it."""

    path: Path
    name: str
    notes: str
    setups: tuple[Sample, ...]


def samples_folder() -> Path | None:
    """Return where the sample rooms are: beside the source, with the installation, or in the folder one works in."""
    places = (
        Path(app.__file__).resolve().parents[1] / _FOLDER,
        Path(sys.prefix) / "share" / "wideberth" / _FOLDER,
        Path.cwd() / _FOLDER,
    )
    return next((place for place in places if place.is_dir()), None)


def sample_rooms(folder: Path) -> tuple[SampleRoom, ...]:
    """Return the rooms of a folder's subfolders, those with most to see first; what cannot be read is left out."""
    return tuple(sorted(_rooms(folder), key=lambda room: (-len(room.setups), room.name)))


def _rooms(folder: Path) -> Iterator[SampleRoom]:
    for path in folder.glob("*/*.room.toml"):
        room = _sample(path)
        if room is not None:
            setups = (_sample(beside) for beside in sorted(path.parent.glob("*.setup.toml")))
            yield SampleRoom(path, room.name, room.notes, tuple(setup for setup in setups if setup is not None))


def _sample(path: Path) -> Sample | None:
    try:
        values = parsed_toml(path, _FORMAT)
    except BadInput:
        return None
    name, notes = values.get("name"), values.get("notes")
    return Sample(
        path,
        name if isinstance(name, str) else path.name,
        " ".join(notes.split()) if isinstance(notes, str) else "",
    )
