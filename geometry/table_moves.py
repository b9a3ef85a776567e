"""Moves of the table top from one set-up to another, at gantry and couch angles that stay."""

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from geometry.kernel import ROUNDING_MM, Hulls
from geometry.legs import Point
from geometry.paths import Approach, PathProver, exact_approach
from geometry.plane_kernel import Pairs
from geometry.planes import Plane, planes_of
from geometry.progress import Progress, Silent, stop_if_cancelled
from geometry.scene import Scene, build_scene
from geometry.setup import Setup
from geometry.spans import Tolerances
from geometry.states import State

Array = NDArray[np.float64]

# A stretch of the move that is shorter than this is not divided further, mm.
RESOLUTION_MM = 0.5
# How far apart the move is sampled for contact once it is known to fail, mm, and how often at most.
SAMPLED_MM = 5.0
MOST_SAMPLES = 200
# Two set-ups' pieces are the same ones moved when no corner is off by more than this, mm.
SAME_MM = 1e-6


@dataclass(frozen=True)
class TableMove:
    """What is known of a straight move of the table top between two set-ups.

    `permitted`: proved at every place of the move and over the tolerances of both angles; `contact` and `short`: a
    place is, its readings taken as true; `no travel`: an end of it is beyond the travel of the stages or of an axis;
    `unproved` otherwise. `least_clearance_mm` is the proved bound, NaN unless permitted. `first_short` is the first
    place that fails, with its exact clearance there, and `first_share` where on the move it is, 0 to 1.
    `length_mm` is how far the couch's parts move at most.
    """

    state: State
    length_mm: float
    least_clearance_mm: float = math.nan
    first_short: Approach | None = None
    first_share: float | None = None
    reason: str = ""


def table_move(
    setup_a: Setup,
    setup_b: Setup,
    gantry_deg: float,
    couch_deg: float,
    tolerances: Tolerances,
    progress: Progress | None = None,
) -> TableMove:
    """Return what is known of the straight move of T from one set-up to the other, angles unwrapped, deg.

    Lateral, longitudinal and vertical run together, in proportion. Where a point moves by up to m, a clearance falls
    by at most m: a stretch of the move is proved by its middle with m more required, otherwise halved. Set-ups that
    differ by more than the table's place, by other parts, devices, pitch or roll, give `unproved`. GeometryError,
    Cancelled.
    """
    scene, other = build_scene(setup_a), build_scene(setup_b)
    beyond = "; ".join((*scene.no_travel, *other.no_travel))
    shifts = _shifts(scene, other)
    if shifts is None:
        return TableMove(State.UNPROVED, math.nan, reason="the set-ups differ by more than the place of the table top")
    mover = _Mover(scene, tolerances, (gantry_deg, couch_deg), shifts)
    if beyond:
        return TableMove(State.NO_TRAVEL, mover.length_mm, reason=beyond)
    return mover.moved(progress or Silent())


class _Mover:
    """Proves one move; `shifts` (parts, 3) is how far each part moves in all, in the system of its motion."""

    def __init__(self, scene: Scene, tolerances: Tolerances, at_deg: Point, shifts: Array) -> None:
        self._scene = scene
        self._tolerances = tolerances
        self._at_deg = at_deg
        self._shifts = shifts
        self._planes = planes_of(scene)
        self.length_mm = float(np.linalg.norm(shifts, axis=1).max(initial=0.0))

    def moved(self, progress: Progress) -> TableMove:
        """Prove the move from its start on, halving what is not proved."""
        waiting = [(0.0, 1.0)]
        least = math.inf
        while waiting:
            stop_if_cancelled(progress)
            low, high = waiting.pop()
            progress.report(low, "table move")
            middle, half = 0.5 * (low + high), 0.5 * (high - low)
            prover = PathProver(self._scene, self._tolerances, planes=self._planes_at(middle, half))
            verdict = prover.verdict([self._at_deg])
            if verdict.state is State.NO_TRAVEL:
                return TableMove(State.NO_TRAVEL, self.length_mm, reason=verdict.reason)
            if verdict.state is State.PERMITTED:
                least = min(least, verdict.least_clearance_mm - half * self.length_mm)
            elif (high - low) * self.length_mm > RESOLUTION_MM:
                waiting += [(middle, high), (low, middle)]
            else:
                return self._failed(middle)
        return TableMove(State.PERMITTED, self.length_mm, max(least, 0.0))

    def _failed(self, first: float) -> TableMove:
        """Tell which way a move fails whose first place that is not proved is known."""
        at = self._exact(first)
        count = min(math.ceil(self.length_mm / SAMPLED_MM), MOST_SAMPLES)
        rest = [self._exact(float(share)) for share in np.linspace(first, 1.0, count + 1)]
        state = State.UNPROVED
        if any(place.clearance_mm == 0.0 for place in (at, *rest)):
            state = State.CONTACT
        elif any(place.slack_mm < 0.0 for place in (at, *rest)):
            state = State.SHORT
        return TableMove(state, self.length_mm, first_short=at, first_share=first)

    def _exact(self, share: float) -> Approach:
        return exact_approach(self._planes_at(share, 0.0), 0, *self._at_deg)

    def _planes_at(self, share: float, half: float) -> tuple[Plane, ...]:
        """Return the planes at a place of the move, each pair required what it may lose within `half` of it more."""
        return tuple(self._plane_at(plane, share, half) for plane in self._planes)

    def _plane_at(self, plane: Plane, share: float, half: float) -> Plane:
        # What the gantry carries stands still: only body b, the couch's or the room's, can move.
        shift = self._shifts[plane.b.part]
        extra = half * np.linalg.norm(shift, axis=1) + (2.0 * SAME_MM + ROUNDING_MM if half > 0.0 else 0.0)
        pairs = Pairs(plane.pairs.i, plane.pairs.j, plane.pairs.required + extra[plane.pairs.j])
        return Plane(
            plane.a, _shifted(plane.b, share * shift, plane.with_couch), pairs, plane.with_gantry, plane.with_couch
        )


def _shifted(hulls: Hulls, shift: Array, turns: bool) -> Hulls:
    """Return the pieces moved by `shift` (pieces, 3), mm; `turns` tells whether their body turns about Z."""
    vertices = hulls.vertices + np.repeat(shift, np.diff(hulls.first), axis=0)
    reach = hulls.reach
    if turns:
        reach = np.maximum.reduceat(np.hypot(vertices[:, 0], vertices[:, 1]), hulls.first[:-1])
    return hulls._replace(vertices=vertices, centres=hulls.centres + shift, reach=reach)


def _shifts(scene: Scene, other: Scene) -> Array | None:
    """Return how far each part is moved in the other scene, (parts, 3), mm; None if that is not all."""
    if [part.label for part in scene.parts] != [part.label for part in other.parts]:
        return None
    if scene.setup.room != other.setup.room or scene.setup.required != other.setup.required:
        return None
    found = [
        _shift([piece.vertices for piece in one.pieces], [piece.vertices for piece in two.pieces])
        for one, two in zip(scene.parts, other.parts, strict=True)
    ]
    shifts = [shift for shift in found if shift is not None]
    return np.array(shifts).reshape(-1, 3) if len(shifts) == len(found) else None


def _shift(pieces: Sequence[Array], others: Sequence[Array]) -> Array | None:
    """Return the shift that takes the pieces' vertices to the others'; None if they are not the same pieces."""
    if [len(piece) for piece in pieces] != [len(other) for other in others]:
        return None
    moved = np.concatenate([*others]) - np.concatenate([*pieces])
    shift: Array = moved.mean(axis=0)
    return shift if np.abs(moved - shift).max() <= SAME_MM else None
