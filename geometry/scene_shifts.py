"""How far the parts of one scene stand from where they are in another that is otherwise the same."""

from collections.abc import Hashable

import numpy as np
from numpy.typing import NDArray

from geometry.machine import EVERY_STAGE, Mount
from geometry.scene import Motion, Scene, ScenePart, Side

Array = NDArray[np.float64]

# Two parts are the same one shifted when no corner is off by more than this, mm.
SAME_MM = 1e-6


def shifts_between(anchored: Scene, scene: Scene) -> Array | None:
    """Return how far each part stands from where it was, (parts, 3), mm; None if that is not all that differs."""
    one, other = anchored.setup, scene.setup
    if len(anchored.parts) != len(scene.parts):
        return None
    if one.room is not other.room and one.room != other.room:
        return None
    if any(one.required.of_pair_mm(patient) != other.required.of_pair_mm(patient) for patient in (False, True)):
        return None
    bodies = rigid_bodies(anchored)
    shifts = np.zeros((len(scene.parts), 3))
    for k, (part, moved) in enumerate(zip(anchored.parts, scene.parts, strict=True)):
        shift = _shift(part, moved)
        # Only what turns with the couch, or a part of the couch that stands still, can be off.
        if shift is None or (part.side is not Side.COUCH and shift.any()):
            return None
        shifts[k] = shift
    return shifts if _rigid(bodies, shifts) else None


def rigid_bodies(scene: Scene) -> NDArray[np.int32]:
    """Return for each part a number that it shares with those that turn with the couch and cannot but shift alike.

    The patient's parts do, and couch parts and devices that follow the same stages; -1 for what does not turn with it.
    """
    follows = {part.name: part.follows for part in scene.setup.room.parts if part.mount is Mount.COUCH}

    def body(part: ScenePart) -> Hashable:
        return "patient" if part.kind == "patient" else follows.get(part.name, EVERY_STAGE)

    numbers: dict[Hashable, int] = {}
    return np.array(
        [
            numbers.setdefault(body(part), len(numbers)) if part.motion is Motion.TURNTABLE else -1
            for part in scene.parts
        ],
        np.int32,
    )


def _shift(part: ScenePart, moved: ScenePart) -> Array | None:
    """Return how far a part stands from where it was, (3,), mm; None if more than that differs."""
    if (part.label, part.kind, part.motion) != (moved.label, moved.kind, moved.motion):
        return None
    if part.pieces is moved.pieces:
        return np.zeros(3)
    if len(part.pieces) != len(moved.pieces):
        return None
    for one, other in zip(part.pieces, moved.pieces, strict=True):
        if one.faces is not other.faces and not np.array_equal(one.faces, other.faces):
            return None
        if one.vertices.shape != other.vertices.shape:
            return None
    was = np.concatenate([piece.vertices for piece in part.pieces])
    off = np.concatenate([piece.vertices for piece in moved.pieces]) - was
    shift: Array = off.mean(axis=0)
    return shift if np.abs(off - shift).max() <= SAME_MM else None


def _rigid(bodies: NDArray[np.int32], shifts: Array) -> bool:
    """Tell whether the parts of each body share one shift."""
    return all(np.ptp(shifts[bodies == body], axis=0).max() <= SAME_MM for body in set(bodies.tolist()) - {-1})
