"""A patient envelope made from sizes: lofts of rounded outlines, shaped like a person."""

from geometry.body.envelope import ARM_POSTURES, LEG_POSTURES, Body, body_landmarks, body_parts
from geometry.body.limbs import ArmPosture, LegPosture
from geometry.body_sizes import SIZES

__all__ = [
    "ARM_POSTURES",
    "LEG_POSTURES",
    "SIZES",
    "ArmPosture",
    "Body",
    "LegPosture",
    "body_landmarks",
    "body_parts",
]
