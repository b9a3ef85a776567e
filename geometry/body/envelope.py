"""The patient envelope that stature, mass or measured sizes make, and its landmarks.

DICOM patient axes, mm: x to the patient's left, y to the back, z to the head. Origin at the mid-line, at the height of
the vertex, on the plane that touches the back of a body that lies flat.
"""

from dataclasses import dataclass
from functools import lru_cache
from typing import Final, get_args

import numpy as np
from numpy.typing import NDArray

from geometry.body.limbs import ArmPosture, LegPosture, arm, leg
from geometry.body.lying import NAVEL, NOTCH, SYMPHYSIS, XIPHOID, Lying
from geometry.body.trunk import front_at, front_line, head_and_neck, head_sections, hip_sections, trunk_sections
from geometry.body_sizes import Build, chosen, sizes_of
from geometry.errors import GeometryError
from geometry.frames import moved
from geometry.landmarks import Landmark
from geometry.outlines import number
from geometry.solids import Loft, Placed, Solid

Array = NDArray[np.float64]

ARM_POSTURES: Final[tuple[ArmPosture, ...]] = get_args(ArmPosture)
LEG_POSTURES: Final[tuple[LegPosture, ...]] = get_args(LegPosture)
GREATEST_SLOPE_DEG: Final = 45.0


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
        sizes_of(self.stature_mm, self.mass_kg, self.build, self.sizes)
        for name in ("arm_left", "arm_right"):
            chosen(name, getattr(self, name), ARM_POSTURES)
        chosen("legs", self.legs, LEG_POSTURES)
        if number("slope_deg", self.slope_deg, 0.0, GREATEST_SLOPE_DEG) > 0.0 and self.prone:
            raise GeometryError(f"slope_deg = {self.slope_deg:g} of a prone body is not allowed; allowed is 0")


@lru_cache(maxsize=64)
def body_parts(body: Body) -> tuple[tuple[str, Solid], ...]:
    """Return the named solids of the envelope; neighbours overlap, so that no joint gapes.

    Equal bodies have the very same solids, so that what is kept of a solid's pieces serves again.
    """
    lying, size = _lying(body)
    raised: list[tuple[str, Solid]] = [
        ("head and neck", head_and_neck(lying, size)),
        ("trunk", Loft(trunk_sections(lying, size), "z")),
    ]
    if body.slope_deg > 0.0:
        raised = [(name, Placed(solid, lying.T_raised)) for name, solid in raised]
    return (
        *raised,
        ("left arm", arm(lying, size, 1.0, body.arm_left, body.legs)),
        ("right arm", arm(lying, size, -1.0, body.arm_right, body.legs)),
        ("pelvis", Loft(hip_sections(lying, size), "z")),
        ("left leg", leg(lying, size, 1.0, body.legs)),
        ("right leg", leg(lying, size, -1.0, body.legs)),
    )


def body_landmarks(body: Body) -> dict[Landmark, Array]:
    """Return the landmarks, each (3,), mm, on the skin at the mid-line: the vertex on top of the head, others in front.

    An arm on the chest may lie over one. Where a slope folds trunk and hips over each other, it is on the outer fold.
    """
    return {name: point.copy() for name, point in _landmarks(body).items()}


@lru_cache(maxsize=64)
def _landmarks(body: Body) -> dict[Landmark, Array]:
    lying, size = _lying(body)
    head = head_sections(lying, size)
    trunk, hips = (front_line(sections) for sections in (trunk_sections(lying, size), hip_sections(lying, size)))
    raised = moved(lying.T_raised, np.insert(trunk, 0, 0.0, axis=1))[:, 1:]
    flat: dict[Landmark, Array] = {
        "vertex": np.array([0.0, head[-1][1].centre_mm[1], head[-1][0]]),
        "chin": np.array([0.0, *front_line(head)[0]]),
    }
    places: dict[Landmark, float] = {"sternal notch": NOTCH, "xiphoid": XIPHOID, "navel": NAVEL}
    for name, place in places.items():
        z = lying.along(place)
        flat[name] = np.array([0.0, front_at(trunk, z), z])
    landmarks = {name: moved(lying.T_raised, point) for name, point in flat.items()}
    for name in places:
        landmarks[name][1] = min(landmarks[name][1], front_at(hips, landmarks[name][2]))
    z = lying.along(SYMPHYSIS)
    landmarks["symphysis"] = np.array([0.0, min(front_at(hips, z), front_at(raised, z)), z])
    return landmarks


def _lying(body: Body) -> tuple[Lying, dict[str, float]]:
    """Return how the body lies and all of its sizes."""
    size = sizes_of(body.stature_mm, body.mass_kg, body.build, body.sizes)
    thickest = max(size["chest_depth_mm"], size["waist_depth_mm"], size["hip_depth_mm"])
    lying = Lying(body.stature_mm, size["head_height_mm"], thickest, body.slope_deg, prone=body.prone)
    return lying, size
