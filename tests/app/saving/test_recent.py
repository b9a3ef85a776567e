from pathlib import Path

import pytest

from app.saving.recent import MOST_RECENT, forget_files, recent_files, remember_file


def made(folder: Path, *names: str) -> list[Path]:
    for name in names:
        (folder / name).write_text("x", encoding="utf-8")
    return [folder / name for name in names]


def test_the_latest_file_comes_first_and_once(tmp_path: Path) -> None:
    a, b = made(tmp_path, "a.setup.toml", "b.setup.toml")
    assert recent_files(tmp_path / "config") == ()
    remember_file(a, tmp_path / "config")
    remember_file(b, tmp_path / "config")
    assert remember_file(a, tmp_path / "config") == (a, b)
    assert recent_files(tmp_path / "config") == (a, b)


def test_files_that_are_gone_are_dropped(tmp_path: Path) -> None:
    a, b = made(tmp_path, "a.setup.toml", "b.setup.toml")
    for path in (a, b):
        remember_file(path, tmp_path)
    b.unlink()
    assert recent_files(tmp_path) == (a,)


def test_the_list_is_short(tmp_path: Path) -> None:
    paths = made(tmp_path, *(f"{n:02}.setup.toml" for n in range(MOST_RECENT + 3)))
    for path in paths:
        remember_file(path, tmp_path)
    assert recent_files(tmp_path) == tuple(reversed(paths))[:MOST_RECENT]


def test_the_list_can_be_emptied(tmp_path: Path) -> None:
    remember_file(made(tmp_path, "a.setup.toml")[0], tmp_path)
    forget_files(tmp_path)
    assert recent_files(tmp_path) == ()


@pytest.mark.parametrize(
    "content", [b"", b"\xff", b"[]", b'{"files": 3}', b'{"files": [3, "relative", "/no\\u0000where"]}', b"[" * 100_000]
)
def test_a_damaged_list_is_empty_and_replaced(tmp_path: Path, content: bytes) -> None:
    (tmp_path / "recent.json").write_bytes(content)
    assert recent_files(tmp_path) == ()
    (path,) = made(tmp_path, "a.setup.toml")
    remember_file(path, tmp_path)
    assert recent_files(tmp_path) == (path,)


def test_a_list_that_cannot_be_written_stops_nobody(tmp_path: Path) -> None:
    (path,) = made(tmp_path, "a.setup.toml")
    assert remember_file(path, path / "below a file") == (path,)
    assert recent_files(path / "below a file") == ()
