"""Angles of control points as paths without jumps, in the sense that a plan or a typed list states."""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

from geometry.frames import normalised_deg

# Plans hold 5e-9 where 0 is meant. Far below any readout.
_DIGITS: Final = 7
# A step against the stated sense of up to this is rounding of the plan, deg.
_JITTER_DEG: Final = 0.01
# Without a stated sense a turn of up to this is taken the shorter way, deg: rounding, no travel that matters.
_SMALL_DEG: Final = 0.05


@dataclass(frozen=True)
class Turned:
    """Angles that follow one another without a jump of 360, deg, and why they are in doubt, in words."""

    angles_deg: tuple[float, ...]
    doubts: tuple[str, ...]


def snapped_deg(angle_deg: float) -> float:
    """Return the angle in [0, 360), freed of the noise of binary and decimal numbers."""
    rounded = round(normalised_deg(angle_deg), _DIGITS)
    return 0.0 if rounded >= 360.0 else rounded


def turned(name: str, angles_deg: Sequence[float], senses: Sequence[int]) -> Turned:
    """Return the angles of an axis as one path.

    `senses[k]` is that of the turn from angle k to the next: 1 rising, -1 falling, 0 not stated. `name` is the axis,
    for the doubts: a turn without a sense, and a sense without a turn, which may be a whole turn or none.
    """
    found = [snapped_deg(angles_deg[0])]
    doubts: dict[str, None] = {}
    for k in range(1, len(angles_deg)):
        rising = snapped_deg(angles_deg[k] - angles_deg[k - 1])
        change = rising if rising <= 180.0 else rising - 360.0
        sense = senses[k - 1]
        if sense and change * sense < -_JITTER_DEG:
            change += 360.0 * sense
        elif not sense and abs(change) > _SMALL_DEG:
            doubts[f"{name} turns from {angles_deg[k - 1]:g} to {angles_deg[k]:g} deg, and which way is not stated"] = (
                None
            )
        found.append(round(found[-1] + change, _DIGITS))
    if any(senses[: len(angles_deg) - 1]) and max(found) - min(found) <= _JITTER_DEG:
        doubts[f"{name} is said to turn and ends where it starts: a whole turn, or none"] = None
    return Turned(tuple(found), tuple(doubts))
