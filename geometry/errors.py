"""Errors that reach a user, each with what was found and what is allowed."""

from dataclasses import dataclass


class WideberthError(Exception):
    """Base of every error that this program raises on purpose."""


class Cancelled(WideberthError):
    """The user stopped a long computation; nothing was kept."""


class GeometryError(WideberthError):
    """A solid that cannot be built: the message gives name, value and allowed range."""


@dataclass(frozen=True)
class Fault:
    """One thing wrong with an input.

    `file` is the path as the user knows it, `place` the key or position in it ("part[2] 'head'.size_mm"),
    `found` the offending value in words, `allowed` what would be accepted.
    """

    file: str
    place: str
    found: str
    allowed: str

    def __str__(self) -> str:
        where = f"{self.file}: {self.place}" if self.place else self.file
        return f"{where}: found {self.found}; allowed: {self.allowed}"


class BadInput(WideberthError):
    """All faults of an input, raised once."""

    def __init__(self, faults: list[Fault] | tuple[Fault, ...]) -> None:
        self.faults = tuple(faults)
        super().__init__("\n".join(str(fault) for fault in self.faults))
