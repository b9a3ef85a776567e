"""Head, neck, trunk and hips of a body, and where its skin is at the mid-line."""

import math
from itertools import pairwise
from typing import Final

import numpy as np
from numpy.typing import NDArray

from geometry.body.lying import (
    AXILLA,
    CHEST,
    CLAVICLE,
    CROTCH,
    FLANK,
    HIP,
    NAVEL,
    NECK,
    NOTCH,
    SHOULDER,
    SYMPHYSIS,
    XIPHOID,
    Lying,
)
from geometry.body.outline import HalvedOutline, oval
from geometry.solids import Group, Loft, Solid

Array = NDArray[np.float64]
Sizes = dict[str, float]
Sections = tuple[tuple[float, HalvedOutline], ...]

# Shares of the head's height from the chin; half of the breadth; from the back of the head: back and front, shares of
# its length. Our own, no source, as are nose and ears.
_HEAD: Final = (
    (0.00, 0.17, 0.52, 0.93),
    (0.09, 0.28, 0.42, 0.96),
    (0.26, 0.39, 0.20, 0.97),
    (0.45, 0.47, 0.03, 0.98),
    (0.62, 0.50, 0.00, 1.00),
    (0.80, 0.46, 0.03, 0.96),
    (0.92, 0.34, 0.14, 0.85),
    (1.00, 0.14, 0.34, 0.64),
)
_NOSE: Final = ((0.33, 0.115, 0.84, 1.10), (0.58, 0.045, 0.84, 1.00))
_EARS: Final = ((0.34, 0.035, 0.43, 0.58), (0.58, 0.085, 0.37, 0.62))
_EAR_AT: Final = 0.50
# How deep the hips are at the symphysis, a share of their depth.
_BELOW_HIP: Final = 0.94
_NOSE_TIP: Final = max(front for _, _, _, front in _NOSE)


def head_sections(lying: Lying, size: Sizes) -> Sections:
    """Return the head's outlines (x, y) at rising z, without nose and ears."""
    return tuple(
        _of_head(lying, size, share, half_width, back, front, exponent=2.2) for share, half_width, back, front in _HEAD
    )


def head_and_neck(lying: Lying, size: Sizes) -> Solid:
    """Return head, nose, ears and neck."""
    nose = tuple(_of_head(lying, size, *section) for section in _NOSE)
    ears = [
        tuple(_of_head(lying, size, *section, x=side * _EAR_AT * size["head_breadth_mm"]) for section in _EARS)
        for side in (1.0, -1.0)
    ]
    lofts = (head_sections(lying, size), nose, *ears, _neck(lying, size))
    return Group(tuple(Loft(sections, "z") for sections in lofts))


def trunk_sections(lying: Lying, size: Sizes) -> Sections:
    """Return the trunk's outlines (x, y) at rising z, from the hips to the neck."""
    chest, waist, hips = (size[f"{name}_breadth_mm"] for name in ("chest", "waist", "hip"))
    shoulders = size["bideltoid_breadth_mm"]
    deep, belly, hip_depth = size["chest_depth_mm"], size["waist_depth_mm"], size["hip_depth_mm"]
    # (place, half the width, lowest and highest height)
    shape = (
        (HIP, 0.5 * hips, 0.0, _folded(lying) * hip_depth),
        (NAVEL, max(0.5 * waist, 0.25 * (waist + hips)), 0.0, belly),
        (FLANK, 0.49 * waist, 0.0, belly),
        (XIPHOID, 0.31 * chest + 0.19 * waist, 0.0, 0.75 * deep + 0.25 * belly),
        (CHEST, 0.5 * chest, 0.0, deep),
        (AXILLA, min(0.55 * chest, 0.40 * shoulders), 0.0, 0.95 * deep),
        (SHOULDER, 0.385 * shoulders, 0.03 * deep, 0.80 * deep),
        (CLAVICLE, 0.28 * shoulders, 0.06 * deep, 0.70 * deep),
        (NECK, 0.13 * shoulders + 0.1 * size["head_breadth_mm"], 0.13 * deep, 0.57 * deep),
    )
    return tuple((lying.along(place), lying.across(*outline)) for place, *outline in shape)


def hip_sections(lying: Lying, size: Sizes) -> Sections:
    """Return the outlines (x, y) of what a slope leaves flat, at rising z, up to the hips or a little above."""
    hips, depth = size["hip_breadth_mm"], size["hip_depth_mm"]
    sections: Sections = (
        (lying.along(CROTCH), lying.across(0.44 * hips, 0.03 * depth, 0.78 * depth)),
        (lying.along(SYMPHYSIS), lying.across(0.5 * hips, 0.0, _BELOW_HIP * depth)),
        (lying.along(HIP), lying.across(0.5 * hips, 0.0, max(_BELOW_HIP, _folded(lying)) * depth)),
    )
    if lying.slope == 0.0:
        return sections
    # Tapers into the raised trunk, above the steepest slope.
    return (*sections, (lying.along(HIP) + 0.15 * depth, lying.across(0.46 * hips, 0.4 * depth, 0.8 * depth)))


def front_line(sections: Sections) -> Array:
    """Return the front of sections at the mid-line, as points (y, z), shape (n, 2), mm.

    Between two sections the front of a loft is the line between theirs.
    """
    return np.array([[outline.centre_mm[1] - outline.below_mm, z] for z, outline in sections])


def front_at(line: Array, z: float) -> float:
    """Return the y, mm, farthest to the front where a line of points (y, z) passes `z`; infinity where it does not."""
    found = [
        y0 + (y1 - y0) * (z - z0) / (z1 - z0)
        for (y0, z0), (y1, z1) in pairwise(line)
        if min(z0, z1) <= z <= max(z0, z1) and z0 != z1
    ]
    return float(min(found, default=np.inf))


def _folded(lying: Lying) -> float:
    """Return the share of the hips' depth where trunk and hips meet: on a slope the one leans into the other."""
    return 1.0 - 0.35 * math.sin(lying.slope)


def _of_head(
    lying: Lying,
    size: Sizes,
    share: float,
    half_width: float,
    back: float,
    front: float,
    *,
    x: float = 0.0,
    exponent: float = 2.0,
) -> tuple[float, HalvedOutline]:
    """Return z and the outline there, from shares of the head's sizes."""
    length = size["head_length_mm"]
    low, high = (_NOSE_TIP - front, _NOSE_TIP - back) if lying.prone else (back, front)
    outline = lying.across(
        half_width * size["head_breadth_mm"], low * length, high * length, x, flat=exponent, full=exponent
    )
    return (share - 1.0) * size["head_height_mm"], outline


def _neck(lying: Lying, size: Sizes) -> Sections:
    """Return the neck's outlines (x, y) at rising z: from within the chest into the head."""
    length, height, deep = size["head_length_mm"], size["head_height_mm"], size["chest_depth_mm"]
    half_width = 0.20 * size["head_breadth_mm"] + 0.0625 * size["bideltoid_breadth_mm"]
    # However heavy or slight the body, the neck stays behind the chin and within the chest.
    half_depth = min(0.15 * length + 0.115 * deep, 0.36 * length, 0.34 * deep)
    in_chest, in_head, foremost = 0.36 * deep, 0.17 * length + half_depth, 0.90 * length - half_depth
    if lying.prone:
        in_head, foremost = _NOSE_TIP * length - in_head, _NOSE_TIP * length - foremost
    between = 0.5 * (in_chest + in_head)
    below_chin = max(between, foremost) if lying.prone else min(between, foremost)
    shape = (
        (lying.along(NOTCH), half_width, in_chest),
        (lying.along(NECK), half_width, below_chin),
        (-0.60 * height, 0.9 * half_width, in_head),
    )
    return tuple((z, oval(wide, half_depth, (0.0, lying.y(middle)))) for z, wide, middle in shape)
