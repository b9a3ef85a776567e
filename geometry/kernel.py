"""Distance between two convex polytopes, compiled: the innermost loop of every sweep and proof.

The method is that of Gilbert, Johnson and Keerthi (1988): a simplex in the difference of the two bodies walks towards
the origin. Each step also yields a separating plane, hence a certified lower bound, whatever rounding did to the
simplex before. A query ends with one of the statuses below; a bound is never replaced by a plausible number.

Body A stands still in its own system; body B is given by `turn`, the nine entries, row by row, of the rotation from
B's system to A's (both have their origin at the isocentre). Lengths in mm. Imports nothing of ours.
"""

from collections.abc import Callable
from typing import NamedTuple, TypeVar, cast

import numpy as np
from numba import njit
from numpy.typing import NDArray

Kernel = TypeVar("Kernel", bound=Callable[..., object])

APART = 0  # the distance is known to within RESOLUTION_MM, or STALLED_MM at worst
CONTACT = 1  # the bodies touch, overlap, or one holds the other
BEYOND = 2  # the distance exceeds the limit of the query; `lower` is a valid bound, no more is known
FAILED = 3  # the iteration gave up; `lower` is still a valid bound

RESOLUTION_MM = 1e-8
# What a query that can get no further must have reached all the same.
STALLED_MM = 1e-6
CONTACT_MM = 1e-7
STEPS = 100
# Covers rounding in carried bounds; far above 1e-16 * 10 m, far below what anyone can measure.
ROUNDING_MM = 1e-7
# Up to this many vertices a plain scan beats walking along edges.
SCAN = 14
# The compass divides each side of a cube of directions into this many by this many.
WINDS = 6


def compiled(function: Kernel) -> Kernel:
    """Compile a kernel for calls without the interpreter's lock.

    No kernel allocates, so none needs numba's reference counting (`_nrt`), whose atomic counters took six sevenths of
    the time of a query.
    """
    # What numba makes of a function is called like the function.
    return cast(Kernel, njit(nogil=True, cache=True, error_model="numpy", _nrt=False)(function))  # type: ignore[call-overload]


def inlined(function: Kernel) -> Kernel:
    """Compile a kernel that is only a step of others, into each of its callers."""
    return cast(
        Kernel,
        njit(nogil=True, cache=True, error_model="numpy", _nrt=False, forceinline=True)(function),  # type: ignore[call-overload]
    )


def pasted(function: Kernel) -> Kernel:
    """Paste a kernel into its one caller before anything is compiled.

    Every level of calls is compiled again with all that it calls: flat, the kernels compile in a third of the time.
    """
    return cast(Kernel, njit(inline="always", error_model="numpy")(function))


class Hulls(NamedTuple):
    """Convex polytopes of one body, packed.

    `vertices` (V, 3), mm; those of piece p are rows first[p] to first[p + 1]. `neighbours[edge_first[v] :
    edge_first[v + 1]]` are the vertices that share a hull edge with vertex v. `part` (P,) is each piece's part.
    `compass` (P, 6 * WINDS * WINDS) are vertices to start a walk from, by direction (see `wind`).
    `centres` (P, 3) and `radii` (P,) are enclosing spheres. `reach` (P,) is the greatest distance of a piece from the
    axis about which its body turns; 0 for a body that stands still.
    """

    vertices: NDArray[np.float64]
    first: NDArray[np.int32]
    edge_first: NDArray[np.int32]
    neighbours: NDArray[np.int32]
    compass: NDArray[np.int32]
    part: NDArray[np.int32]
    centres: NDArray[np.float64]
    radii: NDArray[np.float64]
    reach: NDArray[np.float64]


class Memory(NamedTuple):
    """What a worker remembers of each pair from pose to pose, to start the next query where the last one ended.

    `size` (pairs,) counts the simplex's corners, 0 for none yet; `corners` (pairs, 4, 2) holds their vertex rows and
    `weights` (pairs, 4) the convex combination of them that makes the nearest points. `rate_a` and `rate_b` (pairs,),
    mm per radian, say how fast the last lower bound can fall when a turns about its Y, b about its Z (see `distance`).
    `simplex` (4, 3) is scratch.
    """

    size: NDArray[np.int8]
    corners: NDArray[np.int32]
    weights: NDArray[np.float64]
    rate_a: NDArray[np.float64]
    rate_b: NDArray[np.float64]
    simplex: NDArray[np.float64]


@inlined
def wind(x, y, z):
    """Return the place in a compass of a direction: the side of the cube that it meets, and the square on that side."""
    ax, ay, az = abs(x), abs(y), abs(z)
    if not 0.0 < ax + ay + az < np.inf:
        # No direction at all: a vertex that is not a number must not lead outside the compass.
        return 0
    if ax >= ay and ax >= az:
        side, u, v, w = (0 if x > 0.0 else 1), y, z, ax
    elif ay >= az:
        side, u, v, w = (2 if y > 0.0 else 3), z, x, ay
    else:
        side, u, v, w = (4 if z > 0.0 else 5), x, y, az
    scale = 0.5 * WINDS / w
    column = min(int(u * scale + 0.5 * WINDS), WINDS - 1)
    row = min(int(v * scale + 0.5 * WINDS), WINDS - 1)
    return (side * WINDS + row) * WINDS + column


@inlined
def support(hulls, piece, start, x, y, z):
    """Return the vertex row of `piece` that is farthest along (x, y, z); row `start` is a guess."""
    vertices = hulls.vertices
    low = hulls.first[piece]
    high = hulls.first[piece + 1]
    if high - low <= SCAN:
        best = low
        most = vertices[low, 0] * x + vertices[low, 1] * y + vertices[low, 2] * z
        for row in range(low + 1, high):
            along = vertices[row, 0] * x + vertices[row, 1] * y + vertices[row, 2] * z
            if along > most:
                most = along
                best = row
        return best
    # On a convex polytope a vertex that none of its neighbours beats is the farthest of all.
    best = start
    most = vertices[best, 0] * x + vertices[best, 1] * y + vertices[best, 2] * z
    row = hulls.compass[piece, wind(x, y, z)]
    along = vertices[row, 0] * x + vertices[row, 1] * y + vertices[row, 2] * z
    if along > most:
        most = along
        best = row
    while True:
        here = best
        for k in range(hulls.edge_first[here], hulls.edge_first[here + 1]):
            row = hulls.neighbours[k]
            along = vertices[row, 0] * x + vertices[row, 1] * y + vertices[row, 2] * z
            if along > most:
                most = along
                best = row
        if best == here:
            return best


@inlined
def _nearest_on_segment(ax, ay, az, bx, by, bz):
    """Return the weights of a and b in the segment's point nearest to the origin."""
    dx = bx - ax
    dy = by - ay
    dz = bz - az
    along = -(ax * dx + ay * dy + az * dz)
    if along <= 0.0:
        return 1.0, 0.0
    length2 = dx * dx + dy * dy + dz * dz
    if along >= length2:
        return 0.0, 1.0
    t = along / length2
    return 1.0 - t, t


@inlined
def _nearest_on_triangle(ax, ay, az, bx, by, bz, cx, cy, cz):
    """Return the weights of a, b and c in the triangle's point nearest to the origin.

    By the regions of the triangle's corners, edges and face (Ericson, Real-Time Collision Detection, 5.1.5).
    """
    abx, aby, abz = bx - ax, by - ay, bz - az
    acx, acy, acz = cx - ax, cy - ay, cz - az
    d1 = -(abx * ax + aby * ay + abz * az)
    d2 = -(acx * ax + acy * ay + acz * az)
    if d1 <= 0.0 and d2 <= 0.0:
        return 1.0, 0.0, 0.0
    d3 = -(abx * bx + aby * by + abz * bz)
    d4 = -(acx * bx + acy * by + acz * bz)
    if d3 >= 0.0 and d4 <= d3:
        return 0.0, 1.0, 0.0
    d5 = -(abx * cx + aby * cy + abz * cz)
    d6 = -(acx * cx + acy * cy + acz * cz)
    if d6 >= 0.0 and d5 <= d6:
        return 0.0, 0.0, 1.0
    nx = aby * acz - abz * acy
    ny = abz * acx - abx * acz
    nz = abx * acy - aby * acx
    # Signed areas of the origin's projection against each edge, by the face's normal: no cancellation of products of
    # large dot products, which would cost digits for thin triangles.
    vc = nx * (ay * bz - az * by) + ny * (az * bx - ax * bz) + nz * (ax * by - ay * bx)
    if vc <= 0.0 and d1 >= 0.0 and d3 <= 0.0:
        wa, wb = _nearest_on_segment(ax, ay, az, bx, by, bz)
        return wa, wb, 0.0
    vb = nx * (cy * az - cz * ay) + ny * (cz * ax - cx * az) + nz * (cx * ay - cy * ax)
    if vb <= 0.0 and d2 >= 0.0 and d6 <= 0.0:
        wa, wc = _nearest_on_segment(ax, ay, az, cx, cy, cz)
        return wa, 0.0, wc
    va = nx * (by * cz - bz * cy) + ny * (bz * cx - bx * cz) + nz * (bx * cy - by * cx)
    if va <= 0.0 and d4 - d3 >= 0.0 and d5 - d6 >= 0.0:
        wb, wc = _nearest_on_segment(bx, by, bz, cx, cy, cz)
        return 0.0, wb, wc
    total = va + vb + vc
    if not total > 0.0:
        # A triangle without area: its longest reach is one of its edges.
        return _nearest_on_edges(ax, ay, az, bx, by, bz, cx, cy, cz)
    return va / total, vb / total, vc / total


@inlined
def _nearest_on_edges(ax, ay, az, bx, by, bz, cx, cy, cz):
    """Return the weights of the point nearest to the origin on the three edges of a flat triangle."""
    wa, wb = _nearest_on_segment(ax, ay, az, bx, by, bz)
    x, y, z = wa * ax + wb * bx, wa * ay + wb * by, wa * az + wb * bz
    least = x * x + y * y + z * z
    best = (wa, wb, 0.0)
    wa, wc = _nearest_on_segment(ax, ay, az, cx, cy, cz)
    x, y, z = wa * ax + wc * cx, wa * ay + wc * cy, wa * az + wc * cz
    if x * x + y * y + z * z < least:
        least = x * x + y * y + z * z
        best = (wa, 0.0, wc)
    wb, wc = _nearest_on_segment(bx, by, bz, cx, cy, cz)
    x, y, z = wb * bx + wc * cx, wb * by + wc * cy, wb * bz + wc * cz
    if x * x + y * y + z * z < least:
        best = (0.0, wb, wc)
    return best


@inlined
def _nearest_on_tetrahedron(s, weights):
    """Set the weights of the tetrahedron's point nearest to the origin; return True when it holds the origin."""
    least = np.inf
    holds = True
    for face in range(4):
        i = 1 if face == 0 else 0
        j = 2 if face <= 1 else 1
        k = 3 if face <= 2 else 2
        abx, aby, abz = s[j, 0] - s[i, 0], s[j, 1] - s[i, 1], s[j, 2] - s[i, 2]
        acx, acy, acz = s[k, 0] - s[i, 0], s[k, 1] - s[i, 1], s[k, 2] - s[i, 2]
        nx = aby * acz - abz * acy
        ny = abz * acx - abx * acz
        nz = abx * acy - aby * acx
        of_origin = -(nx * s[i, 0] + ny * s[i, 1] + nz * s[i, 2])
        adx, ady, adz = s[face, 0] - s[i, 0], s[face, 1] - s[i, 1], s[face, 2] - s[i, 2]
        of_corner = nx * adx + ny * ady + nz * adz
        # A flat tetrahedron has no inside: then every face is a candidate.
        flat = of_corner * of_corner <= 1e-24 * (nx * nx + ny * ny + nz * nz) * (adx * adx + ady * ady + adz * adz)
        if flat or of_origin * of_corner < 0.0:
            holds = False
            wi, wj, wk = _nearest_on_triangle(
                s[i, 0], s[i, 1], s[i, 2], s[j, 0], s[j, 1], s[j, 2], s[k, 0], s[k, 1], s[k, 2]
            )
            x = wi * s[i, 0] + wj * s[j, 0] + wk * s[k, 0]
            y = wi * s[i, 1] + wj * s[j, 1] + wk * s[k, 1]
            z = wi * s[i, 2] + wj * s[j, 2] + wk * s[k, 2]
            here = x * x + y * y + z * z
            if here < least:
                least = here
                weights[face] = 0.0
                weights[i] = wi
                weights[j] = wj
                weights[k] = wk
    if holds:
        # The origin's weights do not matter for the distance, which is 0, but the common point is drawn.
        _weigh_inside(s, weights)
    return holds


@inlined
def _weigh_inside(s, weights):
    """Set the weights with which the tetrahedron's corners make the origin, by signed volumes."""
    total = 0.0
    for face in range(4):
        i = 1 if face == 0 else 0
        j = 2 if face <= 1 else 1
        k = 3 if face <= 2 else 2
        volume = (
            s[i, 0] * (s[j, 1] * s[k, 2] - s[j, 2] * s[k, 1])
            + s[i, 1] * (s[j, 2] * s[k, 0] - s[j, 0] * s[k, 2])
            + s[i, 2] * (s[j, 0] * s[k, 1] - s[j, 1] * s[k, 0])
        )
        weights[face] = abs(volume)
        total += abs(volume)
    for face in range(4):
        weights[face] = weights[face] / total if total > 0.0 else 0.25


@inlined
def _depth(s):
    """Return the distance from the origin to the nearest face plane of the tetrahedron that holds it."""
    least = np.inf
    for face in range(4):
        i = 1 if face == 0 else 0
        j = 2 if face <= 1 else 1
        k = 3 if face <= 2 else 2
        abx, aby, abz = s[j, 0] - s[i, 0], s[j, 1] - s[i, 1], s[j, 2] - s[i, 2]
        acx, acy, acz = s[k, 0] - s[i, 0], s[k, 1] - s[i, 1], s[k, 2] - s[i, 2]
        nx = aby * acz - abz * acy
        ny = abz * acx - abx * acz
        nz = abx * acy - aby * acx
        length = np.sqrt(nx * nx + ny * ny + nz * nz)
        least = min(least, abs(nx * s[i, 0] + ny * s[i, 1] + nz * s[i, 2]) / length)
    return least


@inlined
def _shrink(size, s, corners, weights):
    """Reduce the simplex to the face that holds its point nearest to the origin; return the size, 4 for contact."""
    if size == 1:
        weights[0] = 1.0
        return 1
    if size == 2:
        weights[0], weights[1] = _nearest_on_segment(s[0, 0], s[0, 1], s[0, 2], s[1, 0], s[1, 1], s[1, 2])
    elif size == 3:
        weights[0], weights[1], weights[2] = _nearest_on_triangle(
            s[0, 0], s[0, 1], s[0, 2], s[1, 0], s[1, 1], s[1, 2], s[2, 0], s[2, 1], s[2, 2]
        )
    elif _nearest_on_tetrahedron(s, weights):
        return 4
    kept = 0
    for k in range(size):
        if weights[k] > 0.0:
            if k != kept:
                weights[kept] = weights[k]
                corners[kept, 0] = corners[k, 0]
                corners[kept, 1] = corners[k, 1]
                s[kept, 0] = s[k, 0]
                s[kept, 1] = s[k, 1]
                s[kept, 2] = s[k, 2]
            kept += 1
    return kept


@inlined
def _set_rates(a, i, b, j, turn, memory, pair, nx, ny, nz):
    """Keep how fast the bound of the plane with unit normal n, in a's system, can fall: a about Y, b about Z."""
    across = np.sqrt(nx * nx + nz * nz)
    memory.rate_a[pair] = abs(nx * a.centres[i, 2] - nz * a.centres[i, 0]) + across * a.radii[i]
    r0, r1, _, r3, r4, _, r6, r7, _ = turn
    mx = r0 * nx + r3 * ny + r6 * nz
    my = r1 * nx + r4 * ny + r7 * nz
    across = np.sqrt(mx * mx + my * my)
    memory.rate_b[pair] = abs(my * b.centres[j, 0] - mx * b.centres[j, 1]) + across * b.radii[j]


@inlined
def fall(reach_a, reach_b, rate_a, rate_b, by_a, by_b):
    """Return by how much a bound may fall when the bodies turn by up to `by_a` and `by_b` radians.

    The lesser of what the separating plane allows (see `distance`) and of what the pieces can move at all.
    """
    plane = rate_a * by_a + rate_b * by_b + 0.5 * (reach_a * by_a * by_a + reach_b * by_b * by_b)
    # The arc stands in for its chord: no sine for each pair at each pose.
    return min(plane, reach_a * by_a + reach_b * by_b) + ROUNDING_MM


@compiled
def distance(a, i, b, j, turn, memory, pair, limit, half_a, half_b):
    """Find the distance between piece i of body a and piece j of body b.

    Returns (lower, upper, status): the distance lies in [lower, upper]; lower is 0 or certified by a separating
    plane, upper is the length of an actual difference vector. Status APART means upper - lower <= STALLED_MM. As
    soon as the bound exceeds `limit` wherever a turns by up to `half_a` and b by up to `half_b` (radians, both 0 for
    this pose alone), the query ends as BEYOND. In CONTACT lower is 0, and -upper a depth of overlap: no shift shorter
    than it parts the bodies. `memory` row `pair` warms the start and keeps the end.

    The separating plane outlives the pose. With its unit normal n held still, a vertex p of a at distance r from the
    Y axis has n . p(g) >= n . p(0) - |g| |n . (Y x p)| - g^2 r / 2 (Taylor), likewise b about Z. Over a piece inside a
    sphere about c with radius s, |n . (Y x p)| <= |n . (Y x c)| + s |n x Y|: those are the rates, so that
    lower - rate_a |g| - rate_b |c| - (reach_a g^2 + reach_b c^2) / 2 stays a bound for turns g and c from here.
    """
    r0, r1, r2, r3, r4, r5, r6, r7, r8 = turn
    corners = memory.corners[pair]
    s = memory.simplex
    weights = memory.weights[pair]
    size = memory.size[pair]
    if size == 0:
        corners[0, 0] = a.first[i]
        corners[0, 1] = b.first[j]
        size = 1
    for k in range(size):
        p = corners[k, 0]
        q = corners[k, 1]
        x, y, z = b.vertices[q, 0], b.vertices[q, 1], b.vertices[q, 2]
        s[k, 0] = a.vertices[p, 0] - (r0 * x + r1 * y + r2 * z)
        s[k, 1] = a.vertices[p, 1] - (r3 * x + r4 * y + r5 * z)
        s[k, 2] = a.vertices[p, 2] - (r6 * x + r7 * y + r8 * z)
    lower = 0.0
    upper = np.inf
    length = np.inf
    nx, ny, nz = 0.0, 0.0, 0.0
    for _ in range(STEPS):
        size = _shrink(size, s, corners, weights)
        memory.size[pair] = size
        if size == 4:
            memory.rate_a[pair] = a.reach[i]
            memory.rate_b[pair] = b.reach[j]
            return 0.0, -_depth(s), CONTACT
        vx = 0.0
        vy = 0.0
        vz = 0.0
        for k in range(size):
            vx += weights[k] * s[k, 0]
            vy += weights[k] * s[k, 1]
            vz += weights[k] * s[k, 2]
        length = np.sqrt(vx * vx + vy * vy + vz * vz)
        if length <= CONTACT_MM:
            memory.rate_a[pair] = a.reach[i]
            memory.rate_b[pair] = b.reach[j]
            return 0.0, length, CONTACT
        stalled = length >= upper
        upper = min(upper, length)
        p = support(a, i, corners[0, 0], -vx, -vy, -vz)
        q = support(
            b,
            j,
            corners[0, 1],
            r0 * vx + r3 * vy + r6 * vz,
            r1 * vx + r4 * vy + r7 * vz,
            r2 * vx + r5 * vy + r8 * vz,
        )
        x, y, z = b.vertices[q, 0], b.vertices[q, 1], b.vertices[q, 2]
        wx = a.vertices[p, 0] - (r0 * x + r1 * y + r2 * z)
        wy = a.vertices[p, 1] - (r3 * x + r4 * y + r5 * z)
        wz = a.vertices[p, 2] - (r6 * x + r7 * y + r8 * z)
        along = (vx * wx + vy * wy + vz * wz) / length
        if along > lower:
            lower = along
            nx = vx / length
            ny = vy / length
            nz = vz / length
        # Of `length`, not of an earlier and shorter one, are the weights that the witness is made of.
        if length - lower <= RESOLUTION_MM:
            _set_rates(a, i, b, j, turn, memory, pair, nx, ny, nz)
            return lower, length, APART
        if lower > limit:
            _set_rates(a, i, b, j, turn, memory, pair, nx, ny, nz)
            falls = fall(a.reach[i], b.reach[j], memory.rate_a[pair], memory.rate_b[pair], half_a, half_b)
            if lower - falls > limit:
                return lower, upper, BEYOND
        for k in range(size):
            stalled = stalled or (corners[k, 0] == p and corners[k, 1] == q)
        if stalled:
            break
        corners[size, 0] = p
        corners[size, 1] = q
        s[size, 0] = wx
        s[size, 1] = wy
        s[size, 2] = wz
        size += 1
    _set_rates(a, i, b, j, turn, memory, pair, nx, ny, nz)
    # Bodies that nearly touch leave little of a direction to rounding; what is certified still tells the distance.
    if length - lower <= STALLED_MM:
        return lower, length, APART
    memory.size[pair] = 0
    return lower, upper, FAILED
