"""Words for what was found in a file, short and harmless whatever it holds."""

import difflib
from collections.abc import Iterable
from typing import Final

MISSING: Final = object()
"""Stands for the value of a key that is not there, so that the check of the value tells what it should have been."""

_LONGEST_SHOWN = 60
_LARGEST_SHOWN = 10**18


def described(value: object) -> str:
    """Return a TOML value in a few words. Never long, never deep: the value may come from a hostile file."""
    if value is MISSING:
        return "nothing"
    if isinstance(value, str):
        return f"'{printable(value)}'"
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, int) and abs(value) > _LARGEST_SHOWN:
        return "a whole number of more than 18 digits"
    if isinstance(value, int | float):
        return f"{value}"
    if isinstance(value, list):
        return f"a list of {len(value)}"
    if isinstance(value, dict):
        return "a table"
    return f"the date or time {value}"


def printable(text: str) -> str:
    """Return `text` shortened to 60 characters, what cannot be printed escaped."""
    return escaped(text if len(text) <= _LONGEST_SHOWN else text[: _LONGEST_SHOWN - 1] + "…")


def escaped(text: str) -> str:
    """Return `text`, what cannot be printed escaped: names of files may hold what a terminal would obey."""
    return "".join(c if c.isprintable() else f"\\u{ord(c):04x}" for c in text)


def decimal_number(text: str) -> float:
    """Return a number that a person typed. ValueError, also for what only Python reads as one, such as '1_0'."""
    if "_" in text:
        raise ValueError(text)
    return float(text)


def one_of(options: Iterable[str]) -> str:
    """Return the options as a list in words."""
    shown = [f"'{printable(option)}'" for option in options]
    return ", ".join(shown) if shown else "nothing"


def did_you_mean(word: str, options: Iterable[str]) -> str:
    """Return "did you mean 'x'? one of …", or only the list where nothing comes near."""
    known = list(options)
    if not known:
        return "nothing"
    by_folded = {option.casefold(): option for option in known}
    near = difflib.get_close_matches(word[:200].casefold(), list(by_folded), n=1, cutoff=0.55)
    hint = f"did you mean '{printable(by_folded[near[0]])}'? " if near else ""
    return f"{hint}one of {one_of(known)}"


def number_range(low: float, high: float, *, above: bool = False) -> str:
    """Return the range in words; `above` excludes the low end."""
    return f"above {low:g}, at most {high:g}" if above else f"{low:g} to {high:g}"
