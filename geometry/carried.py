"""The exact clearance map of a scene that differs from a mapped one by shifts of what turns with the couch.

What a hand drags, the isocentre or the patient on the table, shifts parts and turns none. An `Anchor` is made once from
an exact map; the maps of scenes up to `LIMIT_MM` off follow from it in a fraction of a sweep, and are as exact.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from geometry.anchor_kernel import Known, Normals, anchor_tiles
from geometry.carry_kernel import MOST, Kept, carry_tiles
from geometry.hulls import packed_hulls
from geometry.kernel import Hulls, Memory
from geometry.pieces import convex_piece
from geometry.plane_kernel import Lists, Pairs
from geometry.planes import Plane, planes_of
from geometry.progress import Progress, Silent
from geometry.scene import Motion, Scene
from geometry.scene_shifts import rigid_bodies, shifts_between
from geometry.sweep import POSES_OF_CALL, ClearanceMap, angles_of, empty_field, empty_map, merge_plane, sweep_plane
from geometry.sweep_kernel import Angles, Field
from geometry.tasks import CALLS, Tiles, run_tiles

Array = NDArray[np.float64]

# How far off an anchor serves. Farther means more pairs at each pose.
LIMIT_MM = 20.0
# Poses each way, gantry and couch, that share a sifting of the pairs.
BLOCK = (6, 12)
# Of one call into compiled code, and how many calls at least: a hand waits for all of them, and none takes long.
POSES_OF_CARRY = 20_000
CARRIES = 4


@dataclass(frozen=True, eq=False)
class Turning:
    """A plane on which both angles count, with what an anchor keeps of it."""

    plane: Plane
    gantry: Angles
    couch: Angles
    kept: Kept


@dataclass(frozen=True, eq=False)
class Other:
    """A plane on which one angle counts at most, with its field: what it costs is not worth carrying."""

    plane: Plane
    gantry: Angles
    couch: Angles
    field: Field


@dataclass(frozen=True, eq=False)
class Anchor:
    """An exact map with what settles most pairs at each of its poses, for shifts up to `limit_mm` of any part.

    `turning` is None where the grid has but one angle of an axis.
    """

    exact: ClearanceMap
    limit_mm: float
    turning: Turning | None
    others: tuple[Other, ...]


def anchor_of(
    exact: ClearanceMap, progress: Progress | None = None, threads: int | None = None, limit_mm: float = LIMIT_MM
) -> Anchor:
    """Return the anchor of an exact map, which takes about as long as the map. Raises Cancelled."""
    progress = progress or Silent()
    turning: Turning | None = None
    others: list[Other] = []
    for plane in planes_of(exact.scene):
        gantry, couch = _angles(exact, plane)
        if len(gantry.angle) > 1 and len(couch.angle) > 1:
            body_of_part = rigid_bodies(exact.scene)
            bodies, known = body_of_part[plane.b.part], _known(exact, body_of_part)
            kept = _kept(plane, (gantry, couch), bodies, known, limit_mm, progress, threads)
            turning = Turning(plane, gantry, couch, kept)
        else:
            field = sweep_plane(plane, gantry, couch, progress, threads)
            others.append(Other(plane, gantry, couch, field))
    return Anchor(exact, limit_mm, turning, tuple(others))


def carried_map(
    anchor: Anchor, scene: Scene, progress: Progress | None = None, threads: int | None = None
) -> ClearanceMap | None:
    """Return the exact map of a scene on the anchor's grid, the same as `sweep` would give. Raises Cancelled.

    None where the scene differs from the anchor's by more than shifts of the couch's parts, of the patient and of
    devices, or where one of them is longer than the anchor's limit.
    """
    progress = progress or Silent()
    shifts = shifts_between(anchor.exact.scene, scene)
    if shifts is None or np.linalg.norm(shifts, axis=1).max(initial=0.0) > anchor.limit_mm:
        return None
    if anchor.turning is None:
        result = empty_map(scene, anchor.exact.gantry_deg, anchor.exact.couch_deg)
    else:
        result = _turning_map(anchor, anchor.turning, scene, shifts, progress, threads)
    for other in anchor.others:
        field = other.field
        if shifts[other.plane.b.part].any():
            field = sweep_plane(_moved(other.plane, scene, shifts), other.gantry, other.couch, progress, threads)
        merge_plane(result, other.plane, field)
    return result


def prepare_carry_kernel() -> None:
    """Make sure that maps can be carried at once. Takes long only on a new machine."""
    corner = np.array([[0.0, 0.0, 0.0], [9.0, 0.0, 0.0], [0.0, 9.0, 0.0], [0.0, 0.0, 9.0]])
    a = packed_hulls([convex_piece(corner + 100.0)], [0], 1)
    b = packed_hulls([convex_piece(corner)], [0], 2)
    one = np.zeros(1, np.int32)
    plane = Plane(a, b, Pairs(one, one, np.ones(1)), with_gantry=True, with_couch=True)
    angles = angles_of(np.array([0.0, 1.0]))
    shape = (2, 2)
    known = Known(
        np.full(shape, np.nan), np.full(shape, np.nan), np.zeros((*shape, 3)), np.ones(shape), np.zeros(shape, np.int32)
    )
    kept = _kept(plane, (angles, angles), one, known, LIMIT_MM, Silent(), 1)
    _carried(Turning(plane, angles, angles, kept), plane, np.zeros((1, 3)), Silent(), 1)


def _angles(exact: ClearanceMap, plane: Plane) -> tuple[Angles, Angles]:
    still = np.zeros(1)
    return (
        angles_of(exact.gantry_deg if plane.with_gantry else still),
        angles_of(exact.couch_deg if plane.with_couch else still),
    )


def _as_map(scene: Scene, like: ClearanceMap, plane: Plane, field: Field) -> ClearanceMap:
    """Return the map of one plane alone whose points are in the fixed system."""
    # Pair -1, none, meets the -1 at the end.
    machine_part = np.append(plane.a.part[plane.pairs.i], np.int32(-1))
    couch_part = np.append(plane.b.part[plane.pairs.j], np.int32(-1))
    return ClearanceMap(
        scene,
        like.gantry_deg,
        like.couch_deg,
        field.clearance,
        field.slack,
        machine_part[field.pair],
        couch_part[field.pair],
        field.point_a,
        field.point_b,
    )


def _kept(
    plane: Plane,
    angles: tuple[Angles, Angles],
    bodies: NDArray[np.int32],
    known: Known,
    limit_mm: float,
    progress: Progress,
    threads: int | None,
) -> Kept:
    """Return what an anchor keeps of a plane on which both angles count; `bodies` (pieces of b,)."""
    gantry, couch = angles
    rows, columns = shape = (len(couch.angle), len(gantry.angle))
    count = len(plane.pairs.i)
    kept = Kept(
        np.full(shape, -1, np.int8),
        np.zeros(shape, np.bool_),
        np.empty((*shape, MOST), np.int32),
        np.empty((*shape, MOST, 4), np.float32),
        np.empty((-(-rows // BLOCK[1]), -(-columns // BLOCK[0]), count), np.uint8),
    )

    def work(hand: Tiles, memory: Memory, lists: Lists) -> None:
        normals = Normals(np.zeros((count, 3)), np.zeros(count))
        grid = gantry, couch, hand, BLOCK
        anchor_tiles(plane.a, plane.b, bodies, plane.pairs, *grid, limit_mm, known, memory, lists, normals, kept)

    calls = max(rows * columns // POSES_OF_CALL, CALLS)
    run_tiles(work, _tiles(rows, columns), plane.pairs, progress, "what stays near", threads, calls)
    return kept


def _turning_map(
    anchor: Anchor, turning: Turning, scene: Scene, shifts: Array, progress: Progress, threads: int | None
) -> ClearanceMap:
    """Return the map of the plane on which both angles count alone; `shifts` (parts, 3), mm."""
    moved = _moved(turning.plane, scene, shifts)
    field = _carried(turning, moved, shifts[moved.b.part], progress, threads)
    return _as_map(scene, anchor.exact, moved, field)


def _carried(turning: Turning, moved: Plane, shift: Array, progress: Progress, threads: int | None) -> Field:
    """Return the plane's field with b's pieces moved by `shift` (pieces, 3), mm; its points are in the fixed system."""
    gantry, couch, kept = turning.gantry, turning.couch, turning.kept
    rows, columns = len(couch.angle), len(gantry.angle)
    field = empty_field(rows, columns)

    def work(hand: Tiles, memory: Memory, lists: Lists) -> None:
        grid = gantry, couch, hand, BLOCK
        carry_tiles(moved.a, moved.b, moved.pairs, *grid, shift, kept, memory, lists, field)

    calls = max(rows * columns // POSES_OF_CARRY, CARRIES)
    run_tiles(work, _tiles(rows, columns), moved.pairs, progress, "exact clearance", threads, calls)
    return field


def _tiles(rows: int, columns: int) -> Tiles:
    return np.array([(0, columns, j, min(j + BLOCK[1], rows)) for j in range(0, rows, BLOCK[1])])


def _known(exact: ClearanceMap, body_of_part: NDArray[np.int32]) -> Known:
    """Return what a map tells of its poses in the kernel's form."""
    scene = exact.scene
    with_patient = np.array([part.kind != "machine" for part in scene.parts])
    required_mm = scene.setup.required.of_pair_mm
    patients = with_patient[exact.machine_part] | with_patient[exact.couch_part]
    by_gantry = np.array([part.motion is Motion.GANTRY for part in scene.parts])
    # Where there is no nearest part, index -1, the clearance is no number, and nothing else is looked at.
    return Known(
        exact.clearance_mm,
        exact.slack_mm,
        exact.machine_point_mm - exact.couch_point_mm,
        np.where(patients, required_mm(True), required_mm(False)),
        np.where(by_gantry[exact.machine_part], body_of_part[exact.couch_part], -1).astype(np.int32),
    )


def _moved(plane: Plane, scene: Scene, shifts: Array) -> Plane:
    """Return the plane with b's pieces as they stand in `scene`; `shifts` (parts, 3), mm."""
    shift = shifts[plane.b.part]
    if not shift.any():
        return plane
    parts = dict.fromkeys(plane.b.part.tolist())
    vertices = np.concatenate([piece.vertices for k in parts for piece in scene.parts[k].pieces])
    reach = plane.b.reach
    if plane.with_couch:
        reach = np.maximum.reduceat(np.hypot(vertices[:, 0], vertices[:, 1]), plane.b.first[:-1])
    b: Hulls = plane.b._replace(vertices=vertices, centres=plane.b.centres + shift, reach=reach)
    # Spheres about groups of pairs would have to be found anew.
    pairs = Pairs(plane.pairs.i, plane.pairs.j, plane.pairs.required)
    return Plane(plane.a, b, pairs, plane.with_gantry, plane.with_couch)
