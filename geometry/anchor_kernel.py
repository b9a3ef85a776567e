"""What an anchor keeps of a swept scene, so that scenes whose couch side stands a little off follow fast; compiled.

A plane that parts two pieces goes on telling when one of them is shifted: along its unit normal n the gap changes by
exactly what the shift is along n. So an anchor keeps, pose by pose, the few pairs that can be the nearest or have the
least slack while no part is shifted by more than a limit, each with its plane.

With v the vector between the nearest points, the least distance is at most |v - s| after a shift s, and that exceeds
|v| - s . v / |v| by at most s^2 / (2 |v|) (by Taylor, exact where v and v - s are of one length): a pair drops out of a
pose when its plane stays farther off than that for every s up to the limit. Where two bodies may be shifted apart, both
by up to the limit, it drops out when it is farther by twice the limit. In contact one pair that touches, the hinge, is
enough for as long as it touches.
"""

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from geometry.carry_kernel import FARTHEST, MOST, SETTLED, Kept
from geometry.kernel import CONTACT, ROUNDING_MM, Hulls, Memory, compiled, distance, fall, inlined, pasted
from geometry.plane_kernel import (
    Lists,
    Pairs,
    between_spheres,
    chord,
    gather,
    group_settled,
    keep_pair,
    turn_between,
)
from geometry.sweep_kernel import Angles, middle_of

# What rounding can do to a kept bound: a share of it in single precision, and what it does to normals and vectors.
SINGLE = 2.0**-23
SLIP_MM = 1e-4


class Known(NamedTuple):
    """What is known of every pose, each (couch angles, gantry angles): see `sweep_kernel.Field`.

    `vector` (..., 3) leads from the other side's nearest point to the machine's, fixed system; `required` is that of
    their pair; `body` is the rigid body of the couch side, as in `bodies`, that has the point, -1 where another plane
    has the nearest.
    """

    clearance: NDArray[np.float64]
    slack: NDArray[np.float64]
    vector: NDArray[np.float64]
    required: NDArray[np.float64]
    body: NDArray[np.int32]


class Normals(NamedTuple):
    """Scratch: the plane of each pair's last query, in the fixed system.

    Where a piece of b is shifted by s, the bound falls by at most `normal` (pairs, 3) . s + `slant` (pairs,) |s|.
    """

    normal: NDArray[np.float64]
    slant: NDArray[np.float64]


@inlined
def _set_normal(a, b, cos_a, sin_a, turn, memory, p, low, normals):
    """Keep the plane of pair p's last query, which gave the bound `low`.

    No vector of the difference of two convex bodies is more than acos(low / length) off the normal of a plane that
    certifies `low`; the last simplex's vector stands in for that normal.
    """
    r0, r1, r2, r3, r4, r5, r6, r7, r8 = turn
    vx, vy, vz = 0.0, 0.0, 0.0
    for k in range(memory.size[p]):
        weight = memory.weights[p, k]
        va = memory.corners[p, k, 0]
        vb = memory.corners[p, k, 1]
        x, y, z = b.vertices[vb, 0], b.vertices[vb, 1], b.vertices[vb, 2]
        vx += weight * (a.vertices[va, 0] - (r0 * x + r1 * y + r2 * z))
        vy += weight * (a.vertices[va, 1] - (r3 * x + r4 * y + r5 * z))
        vz += weight * (a.vertices[va, 2] - (r6 * x + r7 * y + r8 * z))
    length = np.sqrt(vx * vx + vy * vy + vz * vz)
    normals.normal[p, :] = 0.0
    normals.slant[p] = 1.0
    if low > 0.0 and length > 0.0:
        slant = np.sqrt(2.0 * max(1.0 - low / length, 0.0))
        if slant < 1.0:
            normals.slant[p] = slant
            normals.normal[p, 0] = (cos_a * vx + sin_a * vz) / length
            normals.normal[p, 1] = vy / length
            normals.normal[p, 2] = (cos_a * vz - sin_a * vx) / length


@compiled
def anchor_tiles(
    a: Hulls,
    b: Hulls,
    bodies: NDArray[np.int32],
    pairs: Pairs,
    gantry: Angles,
    couch: Angles,
    tiles: NDArray[np.int64],
    block: tuple[int, int],
    limit: float,
    known: Known,
    memory: Memory,
    lists: Lists,
    normals: Normals,
    kept: Kept,
) -> None:
    """Fill `kept` for the poses of each tile, see `sweep_tiles`, for shifts of b's pieces up to `limit` mm.

    Pieces of the same of `bodies` (pieces of b,) share their shift. Tiles begin at whole blocks.
    """
    for k in range(len(tiles)):
        i0, i1, j0, j1 = tiles[k, 0], tiles[k, 1], tiles[k, 2], tiles[k, 3]
        hinge = -1
        for row in range(j0, j1, block[1]):
            for column in range(i0, i1, block[0]):
                cell = (column, min(column + block[0], i1), row, min(row + block[1], j1))
                at_a, half_a, cos_a, sin_a = middle_of(gantry, cell[0], cell[1])
                at_b, half_b, cos_b, sin_b = middle_of(couch, cell[2], cell[3])
                turn = turn_between(cos_a, sin_a, cos_b, sin_b)
                if row == j0 and column == i0:
                    gather(a, b, pairs, turn, at_a, at_b, memory, lists)
                near, tight = _widest(known, cell, limit)
                least = kept.least[row // block[1], column // block[0]]
                middle = (at_a, at_b, half_a, half_b, cos_a, sin_a)
                _sift_widely(a, b, pairs, turn, middle, near, tight, memory, lists, normals, least)
                hinge = _keep_block(
                    a, b, bodies, pairs, gantry, couch, cell, limit, known, memory, lists, normals, hinge, kept
                )


@pasted
def _widest(known, cell, limit):
    """Return (near, tight): no distance or slack of the block exceeds them after any two shifts up to `limit`."""
    i0, i1, j0, j1 = cell
    near = 0.0
    tight = -np.inf
    for row in range(j0, j1):
        for column in range(i0, i1):
            # What is not known may be anything.
            if not known.clearance[row, column] >= 0.0:
                return np.inf, np.inf
            near = max(near, known.clearance[row, column])
            tight = max(tight, known.slack[row, column])
    return near + 2.0 * limit + SLIP_MM, tight + 2.0 * limit + SLIP_MM


@pasted
def _sift_widely(a, b, pairs, turn, middle, near, tight, memory, lists, normals, least):
    """Put the pairs that come below `near`, or their slack below `tight`, somewhere in a cell into the list at depth 1.

    As `plane_kernel.sift`, but nothing that is found narrows the search. `least` (pairs,) takes bounds over the cell.
    """
    at_a, at_b, half_a, half_b, cos_a, sin_a = middle
    chord_a = chord(half_a)
    chord_b = chord(half_b)
    count = 0
    group = 0
    following = 0
    least[:] = SETTLED
    while following < len(pairs.i):
        p = following
        following += 1
        if p == pairs.groups.first[group]:
            group += 1
            if group_settled(a, pairs, group - 1, turn, chord_a, chord_b, near, tight):
                following = pairs.groups.first[group]
                continue
        i = pairs.i[p]
        j = pairs.j[p]
        required = pairs.required[p]
        by_a = abs(at_a - lists.at_a[0, p]) + half_a
        by_b = abs(at_b - lists.at_b[0, p]) + half_b
        falls = fall(a.reach[i], b.reach[j], lists.rate_a[0, p], lists.rate_b[0, p], by_a, by_b)
        bound = max(lists.lower[0, p] - falls, 0.0)
        if bound >= near and bound - required >= tight:
            continue
        motion = a.reach[i] * chord_a + b.reach[j] * chord_b + ROUNDING_MM
        bound = max(bound, between_spheres(a, i, b, j, turn) - motion)
        if bound >= near and bound - required >= tight:
            continue
        low, _, _ = distance(a, i, b, j, turn, memory, p, max(near, tight + required), half_a, half_b)
        falls = fall(a.reach[i], b.reach[j], memory.rate_a[p], memory.rate_b[p], half_a, half_b)
        keep_pair(lists, 0, p, p, low, at_a, at_b, memory.rate_a[p], memory.rate_b[p])
        bound = max(bound, low - falls)
        if bound >= near and bound - required >= tight:
            continue
        _set_normal(a, b, cos_a, sin_a, turn, memory, p, low, normals)
        keep_pair(lists, 1, count, p, low, at_a, at_b, memory.rate_a[p], memory.rate_b[p])
        # What is not a number stays, as near as can be.
        least[p] = int(min(bound, FARTHEST)) if bound > 0.0 else 0
        count += 1
    lists.length[1] = count


@pasted
def _keep_block(a, b, bodies, pairs, gantry, couch, cell, limit, known, memory, lists, normals, hinge, kept):
    """Keep what can matter at each pose of a block, in serpentines, of the list at depth 1; return the last hinge."""
    i0, i1, j0, j1 = cell
    for row in range(j0, j1):
        for step in range(i1 - i0):
            column = i0 + step if (row - j0) % 2 == 0 else i1 - 1 - step
            hinge = _keep_pose(
                a, b, bodies, pairs, gantry, couch, row, column, limit, known, memory, lists, normals, hinge, kept
            )
    return hinge


@pasted
def _keep_pose(a, b, bodies, pairs, gantry, couch, row, column, limit, known, memory, lists, normals, hinge, kept):
    """Keep what can matter at one pose; `hinge` is the pair last found in contact. Returns the one found here."""
    kept.size[row, column] = -1
    kept.hinges[row, column] = False
    clearance = known.clearance[row, column]
    slack = known.slack[row, column]
    if not clearance >= 0.0:
        return hinge
    cos_a, sin_a = gantry.cos[column], gantry.sin[column]
    turn = turn_between(cos_a, sin_a, couch.cos[row], couch.sin[row])
    angle_a = gantry.angle[column]
    angle_b = couch.angle[row]
    count = 0
    enough = 2.0 * limit + SLIP_MM
    # No slack exceeds this after a shift.
    most = slack + limit
    vx, vy, vz = 0.0, 0.0, 0.0
    length = 0.0
    bend = 2.0 * limit
    if clearance == 0.0:
        hinge = _find_hinge(a, b, pairs, turn, angle_a, angle_b, memory, lists, -slack, hinge)
        if hinge < 0:
            return hinge
        most = min(most, -pairs.required[hinge])
        kept.hinges[row, column] = True
        kept.pair[row, column, 0] = hinge
        for axis in range(3):
            kept.plane[row, column, 0, axis] = 0.0
        kept.plane[row, column, 0, 3] = -1.0
        count = 1
    else:
        vx, vy, vz = known.vector[row, column, 0], known.vector[row, column, 1], known.vector[row, column, 2]
        length = np.sqrt(vx * vx + vy * vy + vz * vz)
        vx, vy, vz = vx / length, vy / length, vz / length
        bend = limit * limit / (2.0 * length) if length > 0.5 * limit else 2.0 * (limit - length)
    for k in range(lists.length[1]):
        p = lists.pair[1, k]
        i = pairs.i[p]
        j = pairs.j[p]
        required = pairs.required[p]
        by_a = abs(angle_a - lists.at_a[1, k])
        by_b = abs(angle_b - lists.at_b[1, k])
        falls = fall(a.reach[i], b.reach[j], lists.rate_a[1, k], lists.rate_b[1, k], by_a, by_b)
        bound = lists.lower[1, k] - falls
        asked = False
        matters = True
        while True:
            if clearance == 0.0:
                # Distances do not matter while the hinge is in contact; nor do they fall below 0.
                matters = bound - limit - SLIP_MM - required < most and -required < most
            else:
                apart = enough
                if bodies[j] == known.body[row, column]:
                    dx, dy, dz = normals.normal[p, 0] - vx, normals.normal[p, 1] - vy, normals.normal[p, 2] - vz
                    spread = np.sqrt(dx * dx + dy * dy + dz * dz) + normals.slant[p]
                    apart = min(apart, spread * limit + bend + SLIP_MM)
                matters = bound - length < apart
                if not matters:
                    of_nearest = bound - required - (length - known.required[row, column])
                    matters = bound - required - slack < enough and of_nearest < apart
            if asked or not matters:
                break
            asked = True
            ceiling = max(clearance, slack + required) + enough
            bound, _, _ = distance(a, i, b, j, turn, memory, p, ceiling, 0.0, 0.0)
            keep_pair(lists, 1, k, p, bound, angle_a, angle_b, memory.rate_a[p], memory.rate_b[p])
            _set_normal(a, b, cos_a, sin_a, turn, memory, p, bound, normals)
        if not matters or (p == hinge and clearance == 0.0):
            continue
        if count == MOST:
            return hinge
        kept.pair[row, column, count] = p
        for axis in range(3):
            kept.plane[row, column, count, axis] = normals.normal[p, axis]
        kept.plane[row, column, count, 3] = bound * (1.0 - SINGLE) - normals.slant[p] * limit - SLIP_MM
        count += 1
    kept.size[row, column] = count
    return hinge


@pasted
def _find_hinge(a, b, pairs, turn, angle_a, angle_b, memory, lists, wanted, hinge):
    """Return a pair that is in contact, one that requires `wanted` or more where there is one; -1 for none."""
    if hinge >= 0 and pairs.required[hinge] >= wanted:
        _, _, status = distance(a, pairs.i[hinge], b, pairs.j[hinge], turn, memory, hinge, 0.0, 0.0, 0.0)
        if status == CONTACT:
            return hinge
    found = -1
    for k in range(lists.length[1]):
        p = lists.pair[1, k]
        i = pairs.i[p]
        j = pairs.j[p]
        if found >= 0 and pairs.required[p] <= pairs.required[found]:
            continue
        by_a = abs(angle_a - lists.at_a[1, k])
        by_b = abs(angle_b - lists.at_b[1, k])
        falls = fall(a.reach[i], b.reach[j], lists.rate_a[1, k], lists.rate_b[1, k], by_a, by_b)
        if lists.lower[1, k] - falls > 0.0:
            continue
        _, _, status = distance(a, i, b, j, turn, memory, p, 0.0, 0.0, 0.0)
        if status == CONTACT:
            found = p
            if pairs.required[p] >= wanted:
                break
    return found
