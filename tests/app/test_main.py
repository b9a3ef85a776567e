import subprocess
import sys
from collections.abc import Callable, Sequence
from pathlib import Path
from types import ModuleType

import pytest

from app.__main__ import BROKEN, INTERRUPTED, main

Run = Callable[[Sequence[str]], int]


@pytest.fixture
def command_line(monkeypatch: pytest.MonkeyPatch) -> Callable[[Run], None]:
    """Return a function that puts `run` in the place of the program's own."""

    def put(run: Run) -> None:
        module = ModuleType("app.cli")
        vars(module)["run"] = run
        monkeypatch.setitem(sys.modules, "app.cli", module)

    return put


def test_arguments_go_in_and_the_exit_status_comes_out(command_line: Callable[[Run], None]) -> None:
    seen: list[Sequence[str]] = []

    def run(arguments: Sequence[str]) -> int:
        seen.append(arguments)
        return 2

    command_line(run)
    assert main(["map", "a.setup.toml"]) == 2
    assert seen == [["map", "a.setup.toml"]]


def test_the_process_gives_the_arguments_when_the_caller_does_not(
    command_line: Callable[[Run], None], monkeypatch: pytest.MonkeyPatch
) -> None:
    command_line(len)
    monkeypatch.setattr(sys, "argv", ["wideberth", "pose", "a.setup.toml", "--json"])
    assert main() == 3


def test_an_interrupt_ends_without_a_traceback(
    command_line: Callable[[Run], None], capsys: pytest.CaptureFixture[str]
) -> None:
    def run(_arguments: Sequence[str]) -> int:
        raise KeyboardInterrupt

    command_line(run)
    assert main([]) == INTERRUPTED
    assert capsys.readouterr().err == "wideberth: stopped\n"


def test_a_fault_of_the_program_is_told_without_a_traceback_unless_asked_for(
    command_line: Callable[[Run], None], capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    def run(_arguments: Sequence[str]) -> int:
        raise RuntimeError("odd")

    command_line(run)
    assert main([]) == BROKEN
    told = capsys.readouterr().err
    assert "odd" in told
    assert "Traceback" not in told
    monkeypatch.setenv("WIDEBERTH_TRACEBACK", "1")
    with pytest.raises(RuntimeError, match="odd"):
        main([])


def test_the_way_in_imports_nothing_that_is_slow_or_reads_the_cache_too_early() -> None:
    program = (
        "import sys, app.__main__; print([m for m in ('numba', 'numpy', 'PySide6', 'vtkmodules') if m in sys.modules])"
    )
    root = Path(__file__).parents[2]
    done = subprocess.run([sys.executable, "-c", program], cwd=root, capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"
