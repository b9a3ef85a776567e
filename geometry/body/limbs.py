"""Arms and legs of a body. Proportions are our own, no source; lengths and girths follow the sizes."""

import math
from typing import Final, Literal

import numpy as np
from numpy.typing import NDArray

from geometry.body.lying import ANKLE, AXILLA, CALF, KNEE, SHOULDER, SYMPHYSIS, XIPHOID, Lying
from geometry.body.outline import oval
from geometry.body.trunk import Sizes
from geometry.frames import moved, transform
from geometry.solids import Group, Loft, Placed, Solid

Array = NDArray[np.float64]
ArmPosture = Literal["at the side", "on the chest", "above the head"]
LegPosture = Literal["together", "apart"]
Joints = tuple[Array, Array, Array, Array]

# Of the length from elbow to finger tip.
_FOREARM: Final = 0.58
_HAND: Final = 0.42
# How far apart the ankles go, each, as a share of the way from chin to soles.
_APART: Final = 0.105
# Where thighs are measured, and where hands at the side lie; see `lying`.
_THIGH: Final = 0.58


def arm(lying: Lying, size: Sizes, side: float, posture: ArmPosture, legs: LegPosture) -> Solid:
    """Return an arm; `side` is 1 for the left, -1 for the right. One at the side makes way for legs apart."""
    r = _arm_radius(size)
    if posture == "at the side":
        joints = _at_the_side(lying, size, side, _aside(lying, legs, _THIGH))
    elif posture == "on the chest":
        joints = _on_the_chest(lying, size, side)
    else:
        joints = _above_the_head(lying, size, side)
    # An arm at the side comes down from a raised shoulder to the table; other arms go where the trunk goes.
    place = lying.on_slope if posture == "at the side" else lambda point: moved(lying.T_raised, point)
    shoulder, elbow, wrist, tip = (place(joint) for joint in joints)
    hand = size["forearm_hand_length_mm"] * _HAND
    return Group(
        (
            _limb(shoulder, elbow, _rounded((1.08 * r, 0.0), (1.04 * r, 0.45), (0.84 * r, 1.0), round_start=True)),
            _limb(elbow, wrist, _rounded((0.84 * r, 0.0), (0.86 * r, 0.25), (0.55 * r, 1.0))),
            _limb(
                wrist,
                tip,
                (
                    (0.0, 0.0, 0.55 * r, 0.50 * r),
                    (0.45, 0.0, 0.25 * hand, 0.10 * hand),
                    (1.0, 0.0, 0.15 * hand, 0.05 * hand),
                ),
            ),
        )
    )


def leg(lying: Lying, size: Sizes, side: float, posture: LegPosture) -> Solid:
    """Return a leg with its foot; `side` is 1 for the left, -1 for the right."""
    hips, foot = size["hip_breadth_mm"], size["foot_length_mm"]
    knee = 0.075 * hips + 0.105 * foot
    ankle = 0.135 * foot
    # (place, half the width, lowest and highest height, middle's distance from the mid-line)
    shape = (
        (ANKLE + 0.015, ankle, 0.02 * foot, 0.30 * foot, 0.17 * foot),
        (ANKLE - 0.03, ankle, 0.06 * foot, 0.32 * foot, 0.17 * foot),
        (CALF, knee, 0.0, 2.05 * knee, max(1.04 * knee, 0.19 * foot)),
        (KNEE, knee, 0.20 * knee, 2.25 * knee, max(1.04 * knee, 0.20 * foot)),
        (_THIGH, 0.205 * hips, 0.0, 0.48 * hips, 0.215 * hips),
        (SYMPHYSIS + 0.005, 0.25 * hips, 0.0, 0.57 * hips, 0.25 * hips),
    )
    sections = []
    for place, half_width, low, high, middle in shape:
        x = side * (middle + _aside(lying, posture, place))
        sections.append((lying.along(place), lying.across(half_width, low, high, x)))
    ankle_x = float(sections[0][1].centre_mm[0])
    return Group((Loft(tuple(sections), "z"), _foot(lying, foot, ankle_x, side)))


def _aside(lying: Lying, posture: LegPosture, place: float) -> float:
    """Return how far, mm, a leg goes aside at a place along the body: in a straight line from the symphysis."""
    if posture == "together":
        return 0.0
    return _APART * (lying.along(0.0) - lying.soles) * (place - SYMPHYSIS) / (ANKLE - SYMPHYSIS)


def _foot(lying: Lying, length: float, x: float, side: float) -> Solid:
    """Return a foot: toes up for a supine body, stretched away for a prone one."""
    if lying.prone:
        stretched = (
            (lying.soles - 0.62 * length, 0.13, 0.0, 0.10),
            (lying.soles - 0.25 * length, 0.19, 0.0, 0.20),
            (lying.along(ANKLE), 0.135, 0.02, 0.30),
        )
        return Loft(
            tuple((z, lying.across(half * length, low * length, high * length, x)) for z, half, low, high in stretched),
            "z",
        )
    # (height of the section, half the width, thickness from the sole, shift to the side), shares of the length
    upright = (
        (1.00, 0.12, 0.07, 0.03),
        (0.74, 0.19, 0.15, 0.03),
        (0.30, 0.145, 0.30, 0.0),
        (0.00, 0.10, 0.22, 0.0),
    )
    return Loft(
        tuple(
            (
                lying.y(height * length),
                oval(
                    half * length,
                    0.5 * thick * length,
                    (x + side * shift * length, lying.soles + 0.5 * thick * length),
                    exponent=2.5,
                ),
            )
            for height, half, thick, shift in upright
        ),
        "y",
    )


def _arm_radius(size: Sizes) -> float:
    return size["biceps_circumference_mm"] / (2.0 * math.pi)


def _shoulder(lying: Lying, size: Sizes, side: float) -> Array:
    r = _arm_radius(size)
    # A leaning limb is a little narrower across than its sections; 2 % of a radius makes up for it here.
    height = max(0.42 * size["chest_depth_mm"], 1.12 * r)
    return lying.point(side * (0.5 * size["bideltoid_breadth_mm"] - 1.06 * r), height, lying.along(SHOULDER) - 0.55 * r)


def _at_the_side(lying: Lying, size: Sizes, side: float, aside: float) -> Joints:
    """Return shoulder, elbow, wrist and finger tip of an arm beside trunk and hips, the hand so far, mm, aside."""
    r, reach = _arm_radius(size), size["forearm_hand_length_mm"]
    shoulder = _shoulder(lying, size, side)
    # As at the shoulder, with 3 % of a radius.
    elbow_x = max(0.5 * size["forearm_forearm_breadth_mm"] - 0.81 * r, 0.5 * size["waist_breadth_mm"] + 0.4 * r)
    upper = size["shoulder_elbow_length_mm"]
    elbow = _at_distance(shoulder, lying.point(side * elbow_x, r, shoulder[2] - upper), upper)
    wrist_x = max(elbow_x - 0.12 * _FOREARM * reach, 0.5 * size["hip_breadth_mm"] + 0.5 * r) + aside
    wrist = lying.point(side * wrist_x, max(0.6 * r, 0.1 * _HAND * reach), elbow[2] - _FOREARM * reach)
    tip = lying.point(side * wrist_x, 0.1 * _HAND * reach, wrist[2] - _HAND * reach)
    return shoulder, elbow, wrist, tip


def _on_the_chest(lying: Lying, size: Sizes, side: float) -> Joints:
    """Return the joints of an arm whose hand lies on the chest beyond the mid-line, the left above the right."""
    r, reach = _arm_radius(size), size["forearm_hand_length_mm"]
    shoulder = _shoulder(lying, size, side)
    front = max(size["chest_depth_mm"], size["waist_depth_mm"])
    z = lying.along(AXILLA + 0.02 if side > 0.0 else XIPHOID)
    wrist = lying.point(side * 0.26 * size["chest_breadth_mm"], front + 0.45 * r, z)
    elbow, wrist = _bent(
        shoulder,
        wrist,
        (size["shoulder_elbow_length_mm"], _FOREARM * reach),
        lying.direction(0.6 * side, -1.0, -0.6),
    )
    elbow, wrist = _not_below(lying, elbow, 0.9 * r), _not_below(lying, wrist, r)
    across = lying.direction(-side, -0.1, 0.15)
    return shoulder, elbow, wrist, _at_distance(wrist, wrist + across, _HAND * reach)


def _above_the_head(lying: Lying, size: Sizes, side: float) -> Joints:
    """Return the joints of an arm with the elbow out and the hand above the head, as on a wing board."""
    r, reach = _arm_radius(size), size["forearm_hand_length_mm"]
    shoulder = _shoulder(lying, size, side)
    wrist = lying.point(side * 0.065 * -lying.soles, max(1.1 * r, 0.16 * _HAND * reach), 0.055 * -lying.soles)
    outward = lying.direction(side, -0.2, 0.1)
    elbow, wrist = _bent(shoulder, wrist, (size["shoulder_elbow_length_mm"], _FOREARM * reach), outward)
    elbow, wrist = _not_below(lying, elbow, 0.9 * r), _not_below(lying, wrist, r)
    inward = lying.direction(-0.75 * side, -0.05, 0.65)
    return shoulder, elbow, wrist, _at_distance(wrist, wrist + inward, _HAND * reach)


def _at_distance(start: Array, towards: Array, distance: float) -> Array:
    """Return the point `distance` from `start` on the way to `towards`."""
    along = towards - start
    return start + distance / float(np.linalg.norm(along)) * along


def _bent(start: Array, end: Array, lengths: tuple[float, float], outward: Array) -> tuple[Array, Array]:
    """Return the joint between two limbs of given lengths, bent `outward`, and the end, nearer where they are short."""
    first, second = lengths
    line = end - start
    distance = float(np.linalg.norm(line))
    line /= distance
    distance = min(max(distance, 1.02 * abs(first - second)), 0.98 * (first + second))
    along = (first**2 - second**2 + distance**2) / (2.0 * distance)
    out = outward - (outward @ line) * line
    out *= math.sqrt(first**2 - along**2) / float(np.linalg.norm(out))
    return start + along * line + out, start + distance * line


def _not_below(lying: Lying, point: Array, height: float) -> Array:
    """Return the point, lifted to a height above what the body lies on where it is lower."""
    y = lying.y(height)
    return np.array([point[0], max(point[1], y) if lying.prone else min(point[1], y), point[2]])


def _rounded(*radii: tuple[float, float], round_start: bool = False) -> tuple[tuple[float, float, float, float], ...]:
    """Return a limb's sections from (radius, share of its length), with rounded ends beyond both joints.

    `round_start` rounds the first end more, as a shoulder is.
    """
    first, last = radii[0][0], radii[-1][0]
    cap = ((0.88, 0.38), (0.62, 0.76)) if round_start else ((0.75, 0.6),)
    return (
        *((0.0, -beyond * first, radius * first, radius * first) for beyond, radius in cap),
        *((share, 0.0, radius, radius) for radius, share in radii),
        (1.0, 0.45 * last, 0.6 * last, 0.6 * last),
    )


def _limb(start: Array, end: Array, shape: tuple[tuple[float, float, float, float], ...]) -> Solid:
    """Return a straight limb from (share of its length, mm beyond that, half the width, half the thickness).

    The thickness is as nearly as can be square to what the body lies on.
    """
    length = float(np.linalg.norm(end - start))
    z = (end - start) / length
    helper = np.array([0.0, 1.0, 0.0]) if abs(z[1]) < 0.9 else np.array([1.0, 0.0, 0.0])
    x = np.cross(helper, z)
    x /= np.linalg.norm(x)
    sections = tuple(
        (share * length + beyond, oval(half_width, half_thickness))
        for share, beyond, half_width, half_thickness in shape
    )
    return Placed(Loft(sections, "z"), transform(np.column_stack([x, np.cross(z, x), z]), start))
