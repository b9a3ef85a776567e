"""The set-up files that were open last, in a small file of the user's."""

import json
from collections.abc import Sequence
from pathlib import Path
from typing import Final

import platformdirs

from app.files.atomic import write_atomically
from app.files.input_file import checked_file
from geometry.errors import BadInput

MOST_RECENT: Final = 10
_NAME: Final = "recent.json"
_LARGEST_BYTES: Final = 200_000


def recent_files(folder: Path | None = None) -> tuple[Path, ...]:
    """Return the files that were open last and are still there, the latest first. `folder` is the user's unless given.

    A list that cannot be read counts as empty.
    """
    try:
        content = json.loads(checked_file(_file(folder), _LARGEST_BYTES).read_bytes().decode())
    except (BadInput, OSError, ValueError, RecursionError):
        return ()
    names = content.get("files") if isinstance(content, dict) else None
    paths = [Path(name) for name in names if isinstance(name, str)] if isinstance(names, list) else []
    return tuple(path for path in paths[: 10 * MOST_RECENT] if _is_there(path))[:MOST_RECENT]


def remember_file(path: Path, folder: Path | None = None) -> tuple[Path, ...]:
    """Put a file first in the list and return the list. A list that cannot be written is no reason to stop."""
    path = Path(path).absolute()
    return _write([path, *(other for other in recent_files(folder) if other != path)], folder)


def forget_files(folder: Path | None = None) -> None:
    """Empty the list."""
    _write([], folder)


def _write(paths: Sequence[Path], folder: Path | None) -> tuple[Path, ...]:
    kept = tuple(paths[:MOST_RECENT])
    content = json.dumps({"files": [str(path) for path in kept]}, indent=1).encode()
    file = _file(folder)
    try:
        file.parent.mkdir(parents=True, exist_ok=True)
        write_atomically(file, lambda stream: stream.write(content))
    except (BadInput, OSError):
        pass
    return kept


def _file(folder: Path | None) -> Path:
    return (folder or Path(platformdirs.user_config_path("wideberth", appauthor=False))) / _NAME


def _is_there(path: Path) -> bool:
    try:
        return path.is_absolute() and path.is_file()
    except (OSError, ValueError):
        return False
