"""The document of the window: a set-up, where it came from, and how it is looked at. Frozen; edits make another one."""

import hashlib
from dataclasses import dataclass, field
from pathlib import Path
from typing import Final

from app.files.room_file import read_room
from app.files.setup_file import SETUP_FORMAT, read_setup
from app.files.setup_limits import FROM_HEAD_END_MM, HEIGHT_MM, LATERAL_MM
from app.files.setup_references import names_dicom, setup_of_text, toml_number, toml_string
from geometry.assess import Options
from geometry.errors import BadInput, Fault
from geometry.machine import Axis, Room
from geometry.scene import build_scene
from geometry.setup import Setup

_MOST_READS: Final = 3
_NEW_NAME: Final = "New set-up"
_NEW_REQUIRED_MM: Final = 30
_NEW_REASON: Final = "a starting point of the program, to be replaced by your department's own rule"
_NEW_FROM_HEAD_END_MM: Final = 50.0
_MEAN_STATURE_MM: Final = 1700


@dataclass(frozen=True)
class Source:
    """A set-up as text, so that saving can change what changed and leave the rest as somebody wrote it.

    `text` has line feeds between its lines; `newline` is what the file has, `marked` whether it starts with a byte
    order mark. `folder` is what the text's paths are relative to, `setup` what the text says. `names_dicom`: it names
    DICOM files, which may state the patient position.
    """

    text: str
    folder: Path
    setup: Setup
    newline: str = "\n"
    marked: bool = False
    names_dicom: bool = False

    def encoded(self, text: str) -> bytes:
        """Return `text` as bytes in the way of the file that this source was read from."""
        return (b"\xef\xbb\xbf" if self.marked else b"") + text.replace("\n", self.newline).encode()


@dataclass(frozen=True)
class Document:
    """A set-up being worked on.

    `path` is None for one that was never saved. `stamp` is the hash of the file as it was last read or written here,
    None where there is none. `options` are not saved with the set-up.
    """

    setup: Setup
    path: Path | None
    source: Source
    options: Options = field(default_factory=Options)
    stamp: str | None = None

    @property
    def name(self) -> str:
        """The file's name, or the set-up's where there is no file yet."""
        return self.path.name if self.path is not None else self.setup.name


def open_document(path: Path) -> Document:
    """Return the set-up of a file. Raises BadInput with every fault of the file and of those that it names."""
    path = Path(path).absolute()
    for _ in range(_MOST_READS):
        before = _last_change(path)
        setup = read_setup(path)
        try:
            content = path.read_bytes()
        except OSError as error:
            raise _unreadable(path, f"unreadable ({error.strerror or error})") from error
        # Somebody may write the file between the two readings; text and set-up have to say the same.
        if before == _last_change(path):
            return Document(setup, path, source_of(content, path.parent, setup), stamp=stamp_of(content))
    raise _unreadable(path, "a file that changes while it is read")


def new_document(room_path: Path) -> Document:
    """Return a first set-up in a room: an average adult on the back, the isocentre in the head. Raises BadInput.

    The patient lies where the couch can bring the isocentre to, as far as a place on the table can do that.
    """
    room_path = Path(room_path).absolute()
    room = read_room(room_path)
    # Where the couch stands follows from where the patient lies, and the other way round.
    first = setup_of_text(_new_text(room, room_path, (_NEW_FROM_HEAD_END_MM, 0.0, 0.0)), room_path.parent)
    text = _new_text(room, room_path, _within_travel(first))
    setup = setup_of_text(text, room_path.parent)
    return Document(setup, None, Source(text, room_path.parent, setup))


def source_of(content: bytes, folder: Path, setup: Setup) -> Source:
    """Return a file's content, UTF-8 text that was read before, as a source."""
    raw = content.decode("utf-8-sig")
    text = raw.replace("\r\n", "\n")
    windows = raw.count("\r\n") * 2 > raw.count("\n")
    marked = content.startswith(b"\xef\xbb\xbf")
    return Source(text, folder, setup, "\r\n" if windows else "\n", marked, names_dicom(text))


def stamp_of(content: bytes) -> str:
    """Return a hash by which a file's content is known again."""
    return hashlib.sha256(content).hexdigest()


def _last_change(path: Path) -> tuple[int, int] | None:
    try:
        status = path.stat()
    except (OSError, ValueError):
        return None
    return status.st_mtime_ns, status.st_size


def _unreadable(path: Path, found: str) -> BadInput:
    return BadInput([Fault(str(path), "", found, "a file that can be read")])


def _new_text(room: Room, room_path: Path, place_mm: tuple[float, float, float]) -> str:
    """Return the text of a first set-up, the patient at (from the head end, lateral, height)."""
    from_head_end_mm, lateral_mm, height_mm = (toml_number(value) for value in place_mm)
    survey = "with_survey = true\n" if room.survey is not None else ""
    return f"""\
format = {SETUP_FORMAT}
name = {toml_string(_NEW_NAME)}
room = {toml_string(room_path.name)}

[patient]
position = "HFS"
source = "body"
stature_mm = {_MEAN_STATURE_MM}
build = "mean"

[table]
from_head_end_mm = {from_head_end_mm}
lateral_mm = {lateral_mm}
height_mm = {height_mm}

[isocentre]
landmark = "vertex"
head_mm = -100

[fitted]
collimator_deg = "any"

[required]
fixed_mm = {_NEW_REQUIRED_MM}
reason = {toml_string(_NEW_REASON)}
{survey}"""


def _within_travel(setup: Setup) -> tuple[float, float, float]:
    """Return the place on the table, mm, that brings the stages of a level couch into their travel where it can."""
    couch, pose = setup.room.couch, build_scene(setup).couch
    axes = (couch.lateral, couch.longitudinal, couch.vertical)
    lateral, longitudinal, vertical = (_missing_mm(axis, float(at)) for axis, at in zip(axes, pose.T_mm, strict=True))
    where = setup.on_table
    # T = -p: the table goes further in as the patient lies further down, and lower as the patient lies higher.
    wanted = (
        (where.from_head_end_mm + longitudinal, FROM_HEAD_END_MM),
        (where.lateral_mm - lateral, LATERAL_MM),
        (max(where.height_mm - vertical, 0.0), HEIGHT_MM),
    )
    from_head_end, across, up = (min(max(value, limits.low), limits.high) for value, limits in wanted)
    return from_head_end, across, up


def _missing_mm(axis: Axis, value: float) -> float:
    """Return what has to be added, a whole number where the travel leaves room for it, to come into the travel."""
    if axis.low <= value <= axis.high:
        return 0.0
    exact = (axis.low if value < axis.low else axis.high) - value
    rounded = float(-(-exact // 1) if exact > 0.0 else exact // 1)
    return rounded if axis.low <= value + rounded <= axis.high else exact
