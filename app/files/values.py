"""Checks of single values from a file. Each returns the value as the program wants it, or raises Refused."""

import datetime
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Final, TypeVar

from app.files.wording import described, did_you_mean, number_range, one_of

T = TypeVar("T")
Word = TypeVar("Word", bound=str)

LONGEST_NAME: Final = 200
LONGEST_NOTE: Final = 5000
LARGEST_MM: Final = 20_000.0


@dataclass(frozen=True)
class Problem:
    """What is wrong with a value, or with the item of it at `where` ("[2]", "" for the whole)."""

    where: str
    found: str
    allowed: str


class Refused(Exception):
    """A value that is not allowed: all its problems."""

    def __init__(self, problems: Sequence[Problem]) -> None:
        self.problems = tuple(problems)
        super().__init__("; ".join(f"{p.where} {p.found}" for p in problems))


@dataclass(frozen=True)
class Limits:
    """A range of numbers, ends included; with `above` the low end is not."""

    low: float = -LARGEST_MM
    high: float = LARGEST_MM
    above: bool = False

    def __str__(self) -> str:
        return number_range(self.low, self.high, above=self.above)

    def hold(self, value: float) -> bool:
        """Tell whether the value is finite and within; NaN is not, a whole number may be of any size."""
        return self.low <= value <= self.high and not (self.above and value == self.low)


def number(value: object, limits: Limits) -> float:
    """Return a number within `limits`. True and false are none."""
    if isinstance(value, int | float) and not isinstance(value, bool) and limits.hold(value):
        return float(value)
    raise _refused(value, f"a number, {limits}")


def whole(value: object, low: int, high: int) -> int:
    """Return a whole number within [low, high]."""
    if isinstance(value, int) and not isinstance(value, bool) and low <= value <= high:
        return value
    raise _refused(value, f"a whole number, {low} to {high}")


def flag(value: object) -> bool:
    """Return true or false."""
    if isinstance(value, bool):
        return value
    raise _refused(value, "true or false")


def text(value: object, longest: int = LONGEST_NAME) -> str:
    """Return one line of printable text without blanks at its ends."""
    if not isinstance(value, str):
        raise _refused(value, "text")
    line = value.strip()
    if not 1 <= len(line) <= longest:
        raise Refused([Problem("", f"a text of {len(line)} characters", f"1 to {longest} characters")])
    if not line.isprintable():
        raise _refused(line, "one line of printable characters")
    return line


def note(value: object) -> str:
    """Return text that may be empty and run over lines."""
    if not isinstance(value, str):
        raise _refused(value, "text")
    if len(value) > LONGEST_NOTE:
        raise Refused([Problem("", f"a text of {len(value)} characters", f"at most {LONGEST_NOTE} characters")])
    lines = value.replace("\t", "    ").strip().split("\n")
    if not all(line.isprintable() for line in lines):
        raise _refused(value, "printable characters")
    return "\n".join(lines)


def choice(value: object, options: Sequence[Word]) -> Word:
    """Return one of `options`."""
    for option in options:
        if value == option:
            return option
    raise _refused(value, did_you_mean(value, options) if isinstance(value, str) else f"one of {one_of(options)}")


def day(value: object) -> str:
    """Return a date as YYYY-MM-DD."""
    if isinstance(value, datetime.date) and not isinstance(value, datetime.datetime):
        return value.isoformat()
    raise _refused(value, "a date without quotes, such as 2025-03-14")


def items(value: object, most: int, fewest: int = 0, what: str = "a list") -> list[object]:
    """Return a list of so many items, each still to be checked. `what` says in words what it should be."""
    if isinstance(value, list) and fewest <= len(value) <= most:
        return value
    raise _refused(value, f"{what} of {fewest} to {most}")


def each(values: Sequence[object], check: Callable[[object], T]) -> tuple[T, ...]:
    """Return every item checked; the problems of all items are told together, counted from 1."""
    checked: list[T] = []
    problems: list[Problem] = []
    for i, value in enumerate(values, start=1):
        try:
            checked.append(check(value))
        except Refused as refused:
            problems.extend(Problem(f"[{i}]{p.where}", p.found, p.allowed) for p in refused.problems)
    if problems:
        raise Refused(problems)
    return tuple(checked)


def numbers(value: object, count: int, limits: Limits) -> tuple[float, ...]:
    """Return a list of `count` numbers, each within `limits`."""
    if isinstance(value, list) and len(value) == count:
        return each(value, lambda item: number(item, limits))
    raise _refused(value, f"a list of {count} numbers, {limits}")


def pair(value: object, limits: Limits) -> tuple[float, float]:
    """Return a list of two numbers."""
    first, second = numbers(value, 2, limits)
    return first, second


def vector(value: object, limits: Limits) -> tuple[float, float, float]:
    """Return a list of three numbers."""
    x, y, z = numbers(value, 3, limits)
    return x, y, z


def interval(value: object, limits: Limits) -> tuple[float, float]:
    """Return [low, high] with low not above high."""
    low, high = pair(value, limits)
    if low > high:
        raise Refused([Problem("", f"[{low:g}, {high:g}]", "[low, high], low not above high")])
    return low, high


def distinct(value: object, check: Callable[[object], T], most: int) -> tuple[T, ...]:
    """Return a list of items that all differ."""
    checked = each(items(value, most), check)
    if len(set(checked)) < len(checked):
        raise Refused([Problem("", "the same item twice", "each at most once")])
    return checked


def _refused(value: object, allowed: str) -> Refused:
    return Refused([Problem("", described(value), allowed)])
