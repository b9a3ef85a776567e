"""Sizes of a body from stature, mass and build.

Means are those of ANSUR II (NATICK/TR-15/007: 4082 men, 1986 women, standing or sitting). How they change with stature
and mass, and how much wider a lying body is, is a rule of our own, no source; measured sizes replace it:

- lengths go with stature;
- breadths, depths and girths go with the root of mass over stature, as they do when a body of one shape gains mass;
  the waist with its power 1.3 above the mean, since the belly takes more than its share;
- a head grows as head circumferences of growth charts do;
- each mean is multiplied by the factor in `Size.lying`.

Where no mass is given, the body mass index is the survey's for an adult and goes down to a child's with stature.
"""

import difflib
import math
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from typing import Final, Literal, TypeVar, get_args

import numpy as np

from geometry.errors import GeometryError
from geometry.outlines import number, sequence

Build = Literal["man", "woman", "mean"]
Kind = Literal["length", "girth", "belly", "head"]
Word = TypeVar("Word", bound=str)

STATURE_RANGE_MM: Final = (700.0, 2300.0)
MASS_RANGE_KG: Final = (5.0, 300.0)
# Below and above, a mass is taken for a slip of the pen. Body mass index, kg/m2; our own, no source.
INDEX_RANGE: Final = (8.0, 130.0)
BUILDS: Final[tuple[Build, ...]] = get_args(Build)

# Mean stature, mm, of ANSUR II; mean mass, kg, of the same survey, from memory.
_STATURE_MM: Final = {"man": 1756.2, "woman": 1628.5}
_MASS_KG: Final = {"man": 85.5, "woman": 67.8}
# Vertex to chin of adults, mm, from memory.
_HEAD_HEIGHT_MM: Final = {"man": 232.0, "woman": 219.0}
# Body mass index, kg/m2, that a child of this stature has where no mass is given; from memory, rounded.
_CHILD_STATURE_MM: Final = 1200.0
_CHILD_INDEX: Final = 15.5
# Head circumference against the adult's, by stature against the adult's: growth charts, from memory. Beyond: our own.
_HEAD_BY_STATURE: Final = ((0.42, 0.48, 0.65, 0.83, 1.0, 1.25), (0.80, 0.84, 0.91, 0.95, 1.0, 1.10))
# How deep hips are for their breadth; our own, no source.
_HIP_DEPTH: Final = 0.68


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
    """Return every named size in mm, measured ones as they are, and `head_height_mm` and `hip_depth_mm`.

    GeometryError for what is unknown, named twice or out of range.
    """
    number("stature_mm", stature_mm, *STATURE_RANGE_MM)
    chosen("build", build, BUILDS)
    mass = usual_mass_kg(stature_mm, build) if mass_kg is None else _checked_mass_kg(mass_kg, stature_mm)
    tall = stature_mm / _of_build(_STATURE_MM, build)
    wide = math.sqrt(mass / _of_build(_MASS_KG, build) / tall)
    factors: dict[Kind, float] = {
        "length": tall,
        "girth": wide,
        "belly": max(wide, wide**1.3),
        "head": head_scale(stature_mm, build),
    }
    sizes = {
        name: _of_build({"man": size.man, "woman": size.woman}, build) * factors[size.kind] * size.lying
        for name, size in SIZES.items()
    }
    sizes |= _checked_sizes(measured)
    sizes["hip_depth_mm"] = _HIP_DEPTH * sizes["hip_breadth_mm"]
    sizes["head_height_mm"] = _of_build(_HEAD_HEIGHT_MM, build) * (0.5 + 0.5 * min(tall, 1.2))
    return sizes


def head_scale(stature_mm: float, build: Build) -> float:
    """Return the breadth and length of a head against the adult mean."""
    return float(np.interp(stature_mm / _of_build(_STATURE_MM, build), *_HEAD_BY_STATURE))


def usual_mass_kg(stature_mm: float, build: Build) -> float:
    """Return the mass that is assumed where none is given."""
    adult = _of_build(_STATURE_MM, build)
    index = _of_build(_MASS_KG, build) / (adult / 1000.0) ** 2
    grown = min(max((stature_mm - _CHILD_STATURE_MM) / (adult - _CHILD_STATURE_MM), 0.0), 1.0)
    return (_CHILD_INDEX + grown * (index - _CHILD_INDEX)) * (stature_mm / 1000.0) ** 2


def chosen(name: str, value: object, allowed: tuple[Word, ...]) -> Word:
    """Return a word that is one of those allowed; raise GeometryError otherwise."""
    for word in allowed:
        if value == word:
            return word
    raise GeometryError(f"{name} = {value!r:.80} is not allowed{_hint(value, allowed)}; allowed: {', '.join(allowed)}")


def _of_build(values: Mapping[str, float], build: Build) -> float:
    return 0.5 * (values["man"] + values["woman"]) if build == "mean" else values[build]


def _checked_mass_kg(mass_kg: float, stature_mm: float) -> float:
    number("mass_kg", mass_kg, *MASS_RANGE_KG)
    low, high = (index * (stature_mm / 1000.0) ** 2 for index in INDEX_RANGE)
    if not low <= mass_kg <= high:
        raise GeometryError(
            f"mass_kg = {mass_kg:g} is not allowed at stature_mm = {stature_mm:g}; "
            f"allowed is a number from {low:.1f} to {high:.1f}"
        )
    return float(mass_kg)


def _checked_sizes(measured: object) -> dict[str, float]:
    checked: dict[str, float] = {}
    for i, pair in enumerate(sequence("sizes", measured, 0, len(SIZES))):
        name, value = sequence(f"sizes[{i}]", pair, 2, 2)
        if not isinstance(name, str) or name not in SIZES:
            raise GeometryError(f"size {name!r:.80} is unknown{_hint(name, SIZES)}; allowed: {', '.join(SIZES)}")
        if name in checked:
            raise GeometryError(f"size {name!r} is given twice; allowed is once")
        checked[name] = number(name, value, SIZES[name].low, SIZES[name].high)
    return checked


def _hint(value: object, allowed: Iterable[str]) -> str:
    close = difflib.get_close_matches(str(value)[:80], allowed, n=1)
    return f" (did you mean {close[0]!r}?)" if close else ""
