"""What a number, a word and a text of a set-up are: what they are called, their unit, what they may be and mean.

A field's `key` is its place in the set-up file ("table.height_mm"), or starts with "options". Getting and setting go
through `read` and `changed`; nothing else need know where a value is.
"""

from collections.abc import Callable, Collection
from dataclasses import dataclass, replace
from functools import reduce
from typing import Any

from app.document.document import Document
from app.files import values
from app.files.values import Limits, Refused
from app.files.wording import described, one_of, printable
from geometry.errors import GeometryError

Path = tuple[str | int, ...]
Edit = Callable[[Document], Document]


@dataclass(frozen=True)
class NumberField:
    """A number. `step` is that of an arrow key and of a drag; `none` says what an empty value means, "" if none may be.

    `usual` gives the value that an empty one stands for, where there is such a thing. `axes` names the axes of the
    room whose travel has a say in it.
    """

    key: str
    group: str
    label: str
    unit: str
    help: str
    limits: Limits
    step: float
    read: Callable[[Document], float | None]
    write: Callable[[Document, float | None], Document]
    none: str = ""
    usual: Callable[[Document], float] | None = None
    axes: tuple[str, ...] = ()

    @property
    def title(self) -> str:
        """The field in words, as the undo list names it."""
        return _title(self.group, self.label)

    def changed(self, document: Document, value: float | None) -> Document:
        """Return the document with this value. GeometryError names the field, the value and what is allowed."""
        if value is None:
            if not self.none:
                raise GeometryError(f"{self.title} = nothing; allowed: {self.allowed}")
            return self.write(document, None)
        if not self.limits.hold(value):
            raise GeometryError(f"{self.title} = {value:g} {self.unit}".rstrip() + f"; allowed: {self.allowed}")
        # Adding 0 turns -0.0 into 0.0, which a file would keep.
        return self.write(document, float(value) + 0.0)

    @property
    def allowed(self) -> str:
        """The range in words."""
        return f"{self.limits} {self.unit}".rstrip()


@dataclass(frozen=True)
class ChoiceField:
    """One word of a few; `options` gives those that this document allows, `shown` how a word is shown to people."""

    key: str
    group: str
    label: str
    help: str
    options: Callable[[Document], tuple[str, ...]]
    read: Callable[[Document], str | None]
    write: Callable[[Document, str], Document]
    shown: Callable[[str], str] = str

    @property
    def title(self) -> str:
        """The field in words, as the undo list names it."""
        return _title(self.group, self.label)

    def changed(self, document: Document, value: str) -> Document:
        """Return the document with this word. GeometryError names the field, the word and what is allowed."""
        allowed = self.options(document)
        if value not in allowed:
            raise GeometryError(f"{self.title} = {described(value)}; allowed: {one_of(allowed)}")
        return self.write(document, value)


@dataclass(frozen=True)
class TextField:
    """A text; `check` is the file reader's own."""

    key: str
    group: str
    label: str
    help: str
    check: Callable[[object], str]
    read: Callable[[Document], str]
    write: Callable[[Document, str], Document]

    @property
    def title(self) -> str:
        """The field in words, as the undo list names it."""
        return _title(self.group, self.label)

    def changed(self, document: Document, value: str) -> Document:
        """Return the document with this text. GeometryError names the field, what was found and what is allowed."""
        try:
            return self.write(document, self.check(value))
        except Refused as refused:
            problem = refused.problems[0]
            raise GeometryError(f"{self.title} = {problem.found}; allowed: {problem.allowed}") from refused


# Getting and setting by path


def at(path: Path) -> Callable[[Document], Any]:
    """Return a getter of what lies at a path of attributes and positions of a document."""
    return lambda document: reduce(_step, path, document)


def put(path: Path) -> Callable[[Document, Any], Document]:
    """Return a setter for what lies at a path of attributes and positions of a document."""
    return lambda document, value: replaced(document, path, value)


def _step(thing: Any, step: str | int) -> Any:  # noqa: ANN401 - whatever lies there
    return thing[step] if isinstance(step, int) else getattr(thing, step)


def replaced(thing: Any, path: Path, value: Any) -> Any:  # noqa: ANN401 - whatever lies there
    """Return a copy of frozen `thing` with another value at a path of attributes and positions."""
    if not path:
        return value
    first, *rest = path
    inner = replaced(_step(thing, first), tuple(rest), value)
    if isinstance(first, int):
        return (*thing[:first], inner, *thing[first + 1 :])
    return replace(thing, **{first: inner})


def _title(group: str, label: str) -> str:
    label = label if label[:2].isupper() else label[:1].lower() + label[1:]
    return f"{group}, {label}" if group else label


def with_setup(document: Document, **changes: Any) -> Document:  # noqa: ANN401 - as the fields of Setup
    """Return the document with other values of its set-up."""
    return replace(document, setup=replace(document.setup, **changes))


def own_name(kind: str, name: str, taken: Collection[str]) -> str:
    """Return the name of a part, a component … as a file may have it. GeometryError where it is none, or taken."""
    try:
        checked = values.text(name)
    except Refused as refused:
        problem = refused.problems[0]
        raise GeometryError(f"name of a {kind} = {problem.found}; allowed: {problem.allowed}") from refused
    if checked in taken:
        raise GeometryError(f"name of a {kind} = '{printable(checked)}', which is taken; allowed: a name of its own")
    return checked
