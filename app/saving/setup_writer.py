"""Set-up files saved: read back with the real reader before anything is replaced, and written whole or not at all."""

import contextlib
import secrets
from collections.abc import Iterator
from dataclasses import fields, replace
from pathlib import Path

from app.document.device_edits import device_position_mm
from app.document.document import Document, source_of, stamp_of
from app.files.atomic import write_atomically
from app.files.fingerprint import fingerprint
from app.files.setup_references import read_as
from app.saving.setup_text import setup_text
from geometry.errors import BadInput, Fault, GeometryError
from geometry.setup import Setup, Surface

__all__ = ["ChangedOnDisk", "changed_on_disk", "save_setup", "setup_text"]


class ChangedOnDisk(BadInput):
    """A file, the set-up's own or one that it names, is not as it was when it was read. Nothing was written."""


def changed_on_disk(document: Document) -> bool:
    """Tell whether the document's file holds something else than when it was last read or written here."""
    if document.path is None or document.stamp is None:
        return False
    try:
        return stamp_of(document.path.read_bytes()) != document.stamp
    except OSError:
        # Gone: saving makes it again, and overwrites nobody's work.
        return False


def save_setup(document: Document, path: Path, *, despite_changes: bool = False) -> Document:
    """Write a document to `path` and return it as the document of that file, named after nothing else.

    The text is read back first, from beside `path`, and has to say what the document says. Raises ChangedOnDisk where
    the document's own file, its room or a file of its patient changed since they were read: with `despite_changes` the
    first is replaced and the others are taken as they are now. Raises BadInput where the file cannot be written, or
    would say something else than the document. Whatever is raised, what stood at `path` stays as it was.
    """
    path = Path(path).absolute()
    if not despite_changes and path == document.path and changed_on_disk(document):
        fault = Fault(str(path), "", "a file that somebody changed since it was read", "the file as it was read")
        raise ChangedOnDisk([fault])
    try:
        text = setup_text(document, path.parent)
    except GeometryError as error:
        raise BadInput([Fault(str(path), "", f"a set-up that cannot be written ({error})", "another form")]) from error
    content = document.source.encoded(text)
    setup = _agreed(document.setup, _read_back(content, path), path, despite_changes=despite_changes)
    write_atomically(path, lambda stream: stream.write(content))
    return Document(setup, path, source_of(content, path.parent, setup), document.options, stamp_of(content))


def _read_back(content: bytes, path: Path) -> Setup:
    """Return what the real reader makes of a content in the folder that it is for."""
    check = path.parent / f".wideberth-{secrets.token_hex(8)}.check"
    try:
        write_atomically(check, lambda stream: stream.write(content))
        return read_as(check, str(path))
    except BadInput as error:
        faults = [
            Fault(str(path) if f.file == str(check) else f.file, f.place, f.found, f.allowed) for f in error.faults
        ]
        raise BadInput(faults) from error
    finally:
        with contextlib.suppress(OSError):
            check.unlink(missing_ok=True)


def _agreed(wanted: Setup, read: Setup, path: Path, *, despite_changes: bool) -> Setup:
    """Return the set-up that the saved file stands for, `wanted` itself where nothing outside changed."""
    wanted_plain, read_plain = _without_plan(wanted), _without_plan(read)
    different = tuple(_differences(wanted_plain, read_plain))
    if not different:
        # The reader also knows whether the isocentre is one of the plan's.
        return wanted if fingerprint(wanted) == fingerprint(read) else read
    outside = tuple(_differences(_with_outside_of(wanted_plain, read_plain), read_plain))
    if outside:
        words = ", ".join(different)
        raise BadInput([Fault(str(path), words, "a text that would say something else than the window", "the same")])
    if not despite_changes:
        faults = [
            Fault(str(path), name, "files that changed since they were read", "as they were") for name in different
        ]
        raise ChangedOnDisk(faults)
    return read


def _differences(first: Setup, second: Setup) -> Iterator[str]:
    """Yield the name of each field in which two set-ups differ."""
    whole = fingerprint(first)
    if whole == fingerprint(second):
        return
    for field in fields(Setup):
        if fingerprint(replace(first, **{field.name: getattr(second, field.name)})) != whole:
            yield field.name


def _without_plan(setup: Setup) -> Setup:
    """Return a set-up without what follows from its isocentre and the plan that is named."""
    patient = setup.patient
    return replace(setup, patient=replace(patient, isocentre_mm=None)) if isinstance(patient, Surface) else setup


def _with_outside_of(setup: Setup, read: Setup) -> Setup:
    """Return a set-up with what `read` has from files besides the set-up's own: room, imported envelope, meshes."""
    patient = setup.patient
    if isinstance(patient, Surface) and isinstance(read.patient, Surface):
        patient = replace(patient, solid=read.patient.solid)
    devices = setup.devices
    alike = [(d.name, device_position_mm(d)) for d in devices] == [
        (d.name, device_position_mm(d)) for d in read.devices
    ]
    return replace(setup, room=read.room, patient=patient, devices=read.devices if alike else devices)
