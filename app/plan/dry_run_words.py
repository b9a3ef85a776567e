"""Angles, turns and lengths as the dry-run sheet has them: in IEC 61217 and as the machine shows them."""

import math
from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise
from typing import Final, Literal

from app.files.readings import OwnScales, number_text, reading_deg, shown_deg
from geometry.legs import Point
from geometry.machine import Readout

# A plan's angles, to hundredths; places to drive to, to what scales show.
_ANGLE_DIGITS: Final = 2
PLACE_DIGITS: Final = 1
_SAME_DEG: Final = 0.005
Which = Literal["gantry", "couch"]
AXES: Final[tuple[Which, Which]] = ("gantry", "couch")


@dataclass(frozen=True)
class Turn:
    """An axis's angles during a field or a move.

    `iec`: in IEC 61217, as "181° → 179°"; `own`: as the machine shows it, None where that is the same; `sense`: which
    way it turns, in words, empty where it stands still.
    """

    iec: str
    own: str | None
    sense: str


def angle_text(angle_deg: float, digits: int = _ANGLE_DIGITS) -> str:
    """Return an angle in [0, 360), as "181.5°"."""
    return f"{number_text(reading_deg(round(reading_deg(angle_deg), digits)))}°"


def own_text(readout: Readout, angle_deg: float, digits: int = _ANGLE_DIGITS) -> str:
    """Return an IEC angle as the machine shows it."""
    return angle_text(shown_deg(readout, angle_deg), digits)


def turn_of(angles_deg: Sequence[float], which: Which, own: Readout | None) -> Turn:
    """Return in words what an axis does; `angles_deg` at its control points, unwrapped, deg."""
    corners = _corners(angles_deg)
    shown = None if own is None else _joined([own_text(own, angle) for angle in corners])
    return Turn(_joined([angle_text(angle) for angle in corners]), shown, _sense(corners, which))


def point_text(at: Point, scales: OwnScales, axes: Sequence[Which] = AXES) -> str:
    """Return a place to drive to, as "gantry 163° (machine 17°), couch 0°", for the axes that are asked for."""
    words = []
    for which, angle, scale in zip(AXES, at, (scales.gantry, scales.couch), strict=True):
        shown = "" if scale is None else f" (machine {own_text(scale, angle, PLACE_DIGITS)})"
        if which in axes:
            words.append(f"{which} {angle_text(angle, PLACE_DIGITS)}{shown}")
    return ", ".join(words)


def leg_texts(points_deg: Sequence[Point], scales: OwnScales) -> tuple[str, ...]:
    """Return what to drive, one leg after the other, as "gantry to 181° CC (machine 359°)"."""
    return tuple(_leg(one, other, scales) for one, other in pairwise(points_deg))


def _corners(angles_deg: Sequence[float]) -> list[float]:
    """Return the first and last angle, and those between at which the sense changes."""
    kept = [angles_deg[0]]
    last = angles_deg[0]
    sense = 0.0
    for angle in angles_deg[1:]:
        way = angle - last
        if abs(way) < _SAME_DEG:
            continue
        if sense and math.copysign(1.0, way) != sense:
            kept.append(last)
        sense, last = math.copysign(1.0, way), angle
    return [*kept, last] if last != kept[-1] else kept


def _joined(texts: Sequence[str]) -> str:
    return " → ".join(texts)


def _sense(corners: Sequence[float], which: Which) -> str:
    """Return which way an axis turns: the gantry as seen facing it, the couch as seen from above (IEC 61217)."""
    if len(corners) < 2:
        return ""
    if len(corners) > 2:
        return "there and back"
    rising = corners[1] > corners[0]
    if which == "gantry":
        return "CW" if rising else "CC"
    return "counter-clockwise from above" if rising else "clockwise from above"


def _leg(one: Point, other: Point, scales: OwnScales) -> str:
    words = []
    for k, (name, own) in enumerate(zip(AXES, (scales.gantry, scales.couch), strict=True)):
        if abs(one[k] - other[k]) < _SAME_DEG:
            continue
        turn = turn_of((one[k], other[k]), name, own)
        shown = "" if own is None else f" (machine {own_text(own, other[k])})"
        sense = f" {turn.sense}" if name == "gantry" else ""
        words.append(f"{name} to {angle_text(other[k])}{sense}{shown}")
    return " with ".join(words)
