"""An open data set from the package registry: real DICOM files of a treatment plan.

It is in the source distribution of dicompyler-core 0.5.6 (BSD licence), tests/testdata/example_data: a plan of four
beams and its structure set. pip fetches it once, by name, version and hash. pip asks every source distribution for
its metadata when it fetches it; nothing of it is installed or imported, and only the two files are unpacked.
"""

import os
import shutil
import subprocess
import sys
import tarfile
import tempfile
from pathlib import Path
from typing import Final

from platformdirs import user_cache_path

_NAME: Final = "dicompyler-core"
_VERSION: Final = "0.5.6"
_SHA256: Final = "0e3c05920a8fa3f1c0ff05a5c21dab3ff3f735e00012b69b38926b219d07faee"
_INSIDE: Final = f"{_NAME}-{_VERSION}/tests/testdata/example_data"
_FILES: Final = ("rtplan.dcm", "rtss.dcm")
_PATIENCE_S: Final = 240


def open_data_folder() -> Path:
    """Return the folder that holds rtplan.dcm and rtss.dcm, fetched if it is not there yet.

    It lies in the folder that WIDEBERTH_TEST_CACHE names, else in the user's cache. Raises AssertionError where it
    cannot be fetched: a test that needs it then fails, here as in continuous integration.
    """
    named = os.environ.get("WIDEBERTH_TEST_CACHE")
    cache = Path(named) if named else user_cache_path("wideberth-tests", appauthor=False)
    folder = cache / f"{_NAME}-{_VERSION}"
    if not folder.is_dir():
        cache.mkdir(parents=True, exist_ok=True)
        with tempfile.TemporaryDirectory(dir=cache) as scratch:
            unpacked = _unpacked(_fetched(Path(scratch)), Path(scratch))
            _put(unpacked, folder)
    return folder


def _fetched(scratch: Path) -> Path:
    """Return the archive that pip puts into a folder; its hash is checked before anything of it is looked at."""
    wanted = scratch / "wanted.txt"
    wanted.write_text(f"{_NAME}=={_VERSION} --hash=sha256:{_SHA256}\n", encoding="utf-8")
    command = [
        sys.executable,
        "-m",
        "pip",
        "download",
        "--quiet",
        "--no-deps",
        "--no-binary",
        _NAME,
        "--require-hashes",
    ]
    done = subprocess.run(
        [*command, "--dest", str(scratch), "--requirement", str(wanted)],
        capture_output=True,
        text=True,
        timeout=_PATIENCE_S,
        check=False,
    )
    archives = list(scratch.glob("*.tar.gz"))
    assert done.returncode == 0, f"pip could not fetch {_NAME} {_VERSION}:\n{done.stderr[-2000:]}"
    assert len(archives) == 1, f"pip fetched {archives}, not one archive"
    return archives[0]


def _unpacked(archive: Path, scratch: Path) -> Path:
    folder = scratch / "unpacked"
    folder.mkdir()
    with tarfile.open(archive) as content:
        for name in _FILES:
            member = content.extractfile(f"{_INSIDE}/{name}")
            assert member is not None, f"{name} is not a file in {archive.name}"
            with member, (folder / name).open("wb") as target:
                shutil.copyfileobj(member, target)
    return folder


def _put(unpacked: Path, folder: Path) -> None:
    """Put the folder in its place in one step; where another test run was faster, its folder stays."""
    try:
        unpacked.rename(folder)
    except OSError:
        if not folder.is_dir():
            raise
