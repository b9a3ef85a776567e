"""Parts and devices as room and set-up files write them."""

import re
from collections.abc import Collection, Iterator
from typing import Final

from app.files import values
from app.files.reading import Table
from app.files.shapes import solid_of
from app.files.values import Problem, Refused
from app.files.wording import did_you_mean, printable
from geometry.machine import EVERY_STAGE, Mount, Part, Stage

MOST_PARTS: Final = 500
_COLOURS: Final = {
    "white": "#f2f2ee",
    "light grey": "#cfd2d4",
    "grey": "#a3a8ac",
    "dark grey": "#5f666b",
    "black": "#2b2e31",
    "beige": "#d8ccb4",
    "blue": "#6f8fae",
    "green": "#7f9e86",
    "brown": "#8a6f57",
}
_HEX: Final = re.compile(r"#[0-9a-f]{6}")


class Names:
    """Names of one kind that have to differ, so far."""

    def __init__(self, taken: Collection[str] = ()) -> None:
        self._taken = set(taken)

    def take(self, table: Table) -> str:
        """Return the `name` of `table`; one that is taken already is a fault."""
        name = table.text("name")
        if name and name in self._taken:
            table.fault("name", f"'{printable(name)}', which is taken", "a name of its own")
        self._taken.add(name)
        return name


def parts_of(
    top: Table, accessories: Collection[str], arms: Collection[str]
) -> Iterator[tuple[str, Mount | None, Part | None]]:
    """Yield name, mount and part of each [[part]]; mount and part are None after a fault of theirs."""
    names = Names()
    for table in top.tables("part", MOST_PARTS, fewest=1):
        solid = solid_of(table)
        mount = table.choice("mount", tuple(Mount))
        name = names.take(table)
        follows = _follows(table) if mount is Mount.COUCH else EVERY_STAGE
        accessory = _one_of_those(table, "accessory", accessories)
        arm = _one_of_those(table, "arm", arms)
        colour = _colour_of(table)
        part = None
        if solid is not None and table.sound:
            part = Part(name, mount, solid, follows, accessory=accessory, arm=arm, colour=colour)
        yield name, mount if table.raw("mount") == mount else None, part


def devices_of(top: Table, taken: Collection[str]) -> Iterator[Part]:
    """Yield each [[device]], a part in table-top coordinates. `taken` are names that it may not have."""
    names = Names(taken)
    for table in top.tables("device", MOST_PARTS):
        solid = solid_of(table)
        name = names.take(table)
        colour = _colour_of(table)
        if solid is not None and table.sound:
            yield Part(name, Mount.COUCH, solid, kind="device", colour=colour)


def _one_of_those(table: Table, key: str, known: Collection[str]) -> str | None:
    """Return the name of an accessory or arm of the room, None unless given."""
    name = table.optional_text(key)
    if name and name not in known:
        table.fault(key, f"'{printable(name)}'", did_you_mean(name, known))
    return name


def _follows(table: Table) -> frozenset[Stage]:
    stages = table.checked(
        "follows",
        lambda value: values.distinct(value, lambda item: values.choice(item, tuple(Stage)), len(Stage)),
        (),
        tuple(Stage),
    )
    return frozenset(stages)


def _colour_of(table: Table) -> str | None:
    return table.checked("colour", _colour, "") if table.has("colour") else None


def _colour(value: object) -> str:
    """Return a colour word or "#rrggbb" as "#rrggbb" in lower case."""
    word = values.text(value).lower()
    if word in _COLOURS:
        return _COLOURS[word]
    if not _HEX.fullmatch(word):
        raise Refused([Problem("", f"'{printable(word)}'", f"'#rrggbb' or {did_you_mean(word, _COLOURS)}")])
    return word
