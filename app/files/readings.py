"""Angles as people write them: IEC 61217 in [0, 360), and the machine's own scales where it has some."""

import math
from collections.abc import Iterable
from dataclasses import dataclass

from geometry.frames import normalised_deg
from geometry.machine import Axis, Readout, Room

# Spans are rounded to the readout and grids to their step; what follows is rounding of binary numbers.
_DIGITS = 9


@dataclass(frozen=True)
class OwnScales:
    """The scales of gantry and couch that differ from IEC 61217; None where the machine shows that."""

    gantry: Readout | None
    couch: Readout | None


def own_scales(room: Room) -> OwnScales:
    """Return the scales of a room's gantry and turntable that are not IEC 61217's."""
    return OwnScales(_own(room.gantry), _own(room.couch.turntable))


def reading_deg(angle_deg: float) -> float:
    """Return an angle in [0, 360), freed of the noise of binary numbers."""
    rounded = round(normalised_deg(angle_deg), _DIGITS)
    return 0.0 if rounded >= 360.0 else rounded


def shown_deg(readout: Readout, angle_deg: float) -> float:
    """Return what the machine shows for an IEC angle, in [0, 360), freed of the noise of binary numbers."""
    return reading_deg(readout.shown_deg(angle_deg))


def number_text(value: float) -> str:
    """Return a number with as many decimals as it needs, nine at most, and never with an exponent."""
    text = f"{value:.{_DIGITS}f}".rstrip("0").rstrip(".")
    return "0" if text == "-0" else text


def rounded_down(value_mm: float, digits: int) -> float | None:
    """Return a proved bound with fewer digits, still a bound; None in place of what is no number."""
    if not math.isfinite(value_mm):
        return None
    scale = 10.0**digits
    # A value that is short by rounding alone (0.3 * 10 = 2.9999...) keeps its digit.
    return math.floor(value_mm * scale + 1e-6) / scale


def clearance_text(clearance_mm: float, digits: int = 1) -> str:
    """Return a clearance in mm, rounded down so that paper never claims more; "unknown" where there is none."""
    if clearance_mm == math.inf:
        return "nothing near"
    shown = rounded_down(clearance_mm, digits)
    return "unknown" if shown is None else f"{shown:.{digits}f} mm"


def rounded_up(value_mm: float, digits: int = 1) -> float:
    """Return what must remain with fewer digits, not below it."""
    scale = 10.0**digits
    return math.ceil(value_mm * scale - 1e-6) / scale


def required_text(required_mm: float | None, digits: int = 1) -> str:
    """Return a required clearance in mm, rounded up so that paper never asks for less; empty for none."""
    return "" if required_mm is None else f"{rounded_up(required_mm, digits):.{digits}f} mm"


def finite(value: float) -> float | None:
    """Return the number, or None for one that is infinite or missing."""
    return value if math.isfinite(value) else None


def distinct_readings(angles_deg: Iterable[float]) -> dict[float, list[int]]:
    """Return each reading in [0, 360) with the places in `angles_deg` (unwrapped) that show it, in their order.

    A gantry that turns from -185 to 185 shows 175 to 185 at both ends of its travel.
    """
    places: dict[float, list[int]] = {}
    for place, angle_deg in enumerate(angles_deg):
        places.setdefault(reading_deg(float(angle_deg)), []).append(place)
    return places


def _own(axis: Axis) -> Readout | None:
    return None if axis.readout.is_iec() else axis.readout
