"""Axes of motion as a room file writes them."""

from typing import Final, Literal

from app.files.reading import Table
from app.files.values import LARGEST_MM, Limits
from geometry.machine import Axis, Couch, Readout

LARGEST_TILT: Final = Limits(-30.0, 30.0)
_WHOLE_TURN: Final = Limits(-360.0, 360.0)
_LARGEST_GANTRY_TRAVEL_DEG: Final = 400.0
_FIXED: Final = Axis(0.0, 0.0)
_ORIGIN: Final = (0.0, 0.0, 0.0)


def gantry_of(top: Table) -> Axis:
    """Return the gantry's axis: its travel is unwrapped about 0."""
    table = top.required_table("gantry")
    axis = _axis(table, "deg", _WHOLE_TURN)
    if axis.low > 0.0 or axis.high < 0.0:
        table.fault("travel_deg", f"[{axis.low:g}, {axis.high:g}]", "an interval that contains 0")
    if axis.high - axis.low > _LARGEST_GANTRY_TRAVEL_DEG:
        table.fault("travel_deg", f"{axis.high - axis.low:g} in all", f"at most {_LARGEST_GANTRY_TRAVEL_DEG:g} in all")
    return axis


def collimator_of(top: Table) -> Axis:
    """Return the collimator's axis, fixed at 0 where there is none."""
    return _optional(top, "collimator", "deg", _WHOLE_TURN)


def couch_of(top: Table) -> Couch:
    """Return the couch; a stage that is left out stands at 0."""
    table = top.required_table("couch")
    linear = Limits(-5000.0, 5000.0)
    return Couch(
        turntable=_optional(table, "turntable", "deg", Limits(-180.0, 180.0)),
        eccentric=_optional(table, "eccentric", "deg", _WHOLE_TURN),
        lateral=_optional(table, "lateral", "mm", linear),
        longitudinal=_optional(table, "longitudinal", "mm", linear),
        vertical=_optional(table, "vertical", "mm", linear),
        pitch=_optional(table, "pitch", "deg", LARGEST_TILT),
        roll=_optional(table, "roll", "deg", LARGEST_TILT),
        eccentric_offset_mm=table.vector("eccentric_offset_mm", default=_ORIGIN),
        head_end_mm=table.number("head_end_mm", default=0.0),
    )


def _optional(table: Table, key: str, unit: Literal["deg", "mm"], limits: Limits) -> Axis:
    axis = table.table(key)
    return _FIXED if axis is None else _axis(axis, unit, limits)


def _axis(table: Table, unit: Literal["deg", "mm"], limits: Limits) -> Axis:
    low, high = table.interval(f"travel_{unit}", limits)
    speed = table.optional_number(f"speed_{unit}_per_s", Limits(0.0, 10_000.0, above=True))
    readout = table.table("readout")
    return Axis(low, high, speed, Readout() if readout is None else _readout(readout, unit))


def _readout(table: Table, unit: Literal["deg", "mm"]) -> Readout:
    zero_limits = _WHOLE_TURN if unit == "deg" else Limits(-LARGEST_MM, LARGEST_MM)
    zero = table.number(f"zero_{unit}", zero_limits, default=0.0)
    sense = table.whole("sense", -1, 1) if table.has("sense") else 1
    if sense == 0:
        table.fault("sense", "0", "1 or -1")
    resolution = table.number(f"resolution_{unit}", Limits(1e-4, 10.0), default=0.1)
    return Readout(zero, -1 if sense < 0 else 1, resolution)
