"""Progress of long work on a terminal, and Ctrl-C as a wish to stop it."""

import signal
import sys
import threading
from collections.abc import Callable
from types import FrameType, TracebackType
from typing import TYPE_CHECKING, Self, TextIO

if TYPE_CHECKING:
    from rich.progress import Progress, TaskID

_Handler = Callable[[int, FrameType | None], object] | int | None


class TerminalProgress:
    """A `geometry.progress.Progress` for the command line, used in a `with` statement.

    A bar is drawn on `stream`, standard error unless given, where that is a terminal and `quiet` is not asked for;
    it is wiped away at the end. Inside the statement the first Ctrl-C only makes `cancelled` true, so that the work
    can end in order; the second one interrupts at once. `cancelled` keeps its answer after the statement.
    """

    def __init__(self, *, quiet: bool = False, stream: TextIO | None = None) -> None:
        self._bar = None if quiet else _bar_on(sys.stderr if stream is None else stream)
        self._task: TaskID | None = None
        self._message = ""
        # A plain flag: unlike an Event it takes no lock, which a signal handler must not wait for.
        self._stop = False
        self._handles_interrupt = False
        self._previous: _Handler = None

    def __enter__(self) -> Self:
        self._take_interrupt()
        if self._bar is not None:
            self._task = self._bar.add_task("", total=1.0, start=False, visible=False)
            self._bar.start()
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, traceback: TracebackType | None
    ) -> None:
        try:
            if self._bar is not None:
                self._bar.stop()
        finally:
            self._give_interrupt_back()

    def report(self, fraction: float, message: str) -> None:
        """Show that `fraction` (0 to 1) of the work named by `message` is done; another message starts another bar."""
        if self._bar is None or self._task is None or self._stop:
            return
        if message != self._message:
            self._message = message
            self._bar.reset(self._task, total=1.0, description=message, visible=True)
        self._bar.update(self._task, completed=fraction)

    def cancelled(self) -> bool:
        """Tell whether Ctrl-C was pressed."""
        return self._stop

    def _take_interrupt(self) -> None:
        """Handle Ctrl-C, where this thread may and where the caller has not switched it off (as `nohup` does)."""
        if threading.current_thread() is not threading.main_thread():
            return
        previous = signal.getsignal(signal.SIGINT)
        if previous in (signal.SIG_IGN, None):
            return
        self._previous = previous
        self._handles_interrupt = True
        signal.signal(signal.SIGINT, self._on_interrupt)

    def _give_interrupt_back(self) -> None:
        if self._handles_interrupt:
            self._handles_interrupt = False
            signal.signal(signal.SIGINT, self._previous)

    def _on_interrupt(self, _signal: int, _frame: FrameType | None) -> None:
        self._stop = True
        self._give_interrupt_back()
        if self._bar is not None and self._task is not None:
            self._bar.update(self._task, description="stopping")


def _bar_on(stream: TextIO | None) -> "Progress | None":
    """Return a bar, not yet drawn, or None where `stream` is no terminal that can redraw a line."""
    if stream is None or not stream.isatty():
        return None
    # Kept from what shows no bar: the window, which should be there at once, and `--help`.
    from rich.console import Console  # noqa: PLC0415
    from rich.progress import BarColumn, Progress, TaskProgressColumn, TextColumn, TimeRemainingColumn  # noqa: PLC0415

    console = Console(file=stream)
    if not console.is_terminal or console.is_dumb_terminal:
        return None
    return Progress(
        # Messages may hold names from files: their brackets are no markup.
        TextColumn("{task.description}", markup=False),
        BarColumn(),
        TaskProgressColumn(),
        TimeRemainingColumn(),
        console=console,
        transient=True,
        # Standard output belongs to results; it must not be led to the bar's stream.
        redirect_stdout=False,
        redirect_stderr=False,
    )
