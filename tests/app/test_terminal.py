import io
import signal
import threading

import pytest

from app.terminal import TerminalProgress
from geometry.errors import Cancelled
from geometry.progress import Progress, stop_if_cancelled


class Screen(io.StringIO):
    """A stream that says it is a terminal."""

    def isatty(self) -> bool:
        return True


@pytest.fixture
def screen(monkeypatch: pytest.MonkeyPatch) -> Screen:
    monkeypatch.setenv("TERM", "xterm")
    monkeypatch.setenv("COLUMNS", "100")
    monkeypatch.delenv("TTY_COMPATIBLE", raising=False)
    return Screen()


def work(progress: Progress) -> None:
    progress.report(0.25, "proving [cells]")
    progress.report(0.75, "proving [cells]")


def test_a_terminal_sees_the_message_as_it_is_and_the_share_done(screen: Screen) -> None:
    with TerminalProgress(stream=screen) as progress:
        work(progress)
    assert "proving [cells]" in screen.getvalue()
    assert "75%" in screen.getvalue()


def test_another_message_starts_another_bar(screen: Screen) -> None:
    with TerminalProgress(stream=screen) as progress:
        progress.report(1.0, "compiling")
        progress.report(0.1, "sweeping")
    last = screen.getvalue().rpartition("sweeping")[2]
    assert "10%" in last
    assert "100%" not in last


def test_a_file_and_a_quiet_terminal_see_nothing(screen: Screen) -> None:
    file = io.StringIO()
    with TerminalProgress(stream=file) as progress:
        work(progress)
    with TerminalProgress(stream=screen, quiet=True) as progress:
        work(progress)
    assert (file.getvalue(), screen.getvalue()) == ("", "")


def test_forced_colours_draw_no_bar_into_a_file(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("FORCE_COLOR", "1")
    file = io.StringIO()
    with TerminalProgress(stream=file) as progress:
        work(progress)
    assert file.getvalue() == ""


def test_a_terminal_that_cannot_redraw_a_line_sees_nothing(screen: Screen, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("TERM", "dumb")
    with TerminalProgress(stream=screen) as progress:
        work(progress)
    assert screen.getvalue() == ""


def test_without_a_standard_error_nothing_is_drawn(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("sys.stderr", None)
    with TerminalProgress() as progress:
        work(progress)
    assert not progress.cancelled()


def test_results_printed_meanwhile_stay_on_standard_output(screen: Screen, capsys: pytest.CaptureFixture[str]) -> None:
    with TerminalProgress(stream=screen) as progress:
        work(progress)
        print("a result")
    assert capsys.readouterr().out == "a result\n"
    assert "a result" not in screen.getvalue()


def test_the_first_interrupt_asks_and_the_second_ends_at_once(screen: Screen) -> None:
    handler = signal.getsignal(signal.SIGINT)
    with TerminalProgress(stream=screen) as progress:
        progress.report(0.5, "sweeping")
        assert not progress.cancelled()
        signal.raise_signal(signal.SIGINT)
        assert progress.cancelled()
        with pytest.raises(Cancelled):
            stop_if_cancelled(progress)
        progress.report(0.6, "sweeping")
        with pytest.raises(KeyboardInterrupt):
            signal.raise_signal(signal.SIGINT)
    assert signal.getsignal(signal.SIGINT) == handler
    assert progress.cancelled()
    assert "stopping" in screen.getvalue().rpartition("sweeping")[2]


def test_quiet_work_can_be_interrupted_too() -> None:
    with TerminalProgress(quiet=True) as progress:
        signal.raise_signal(signal.SIGINT)
        assert progress.cancelled()


def test_the_handler_comes_back_when_the_work_fails(screen: Screen) -> None:
    handler = signal.getsignal(signal.SIGINT)
    with pytest.raises(BrokenPipeError), TerminalProgress(stream=screen):
        raise BrokenPipeError
    assert signal.getsignal(signal.SIGINT) == handler


def test_an_interrupt_that_the_caller_switched_off_stays_off() -> None:
    before = signal.signal(signal.SIGINT, signal.SIG_IGN)
    try:
        with TerminalProgress(quiet=True) as progress:
            signal.raise_signal(signal.SIGINT)
            assert not progress.cancelled()
        assert signal.getsignal(signal.SIGINT) == signal.SIG_IGN
    finally:
        signal.signal(signal.SIGINT, before)


def test_another_thread_than_the_main_one_leaves_the_handler_alone() -> None:
    handler = signal.getsignal(signal.SIGINT)
    seen: list[object] = []

    def enter() -> None:
        with TerminalProgress(quiet=True):
            seen.append(signal.getsignal(signal.SIGINT))

    thread = threading.Thread(target=enter)
    thread.start()
    thread.join()
    assert seen == [handler]


def test_no_thread_is_left_behind(screen: Screen) -> None:
    before = set(threading.enumerate())
    with TerminalProgress(stream=screen) as progress:
        work(progress)
        drawing = set(threading.enumerate()) - before
    assert drawing
    for thread in drawing:
        thread.join(timeout=5)  # s; it was told to end, and may be doing so
        assert not thread.is_alive()
