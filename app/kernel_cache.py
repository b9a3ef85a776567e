"""Where compiled kernels are kept from one start to the next."""

import atexit
import hashlib
import importlib.metadata
import os
import shutil
import tempfile
from collections.abc import Sequence
from pathlib import Path

import platformdirs

import geometry

_VARIABLE = "NUMBA_CACHE_DIR"


def choose_kernel_cache() -> None:
    """Tell numba where to keep what it compiles. To be called before numba is first imported.

    Beside the source, where that can be written; else in the user's cache folder; else in a folder that lasts as long
    as the process. Numba alone would refuse to start where neither of the first two can be written. Where the user
    named a folder with NUMBA_CACHE_DIR it is in there. Calling it again changes nothing.
    """
    name = f"kernels-{kernels_digest()}"
    of_choice = os.environ.get(_VARIABLE)
    if of_choice:
        if Path(of_choice).name != name:
            os.environ[_VARIABLE] = str(Path(of_choice) / name)
        return
    beside_source = Path(geometry.__file__).parent / "__pycache__" / name
    of_user = platformdirs.user_cache_path("wideberth", appauthor=False) / name
    os.environ[_VARIABLE] = str(first_writable([beside_source, of_user]) or _of_process())


def kernels_digest() -> str:
    """Return a digest of all that compiled kernels are made from.

    Numba notices a change in a kernel's own file alone. A kernel calls those of other files, and after an update would
    go on with the machine code of the older ones; a folder of its own for each state of the sources prevents that.
    """
    digest = hashlib.sha256(importlib.metadata.version("numba").encode())
    for source in sorted(Path(geometry.__file__).parent.rglob("*kernel*.py")):
        digest.update(source.read_bytes())
    return digest.hexdigest()[:16]


def first_writable(folders: Sequence[Path]) -> Path | None:
    """Return the first of `folders` that exists or can be made, and in which a file can be made."""
    for folder in folders:
        try:
            folder.mkdir(parents=True, exist_ok=True)
            with tempfile.TemporaryFile(dir=folder):
                return folder
        except OSError:
            continue
    return None


def _of_process() -> str:
    """Return a folder that nobody else can write (it holds code that is run) and that goes with the process."""
    folder = tempfile.mkdtemp(prefix="wideberth-")
    atexit.register(shutil.rmtree, folder, ignore_errors=True)
    return folder
