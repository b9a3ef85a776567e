"""A cursor over the tables of a TOML file that collects every fault instead of stopping at the first.

A getter that meets a fault notes it and returns a stand-in of the right type (NaN for a number). Nothing made from
stand-ins leaves a reader: `Table.built` makes nothing from a table with a fault, and `Reading.finished` raises.
"""

import math
import re
from collections.abc import Callable, Iterator, Mapping, Sequence
from pathlib import Path
from typing import Final, TypeVar

from app.files import values
from app.files.references import NoSuchReference, referenced_file
from app.files.values import Limits, Refused, Word
from app.files.wording import MISSING, described, did_you_mean, printable
from geometry.errors import BadInput, Fault, GeometryError

T = TypeVar("T")
S = TypeVar("S")

_MOST_FAULTS: Final = 100
_NAN: Final = math.nan
_MM: Final = Limits()
_ALLOWED_IN_MESSAGE: Final = re.compile(r"; allowed(?: is| are|:) | is outside the range ")


class Reading:
    """One file being read: its faults so far, and its tables, which tell at the end which keys nobody asked for."""

    def __init__(self, path: Path, content: Mapping[str, object]) -> None:
        self.file = str(path)
        self.folder = path.parent
        self._faults: list[Fault] = []
        self._tables: list[Table] = []
        self.top = self.opened(content, "", "", None)

    def opened(self, content: Mapping[str, object], place: str, heading: str, parent: "Table | None") -> "Table":
        """Return a cursor over `content`, whose unknown keys count in the end."""
        table = Table(self, content, place, heading, parent)
        self._tables.append(table)
        return table

    def add(self, faults: Sequence[Fault]) -> None:
        """Note faults, of this file or of one that it names. Raises BadInput once there are far too many."""
        self._faults.extend(faults)
        if len(self._faults) > _MOST_FAULTS:
            cut = Fault(self.file, "", f"more faults than these {_MOST_FAULTS}", "none")
            raise BadInput([*self._faults[:_MOST_FAULTS], cut])

    def finished(self, made: T | None) -> T:
        """Return what was made of the file; raise BadInput with all faults, unknown keys among them."""
        for table in self._tables:
            table.refuse_unknown()
        if self._faults or made is None:
            raise BadInput(self._faults)
        return made


class Table:
    """One table of a file: typed getters that check the value and remember the key.

    A getter without `default` wants the key to be there. `place` tells a reader where the table is, the tables of a
    list counted from 1 ("arm[2] 'snout'.position[1]"); `heading` is what TOML calls it ("arm.position").
    """

    def __init__(
        self,
        reading: Reading,
        content: Mapping[str, object],
        place: str,
        heading: str,
        parent: "Table | None",
    ) -> None:
        self.reading = reading
        self.place = place
        self.heading = heading
        self.sound = True
        self._content = content
        self.parent = parent
        self._known: list[str] = ["format"] if parent is None else []
        self._any_key = False

    # What the file says besides values

    def has(self, key: str) -> bool:
        """Tell whether the key is there, and count it as known."""
        if key not in self._known:
            self._known.append(key)
        return key in self._content

    def raw(self, key: str) -> object:
        """Return the unchecked value, MISSING where there is none."""
        return self._content[key] if self.has(key) else MISSING

    def ignore_rest(self) -> None:
        """Leave the keys that nobody asks for alone: what they mean hangs on something that is at fault itself."""
        self._any_key = True

    def refuse_unknown(self) -> None:
        """Note a fault for every key that no getter asked for."""
        unknown = [] if self._any_key else [key for key in self._content if key not in self._known]
        for key in unknown:
            self.fault(_key_shown(key), "an unknown key", did_you_mean(key, self._known))

    # Faults

    def fault(self, where: str, found: str, allowed: str) -> None:
        """Note a fault at `where`, a key or a position below this table ("" for the table itself)."""
        self.reading.add([Fault(self.reading.file, self._at(where), found, allowed)])
        self._spoil()

    def built(self, make: Callable[[], T]) -> T | None:
        """Return `make()`, or None where the table has a fault already or what it makes is refused."""
        return self.attempted(make) if self.sound else None

    def attempted(self, make: Callable[[], T]) -> T | None:
        """Return `make()`, which needs nothing of this table that may be at fault, or None where it is refused."""
        try:
            return make()
        except GeometryError as error:
            found, allowed = [*_ALLOWED_IN_MESSAGE.split(str(error), maxsplit=1), "what the message says"][:2]
            self.fault("", found, allowed)
        except BadInput as error:
            self.reading.add(error.faults)
            self._spoil()
        return None

    # Single values

    def checked(self, key: str, check: Callable[[object], T], stand_in: S, default: S | None = None) -> T | S:
        """Return the value as `check` returns it, or the default, or after a fault the stand-in."""
        value = self.raw(key)
        if value is MISSING and default is not None:
            return default
        try:
            return check(value)
        except Refused as refused:
            for problem in refused.problems:
                self.fault(key + problem.where, problem.found, problem.allowed)
            return stand_in

    def number(self, key: str, limits: Limits = _MM, default: float | None = None) -> float:
        """Return a finite number within `limits`."""
        return self.checked(key, lambda value: values.number(value, limits), _NAN, default)

    def optional_number(self, key: str, limits: Limits = _MM) -> float | None:
        """Return a finite number within `limits`, None where the key is missing."""
        return self.number(key, limits) if self.has(key) else None

    def whole(self, key: str, low: int, high: int) -> int:
        """Return a whole number within [low, high]."""
        return self.checked(key, lambda value: values.whole(value, low, high), low)

    def flag(self, key: str) -> bool:
        """Return true or false; false unless given."""
        return self.checked(key, values.flag, False, False)

    def text(self, key: str) -> str:
        """Return one line of printable text."""
        return self.checked(key, values.text, "")

    def optional_text(self, key: str) -> str | None:
        """Return one line of printable text, None where the key is missing."""
        return self.text(key) if self.has(key) else None

    def note(self, key: str) -> str:
        """Return text that may run over lines; empty unless given."""
        return self.checked(key, values.note, "", "")

    def day(self, key: str) -> str:
        """Return a date as YYYY-MM-DD."""
        return self.checked(key, values.day, "")

    def choice(self, key: str, options: Sequence[Word], default: Word | None = None) -> Word:
        """Return one of `options`."""
        return self.checked(key, lambda value: values.choice(value, options), options[0], default)

    def file(self, key: str) -> Path | None:
        """Return the existing file that the key names; None after a fault."""
        text = self.checked(key, lambda value: values.text(value, longest=1000), "")
        if not text:
            return None
        try:
            return referenced_file(self.reading.folder, text)
        except NoSuchReference as error:
            self.fault(key, error.found, error.allowed)
            return None

    # Lists

    def pair(self, key: str, limits: Limits = _MM, default: tuple[float, float] | None = None) -> tuple[float, float]:
        """Return two numbers."""
        return self.checked(key, lambda value: values.pair(value, limits), (_NAN, _NAN), default)

    def vector(
        self, key: str, limits: Limits = _MM, default: tuple[float, float, float] | None = None
    ) -> tuple[float, float, float]:
        """Return three numbers."""
        return self.checked(key, lambda value: values.vector(value, limits), (_NAN, _NAN, _NAN), default)

    def interval(self, key: str, limits: Limits = _MM) -> tuple[float, float]:
        """Return [low, high], low not above high."""
        return self.checked(key, lambda value: values.interval(value, limits), (_NAN, _NAN))

    def names(self, key: str, most: int, default: tuple[str, ...] | None = None) -> tuple[str, ...]:
        """Return a list of one-line texts that differ."""
        return self.checked(key, lambda value: values.distinct(value, values.text, most), (), default)

    # Tables below

    def table(self, key: str) -> "Table | None":
        """Return the table [key], None where there is none or something else."""
        return self._opened(self._content[key], key, key) if self.has(key) else None

    def required_table(self, key: str) -> "Table":
        """Return the table [key]; where there is none that is one fault, and what is returned is empty and mute."""
        table = self.table(key)
        if table is not None:
            return table
        if key not in self._content:
            self.fault(key, "nothing", f"a table [{self._below(key)}]")
        return Table(Reading(Path(self.reading.file), {}), {}, self._at(key), self._below(key), None)

    def tables(self, key: str, most: int, fewest: int = 0) -> Iterator["Table"]:
        """Yield each table of the list [[key]], which may be missing where `fewest` is 0."""
        if isinstance(self.raw(key), dict):
            self.fault(key, "a single table", f"[[{self._below(key)}]] for each")
            return
        default: list[object] | None = None if fewest else []
        what = f"a list [[{self._below(key)}]] or {key} = [{{ … }}, … ]"
        items = self.checked(key, lambda value: values.items(value, most, fewest, what), [], default)
        for i, item in enumerate(items, start=1):
            table = self._opened(item, key, f"{key}[{i}]")
            if table is not None:
                yield table

    def _opened(self, value: object, key: str, where: str) -> "Table | None":
        if not isinstance(value, dict):
            self.fault(where, described(value), f"a table [{self._below(key)}] or {key} = {{ … }}")
            return None
        name = value.get("name")
        label = f" '{printable(name)}'" if isinstance(name, str) and name else ""
        return self.reading.opened(value, self._at(where) + label, self._below(key), self)

    def _below(self, key: str) -> str:
        return f"{self.heading}.{key}" if self.heading else key

    def _at(self, where: str) -> str:
        return f"{self.place}.{where}" if self.place and where else self.place or where

    def _spoil(self) -> None:
        table: Table | None = self
        while table is not None:
            table.sound = False
            table = table.parent


def _key_shown(key: str) -> str:
    """Return a key as it would stand in a file, quoted where it is more than a plain word."""
    plain = key.replace("_", "").replace("-", "")
    return key if plain.isalnum() and key.isascii() and len(key) <= values.LONGEST_NAME else f"'{printable(key)}'"
