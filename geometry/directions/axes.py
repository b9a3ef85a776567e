"""Beam directions: where the source stands, seen from the isocentre, and the angles that put it there.

The gantry turns about a level axis and the couch about a plumb one. So in the patient support system, which turns with
the couch, the source stands at `(sin g cos c, -sin g sin c, cos g)`: the gantry angle is the distance from the pole
above, the couch angle the longitude. Eccentric angle, pitch, roll and the position of the patient are one fixed turn
on top of that. Two pairs of angles give each direction, (g, c) and (-g, c + 180), and any couch angle gives a pole.
Sources: IEC 61217:2011; DICOM PS3.3 C.8.8; arXiv:1406.0014, table 1, for the positions of the patient.
"""

import math
from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import ArrayLike, NDArray

from geometry.frames import R_dicom_tabletop, R_tilt, rotation_z, unwrapped_deg
from geometry.setup import Setup

Array = NDArray[np.float64]
Interval = tuple[float, float]

# Nearer to the plumb line than this, deg, every couch angle gives the direction.
POLE_DEG: Final = 1e-7

# The axes of DICOM patients in words, negative and positive end.
_ENDS: Final = (("right", "left"), ("front", "back"), ("foot", "head"))
_FROM: Final = {
    "right": "from the right",
    "left": "from the left",
    "front": "from the front",
    "back": "from the back",
    "foot": "from the feet",
    "head": "from the head",
}
_TO: Final = {**{end: f"to the {end}" for end in _FROM}, "foot": "to the feet"}


@dataclass(frozen=True)
class PatientAxes:
    """How the patient's axes lie on what the turntable carries. KeyError, where used, for an unknown position."""

    position: str = "HFS"
    pitch_deg: float = 0.0
    roll_deg: float = 0.0
    eccentric_deg: float = 0.0

    def R_support_tabletop(self) -> Array:
        """Return the turn from the table top to the patient support system, (3, 3)."""
        turn: Array = rotation_z(self.eccentric_deg) @ R_tilt(self.pitch_deg, self.roll_deg)
        return turn

    def R_support_patient(self) -> Array:
        """Return the turn from DICOM patient axes to the patient support system, (3, 3)."""
        turn: Array = self.R_support_tabletop() @ R_dicom_tabletop(self.position).T
        return turn


@dataclass(frozen=True)
class AnglePair:
    """Angles that give a direction, deg, unwrapped; with `any_couch` every other couch angle gives it too."""

    gantry_deg: float
    couch_deg: float
    any_couch: bool = False


def axes_of(setup: Setup) -> PatientAxes:
    """Return how the patient of a set-up lies."""
    return PatientAxes(setup.patient_position, setup.pitch_deg, setup.roll_deg, setup.eccentric_deg)


def directions_support(gantry_deg: ArrayLike, couch_deg: ArrayLike) -> Array:
    """Return unit vectors from the isocentre to the source, patient support system, shape (..., 3).

    The angles, deg, are broadcast against each other. At couch 0 this is the fixed system.
    """
    gantry, couch = np.broadcast_arrays(np.radians(gantry_deg), np.radians(couch_deg))
    sin = np.sin(gantry)
    return np.stack([sin * np.cos(couch), -sin * np.sin(couch), np.cos(gantry)], axis=-1)


def directions_tabletop(gantry_deg: ArrayLike, couch_deg: ArrayLike, axes: PatientAxes) -> Array:
    """Return unit vectors from the isocentre to the source in table-top axes, shape (..., 3)."""
    return turned(directions_support(gantry_deg, couch_deg), axes.R_support_tabletop().T)


def directions_patient(gantry_deg: ArrayLike, couch_deg: ArrayLike, axes: PatientAxes) -> Array:
    """Return unit vectors from the isocentre to the source in DICOM patient axes, shape (..., 3)."""
    return turned(directions_support(gantry_deg, couch_deg), axes.R_support_patient().T)


def turned(directions: Array, rotation: Array) -> Array:
    """Return `rotation`, (3, 3), applied to directions, (..., 3)."""
    # Not by matrix product: for many directions that starts threads, which on a busy machine wait for each other.
    result: Array = np.einsum("ij,...j->...i", rotation, directions)
    return result


def folded_deg(directions: Array) -> tuple[Array, Array]:
    """Return, for directions (..., 3) of the patient support system, the pair with the gantry in [0, 180], deg.

    The couch angle is in [-180, 180], of no meaning at the poles. The other pair is (-gantry, couch + 180).
    """
    x, y, z = directions[..., 0], directions[..., 1], directions[..., 2]
    return np.degrees(np.arctan2(np.hypot(x, y), z)), np.degrees(np.arctan2(-y, x))


def angle_pairs(
    direction: ArrayLike, axes: PatientAxes, gantry_travel_deg: Interval, couch_travel_deg: Interval
) -> tuple[AnglePair, ...]:
    """Return every pair of angles within the travel that gives a direction (3,) in DICOM patient axes.

    Empty where none does. At a pole, one pair for each gantry angle, with the couch angle nearest to 0. Any length but
    0 of the direction will do; ValueError for 0 and for what is not finite.
    """
    vector = np.asarray(direction, dtype=np.float64)
    if vector.shape != (3,) or not np.isfinite(vector).all() or not vector.any():
        raise ValueError(f"direction = {vector} must be 3 finite numbers, not all 0")
    gantry, couch = (float(angle) for angle in folded_deg(turned(vector, axes.R_support_patient())))
    if min(gantry, 180.0 - gantry) < POLE_DEG:
        pole = 0.0 if gantry < 90.0 else 180.0
        nearest = min(max(0.0, couch_travel_deg[0]), couch_travel_deg[1])
        return tuple(AnglePair(angle, nearest, any_couch=True) for angle in unwrapped_deg(pole, gantry_travel_deg))
    return tuple(
        AnglePair(gantry_deg, couch_deg)
        for one, other in ((gantry, couch), (-gantry, couch + 180.0))
        for gantry_deg in unwrapped_deg(one, gantry_travel_deg)
        for couch_deg in unwrapped_deg(other, couch_travel_deg)
    )


def direction_words(direction: ArrayLike) -> str:
    """Say from where a direction (3,) in DICOM patient axes comes, in the patient's own left and right.

    "from the left, 30° to the front, 20° to the head" lies, in the transverse plane, 30° from the left, and 20° out of
    that plane. From head or feet, each angle is that of the direction's shadow on the plane of both axes.
    """
    vector = np.asarray(direction, dtype=np.float64)
    vector = np.where(np.abs(vector) < 1e-12, 0.0, vector / np.linalg.norm(vector))
    main = int(np.argmax(np.abs(vector)))
    words = [_FROM[_end(main, vector)]]
    for axis in range(3):
        if axis != main:
            along = math.hypot(vector[0], vector[1]) if axis == 2 else abs(vector[main])
            angle = round(math.degrees(math.atan2(abs(vector[axis]), along)))
            if angle:
                words.append(f"{angle}° {_TO[_end(axis, vector)]}")
    return ", ".join(words)


def _end(axis: int, vector: Array) -> str:
    return _ENDS[axis][int(vector[axis] > 0.0)]
