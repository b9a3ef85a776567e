"""Files that appear whole or not at all."""

import contextlib
import os
import secrets
import shutil
from collections.abc import Callable
from pathlib import Path
from typing import BinaryIO

from geometry.errors import BadInput, Fault


def write_atomically(path: Path, write: Callable[[BinaryIO], object]) -> None:
    """Make or replace the file at `path` with what `write` puts into the stream that it is given.

    The stream is a temporary file in the same folder, seekable, open for binary reading and writing; `write` leaves it
    open. The file takes the place of `path` in one step after `write` has returned. Whatever goes wrong before, Ctrl-C
    included, it is removed, and what stood at `path` stays as it was. A symbolic link stays one, and its target is
    replaced.

    Raises BadInput where the folder is missing, or the file cannot be written; other errors of `write` pass through.
    """
    try:
        target = _target_of(path)
        # Not named after the target, whose name may already be as long as a name can be.
        part = target.parent / f".wideberth-{secrets.token_hex(8)}.part"
        try:
            # Unlike tempfile's, a file made here gets the permissions that any new file of the user has.
            with part.open("x+b") as stream:
                write(stream)
                stream.flush()
                os.fsync(stream.fileno())
            if target.exists():
                # A network drive may know no permissions; the content matters more.
                with contextlib.suppress(OSError):
                    shutil.copymode(target, part)
            part.replace(target)
        finally:
            # After a success there is nothing left to remove.
            part.unlink(missing_ok=True)
    except OSError as error:
        raise _cannot_write(path, error) from error


def _target_of(path: Path) -> Path:
    """Return the file that `path` leads to, links followed. Raises BadInput where none can be made or replaced."""
    target = Path(os.path.realpath(path))
    if not target.parent.is_dir():
        raise _bad(path, f"no folder '{target.parent}'", "a file in an existing folder")
    if target.is_dir():
        raise _bad(path, "a folder", "a file")
    # A device such as /dev/null would be replaced by a plain file.
    if target.exists() and not target.is_file():
        raise _bad(path, "something other than a plain file", "a file")
    if target.exists() and not os.access(target, os.W_OK):
        raise _bad(path, "a write-protected file", "a file that may be replaced")
    return target


def _cannot_write(path: Path, error: OSError) -> BadInput:
    reason = error.strerror or str(error)
    return _bad(
        path,
        f"a file that cannot be written ({reason})",
        "a folder with room where you may write, and a file that no other program has open",
    )


def _bad(path: Path, found: str, allowed: str) -> BadInput:
    return BadInput([Fault(str(path), "", found, allowed)])
