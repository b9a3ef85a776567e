import json
import os
import subprocess
import sys
from dataclasses import replace
from pathlib import Path

import psutil
import pytest

from app.document.device_edits import add_box
from app.document.document import Document, new_document, open_document
from app.document.edits import in_turn, set_value
from app.files.fingerprint import fingerprint
from app.saving.autosave import Autosave, Pending, discard, pending_recovery, side_file
from app.saving.setup_writer import ChangedOnDisk, save_setup
from tests.app.files.documents import ROOM_TEXT, SETUP_TEXT, written

EDIT = in_turn(
    set_value("isocentre.head_mm", -33.3),
    set_value("notes", "half done"),
    add_box("wedge", (1.0, 2.0, 3.0)),
    set_value("options.gantry_tolerance_deg", 0.5),
)


@pytest.fixture
def document(tmp_path: Path) -> Document:
    written(tmp_path / "test.room.toml", ROOM_TEXT)
    return open_document(written(tmp_path / "a.setup.toml", SETUP_TEXT))


@pytest.fixture
def path(document: Document) -> Path:
    assert document.path is not None
    return document.path


def written_side_file(document: Document, **changes: object) -> Path:
    """Write a side file with other values than those of the document."""
    file = Autosave().write(document)
    content = json.loads(file.read_text(encoding="utf-8"))
    file.write_text(json.dumps(content | changes), encoding="utf-8")
    return file


def ignored(pending: Pending, file: Path) -> str:
    """Return the one message about a side file that is not used, and is still there."""
    assert pending.recoveries == ()
    assert file.exists()
    (message,) = pending.messages
    assert str(file) in message
    assert "\n" not in message
    return message


def test_nothing_is_pending_without_a_side_file(path: Path, tmp_path: Path) -> None:
    assert pending_recovery(path) == Pending()
    assert pending_recovery(None, tmp_path / "none") == Pending()


def test_what_is_recovered_is_what_was_autosaved(document: Document, path: Path) -> None:
    edited = EDIT(document)
    file = Autosave().write(edited)
    assert file == path.parent / ".a.setup.toml.autosave"
    assert path.read_text(encoding="utf-8") == SETUP_TEXT
    (recovery,) = pending_recovery(path).recoveries
    recovered = recovery.document
    assert fingerprint(recovered.setup) == fingerprint(edited.setup)
    assert recovered.options == edited.options
    assert (recovered.path, recovered.stamp) == (path, document.stamp)
    assert recovery.saved_at.tzinfo is not None
    save_setup(recovered, path)
    assert fingerprint(open_document(path).setup) == fingerprint(edited.setup)


def test_comments_survive_the_crash(tmp_path: Path) -> None:
    written(tmp_path / "test.room.toml", ROOM_TEXT)
    text = SETUP_TEXT.replace("height_mm = 20", "height_mm = 20 # by eye").replace("\n", "\r\n")
    (tmp_path / "a.setup.toml").write_bytes(text.encode())
    Autosave().write(set_value("table.lateral_mm", 6.0)(open_document(tmp_path / "a.setup.toml")))
    (recovery,) = pending_recovery(tmp_path / "a.setup.toml").recoveries
    save_setup(recovery.document, tmp_path / "a.setup.toml")
    expected = text.replace("lateral_mm = 5", "lateral_mm = 6").encode()
    assert (tmp_path / "a.setup.toml").read_bytes() == expected


def test_work_on_a_file_that_somebody_changed_since_is_told_when_saved(document: Document, path: Path) -> None:
    Autosave().write(EDIT(document))
    written(path, SETUP_TEXT.replace("k = 1.5", "k = 3"))
    (recovery,) = pending_recovery(path).recoveries
    with pytest.raises(ChangedOnDisk):
        save_setup(recovery.document, path)


def test_the_side_file_goes_after_saving(document: Document, path: Path) -> None:
    autosave = Autosave()
    file = autosave.write(EDIT(document))
    autosave.remove()
    autosave.remove()
    assert not file.exists()
    assert pending_recovery(path) == Pending()


def test_a_document_that_was_never_saved_has_its_side_file_in_the_users_folder(tmp_path: Path) -> None:
    room = written(tmp_path / "test.room.toml", ROOM_TEXT)
    folder = tmp_path / "data" / "unsaved"
    edited = EDIT(new_document(room))
    autosave = Autosave(folder)
    file = autosave.write(edited)
    assert file.parent == folder
    other = Autosave(folder).write(set_value("name", "Other")(edited))
    assert other != file
    pending = pending_recovery(None, folder)
    assert {recovery.name for recovery in pending.recoveries} == {"New set-up", "Other"}
    recovery = next(r for r in pending.recoveries if r.side_file == file)
    assert fingerprint(recovery.document.setup) == fingerprint(edited.setup)
    assert recovery.document.path is None
    saved = save_setup(recovery.document, tmp_path / "first.setup.toml")
    assert 'room = "test.room.toml"' in saved.source.text


def test_with_its_first_saving_a_document_changes_its_side_file(tmp_path: Path) -> None:
    room = written(tmp_path / "test.room.toml", ROOM_TEXT)
    autosave = Autosave(tmp_path / "data")
    first = autosave.write(new_document(room))
    saved = save_setup(new_document(room), tmp_path / "b.setup.toml")
    second = autosave.write(EDIT(saved))
    assert not first.exists()
    assert second == side_file(tmp_path / "b.setup.toml")


def test_a_recovered_document_keeps_its_side_file(tmp_path: Path) -> None:
    room = written(tmp_path / "test.room.toml", ROOM_TEXT)
    file = Autosave(tmp_path / "data").write(new_document(room))
    (recovery,) = pending_recovery(None, tmp_path / "data").recoveries
    autosave = Autosave(tmp_path / "data")
    autosave.adopt(recovery)
    assert autosave.write(EDIT(recovery.document)) == file
    autosave.remove()
    assert not file.exists()


def test_a_folder_that_was_moved_takes_its_unsaved_work_along(document: Document, path: Path, tmp_path: Path) -> None:
    edited = EDIT(document)
    Autosave().write(edited)
    moved = tmp_path / "moved"
    moved.mkdir()
    for file in [file for file in tmp_path.iterdir() if file.is_file()]:
        file.rename(moved / file.name)
    (recovery,) = pending_recovery(moved / path.name).recoveries
    assert fingerprint(recovery.document.setup) == fingerprint(edited.setup)
    assert recovery.document.path == moved / path.name


@pytest.mark.parametrize(
    "content",
    [
        b"",
        b"\x00\xff\xfe",
        b"[]",
        b"null",
        b"{}",
        b'{"format": 2}',
        b"[" * 100_000,
        b'{"format": 1, "text": 3}',
        b'{"format": 1, "text": "x", "folder": "/"}',
        b'{"format": 1, "text": "' + b"a" * 1000,
        b'{"format": 1e400}',
        b"1" * 5000,
    ],
)
def test_a_damaged_side_file_is_told_and_left_alone(document: Document, path: Path, content: bytes) -> None:
    del document
    file = side_file(path)
    file.write_bytes(content)
    assert len(ignored(pending_recovery(path), file)) < 600 + len(str(file))


@pytest.mark.parametrize(
    "changes",
    [
        {"text": "format = 1"},
        {"text": SETUP_TEXT.replace("stature_mm = 1756", "stature_mm = 1")},
        {"text": SETUP_TEXT.replace("test.room.toml", "none.room.toml")},
        {"text": "a" * 3_000_000},
        {"text": "x = " + "[" * 10_000},
        {"saved_at": "yesterday"},
        {"saved_at": "2025-01-01T00:00:00"},
        {"saved_at": None},
        {"folder": "no\0where", "path": None},
        {"folder": None},
    ],
)
def test_a_side_file_that_holds_no_set_up_is_told_and_left_alone(
    document: Document, path: Path, changes: dict[str, object]
) -> None:
    file = written_side_file(document, **changes)
    ignored(pending_recovery(path), file)


def test_options_that_cannot_be_are_not_taken_over(document: Document, path: Path) -> None:
    written_side_file(document, options={"edge_deg": -1, "gantry_tolerance_deg": "x", "couch_tolerance_deg": 2})
    (recovery,) = pending_recovery(path).recoveries
    assert recovery.document.options.edge_deg == 0.25
    assert recovery.document.options.gantry_tolerance_deg == 1.0
    assert recovery.document.options.couch_tolerance_deg == 2.0


def test_what_is_not_a_file_is_told(document: Document, path: Path) -> None:
    del document
    side_file(path).mkdir()
    ignored(pending_recovery(path), side_file(path))
    discard(side_file(path))
    assert side_file(path).is_dir()


def test_a_side_file_that_fails_halfway_leaves_the_one_before(
    document: Document, path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    autosave = Autosave()
    file = autosave.write(document)
    before = file.read_bytes()

    def full(_: int) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr(os, "fsync", full)
    with pytest.raises(KeyboardInterrupt):
        autosave.write(EDIT(document))
    assert file.read_bytes() == before
    assert {entry.name for entry in path.parent.iterdir()} == {"test.room.toml", "a.setup.toml", file.name}


def test_work_of_a_window_that_still_runs_is_left_alone(
    document: Document, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    file = Autosave(tmp_path).write(replace(document, path=None, stamp=None))
    assert len(pending_recovery(None, tmp_path).recoveries) == 1, "this very process may take up its own"
    content = json.loads(file.read_text(encoding="utf-8"))
    other = subprocess.Popen([sys.executable, "-c", "input()"], stdin=subprocess.PIPE)
    try:
        content["owner"] |= {"id": other.pid, "since": round(psutil.Process(other.pid).create_time(), 1)}
        file.write_text(json.dumps(content), encoding="utf-8")
        pending = pending_recovery(None, tmp_path)
        assert pending.recoveries == ()
        assert "Another window is at work" in pending.messages[0]
    finally:
        other.communicate(b"\n")
    assert len(pending_recovery(None, tmp_path).recoveries) == 1, "that window has gone"
    monkeypatch.setattr("platform.node", lambda: "another computer")
    assert len(pending_recovery(None, tmp_path).recoveries) == 1
