"""Unsaved work in a side file, and its recovery after a crash.

A document with a file has its side file beside it, one that was never saved in the user's data folder. What a side file
holds is not believed before the real reader has read it.
"""

import contextlib
import datetime
import json
import os
import platform
import secrets
from collections.abc import Mapping
from dataclasses import asdict, dataclass
from pathlib import Path
from typing import Any, Final

import platformdirs
import psutil

from app.document.document import Document, Source
from app.files.atomic import write_atomically
from app.files.input_file import checked_file
from app.files.setup_limits import EDGE_DEG, STEP_DEG, TOLERANCE_DEG
from app.files.setup_references import names_dicom, setup_of_text
from app.files.toml_source import LARGEST_FILE_BYTES
from app.saving.setup_text import setup_text
from geometry.assess import Options
from geometry.errors import BadInput, GeometryError

SUFFIX: Final = ".autosave"
_FORMAT: Final = 1
# JSON escapes what TOML need not.
_LARGEST_BYTES: Final = 7 * LARGEST_FILE_BYTES
_UNSAVED: Final = "unsaved-"
_OPTION_LIMITS: Final = {
    "gantry_step_deg": STEP_DEG,
    "couch_step_deg": STEP_DEG,
    "edge_deg": EDGE_DEG,
    "gantry_tolerance_deg": TOLERANCE_DEG,
    "couch_tolerance_deg": TOLERANCE_DEG,
}
_ERRORS: Final = (BadInput, GeometryError, OSError, ValueError, TypeError, KeyError, RecursionError)


@dataclass(frozen=True)
class Recovery:
    """Unsaved work that a side file holds: of which file (None: never saved), under what name, and from when."""

    side_file: Path
    path: Path | None
    name: str
    saved_at: datetime.datetime
    document: Document


@dataclass(frozen=True)
class Pending:
    """What was found of unsaved work, and a sentence about each side file that could not be used."""

    recoveries: tuple[Recovery, ...] = ()
    messages: tuple[str, ...] = ()


class Autosave:
    """The side file of one open document. `folder` is for documents that were never saved, the user's unless given."""

    def __init__(self, folder: Path | None = None) -> None:
        self._folder = folder or data_folder()
        self._unsaved = f"{_UNSAVED}{secrets.token_hex(8)}.setup.toml{SUFFIX}"
        self._written: Path | None = None

    def write(self, document: Document) -> Path:
        """Write the document's side file and return its path; one of another path goes. Raises BadInput."""
        target = side_file(document.path) if document.path is not None else self._folder / self._unsaved
        if document.path is None:
            with contextlib.suppress(OSError):
                self._folder.mkdir(parents=True, exist_ok=True)
        content = json.dumps(_content(document), indent=1).encode()
        write_atomically(target, lambda stream: stream.write(content))
        if self._written not in (None, target):
            self.remove()
        self._written = target
        return target

    def adopt(self, recovery: Recovery) -> None:
        """Take over the side file that a document was recovered from: it goes with the next `remove`."""
        self.remove()
        self._written = recovery.side_file
        if recovery.path is None:
            self._unsaved = recovery.side_file.name

    def remove(self) -> None:
        """Remove the side file, after saving or closing. One that cannot be removed stays."""
        if self._written is not None:
            discard(self._written)
        self._written = None


def side_file(path: Path) -> Path:
    """Return the side file of a set-up file."""
    return path.parent / f".{path.name}{SUFFIX}"


def data_folder() -> Path:
    """Return the user's folder for side files of documents that were never saved."""
    return Path(platformdirs.user_data_path("wideberth", appauthor=False), "unsaved")


def discard(file: Path) -> None:
    """Remove a side file that nobody wants. One that cannot be removed stays."""
    with contextlib.suppress(OSError):
        file.unlink(missing_ok=True)


def pending_recovery(path: Path | None, folder: Path | None = None) -> Pending:
    """Return unsaved work of a set-up file, or with None of documents that were never saved, the latest first.

    A side file that is damaged, or holds no set-up, is told in a message and left alone. Never raises for what a file
    holds.
    """
    if path is not None:
        path = Path(path).absolute()
        candidates = [side_file(path)]
    else:
        try:
            candidates = sorted((folder or data_folder()).glob(f"{_UNSAVED}*{SUFFIX}"))
        except OSError:
            candidates = []
    recoveries, messages = [], []
    for candidate in candidates:
        if not os.path.lexists(candidate):
            continue
        try:
            recovery = _recovery(candidate, path)
        except _ERRORS as error:
            reason = " ".join(str(error).split())[:300]
            messages.append(f"Unsaved work in {candidate} cannot be read and is left alone: {reason}")
        else:
            if recovery is None:
                messages.append(
                    f"Another window is at work on {candidate.name.removesuffix(SUFFIX).removeprefix('.')}."
                )
            else:
                recoveries.append(recovery)
    recoveries.sort(key=lambda recovery: recovery.saved_at, reverse=True)
    return Pending(tuple(recoveries), tuple(messages))


def _content(document: Document) -> dict[str, object]:
    source = document.source
    return {
        "format": _FORMAT,
        "path": None if document.path is None else str(document.path),
        "folder": str(source.folder.absolute()),
        "name": document.setup.name,
        "saved_at": datetime.datetime.now(datetime.UTC).isoformat(timespec="seconds"),
        "stamp": document.stamp,
        "newline": source.newline,
        "marked": source.marked,
        "options": asdict(document.options),
        "owner": _this_process(),
        "text": setup_text(document),
    }


def _this_process() -> dict[str, object]:
    """Return by what a process is known again: numbers come back, start times with them do not."""
    return {"host": platform.node(), "id": os.getpid(), "since": round(psutil.Process().create_time(), 1)}


def _is_at_work(owner: object) -> bool:
    """Tell whether the process that wrote a side file is still running on this computer, and is not this one."""
    if not isinstance(owner, dict) or owner.get("host") != platform.node() or owner == _this_process():
        return False
    number = owner.get("id")
    if isinstance(number, bool) or not isinstance(number, int):
        return False
    try:
        return bool(round(psutil.Process(number).create_time(), 1) == owner.get("since"))
    except (psutil.Error, ValueError, OverflowError):
        return False


def _recovery(file: Path, path: Path | None) -> Recovery | None:
    """Return what a side file holds, None while another window is at work on it."""
    content = json.loads(checked_file(file, _LARGEST_BYTES).read_bytes().decode())
    if not isinstance(content, dict) or content.get("format") != _FORMAT:
        raise ValueError(f"no side file of format {_FORMAT}")
    if _is_at_work(content.get("owner")):
        return None
    text, stamp = _kept(content, "text", str), content.get("stamp")
    # Beside its set-up the side file counts for that one, wherever the folder was moved to since.
    folder = Path(_kept(content, "folder", str))
    if path is not None and content.get("path") is not None and folder == Path(str(content["path"])).parent:
        folder = path.parent
    setup = setup_of_text(text, folder)
    newline = "\r\n" if content.get("newline") == "\r\n" else "\n"
    source = Source(text, folder, setup, newline, content.get("marked") is True, names_dicom(text))
    document = Document(setup, path, source, _options(content), stamp if isinstance(stamp, str) else None)
    saved_at = datetime.datetime.fromisoformat(_kept(content, "saved_at", str))
    if saved_at.tzinfo is None:
        raise ValueError("a time without its zone")
    return Recovery(file, path, setup.name, saved_at, document)


def _options(content: Mapping[str, Any]) -> Options:
    """Return the options, a default in place of each that is none or out of range."""
    given = content.get("options")
    values = given if isinstance(given, dict) else {}
    chosen = {}
    for name, limits in _OPTION_LIMITS.items():
        value = values.get(name)
        if isinstance(value, int | float) and not isinstance(value, bool) and limits.hold(value):
            chosen[name] = float(value)
    return Options(**chosen)


def _kept(content: Mapping[str, Any], key: str, kind: type[str]) -> str:
    value = content.get(key)
    if not isinstance(value, kind):
        raise ValueError(f"no {key}")  # noqa: TRY004 - a fault of a file, not of a caller
    return value
