"""Where the couch's stages and the gantry put things (IEC 61217; DICOM PS3.3 C.8.8.25 for pitch and roll)."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from geometry.frames import R_tilt, rotation_z, transform
from geometry.machine import Couch, Stage

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class CouchPose:
    """The couch's stages below and above the turntable, for one set-up.

    `T_mm` (3,) is the table-top origin in the eccentric system (lateral, longitudinal, vertical); `E_mm` (3,) the
    eccentric system's origin in the patient support system.
    """

    T_mm: Array
    E_mm: Array
    eccentric_deg: float
    pitch_deg: float
    roll_deg: float

    def T_support_part(self, follows: frozenset[Stage]) -> Array:
        """Return the homogeneous matrix, (4, 4), from a couch part's own coordinates to the patient support system.

        r_support = E + Rz(eccentric) (T + Rx(pitch) Ry(roll) r), with every stage that the part does not follow at
        zero; E goes with the eccentric stage.
        """
        tilt = R_tilt(self.pitch_deg, self.roll_deg) if Stage.PITCH_ROLL in follows else np.eye(3)
        slides = np.array([Stage.LATERAL in follows, Stage.LONGITUDINAL in follows, Stage.VERTICAL in follows])
        table = transform(tilt, np.where(slides, self.T_mm, 0.0))
        if Stage.ECCENTRIC not in follows:
            return table
        return transform(rotation_z(self.eccentric_deg), self.E_mm) @ table


def couch_pose(
    couch: Couch, p_isocentre_tabletop: Array, pitch_deg: float, roll_deg: float, eccentric_deg: float
) -> CouchPose:
    """Return the stages that hold a point of the table top, (3,), mm, at the isocentre.

    T = -Rz(-eccentric) E - Rx(pitch) Ry(roll) p, so that the point stays put at every couch angle, pitch and roll.
    """
    E = np.array(couch.eccentric_offset_mm, dtype=np.float64)
    T = -rotation_z(-eccentric_deg) @ E - R_tilt(pitch_deg, roll_deg) @ p_isocentre_tabletop
    return CouchPose(T, E, eccentric_deg, pitch_deg, roll_deg)
