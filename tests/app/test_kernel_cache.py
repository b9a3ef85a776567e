import os
import subprocess
import sys
from pathlib import Path

import platformdirs
import pytest

import geometry
from app.kernel_cache import choose_kernel_cache, first_writable, kernels_digest

VARIABLE = "NUMBA_CACHE_DIR"


@pytest.fixture
def source(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """Return the folder that the kernels seem to be in, not there yet, with a user's cache folder beside it."""
    monkeypatch.setenv(VARIABLE, "")
    monkeypatch.setattr(geometry, "__file__", str(tmp_path / "source" / "__init__.py"))
    monkeypatch.setattr(platformdirs, "user_cache_path", lambda name, **_: tmp_path / "user" / name)
    return tmp_path / "source"


def test_the_first_choice_lies_beside_the_source(source: Path) -> None:
    source.mkdir()
    choose_kernel_cache()
    assert Path(os.environ[VARIABLE]).parent == source / "__pycache__"


def test_a_change_in_any_kernel_leads_to_another_folder(source: Path) -> None:
    source.mkdir()
    chosen = []
    for content in ("K = 1", "K = 2", "K = 1"):
        (source / "kernel.py").write_text(content, encoding="utf-8")
        chosen.append(kernels_digest())
    assert chosen[0] == chosen[2] != chosen[1]


def test_the_users_folder_is_next(source: Path, tmp_path: Path) -> None:
    source.write_bytes(b"")  # a file: no folder can be made in it, not even by root
    choose_kernel_cache()
    assert Path(os.environ[VARIABLE]).parent == tmp_path / "user" / "wideberth"


def test_a_folder_named_outside_holds_one_for_each_state_of_the_sources(
    source: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    source.write_bytes(b"")
    monkeypatch.setenv(VARIABLE, "elsewhere")
    for _ in range(2):
        choose_kernel_cache()
        assert Path(os.environ[VARIABLE]) == Path("elsewhere") / f"kernels-{kernels_digest()}"


def test_the_last_resort_goes_with_the_process(tmp_path: Path) -> None:
    program = (
        "import os, pathlib\n"
        "from app import kernel_cache\n"
        "kernel_cache.first_writable = lambda folders: None\n"
        "kernel_cache.choose_kernel_cache()\n"
        "folder = pathlib.Path(os.environ['NUMBA_CACHE_DIR'])\n"
        "(folder / 'kernel').write_bytes(b'')\n"
        "print(folder, oct(folder.stat().st_mode & 0o077))\n"
    )
    environment = os.environ | {VARIABLE: "", "TMPDIR": str(tmp_path), "TEMP": str(tmp_path)}
    root = Path(__file__).parents[2]
    done = subprocess.run(
        [sys.executable, "-c", program], cwd=root, env=environment, capture_output=True, text=True, check=True
    )
    folder, others_may = done.stdout.rsplit(maxsplit=1)
    assert Path(folder).parent == tmp_path
    assert others_may == "0o0" or sys.platform == "win32"
    assert list(tmp_path.iterdir()) == []


def test_the_first_folder_that_takes_a_file_is_chosen(tmp_path: Path) -> None:
    blocked = tmp_path / "file"
    blocked.write_bytes(b"")
    folders = [blocked / "a", tmp_path / "b", tmp_path / "c"]
    assert first_writable(folders) == tmp_path / "b"
    assert list((tmp_path / "b").iterdir()) == []
    assert first_writable([blocked / "a"]) is None
