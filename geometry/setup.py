"""The set-up: one patient on the couch, as the user states it."""

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from geometry.body import Body
from geometry.landmarks import Landmark
from geometry.machine import Part, Room
from geometry.solids import Solid

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Surface:
    """A patient envelope that was imported rather than made from sizes.

    `solid` and `landmarks_mm` are in DICOM patient axes, mm. `source` says in words where it came from.
    `isocentre_mm` is that of the RT Plan beside it, if one was named.
    """

    solid: Solid
    source: str
    landmarks_mm: tuple[tuple[Landmark, tuple[float, float, float]], ...] = ()
    isocentre_mm: tuple[float, float, float] | None = None


@dataclass(frozen=True)
class OnTable:
    """Where the patient lies, as a tape measure tells it.

    `from_head_end_mm`: along the table from its head end to the patient's nearest point (negative: overhangs).
    `lateral_mm`: table-top X of the patient axes' origin, the mid-line of a patient on back or front. `height_mm`: gap
    between the table's surface and the patient's lowest point (mattress, board).
    """

    from_head_end_mm: float
    lateral_mm: float = 0.0
    height_mm: float = 0.0


@dataclass(frozen=True)
class Isocentre:
    """The isocentre in the patient: an offset in patient axes from a landmark, or a point in DICOM coordinates.

    `offset_mm` is (to the patient's left, to the head, to the front) from `landmark`; with `landmark` None,
    `dicom_mm` holds the point.
    """

    landmark: Landmark | None
    offset_mm: tuple[float, float, float] = (0.0, 0.0, 0.0)
    dicom_mm: tuple[float, float, float] | None = None


@dataclass(frozen=True)
class Component:
    """One contribution to the required clearance, one standard deviation in mm.

    `patient_only`: it counts only where the patient or a device is one of the pair.
    """

    name: str
    sd_mm: float
    patient_only: bool = False


@dataclass(frozen=True)
class Required:
    """Required clearance of a pair: fixed + k * sqrt(sum of squares), in mm, and why.

    The room model's uncertainty, from the room's survey, is one of `components` where the set-up says so.
    """

    fixed_mm: float
    reason: str
    k: float = 2.0
    components: tuple[Component, ...] = ()

    def of_pair_mm(self, with_patient: bool) -> float:
        """Return the required clearance of a pair; `with_patient` when the patient or a device is in it."""
        squares = sum(c.sd_mm**2 for c in self.components if with_patient or not c.patient_only)
        return self.fixed_mm + self.k * math.sqrt(squares)


@dataclass(frozen=True)
class Setup:
    """One patient on the couch of one room.

    `devices` are couch parts of kind "device", in table-top coordinates. `collimator_deg` None means any angle.
    `arm_positions` names, for each arm that is not in its first position, a position or a slide in mm.
    """

    name: str
    room: Room
    patient: Body | Surface
    patient_position: str
    on_table: OnTable
    isocentre: Isocentre
    required: Required
    devices: tuple[Part, ...] = ()
    pitch_deg: float = 0.0
    roll_deg: float = 0.0
    eccentric_deg: float = 0.0
    collimator_deg: float | None = None
    fitted: tuple[str, ...] = ()
    arm_positions: tuple[tuple[str, str | float], ...] = ()
    demonstration: bool = False
    notes: str = ""
