"""What is fitted, from words that a person typed or a plan holds, to a room's accessories and arms."""

from collections.abc import Iterable
from dataclasses import dataclass, replace
from typing import Final

from app.files.wording import decimal_number, did_you_mean, one_of, printable
from geometry.machine import Arm, Room
from geometry.setup import Setup

# Said in place of accessories: there are none.
NOTHING: Final = "none"


class Unfit(ValueError):
    """What is said to be fitted is not there to be fitted: `found` and `allowed`, in words."""

    def __init__(self, found: str, allowed: str) -> None:
        super().__init__(f"{found}; allowed: {allowed}")
        self.found = found
        self.allowed = allowed


@dataclass(frozen=True)
class Fitted:
    """Accessories in the room's order, None for "as the set-up has them", and arms that are said to stand elsewhere."""

    accessories: tuple[str, ...] | None
    arms: tuple[tuple[str, str | float], ...]


def fitted_from(words: Iterable[str], room: Room) -> Fitted:
    """Return what words such as `cone`, `kV source=extended`, `snout=120` or `none` say. Raises Unfit."""
    accessories: list[str] = []
    arms: dict[str, str | float] = {}
    bare = False
    for word in words:
        name, is_arm, place = (part.strip() for part in word.partition("="))
        found = accessory_named(word, room)
        if found is not None:
            accessories.append(found)
        elif is_arm:
            arm = _named(name, [arm.name for arm in room.arms], "an arm", "arms")
            stands = _place(room.arm_named(arm), place)
            if arms.setdefault(arm, stands) != stands:
                raise Unfit(f"'{printable(arm)}' at {_told(arms[arm])} and at {_told(stands)}", "one place for an arm")
        elif plain(word) == plain(NOTHING):
            bare = True
        else:
            accessories.append(_named(word, [one.name for one in room.accessories], "an accessory", "accessories"))
    if bare and accessories:
        raise Unfit(f"'{NOTHING}' and {one_of(accessories)}", "one of the two")
    _check_slots(accessories, room)
    ordered = tuple(one.name for one in room.accessories if one.name in accessories)
    return Fitted(ordered if accessories or bare else None, tuple(arms.items()))


def accessory_named(words: str, room: Room) -> str | None:
    """Return the accessory whose name is `words` but for case, spaces and signs; None for none, or for several."""
    found = [one.name for one in room.accessories if plain(one.name) == plain(words)]
    return found[0] if len(found) == 1 else None


def with_fitted(setup: Setup, fitted: Fitted) -> Setup:
    """Return the set-up with what is said to be fitted; what nothing is said of stays."""
    accessories = setup.fitted if fitted.accessories is None else fitted.accessories
    chosen = {**dict(setup.arm_positions), **dict(fitted.arms)}
    arms = tuple((arm.name, chosen[arm.name]) for arm in setup.room.arms if arm.name in chosen)
    return replace(setup, fitted=accessories, arm_positions=arms)


def with_accessory(setup: Setup, name: str) -> Setup:
    """Return the set-up with one accessory more, in the place of one that is in its slot."""
    slots = {one.name: one.slot for one in setup.room.accessories}
    kept = [one for one in setup.fitted if slots.get(one) is None or slots.get(one) != slots[name]]
    return replace(setup, fitted=tuple(one for one in slots if one in kept or one == name))


def plain(words: str) -> str:
    """Return letters and digits alone, in lower case: what names are compared by."""
    return "".join(letter for letter in words.casefold() if letter.isalnum())


def _named(words: str, names: list[str], what: str, all_of_them: str) -> str:
    found = [name for name in names if plain(name) == plain(words)]
    if len(found) != 1:
        known = f"{what} of the room: {did_you_mean(words, names)}" if names else f"none: the room has no {all_of_them}"
        raise Unfit(f"'{printable(words)}'", known)
    return found[0]


def _told(place: str | float) -> str:
    return f"'{printable(place)}'" if isinstance(place, str) else f"{place:g} mm"


def _place(arm: Arm, words: str) -> str | float:
    names = [position.name for position in arm.positions]
    found = [name for name in names if plain(name) == plain(words)]
    if len(found) == 1:
        return found[0]
    allowed = did_you_mean(words, names)
    if arm.travel_mm is not None:
        low, high = arm.travel_mm
        allowed = f"a slide of {low:g} to {high:g} mm" + (f", or {allowed}" if names else "")
        try:
            slide_mm = decimal_number(words)
        except ValueError:
            raise Unfit(f"'{printable(arm.name)}={printable(words)}'", allowed) from None
        if low <= slide_mm <= high:
            return slide_mm
    raise Unfit(f"'{printable(arm.name)}={printable(words)}'", allowed)


def _check_slots(accessories: list[str], room: Room) -> None:
    slots = {one.name: one.slot for one in room.accessories}
    taken: dict[str, str] = {}
    for name in dict.fromkeys(accessories):
        slot = slots[name]
        if slot is None:
            continue
        if slot in taken:
            raise Unfit(f"'{printable(taken[slot])}' and '{printable(name)}' in slot '{printable(slot)}'", "one")
        taken[slot] = name
