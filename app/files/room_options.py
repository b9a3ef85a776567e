"""Accessories, arms and joined pairs as a room file writes them."""

import itertools
import math
from collections.abc import Iterator, Mapping
from typing import Final

from app.files.part_keys import MOST_PARTS, Names
from app.files.reading import Table
from app.files.shapes import AXES, ORIGIN
from app.files.values import Limits
from app.files.wording import did_you_mean, printable
from geometry.machine import Accessory, Arm, ArmPosition, JoinedPair, Mount

_MOST: Final = 100
_MOST_JOINED: Final = 5000
_NOT_OF_THE_ROOM: Final = ("patient", "body", "device")


def accessories_of(top: Table) -> Iterator[Accessory]:
    """Yield each [[accessory]]."""
    names = Names()
    for table in top.tables("accessory", _MOST):
        yield Accessory(names.take(table), table.optional_text("slot"))


def arms_of(top: Table) -> Iterator[Arm]:
    """Yield each [[arm]], the direction of its slide as a unit vector."""
    names = Names()
    for table in top.tables("arm", _MOST):
        name = names.take(table)
        direction, travel_mm = _slide(table)
        position_names = Names()
        fewest = 1 if travel_mm is None else 0
        positions = tuple(_position(position, position_names) for position in table.tables("position", _MOST, fewest))
        yield Arm(name, positions, direction, travel_mm)


def joined_of(top: Table, mounts: Mapping[str, Mount | None]) -> tuple[JoinedPair, ...]:
    """Return every joined pair. `mounts` holds the mount of each part by its name, None where that is at fault."""
    pairs: dict[tuple[str, str], JoinedPair] = {}
    for table in top.tables("joined", _MOST_JOINED):
        reason = table.text("reason")
        several = table.has("parts") or table.has("with")
        firsts = table.names("parts", MOST_PARTS) if several else (table.text("first"),)
        seconds = table.names("with", MOST_PARTS) if several else (table.text("second"),)
        known = [_known(table, name, mounts) for name in (*firsts, *seconds)]
        if not all(known) or len(firsts) * len(seconds) + len(pairs) > _MOST_JOINED:
            if all(known):
                table.fault("", "too many pairs", f"at most {_MOST_JOINED} in the room")
            continue
        for first, second in itertools.product(firsts, seconds):
            key = (min(first, second), max(first, second))
            if key in pairs:
                table.fault("", f"'{printable(first)}' and '{printable(second)}' again", "each pair once")
            elif _may_be_joined(table, first, second, mounts):
                pairs[key] = JoinedPair(first, second, reason)
    return tuple(pairs.values())


def _position(table: Table, names: Names) -> ArmPosition:
    return ArmPosition(
        name=names.take(table),
        shift_mm=table.vector("shift_mm", default=ORIGIN),
        turn_axis=table.choice("turn_axis", AXES, default="x"),
        turn_deg=table.number("turn_deg", Limits(-360.0, 360.0), default=0.0),
        turn_about_mm=table.vector("turn_about_mm", default=ORIGIN),
    )


def _slide(table: Table) -> tuple[tuple[float, float, float] | None, tuple[float, float] | None]:
    """Return unit direction and travel of an arm that slides, both None for one that does not."""
    given = [key for key in ("direction", "travel_mm") if table.has(key)]
    if not given:
        return None, None
    if len(given) == 1:
        table.fault("", f"{given[0]} alone", "direction and travel_mm together")
        table.ignore_rest()
        return None, None
    travel_mm = table.interval("travel_mm", Limits(-5000.0, 5000.0))
    x, y, z = table.vector("direction")
    length = math.hypot(x, y, z)
    if length == 0.0:
        table.fault("direction", "[0, 0, 0]", "a direction")
        return None, None
    return (x / length, y / length, z / length), travel_mm


def _known(table: Table, name: str, mounts: Mapping[str, Mount | None]) -> bool:
    """Tell whether a joined pair may name this; if not, that is a fault."""
    if name in mounts or not name:
        return bool(name)
    word = name.casefold()
    if any(word.startswith(kind) for kind in _NOT_OF_THE_ROOM):
        table.fault("", f"'{printable(name)}'", "parts of the room; the patient and devices are always checked")
    else:
        table.fault("", f"'{printable(name)}', no part of the room", did_you_mean(name, mounts))
    return False


def _may_be_joined(table: Table, first: str, second: str, mounts: Mapping[str, Mount | None]) -> bool:
    """Tell whether just one of the two is fixed to the room; if not, that is a fault."""
    sides = {_side(mount) for mount in (mounts[first], mounts[second]) if mount is not None}
    if None in (mounts[first], mounts[second]):
        return False
    shown = f"'{printable(first)}' and '{printable(second)}'"
    if len(sides) == 1:
        table.fault("", f"{shown}, both of side {sides.pop()}", "parts of two sides; others are not checked anyway")
        return False
    if "room" not in sides:
        table.fault("", f"{shown}, gantry and couch", "a fixed part with one of the gantry or the couch")
        return False
    return True


def _side(mount: Mount) -> str:
    if mount is Mount.FIXED:
        return "room"
    return "couch" if mount is Mount.COUCH else "gantry"
