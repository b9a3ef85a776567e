"""The standard views of a room."""

import math
from typing import Final

import numpy as np

from app.window.room.camera import Camera

BEAMS_EYE: Final = "Beam's eye"
# What the beam's eye sees at the isocentre, from its middle upwards.
_BEAM_HALF_HEIGHT_MM: Final = 420.0
_SOMEWHERE_MM: Final = 6000.0

# Azimuth and elevation, degrees. Sides are named by the fixed axes of IEC 61217: which side of the patient one sees
# from there depends on how the patient lies.
_DIRECTIONS: Final = {
    "Three-quarter": (38.0, 20.0),
    "From the foot end": (0.0, 8.0),
    "From the X+ side": (90.0, 4.0),
    "From the X\u2212 side": (-90.0, 4.0),
    "From above": (0.0, 90.0),
}
VIEWS: Final = (*_DIRECTIONS, BEAMS_EYE)


def standard_view(name: str) -> Camera:
    """Return the camera of a standard view that does not move with the gantry, somewhere. KeyError for another name."""
    azimuth_deg, elevation_deg = _DIRECTIONS[name]
    return Camera(np.zeros(3), _SOMEWHERE_MM, azimuth_deg, elevation_deg)


def beams_eye(gantry_deg: float, source_axis_mm: float) -> Camera:
    """Return the eye at the source, looking at the isocentre, with the gantry's Y up in the picture."""
    view_angle_deg = 2.0 * math.degrees(math.atan(_BEAM_HALF_HEIGHT_MM / source_axis_mm))
    return Camera(np.zeros(3), source_axis_mm, 90.0, 90.0 - gantry_deg, -90.0, view_angle_deg)
