"""What a proof says of a pair of angles, of a rectangle of them, and of very many rectangles at once."""

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from geometry.proof import Interval, Proof, Steps
from geometry.spans import ANGLE_DEG, Tolerances

Array = NDArray[np.float64]
Indices = NDArray[np.int64]
Flags = NDArray[np.bool_]

# Angles nearer than this share of a step to a border of it count as on it.
_ON_BORDER = 1e-7


@dataclass(frozen=True)
class Bound:
    """Proved lower bounds, mm, NaN where unproved; parts index `Scene.parts` and are -1 where none is known.

    The parts are the pair that the clearance belongs to or, unproved, a pair in the way.
    """

    clearance_mm: float
    slack_mm: float
    machine_part: int
    couch_part: int

    @property
    def proved(self) -> bool:
        """Tell whether at every pose meant the clearance is at least the required one."""
        return not math.isnan(self.slack_mm)


NOTHING_PROVED = Bound(math.nan, math.nan, -1, -1)


def bound_at(proof: Proof, gantry_deg: float, couch_deg: float) -> Bound:
    """Return what is proved of one pair of true angles (unwrapped), without tolerance.

    On the border of cells the best of them holds. Angles that were not proved, or no numbers, give NaN.
    """
    return least_bound(proof, (gantry_deg, gantry_deg), (couch_deg, couch_deg))


def least_bound(proof: Proof, gantry_deg: Interval, couch_deg: Interval) -> Bound:
    """Return what is proved throughout a closed rectangle of true angles (unwrapped), without tolerance.

    A rectangle that reaches beyond what was proved, or whose ends are no numbers, gives NaN.
    """
    columns = _choices(proof.gantry, gantry_deg)
    rows = _choices(proof.couch, couch_deg)
    best = NOTHING_PROVED
    for row in rows:
        for column in columns:
            found = _least(proof, row, column)
            if math.isnan(best.clearance_mm) or found.clearance_mm > best.clearance_mm:
                best = found
    return best


def rectangle_permitted(proof: Proof, tolerances: Tolerances, gantry_deg: Interval, couch_deg: Interval) -> bool:
    """Tell whether every reading of a closed rectangle (unwrapped) is within the travel and permitted."""
    for (low, high), (least, most) in (
        (gantry_deg, tolerances.gantry_travel_deg),
        (couch_deg, tolerances.couch_travel_deg),
    ):
        # Written so that an end that is no number fails.
        if not least - ANGLE_DEG <= low <= high <= most + ANGLE_DEG:
            return False
    around = tolerances.of_gantry_deg, tolerances.of_couch_deg
    return least_bound(
        proof,
        (gantry_deg[0] - around[0], gantry_deg[1] + around[0]),
        (couch_deg[0] - around[1], couch_deg[1] + around[1]),
    ).proved


class ProvedTable:
    """Tells of many rectangles of true angles at once whether each is proved, by counts of unproved cells."""

    def __init__(self, proof: Proof) -> None:
        self._proof = proof
        unproved = np.isnan(proof.slack_mm)
        # counts[j, i]: unproved cells among the first j rows and i columns.
        self._counts = np.zeros((unproved.shape[0] + 1, unproved.shape[1] + 1), np.int64)
        np.cumsum(np.cumsum(unproved, axis=0), axis=1, out=self._counts[1:, 1:])

    def proved(
        self, gantry_low_deg: Array, gantry_high_deg: Array, couch_low_deg: Array, couch_high_deg: Array
    ) -> Flags:
        """Return, rectangle by rectangle (arrays that broadcast), whether all of it is proved."""
        proof = self._proof
        found = []
        for i0, i1, inside_gantry in _ranges(proof.gantry, gantry_low_deg, gantry_high_deg):
            for j0, j1, inside_couch in _ranges(proof.couch, couch_low_deg, couch_high_deg):
                counts = self._counts
                unproved = counts[j1, i1] - counts[j0, i1] - counts[j1, i0] + counts[j0, i0]
                found.append((unproved == 0) & inside_gantry & inside_couch)
        flags: Flags = np.logical_or.reduce(found)
        return flags


def _choices(steps: Steps, interval: Interval) -> list[slice]:
    """Return the ranges of steps that each hold a closed interval; none if no steps do."""
    low, high = np.array([interval[0]]), np.array([interval[1]])
    if not interval[0] <= interval[1]:
        return []
    found = [slice(int(i0[0]), int(i1[0])) for i0, i1, inside in _ranges(steps, low, high) if inside[0]]
    return found[:1] if found[:1] == found[1:] else found


def _ranges(steps: Steps, low_deg: Array, high_deg: Array) -> list[tuple[Indices, Indices, Flags]]:
    """Return two choices of half-open ranges of steps that hold closed intervals, and whether they do.

    The two differ for an interval that is a single angle on a border: the step above it and the step below it.
    """
    inside = (low_deg >= steps.low_deg - ANGLE_DEG) & (high_deg <= steps.high_deg + ANGLE_DEG) & (low_deg <= high_deg)
    low = np.where(inside, (low_deg - steps.start_deg) / steps.step_deg, 0.0)
    high = np.where(inside, (high_deg - steps.start_deg) / steps.step_deg, 0.0)
    first = np.clip(np.floor(low + _ON_BORDER), 0, steps.count - 1).astype(np.int64)
    last = np.clip(np.ceil(high - _ON_BORDER), 1, steps.count).astype(np.int64)
    single = last <= first
    above = np.where(single, first + 1, last)
    below = np.where(single, np.maximum(first - 1, 0), first)
    return [(first, above, inside), (below, np.maximum(last, below + 1), inside)]


def _least(proof: Proof, rows: slice, columns: slice) -> Bound:
    clearance = proof.clearance_mm[rows, columns]
    slack = proof.slack_mm[rows, columns]
    worst = int(np.argmin(np.where(np.isnan(slack), -np.inf, clearance)))
    return Bound(
        float(clearance.flat[worst]),
        float(np.min(slack)),
        int(proof.machine_part[rows, columns].flat[worst]),
        int(proof.couch_part[rows, columns].flat[worst]),
    )
