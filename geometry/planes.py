"""Which pieces of a scene are checked against which, as planes of angles that the kernel sweeps.

How two bodies stand to each other depends on the gantry angle, the couch angle, both, or neither: each two are a plane.
"""

from dataclasses import dataclass
from functools import lru_cache
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from geometry.errors import GeometryError
from geometry.hulls import packed_hulls
from geometry.kernel import Hulls
from geometry.machine import JoinedPair
from geometry.pieces import ConvexPiece
from geometry.plane_kernel import Groups, Pairs
from geometry.scene import Motion, Scene, ScenePart, Side

Array = NDArray[np.float64]
Indices = NDArray[np.intp]

# Pairs that are looked at together before they are looked at one by one.
GROUP = 8
# The gantry system turns about its Y, the patient support about its Z.
_TURN_AXIS = {Motion.GANTRY: 1, Motion.TURNTABLE: 2, Motion.STILL: None}


@dataclass(frozen=True, eq=False)
class Plane:
    """Two bodies and the pairs between them. Body a is the machine's, body b the other's.

    `a.part` and `b.part` index `Scene.parts`. `with_gantry` and `with_couch` tell on which angles the pose depends.
    """

    a: Hulls
    b: Hulls
    pairs: Pairs
    with_gantry: bool
    with_couch: bool


@lru_cache(maxsize=4)
def planes_of(scene: Scene) -> tuple[Plane, ...]:
    """Return the planes that have pairs to check. GeometryError where there are none at all.

    Remembered: a scene never changes, and sweep, proof and each path ask for the same.
    """
    gantry = _members(scene, Motion.GANTRY)
    turntable = _members(scene, Motion.TURNTABLE)
    still = _members(scene, Motion.STILL)
    still_room = [k for k in still if scene.parts[k].side is Side.ROOM]
    still_couch = [k for k in still if scene.parts[k].side is Side.COUCH]
    found = (
        _plane(scene, Motion.GANTRY, gantry, Motion.TURNTABLE, turntable),
        _plane(scene, Motion.GANTRY, gantry, Motion.STILL, still),
        _plane(scene, Motion.STILL, still_room, Motion.TURNTABLE, turntable),
        _plane(scene, Motion.STILL, still_room, Motion.STILL, still_couch),
    )
    planes = tuple(plane for plane in found if len(plane.pairs.i))
    if not planes:
        raise GeometryError("the room has no part to keep clear of; allowed: at least one that is not joined")
    return planes


def checked_part_pairs(scene: Scene) -> tuple[tuple[ScenePart, ScenePart], ...]:
    """Return every pair of parts, machine's first, whose clearance is asked."""
    seen: dict[tuple[int, int], None] = {}
    for plane in planes_of(scene):
        for i, j in zip(plane.a.part[plane.pairs.i], plane.b.part[plane.pairs.j], strict=True):
            seen[int(i), int(j)] = None
    return tuple((scene.parts[i], scene.parts[j]) for i, j in seen)


def is_checked(first: ScenePart, second: ScenePart, joined: tuple[JoinedPair, ...]) -> bool:
    """Tell whether clearance is asked between two parts.

    Joining counts only between the room and a machine part: a gantry-couch pair, and any pair with the patient or a
    device, is checked whatever a file says.
    """
    sides = {first.side, second.side}
    if len(sides) == 1:
        return False
    if sides == {Side.GANTRY, Side.COUCH} or first.kind != "machine" or second.kind != "machine":
        return True
    return not any({pair.first, pair.second} == {first.name, second.name} for pair in joined)


def _members(scene: Scene, motion: Motion) -> list[int]:
    return [k for k, part in enumerate(scene.parts) if part.motion is motion]


def _plane(scene: Scene, motion_a: Motion, members_a: list[int], motion_b: Motion, members_b: list[int]) -> Plane:
    a = _body(scene, members_a, motion_a)
    b = _body(scene, members_b, motion_b)
    checked = np.zeros((len(scene.parts), len(scene.parts)), dtype=bool)
    for one in members_a:
        for other in members_b:
            checked[one, other] = is_checked(scene.parts[one], scene.parts[other], scene.setup.room.joined)
    i, j = np.nonzero(checked[np.ix_(a.part, b.part)])
    with_patient = np.array([part.kind != "machine" for part in scene.parts])
    required_mm = scene.setup.required.of_pair_mm
    needed = np.where(with_patient[a.part[i]] | with_patient[b.part[j]], required_mm(True), required_mm(False))
    if not (np.isfinite(needed) & (needed > 0.0)).all():
        raise GeometryError(f"required clearance = {needed.min():g} mm; allowed: above 0 for every pair")
    pairs = Pairs(i.astype(np.int32), j.astype(np.int32), needed, _groups(a, b, i, j, needed))
    return Plane(a, b, pairs, Motion.GANTRY in (motion_a, motion_b), Motion.TURNTABLE in (motion_a, motion_b))


def _groups(a: Hulls, b: Hulls, i: Indices, j: Indices, required: Array) -> Groups:
    """Put neighbouring pairs of the same piece of a, up to `GROUP` of them, into groups."""
    place = np.arange(len(i))
    start_of_piece = np.searchsorted(i, np.arange(len(a.radii)))
    starts = np.flatnonzero((place - start_of_piece[i]) % GROUP == 0)
    first = np.append(starts, len(i))
    # Most pieces of a are checked against the same ones of b, in the same groups.
    members = [tuple(j[start:stop]) for start, stop in pairwise(first)]
    known = {group: _sphere(b, group) for group in dict.fromkeys(members)}
    spheres = [known[group] for group in members]
    return Groups(
        first.astype(np.int32),
        np.array([centre for centre, _ in spheres]).reshape(-1, 3),
        np.array([radius for _, radius in spheres]),
        np.array([b.reach[j[start:stop]].max() for start, stop in pairwise(first)]),
        np.array([required[start:stop].max() for start, stop in pairwise(first)]),
    )


def _sphere(hulls: Hulls, pieces: tuple[int, ...]) -> tuple[Array, float]:
    """Return centre and radius of a sphere about some pieces."""
    points = np.concatenate([hulls.vertices[hulls.first[p] : hulls.first[p + 1]] for p in pieces])
    centre = 0.5 * (points.min(axis=0) + points.max(axis=0))
    return centre, float(np.linalg.norm(points - centre, axis=1).max())


def _body(scene: Scene, members: list[int], motion: Motion) -> Hulls:
    pieces = tuple(piece for k in members for piece in scene.parts[k].pieces)
    parts = tuple(k for k in members for _ in scene.parts[k].pieces)
    return _packed(pieces, parts, _TURN_AXIS[motion])


@lru_cache(maxsize=8)
def _packed(pieces: tuple[ConvexPiece, ...], parts: tuple[int, ...], axis: int | None) -> Hulls:
    """Pack a body; remembered, since what a user changes leaves most bodies as they are."""
    return packed_hulls(pieces, parts, axis)
