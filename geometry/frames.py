"""Coordinate systems of IEC 61217 and of DICOM patients, and the turns between them.

All matrices are active and map child to mother coordinates: `p_fixed = R_fixed_gantry @ p_gantry`.
Fixed system: origin at the isocentre, Y points to the gantry bearing, Z up, X completes it.
Degrees and mm at every boundary. Sources: IEC 61217:2011; DICOM PS3.3 C.8.8 and C.7.3.1.1.2.
"""

import math
from typing import Final

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

# p_dicom = R_dicom_tabletop @ p_tabletop, origins apart: row x, y, z of the patient in terms of
# table-top X, Y, Z (arXiv:1406.0014, table 1).
_DICOM_ROWS: Final = {
    "HFS": ((1, 0, 0), (0, 0, -1), (0, 1, 0)),
    "HFP": ((-1, 0, 0), (0, 0, 1), (0, 1, 0)),
    "FFS": ((-1, 0, 0), (0, 0, -1), (0, -1, 0)),
    "FFP": ((1, 0, 0), (0, 0, 1), (0, -1, 0)),
    "HFDR": ((0, 0, 1), (1, 0, 0), (0, 1, 0)),
    "HFDL": ((0, 0, -1), (-1, 0, 0), (0, 1, 0)),
    "FFDR": ((0, 0, 1), (-1, 0, 0), (0, -1, 0)),
    "FFDL": ((0, 0, -1), (1, 0, 0), (0, -1, 0)),
}
PATIENT_POSITIONS: Final = tuple(_DICOM_ROWS)


def normalised_deg(angle_deg: float) -> float:
    """Return the angle in [0, 360). A plain `%` turns -1e-17 into 360.0; this does not."""
    if not math.isfinite(angle_deg):
        raise ValueError(f"angle = {angle_deg} deg is not finite")
    turned = angle_deg % 360.0
    return 0.0 if turned >= 360.0 else turned


def unwrapped_deg(angle_deg: float, travel_deg: tuple[float, float]) -> tuple[float, ...]:
    """Return every angle of the closed interval `travel_deg` that equals `angle_deg` modulo 360, rising.

    Angles within 1e-9 deg of an end of the travel count as that end.
    """
    low, high = travel_deg
    first = angle_deg + 360.0 * math.ceil((low - angle_deg) / 360.0 - 1e-9 / 360.0)
    found = []
    while first <= high + 1e-9:
        found.append(min(max(first, low), high))
        first += 360.0
    return tuple(found)


def rotation_x(angle_deg: float) -> Array:
    """Return the active rotation about X, shape (3, 3)."""
    c, s = cos_sin(angle_deg)
    return np.array([[1.0, 0.0, 0.0], [0.0, c, -s], [0.0, s, c]])


def rotation_y(angle_deg: float) -> Array:
    """Return the active rotation about Y, shape (3, 3)."""
    c, s = cos_sin(angle_deg)
    return np.array([[c, 0.0, s], [0.0, 1.0, 0.0], [-s, 0.0, c]])


def rotation_z(angle_deg: float) -> Array:
    """Return the active rotation about Z, shape (3, 3)."""
    c, s = cos_sin(angle_deg)
    return np.array([[c, -s, 0.0], [s, c, 0.0], [0.0, 0.0, 1.0]])


def transform(rotation: Array, translation: Array) -> Array:
    """Return the homogeneous matrix, shape (4, 4), of a rotation followed by a translation in mm."""
    matrix = np.eye(4)
    matrix[:3, :3] = rotation
    matrix[:3, 3] = translation
    return matrix


def moved(matrix: Array, points: Array) -> Array:
    """Return `points`, shape (..., 3), mm, mapped by the homogeneous `matrix`, shape (4, 4)."""
    mapped: Array = points @ matrix[:3, :3].T + matrix[:3, 3]
    return mapped


def R_fixed_gantry(gantry_deg: float) -> Array:
    """Return the turn of the gantry about Y of the fixed system (IEC 61217, gantry system)."""
    return rotation_y(gantry_deg)


def R_gantry_collimator(collimator_deg: float) -> Array:
    """Return the turn of the beam limiting device about Z of the gantry system (IEC 61217)."""
    return rotation_z(collimator_deg)


def R_fixed_turntable(couch_deg: float) -> Array:
    """Return the turn of the patient support about Z of the fixed system (IEC 61217)."""
    return rotation_z(couch_deg)


def R_tilt(pitch_deg: float, roll_deg: float) -> Array:
    """Return pitch about X, then roll about Y of the table top: Rx(pitch) @ Ry(roll) (DICOM PS3.3 C.8.8.25)."""
    tilt: Array = rotation_x(pitch_deg) @ rotation_y(roll_deg)
    return tilt


def R_dicom_tabletop(patient_position: str) -> Array:
    """Return the turn from table-top axes to DICOM patient axes for one of the eight positions.

    Raises KeyError for an unknown position.
    """
    return np.array(_DICOM_ROWS[patient_position], dtype=np.float64)


def source_direction_fixed(gantry_deg: float) -> Array:
    """Return the unit vector from the isocentre to the source, fixed system, shape (3,)."""
    direction: Array = R_fixed_gantry(gantry_deg) @ np.array([0.0, 0.0, 1.0])
    return direction


def source_direction_dicom(gantry_deg: float, couch_deg: float, patient_position: str = "HFS") -> Array:
    """Return the unit vector from the isocentre to the source in DICOM patient axes, pitch and roll zero."""
    direction: Array = (
        R_dicom_tabletop(patient_position) @ R_fixed_turntable(couch_deg).T @ source_direction_fixed(gantry_deg)
    )
    return direction


def cos_sin(angle_deg: float) -> tuple[float, float]:
    """Return cosine and sine, exact at multiples of 90 deg so that right angles stay right."""
    quarter = round(angle_deg / 90.0)
    if angle_deg == quarter * 90.0:
        return ((1.0, 0.0), (0.0, 1.0), (-1.0, 0.0), (0.0, -1.0))[quarter % 4]
    angle = math.radians(angle_deg)
    return math.cos(angle), math.sin(angle)
