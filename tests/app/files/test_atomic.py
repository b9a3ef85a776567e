import os
import stat
import sys
from pathlib import Path
from typing import BinaryIO

import pytest

from app.files.atomic import write_atomically
from geometry.errors import BadInput

posix_only = pytest.mark.skipif(sys.platform == "win32", reason="POSIX permissions, links and devices")


def hello(stream: BinaryIO) -> None:
    stream.write(b"hello")


def names(folder: Path) -> list[str]:
    return sorted(entry.name for entry in folder.iterdir())


def fault_of(path: Path) -> str:
    with pytest.raises(BadInput) as caught:
        write_atomically(path, hello)
    (fault,) = caught.value.faults
    assert fault.file == str(path)
    return fault.found


def test_a_file_appears_whole_and_alone(tmp_path: Path) -> None:
    write_atomically(tmp_path / "out.csv", hello)
    assert (tmp_path / "out.csv").read_bytes() == b"hello"
    assert names(tmp_path) == ["out.csv"]


def test_while_it_is_written_the_former_content_stands(tmp_path: Path) -> None:
    path = tmp_path / "out.csv"
    path.write_bytes(b"before")

    def write(stream: BinaryIO) -> None:
        stream.write(b"after")
        stream.flush()
        assert path.read_bytes() == b"before"

    write_atomically(path, write)
    assert path.read_bytes() == b"after"


@pytest.mark.parametrize("error", [ValueError("bad"), KeyboardInterrupt(), SystemExit(3)])
def test_whatever_stops_the_writing_nothing_changes(tmp_path: Path, error: BaseException) -> None:
    path = tmp_path / "out.csv"
    path.write_bytes(b"before")

    def write(stream: BinaryIO) -> None:
        stream.write(b"half")
        raise error

    with pytest.raises(type(error)) as caught:
        write_atomically(path, write)
    assert caught.value is error
    assert path.read_bytes() == b"before"
    assert names(tmp_path) == ["out.csv"]


def test_a_full_disk_is_told_and_leaves_nothing(tmp_path: Path) -> None:
    def write(stream: BinaryIO) -> None:
        stream.write(b"half")
        raise OSError(28, "No space left on device")

    with pytest.raises(BadInput, match="No space left on device"):
        write_atomically(tmp_path / "out.csv", write)
    assert names(tmp_path) == []


def test_a_file_that_another_program_holds_open_is_told(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    # What Windows answers while a spreadsheet is open in another program.
    def refuse(_self: Path, _target: Path) -> None:
        raise PermissionError(13, "Access is denied")

    path = tmp_path / "out.xlsx"
    path.write_bytes(b"before")
    monkeypatch.setattr(Path, "replace", refuse)
    with pytest.raises(BadInput, match=r"Access is denied.*no other program has open"):
        write_atomically(path, hello)
    assert path.read_bytes() == b"before"
    assert names(tmp_path) == ["out.xlsx"]


def test_a_missing_folder_is_named(tmp_path: Path) -> None:
    assert fault_of(tmp_path / "nowhere" / "out.csv") == f"no folder '{tmp_path / 'nowhere'}'"
    assert names(tmp_path) == []


def test_a_folder_is_no_file(tmp_path: Path) -> None:
    assert fault_of(tmp_path) == "a folder"


def test_a_file_is_no_folder(tmp_path: Path) -> None:
    (tmp_path / "file").write_bytes(b"")
    assert "no folder" in fault_of(tmp_path / "file" / "out.csv")


def test_a_name_that_is_too_long_is_told(tmp_path: Path) -> None:
    assert "cannot be written" in fault_of(tmp_path / ("x" * 5000))
    assert names(tmp_path) == []


@pytest.mark.skipif(sys.platform != "linux", reason="needs a folder that not even root may write in")
def test_a_folder_without_permission_is_told() -> None:
    assert "cannot be written" in fault_of(Path("/proc/out.csv"))


def test_a_write_protected_file_is_not_replaced(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = tmp_path / "out.csv"
    path.write_bytes(b"before")
    # Root may write everywhere, so that the system's answer is given here.
    monkeypatch.setattr(os, "access", lambda target, mode: not (target == path.resolve() and mode == os.W_OK))
    assert fault_of(path) == "a write-protected file"
    assert path.read_bytes() == b"before"


@posix_only
def test_a_device_is_not_replaced() -> None:
    assert fault_of(Path(os.devnull)) == "something other than a plain file"
    assert stat.S_ISCHR(Path(os.devnull).stat().st_mode)


@posix_only
def test_a_link_stays_a_link(tmp_path: Path) -> None:
    (tmp_path / "shelf").mkdir()
    link = tmp_path / "out.csv"
    link.symlink_to(tmp_path / "shelf" / "real.csv")
    for _ in range(2):  # first without, then with a file that the link leads to
        write_atomically(link, hello)
        assert link.is_symlink()
        assert (tmp_path / "shelf" / "real.csv").read_bytes() == b"hello"
    assert names(tmp_path / "shelf") == ["real.csv"]


@posix_only
def test_permissions_are_those_of_any_file_or_of_the_one_replaced(tmp_path: Path) -> None:
    plain = tmp_path / "plain"
    plain.write_bytes(b"")
    path = tmp_path / "out.csv"
    write_atomically(path, hello)
    assert path.stat().st_mode == plain.stat().st_mode
    path.chmod(0o640)
    write_atomically(path, hello)
    assert stat.S_IMODE(path.stat().st_mode) == 0o640
