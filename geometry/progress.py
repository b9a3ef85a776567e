"""How long work reports how far it is and asks whether to go on."""

from typing import Protocol

from geometry.errors import Cancelled


class Progress(Protocol):
    """What a computation talks to. Calls may come from worker threads."""

    def report(self, fraction: float, message: str) -> None:
        """Tell that `fraction` (0 to 1) of the work named by `message` is done."""

    def cancelled(self) -> bool:
        """Tell whether the user wants the work stopped."""


class Silent:
    """A progress that shows nothing and never cancels."""

    def report(self, fraction: float, message: str) -> None:
        """Ignore the report."""

    def cancelled(self) -> bool:
        """Never."""
        return False


def stop_if_cancelled(progress: Progress) -> None:
    """Raise `Cancelled` when the user asked for it."""
    if progress.cancelled():
        raise Cancelled("stopped on request")
