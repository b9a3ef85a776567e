"""The exact clearance at every pair of angles of a grid."""

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from geometry.frames import cos_sin
from geometry.kernel import Memory
from geometry.plane_kernel import Lists
from geometry.planes import Plane, planes_of
from geometry.progress import Progress, Silent
from geometry.scene import Scene
from geometry.sweep_kernel import Angles, Field, sweep_tiles
from geometry.tasks import CALLS, Tiles, run_tiles

Array = NDArray[np.float64]
Indices = NDArray[np.int32]

# Poses each way that share a sifting of the pairs: what fits into that many degrees, within bounds; on a coarse grid
# more of them would have too little in common. And how many where only one axis turns.
BLOCK_DEG = 12.0
BLOCK = (3, 12)
POSES = 144
# Of one call into compiled code, some hundredths of a second.
POSES_OF_CALL = 5000


@dataclass(frozen=True, eq=False)
class ClearanceMap:
    """What the sweep finds on a grid of n gantry and m couch angles (deg, rising, gantry unwrapped).

    `clearance_mm` (m, n): 0 in contact, NaN where no valid distance was found. `slack_mm` (m, n): the least of
    clearance - required. `machine_part`, `couch_part` (m, n): indices into `scene.parts` of the nearest parts, -1 for
    none. `machine_point_mm`, `couch_point_mm` (m, n, 3): the witness, fixed system.
    """

    scene: Scene
    gantry_deg: Array
    couch_deg: Array
    clearance_mm: Array
    slack_mm: Array
    machine_part: Indices
    couch_part: Indices
    machine_point_mm: Array
    couch_point_mm: Array


def grid_deg(low: float, high: float, step: float) -> Array:
    """Return the multiples of `step` within [low, high], with both ends added, rising."""
    first = math.ceil(low / step - 1e-9)
    last = math.floor(high / step + 1e-9)
    inner = np.arange(first, last + 1) * step
    inner = inner[(inner > low + 1e-9) & (inner < high - 1e-9)]
    return np.unique(np.concatenate([[low], inner, [high]]))


def sweep(
    scene: Scene, gantry_deg: Array, couch_deg: Array, progress: Progress | None = None, threads: int | None = None
) -> ClearanceMap:
    """Return the clearance map of a scene on a grid; angles in degrees, rising. Raises Cancelled."""
    progress = progress or Silent()
    result = empty_map(scene, gantry_deg, couch_deg)
    for plane in planes_of(scene):
        gantry = angles_of(gantry_deg if plane.with_gantry else np.zeros(1))
        couch = angles_of(couch_deg if plane.with_couch else np.zeros(1))
        field = sweep_plane(plane, gantry, couch, progress, threads)
        merge_plane(result, plane, field)
    return result


def empty_map(scene: Scene, gantry_deg: Array, couch_deg: Array) -> ClearanceMap:
    """Return the map of a scene before any plane is looked at: nothing is near anywhere."""
    shape = (len(couch_deg), len(gantry_deg))
    return ClearanceMap(
        scene,
        gantry_deg,
        couch_deg,
        np.full(shape, np.inf),
        np.full(shape, np.inf),
        np.full(shape, -1, np.int32),
        np.full(shape, -1, np.int32),
        np.full((*shape, 3), np.nan),
        np.full((*shape, 3), np.nan),
    )


def empty_field(rows: int, columns: int) -> Field:
    """Return the field of a plane before it is filled: no distance is known."""
    return Field(
        np.full((rows, columns), np.nan),
        np.full((rows, columns), np.nan),
        np.full((rows, columns), -1, np.int32),
        np.full((rows, columns, 3), np.nan),
        np.full((rows, columns, 3), np.nan),
    )


def sweep_plane(
    plane: Plane, gantry: Angles, couch: Angles, progress: Progress | None = None, threads: int | None = None
) -> Field:
    """Return the exact field of one plane; see `Field` for shapes. Raises Cancelled."""
    progress = progress or Silent()
    columns, rows = len(gantry.angle), len(couch.angle)
    field = empty_field(rows, columns)
    block = (
        1 if columns == 1 else POSES if rows == 1 else _block(gantry),
        1 if rows == 1 else POSES if columns == 1 else _block(couch),
    )
    tiles = np.array([(0, columns, j, min(j + block[1], rows)) for j in range(0, rows, block[1])])

    def work(hand: Tiles, memory: Memory, lists: Lists) -> None:
        sweep_tiles(plane.a, plane.b, plane.pairs, gantry, couch, hand, block, memory, lists, field)

    calls = max(rows * columns // POSES_OF_CALL, CALLS)
    run_tiles(work, tiles, plane.pairs, progress, "exact clearance", threads, calls)
    return field


def _block(angles: Angles) -> int:
    """Return how many of some rising angles are walked together."""
    step_deg = math.degrees(float(angles.angle[-1] - angles.angle[0])) / (len(angles.angle) - 1)
    return min(max(round(BLOCK_DEG / step_deg), BLOCK[0]), BLOCK[1])


def angles_of(angles_deg: Array) -> Angles:
    """Return the kernel's form of rising angles in degrees; cosines are exact at right angles."""
    pairs = np.array([cos_sin(float(angle)) for angle in angles_deg]).reshape(-1, 2)
    return Angles(np.radians(angles_deg), np.ascontiguousarray(pairs[:, 0]), np.ascontiguousarray(pairs[:, 1]))


def merge_plane(result: ClearanceMap, plane: Plane, field: Field) -> None:
    """Keep, pose by pose, the nearer of what was known and what a plane adds; a missing distance stays missing."""
    shape = result.clearance_mm.shape
    clearance = np.broadcast_to(field.clearance, shape)
    slack = np.broadcast_to(field.slack, shape)
    known = result.clearance_mm
    # Contact outranks a missing distance, which outranks any other distance.
    nearer = (clearance == 0.0) & (known != 0.0)
    nearer |= np.isnan(clearance) & ~np.isnan(known) & (known != 0.0)
    nearer |= clearance < known
    pair = np.broadcast_to(field.pair, shape)
    known[nearer] = clearance[nearer]
    valid = nearer & (pair >= 0)
    result.machine_part[nearer] = -1
    result.couch_part[nearer] = -1
    result.machine_part[valid] = plane.a.part[plane.pairs.i[pair[valid]]]
    result.couch_part[valid] = plane.b.part[plane.pairs.j[pair[valid]]]
    for target, points in (
        (result.machine_point_mm, field.point_a),
        (result.couch_point_mm, field.point_b),
    ):
        fixed = _fixed_points(points, result.gantry_deg) if plane.with_gantry else points
        target[nearer] = np.broadcast_to(fixed, target.shape)[nearer]
    np.minimum(result.slack_mm, slack, out=result.slack_mm)


def _fixed_points(points: Array, gantry_deg: Array) -> Array:
    """Turn points (rows, n, 3) of the gantry system at each of n gantry angles into the fixed system."""
    cos, sin = np.array([cos_sin(float(angle)) for angle in gantry_deg]).T
    x, y, z = points[..., 0], points[..., 1], points[..., 2]
    return np.stack([cos * x + sin * z, y, cos * z - sin * x], axis=-1)
