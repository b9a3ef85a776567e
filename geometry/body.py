"""A patient envelope made from sizes: lofts of rounded outlines, shaped like a person.

DICOM patient axes, mm: x to the patient's left, y to the back, z to the head. Origin at the mid-line, at the height of
the vertex, on the plane that touches the back of a body that lies flat. Proportions along the body and radii of limbs
are our own, no source.
"""

import math
from dataclasses import dataclass
from functools import lru_cache
from typing import Final, Literal, get_args

import numpy as np
from numpy.typing import NDArray

from geometry.body_sizes import SIZES, Build, head_scale, sizes_of
from geometry.errors import GeometryError
from geometry.frames import moved, rotation_x, transform
from geometry.landmarks import Landmark
from geometry.outlines import CircleOutline, EllipseOutline, Outline
from geometry.solids import Group, Loft, Placed, Solid

__all__ = ["SIZES", "Body", "body_landmarks", "body_parts"]

Array = NDArray[np.float64]
ArmPosture = Literal["at the side", "on the chest", "above the head"]
LegPosture = Literal["together", "apart"]

# From the chin (0) to the soles (1): where the parts of a body lie.
_NECK: Final = 0.038
_NOTCH: Final = 0.055
_SHOULDER: Final = 0.075
_AXILLA: Final = 0.150
_CHEST: Final = 0.185
_XIPHOID: Final = 0.225
_WAIST: Final = 0.290
_NAVEL: Final = 0.325
_HIP: Final = 0.395
_SYMPHYSIS: Final = 0.425
_CROTCH: Final = 0.460
_KNEE: Final = 0.690
_ANKLE: Final = 0.955
# Adult head, vertex to chin, mm; mean of men and women, from memory.
_HEAD_HEIGHT_MM: Final = 228.0


@dataclass(frozen=True)
class Body:
    """A body to be made from sizes; see `body_sizes.SIZES` for the names that `sizes` may replace, in mm.

    `slope_deg` raises trunk, head and arms about the hips, as a sloped board does; a prone body lies flat.
    GeometryError where a value is out of range.
    """

    stature_mm: float
    mass_kg: float | None = None
    build: Build = "mean"
    sizes: tuple[tuple[str, float], ...] = ()
    arm_left: ArmPosture = "at the side"
    arm_right: ArmPosture = "at the side"
    legs: LegPosture = "together"
    slope_deg: float = 0.0
    prone: bool = False

    def __post_init__(self) -> None:
        """Check every value."""
        for name, value, words in (
            ("build", self.build, get_args(Build)),
            ("arm_left", self.arm_left, get_args(ArmPosture)),
            ("arm_right", self.arm_right, get_args(ArmPosture)),
            ("legs", self.legs, get_args(LegPosture)),
        ):
            if value not in words:
                raise GeometryError(f"{name} = {value!r}; allowed: {', '.join(map(repr, words))}")
        sizes_of(self.stature_mm, self.mass_kg, self.build, self.sizes)
        if not 0.0 <= self.slope_deg <= 45.0:
            raise GeometryError(f"slope_deg = {self.slope_deg:g} is outside the range 0 to 45")
        if self.prone and self.slope_deg > 0.0:
            raise GeometryError(f"slope_deg = {self.slope_deg:g} of a prone body; allowed: 0")


def body_parts(body: Body) -> tuple[tuple[str, Solid], ...]:
    """Return the named solids of the envelope; neighbours overlap, so that no joint gapes."""
    return _Maker(body).parts()


def body_landmarks(body: Body) -> dict[Landmark, Array]:
    """Return the landmarks, each (3,), mm, on the skin at the front of the mid-line; the vertex on top of the head."""
    return _Maker(body).landmarks()


@lru_cache(maxsize=64)
def _sizes(body: Body) -> dict[str, float]:
    return sizes_of(body.stature_mm, body.mass_kg, body.build, body.sizes)


class _Maker:
    """Makes the parts of one body."""

    def __init__(self, body: Body) -> None:
        self.body = body
        self.size = _sizes(body)
        self.head_height = _HEAD_HEIGHT_MM * head_scale(body.stature_mm, body.build)
        self.length = body.stature_mm - self.head_height
        self.hip_depth = 0.68 * self.size["hip_breadth_mm"]
        self.arm_radius = self.size["biceps_circumference_mm"] / (2.0 * math.pi)
        self.thigh_radius = 0.255 * self.size["hip_breadth_mm"]
        self.deepest = max(self.size["chest_depth_mm"], self.size["waist_depth_mm"], self.hip_depth)
        # Trunk, head and raised arms turn about the line where the hips touch the plane that they lie on.
        pivot = np.array([0.0, 0.0, self.down(_HIP)])
        turn = rotation_x(body.slope_deg)
        self.T_raised = transform(turn, pivot - turn @ pivot)

    def down(self, fraction: float) -> float:
        """Return z of a place between chin (0) and soles (1)."""
        return -self.head_height - fraction * self.length

    def middle(self, half_depth: float) -> float:
        """Return y of the middle of something that lies on the table with its back or, prone, its front."""
        return half_depth - self.deepest if self.body.prone else -half_depth

    def parts(self) -> tuple[tuple[str, Solid], ...]:
        raised = {
            "head and neck": self.head(),
            "trunk": Loft(self.trunk_sections(), "z"),
        }
        flat = {
            "left arm": self.arm(1.0, self.body.arm_left),
            "right arm": self.arm(-1.0, self.body.arm_right),
            "pelvis": Loft(self.pelvis_sections(), "z"),
            "left leg": self.leg(1.0),
            "right leg": self.leg(-1.0),
        }
        if self.body.slope_deg > 0.0:
            raised = {name: Placed(solid, self.T_raised) for name, solid in raised.items()}
        return (*raised.items(), *flat.items())

    def landmarks(self) -> dict[Landmark, Array]:
        chest, waist = self.size["chest_depth_mm"], self.size["waist_depth_mm"]
        head = self.size["head_length_mm"]
        fronts: dict[Landmark, tuple[float, float]] = {
            "vertex": (self.middle(0.5 * head), 0.0),
            "chin": (self.middle(0.5 * head) - 0.40 * head, -self.head_height),
            "sternal notch": (self.middle(0.5 * chest) - 0.36 * chest, self.down(_NOTCH)),
            "xiphoid": (self.middle(0.5 * chest) - 0.5 * chest, self.down(_XIPHOID)),
            "navel": (self.middle(0.5 * waist) - 0.5 * waist, self.down(_NAVEL)),
            "symphysis": (self.middle(0.5 * self.hip_depth) - 0.46 * self.hip_depth, self.down(_SYMPHYSIS)),
        }
        points = {name: np.array([0.0, y, z]) for name, (y, z) in fronts.items()}
        return {name: p if name == "symphysis" else moved(self.T_raised, p) for name, p in points.items()}

    def head(self) -> Solid:
        breadth, length, height = self.size["head_breadth_mm"], self.size["head_length_mm"], self.head_height
        y = self.middle(0.5 * length)
        # (share of the height from the chin, share of the breadth, share of the length, shift to the front)
        shape = (
            (0.00, 0.42, 0.50, 0.15),
            (0.18, 0.72, 0.78, 0.09),
            (0.45, 0.94, 0.97, 0.015),
            (0.62, 1.00, 1.00, 0.0),
            (0.80, 0.90, 0.92, 0.0),
            (0.93, 0.62, 0.66, 0.0),
            (1.00, 0.24, 0.28, 0.0),
        )
        face = Loft(
            tuple(
                (
                    (share - 1.0) * height,
                    EllipseOutline(0.5 * wide * breadth, 0.5 * deep * length, (0.0, y - shift * length)),
                )
                for share, wide, deep, shift in shape
            ),
            "z",
        )
        neck = EllipseOutline(0.40 * breadth, 0.34 * length, (0.0, y + 0.04 * length))
        base = EllipseOutline(0.46 * breadth, 0.38 * length, (0.0, self.middle(0.5 * self.size["chest_depth_mm"])))
        throat = Loft(((self.down(_NOTCH), base), (self.down(0.01), neck), (-0.75 * height, neck)), "z")
        return Group((face, throat))

    def trunk_sections(self) -> tuple[tuple[float, Outline], ...]:
        chest, waist = self.size["chest_breadth_mm"], self.size["waist_breadth_mm"]
        shoulder = self.size["bideltoid_breadth_mm"] - 1.5 * self.arm_radius
        deep, belly = self.size["chest_depth_mm"], self.size["waist_depth_mm"]
        hips = self.size["hip_breadth_mm"]
        return (
            self.section(_HIP, 0.5 * hips, 0.5 * self.hip_depth),
            self.section(_NAVEL, 0.25 * (waist + hips) + 0.01 * hips, 0.5 * belly),
            self.section(_WAIST, 0.5 * waist, 0.5 * belly),
            self.section(_XIPHOID, 0.25 * (waist + chest) + 0.01 * chest, 0.5 * deep),
            self.section(_CHEST, 0.5 * chest, 0.5 * deep),
            self.section(_AXILLA, 0.52 * chest, 0.49 * deep),
            self.section(_SHOULDER, 0.5 * shoulder, 0.42 * deep, centre=0.5 * deep),
            self.section(_NOTCH, 0.40 * shoulder, 0.36 * deep, centre=0.5 * deep),
            self.section(_NECK, 0.24 * shoulder, 0.27 * deep, centre=0.5 * deep),
        )

    def pelvis_sections(self) -> tuple[tuple[float, Outline], ...]:
        hips, deep = self.size["hip_breadth_mm"], self.hip_depth
        return (
            self.section(_CROTCH + 0.02, 0.42 * hips, 0.36 * deep, centre=0.5 * deep),
            self.section(_CROTCH, 0.48 * hips, 0.42 * deep, centre=0.5 * deep),
            self.section(_SYMPHYSIS, 0.5 * hips, 0.46 * deep, centre=0.5 * deep),
            self.section(_HIP, 0.5 * hips, 0.5 * deep),
        )

    def section(
        self, fraction: float, half_width: float, half_depth: float, centre: float | None = None
    ) -> tuple[float, Outline]:
        """Return a rounded outline across the body; `centre` is the half depth that it is centred as."""
        y = self.middle(half_depth if centre is None else centre)
        return self.down(fraction), EllipseOutline(half_width, half_depth, (0.0, y), exponent=2.4)

    def arm(self, side: float, posture: ArmPosture) -> Solid:
        """Return an arm; `side` is 1 for the left, -1 for the right."""
        upper, reach = self.size["shoulder_elbow_length_mm"], self.size["forearm_hand_length_mm"]
        r = self.arm_radius
        shoulder_x = 0.5 * self.size["bideltoid_breadth_mm"] - r
        shoulder_y = self.middle(0.5 * self.size["chest_depth_mm"])
        shoulder = np.array([side * shoulder_x, shoulder_y, self.down(_SHOULDER) - 0.6 * r])
        lying = self.middle(1.15 * r)
        if posture == "at the side":
            # From a raised shoulder the arm comes down to the table.
            shoulder = moved(self.T_raised, shoulder)
            elbow_x = 0.5 * self.size["forearm_forearm_breadth_mm"] - 0.85 * r
            elbow = _at_distance(shoulder, np.array([side * elbow_x, lying, shoulder[2] - upper]), upper)
            wrist = _at_distance(elbow, elbow + np.array([-0.12 * side, 0.0, -1.0]), 0.58 * reach)
        elif posture == "on the chest":
            half = 0.5 * max(self.size["chest_breadth_mm"], self.size["waist_breadth_mm"])
            elbow = _at_distance(shoulder, np.array([side * (half + r), shoulder_y, shoulder[2] - upper]), upper)
            front = shoulder_y - 0.5 * max(self.size["chest_depth_mm"], self.size["waist_depth_mm"])
            # The left forearm crosses over the right one.
            lift = front - 0.5 * r - (0.9 * r if side > 0.0 else 0.0) - elbow[1]
            towards_head = math.sqrt(max((0.58 * reach) ** 2 - elbow[0] ** 2 - lift**2, 0.0))
            wrist = _at_distance(elbow, elbow + np.array([-elbow[0], lift, towards_head]), 0.58 * reach)
        else:
            elbow = _at_distance(shoulder, shoulder + np.array([0.62 * side, 0.0, 0.78]), upper)
            elbow[1] = lying
            wrist = _at_distance(elbow, np.array([0.15 * side * upper, lying, elbow[2] + 0.5 * reach]), 0.58 * reach)
        # A hand on the chest lies flat on it; any other goes on as the forearm does.
        flat = np.array([1.0, 0.0 if posture == "on the chest" else 1.0, 1.0])
        hand = _at_distance(wrist, wrist + flat * (wrist - elbow), 0.36 * reach)
        if posture != "at the side":
            shoulder, elbow, wrist, hand = (moved(self.T_raised, joint) for joint in (shoulder, elbow, wrist, hand))
        return Group(
            (
                _limb(shoulder, elbow, r * 1.05, r * 0.85),
                _limb(elbow, wrist, r * 0.85, r * 0.55),
                _limb(wrist, hand, r * 0.62, r * 0.45),
            )
        )

    def leg(self, side: float) -> Solid:
        r = self.thigh_radius
        spread = 0.5 * self.size["hip_breadth_mm"] - r
        knee_x = 0.72 * r if self.body.legs == "together" else spread + 0.9 * r
        ankle_x = 0.5 * r if self.body.legs == "together" else spread + 1.5 * r
        hip = np.array([side * spread, self.middle(1.05 * r), self.down(_SYMPHYSIS)])
        knee = np.array([side * knee_x, self.middle(0.70 * r), self.down(_KNEE)])
        ankle = np.array([side * ankle_x, self.middle(0.42 * r), self.down(_ANKLE)])
        calf = knee + 0.33 * (ankle - knee)
        calf[1] = self.middle(0.69 * r)
        return Group(
            (
                _limb(hip, knee, r, 0.68 * r),
                _limb(knee, calf, 0.66 * r, 0.66 * r),
                _limb(calf, ankle, 0.66 * r, 0.40 * r),
                self.foot(ankle),
            )
        )

    def foot(self, ankle: Array) -> Solid:
        """Return a foot: toes up for a supine body, stretched away for a prone one."""
        length = self.size["foot_length_mm"]
        width = 0.19 * length
        if self.body.prone:
            return _limb(ankle, ankle + np.array([0.0, 0.0, -0.75 * length]), 0.8 * width, 0.6 * width)
        sole = -self.body.stature_mm
        x = float(ankle[0])
        return Loft(
            (
                (-0.97 * length, EllipseOutline(0.55 * width, 0.09 * length, (x, sole + 0.09 * length))),
                (-0.75 * length, EllipseOutline(width, 0.13 * length, (x, sole + 0.13 * length))),
                (-0.25 * length, EllipseOutline(0.8 * width, 0.17 * length, (x, sole + 0.17 * length))),
                (-0.02 * length, EllipseOutline(0.6 * width, 0.12 * length, (x, sole + 0.12 * length))),
            ),
            "y",
        )


def _at_distance(start: Array, towards: Array, distance: float) -> Array:
    """Return the point `distance` from `start` on the way to `towards`."""
    along = towards - start
    return start + distance / float(np.linalg.norm(along)) * along


def _limb(start: Array, end: Array, start_radius: float, end_radius: float) -> Solid:
    """Return a tapered limb with rounded ends that reach half a radius beyond both joints."""
    length = float(np.linalg.norm(end - start))
    sections = (
        (-0.75 * start_radius, CircleOutline(0.55 * start_radius)),
        (-0.1 * start_radius, CircleOutline(start_radius)),
        (length + 0.1 * end_radius, CircleOutline(end_radius)),
        (length + 0.75 * end_radius, CircleOutline(0.55 * end_radius)),
    )
    z = (end - start) / length
    helper = np.array([1.0, 0.0, 0.0]) if abs(z[0]) < 0.9 else np.array([0.0, 1.0, 0.0])
    x = np.cross(helper, z)
    x /= np.linalg.norm(x)
    turn = np.column_stack([x, np.cross(z, x), z])
    return Placed(Loft(sections, "z"), transform(turn, start))
