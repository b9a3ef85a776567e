"""The room: what stays the same from patient to patient."""

from collections.abc import Mapping
from dataclasses import dataclass, field
from enum import StrEnum
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from geometry.frames import normalised_deg, rotation_x, rotation_y, rotation_z, transform
from geometry.solids import Solid

Array = NDArray[np.float64]


class Mount(StrEnum):
    """The system of IEC 61217 that a part is fixed to, and whose coordinates describe it."""

    FIXED = "fixed"
    GANTRY = "gantry"
    COLLIMATOR = "collimator"
    COUCH = "couch"


class Stage(StrEnum):
    """A movement of the couch that a couch part may follow, from the floor up."""

    TURNTABLE = "turntable"
    ECCENTRIC = "eccentric"
    LATERAL = "lateral"
    LONGITUDINAL = "longitudinal"
    VERTICAL = "vertical"
    PITCH_ROLL = "pitch_roll"


EVERY_STAGE = frozenset(Stage)

PartKind = Literal["machine", "patient", "device"]


@dataclass(frozen=True)
class Part:
    """A named solid on a mount.

    `solid` is in the coordinates of the mount, mm: the fixed, gantry or collimator system of IEC 61217, each with
    its origin at the isocentre; for a couch part, the table-top system of the stages that it follows, the others at
    zero (a pedestal that follows the turntable alone: the patient support system).
    """

    name: str
    mount: Mount
    solid: Solid
    follows: frozenset[Stage] = EVERY_STAGE
    kind: PartKind = "machine"
    accessory: str | None = None
    arm: str | None = None
    colour: str | None = None


@dataclass(frozen=True)
class Readout:
    """The scale that a machine shows for an axis: shown = zero + sense * IEC value."""

    zero: float = 0.0
    sense: Literal[1, -1] = 1
    resolution: float = 0.1

    def is_iec(self) -> bool:
        """Tell whether the scale is that of IEC 61217 itself."""
        return self.zero == 0.0 and self.sense == 1

    def shown_deg(self, iec_deg: float) -> float:
        """Return what the machine shows, in [0, 360), for an angle in IEC 61217."""
        return normalised_deg(self.zero + self.sense * iec_deg)


@dataclass(frozen=True)
class Axis:
    """Travel (unwrapped, closed, IEC sense), top speed and readout of one axis; deg or mm, and per second."""

    low: float
    high: float
    speed: float | None = None
    readout: Readout = field(default_factory=Readout)


@dataclass(frozen=True)
class Couch:
    """Axes of the patient support of IEC 61217.

    `eccentric_offset_mm` is E, the eccentric system's origin in the patient support system.
    `head_end_mm` is the table-top Y of the table's head end (the origin is on the upper surface, mid-width).
    """

    turntable: Axis
    eccentric: Axis
    lateral: Axis
    longitudinal: Axis
    vertical: Axis
    pitch: Axis
    roll: Axis
    eccentric_offset_mm: tuple[float, float, float] = (0.0, 0.0, 0.0)
    head_end_mm: float = 0.0


@dataclass(frozen=True)
class ArmPosition:
    """Where a named position puts an arm's parts: a turn about a line, then a shift, in the mount's coordinates."""

    name: str
    shift_mm: tuple[float, float, float] = (0.0, 0.0, 0.0)
    turn_axis: Literal["x", "y", "z"] = "x"
    turn_deg: float = 0.0
    turn_about_mm: tuple[float, float, float] = (0.0, 0.0, 0.0)

    def matrix(self) -> Array:
        """Return the homogeneous matrix, shape (4, 4), from the part as drawn to the part in this position."""
        turn = {"x": rotation_x, "y": rotation_y, "z": rotation_z}[self.turn_axis](self.turn_deg)
        pivot = np.array(self.turn_about_mm)
        return transform(turn, pivot - turn @ pivot + np.array(self.shift_mm))


@dataclass(frozen=True)
class Arm:
    """A part or parts that move between named positions, or slide along a direction within a travel.

    `positions[0]` is the position when a set-up names none. `travel_mm` is None where there is no free travel.
    """

    name: str
    positions: tuple[ArmPosition, ...]
    direction: tuple[float, float, float] | None = None
    travel_mm: tuple[float, float] | None = None


@dataclass(frozen=True)
class Accessory:
    """Something that can be fitted; its parts name it. Of those in one `slot` only one can be fitted."""

    name: str
    slot: str | None = None


@dataclass(frozen=True)
class JoinedPair:
    """Two parts of different sides that touch by construction and are not checked; the reason is exported."""

    first: str
    second: str
    reason: str


@dataclass(frozen=True)
class Survey:
    """Who measured the room, when, how, and the standard uncertainty (one standard deviation, mm)."""

    by: str
    on: str
    method: str
    uncertainty_mm: float


@dataclass(frozen=True)
class Room:
    """A treatment room, checked and in the units of its fields.

    Parts' names are unique within a room. `survey` is None where nobody surveyed it.
    """

    name: str
    demonstration: bool
    survey: Survey | None
    source_axis_distance_mm: float
    gantry: Axis
    collimator: Axis
    couch: Couch
    parts: tuple[Part, ...]
    arms: tuple[Arm, ...] = ()
    accessories: tuple[Accessory, ...] = ()
    joined: tuple[JoinedPair, ...] = ()
    max_excess_mm: float = 0.5
    notes: str = ""

    def arm_named(self, name: str) -> Arm:
        """Return the arm; KeyError if the room has none of that name."""
        return self._arms_by_name()[name]

    def _arms_by_name(self) -> Mapping[str, Arm]:
        return {arm.name: arm for arm in self.arms}
