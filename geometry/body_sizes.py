"""Sizes of a body from stature, mass and build.

Means are those of ANSUR II (NATICK/TR-15/007: 4082 men, 1986 women, standing or sitting). How they change with stature
and mass, and how much wider a lying body is, is a rule of our own, no source; measured sizes replace it.
"""

import difflib
import math
from dataclasses import dataclass
from typing import Final, Literal

from geometry.errors import GeometryError

Build = Literal["man", "woman", "mean"]
Kind = Literal["length", "girth", "belly", "head"]

STATURE_RANGE_MM: Final = (700.0, 2300.0)
MASS_RANGE_KG: Final = (5.0, 300.0)

# Mean stature, mm, of ANSUR II; mean mass, kg, of the same survey, from memory.
_STATURE_MM: Final = {"man": 1756.2, "woman": 1628.5}
_MASS_KG: Final = {"man": 85.5, "woman": 67.8}
# Body mass index, kg/m2, that a child of this stature has where no mass is given; from memory, rounded.
_CHILD_STATURE_MM: Final = 1200.0
_CHILD_INDEX: Final = 15.5


@dataclass(frozen=True)
class Size:
    """A named size: means of men and women, mm; allowed range, mm; how it scales; factor for lying down."""

    man: float
    woman: float
    low: float
    high: float
    kind: Kind
    lying: float = 1.0


SIZES: Final[dict[str, Size]] = {
    "head_breadth_mm": Size(154.3, 147.8, 80, 220, "head"),
    "head_length_mm": Size(199.5, 189.8, 100, 280, "head"),
    "bideltoid_breadth_mm": Size(510.4, 450.3, 150, 900, "girth", 1.02),
    "forearm_forearm_breadth_mm": Size(579.9, 494.8, 180, 1100, "girth", 1.02),
    "chest_breadth_mm": Size(289.4, 269.3, 100, 700, "girth", 1.05),
    "chest_depth_mm": Size(253.8, 247.4, 90, 600, "girth"),
    "waist_breadth_mm": Size(326.4, 299.9, 100, 900, "belly", 1.05),
    "waist_depth_mm": Size(237.8, 213.0, 80, 700, "belly"),
    "hip_breadth_mm": Size(345.7, 353.8, 100, 900, "girth", 1.04),
    "shoulder_elbow_length_mm": Size(363.7, 334.3, 100, 550, "length"),
    "forearm_hand_length_mm": Size(480.2, 439.9, 130, 700, "length"),
    "biceps_circumference_mm": Size(358.1, 305.6, 90, 800, "girth"),
    "foot_length_mm": Size(271.2, 246.3, 80, 400, "length"),
}


def sizes_of(
    stature_mm: float, mass_kg: float | None, build: Build, measured: tuple[tuple[str, float], ...]
) -> dict[str, float]:
    """Return every named size in mm, measured ones as they are. GeometryError for what is unknown or out of range."""
    if not STATURE_RANGE_MM[0] <= stature_mm <= STATURE_RANGE_MM[1]:
        raise _out_of_range("stature_mm", stature_mm, STATURE_RANGE_MM)
    if mass_kg is not None and not MASS_RANGE_KG[0] <= mass_kg <= MASS_RANGE_KG[1]:
        raise _out_of_range("mass_kg", mass_kg, MASS_RANGE_KG)
    reference = _of_build(_STATURE_MM, build)
    tall = stature_mm / reference
    mass = mass_kg if mass_kg is not None else usual_mass_kg(stature_mm, build)
    # A body of the same shape has mass over stature as the square of its breadths.
    wide = math.sqrt(mass / _of_build(_MASS_KG, build) / tall)
    factors: dict[Kind, float] = {
        "length": tall,
        "girth": wide,
        # The belly takes more than its share of what one gains.
        "belly": wide**1.3 if wide > 1.0 else wide,
        "head": head_scale(stature_mm, build),
    }
    sizes = {
        name: _of_build({"man": size.man, "woman": size.woman}, build) * factors[size.kind] * size.lying
        for name, size in SIZES.items()
    }
    for name, value in measured:
        sizes[name] = _checked(name, value)
    return sizes


def head_scale(stature_mm: float, build: Build) -> float:
    """Return the size of a head against the adult mean: it grows half as much as the rest."""
    return 0.5 + 0.5 * min(stature_mm / _of_build(_STATURE_MM, build), 1.1)


def usual_mass_kg(stature_mm: float, build: Build) -> float:
    """Return the mass that is assumed where none is given."""
    adult = _of_build(_STATURE_MM, build)
    index = _of_build(_MASS_KG, build) / (adult / 1000.0) ** 2
    grown = min(max((stature_mm - _CHILD_STATURE_MM) / (adult - _CHILD_STATURE_MM), 0.0), 1.0)
    return (_CHILD_INDEX + grown * (index - _CHILD_INDEX)) * (stature_mm / 1000.0) ** 2


def _of_build(values: dict[str, float], build: Build) -> float:
    if build == "mean":
        return 0.5 * (values["man"] + values["woman"])
    return values[build]


def _checked(name: str, value: float) -> float:
    if name not in SIZES:
        close = difflib.get_close_matches(name, SIZES, n=1)
        hint = f"; did you mean {close[0]!r}?" if close else ""
        raise GeometryError(f"size {name!r} is unknown{hint}; allowed: {', '.join(SIZES)}")
    size = SIZES[name]
    if not size.low <= value <= size.high:
        raise _out_of_range(name, value, (size.low, size.high))
    return value


def _out_of_range(name: str, value: float, allowed: tuple[float, float]) -> GeometryError:
    return GeometryError(f"{name} = {value:g} is outside the range {allowed[0]:g} to {allowed[1]:g}")
