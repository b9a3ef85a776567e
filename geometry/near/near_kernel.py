"""How near convex pieces come to a point while gantry and couch turn, compiled; and every pair of pieces at one pose.

Branch and bound over cells of angles, point by point. Seen from the system of a piece, the point moves; `outer` is the
turn of the piece's body, `inner` that of the point's. With the unit normal n of the plane that parts the two at the
middle of a cell, held still in the piece's system, the distance elsewhere is at least n . (x - nearest point of the
piece), and x can be followed by Taylor's theorem: to second order exactly, beyond that by bounds of the third
derivatives, each the point's distance from the axis times the part of n across that axis. So cells of several degrees
will do where the bodies are nearest, since there the first derivatives vanish and the second ones mostly help.
"""

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from geometry.kernel import (
    APART,
    BEYOND,
    CONTACT,
    FAILED,
    ROUNDING_MM,
    Hulls,
    Memory,
    compiled,
    distance,
    inlined,
    pasted,
)
from geometry.plane_kernel import Pairs, chord, turn_between

# Halvings of a cell. 370 deg halved 30 times on both axes is far below what a readout shows.
LEVELS = 60
# Where the point can move farther than this within a cell, only the nearest piece is asked for its distance, mm.
COARSE_MM = 250.0


class Targets(NamedTuple):
    """For each part p with points, the pieces that it is checked against: `pieces[first[p] : first[p + 1]]`."""

    first: NDArray[np.int32]
    pieces: NDArray[np.int32]


class Region(NamedTuple):
    """Where to look: `cells` (n, 4), each (gantry, couch, half-width, half-width), radians.

    With `line` the cells are stretches of a path, from middle - halves to middle + halves, and halves have signs.
    `with_gantry` and `with_couch` tell whether an angle moves the points against the pieces at all.
    """

    cells: NDArray[np.float64]
    line: bool
    with_gantry: bool
    with_couch: bool


class Found(NamedTuple):
    """Of each point: the least distance known, mm, and the angles there, radians.

    `distance` comes in as the most that is asked for. NaN: no valid distance was found.
    """

    distance: NDArray[np.float64]
    gantry: NDArray[np.float64]
    couch: NDArray[np.float64]


class Scratch(NamedTuple):
    """Of one worker: for each level of cells the number of pieces that may matter, and which; the cells still to do.

    `planes` (LEVELS, pieces, 4): for each of them unit normal and offset of a plane with the piece behind it, in the
    piece's system, found in a cell around; normal 0 for none.
    """

    length: NDArray[np.int64]
    pieces: NDArray[np.int32]
    planes: NDArray[np.float64]
    stack: NDArray[np.float64]


@inlined
def _turn(gantry, couch, backward):
    """Return the rotation, row by row, from the points' system to that of the pieces."""
    r0, r1, r2, r3, r4, r5, r6, r7, r8 = turn_between(np.cos(gantry), np.sin(gantry), np.cos(couch), np.sin(couch))
    if backward:
        return r0, r3, r6, r1, r4, r7, r2, r5, r8
    return r0, r1, r2, r3, r4, r5, r6, r7, r8


@inlined
def _across(x, y, z, about_z):
    """Return the length of the part of a vector that is across Y, or across Z."""
    return np.sqrt(x * x + y * y) if about_z else np.sqrt(x * x + z * z)


@inlined
def _least_on_line(slope, bend, half):
    """Return the least of slope s + bend s^2 / 2 over |s| <= half."""
    if bend * half > abs(slope):
        return -0.5 * slope * slope / bend
    return -abs(slope) * half + 0.5 * bend * half * half


@inlined
def _least_on_box(fs, ft, fss, fst, ftt, s, t):
    """Return the least of fs u + ft v + (fss u^2 + 2 fst u v + ftt v^2) / 2 over |u| <= s, |v| <= t; at most 0."""
    inner = fss * ftt - fst * fst
    if fss > 0.0 and inner > 0.0:
        u = (fst * ft - ftt * fs) / inner
        v = (fst * fs - fss * ft) / inner
        if abs(u) <= s and abs(v) <= t:
            return 0.5 * (fs * u + ft * v)
    # Else it is on the border.
    least = 0.0
    for side in (-1.0, 1.0):
        u = side * s
        least = min(least, fs * u + 0.5 * fss * u * u + _least_on_line(ft + fst * u, ftt, t))
        v = side * t
        least = min(least, ft * v + 0.5 * ftt * v * v + _least_on_line(fs + fst * v, fss, s))
    return least


@inlined
def _separation(hulls, piece, points, row, turn, memory):
    """Return the vector from the piece's nearest point to the point, as the last query left it, in its system."""
    r0, r1, r2, r3, r4, r5, r6, r7, r8 = turn
    px, py, pz = points.vertices[row, 0], points.vertices[row, 1], points.vertices[row, 2]
    x = r0 * px + r1 * py + r2 * pz
    y = r3 * px + r4 * py + r5 * pz
    z = r6 * px + r7 * py + r8 * pz
    for k in range(memory.size[piece]):
        weight = memory.weights[piece, k]
        vertex = memory.corners[piece, k, 0]
        x -= weight * hulls.vertices[vertex, 0]
        y -= weight * hulls.vertices[vertex, 1]
        z -= weight * hulls.vertices[vertex, 2]
    return x, y, z


@inlined
def _keep(scratch, level, place, piece, nx, ny, nz, offset):
    """Put a piece and its plane into the list of a level."""
    scratch.pieces[level, place] = piece
    scratch.planes[level, place, 0] = nx
    scratch.planes[level, place, 1] = ny
    scratch.planes[level, place, 2] = nz
    scratch.planes[level, place, 3] = offset


@inlined
def _swap(scratch, level, place):
    """Put a piece of a level's list first."""
    scratch.pieces[level, 0], scratch.pieces[level, place] = scratch.pieces[level, place], scratch.pieces[level, 0]
    for c in range(4):
        planes = scratch.planes
        planes[level, 0, c], planes[level, place, c] = planes[level, place, c], planes[level, 0, c]


@inlined
def _fall(nx, ny, nz, x, y, z, px, py, pz, turn, backward, outer, inner):
    """Return by how much n . x may fall within a cell, mm, when the point p, seen at x, and the piece turn.

    Returns its slopes by the two angles, mm per radian, as well.

    `outer` and `inner`: half-widths of the cell. The outer angle turns x the other way about Y (`backward`: Z), the
    inner one turns p about Z (Y). First and second derivatives are exact, the third ones bounded.
    """
    r0, r1, r2, r3, r4, r5, r6, r7, r8 = turn
    # The normal in the points' system, for the turn of the points' own body.
    mx = r0 * nx + r3 * ny + r6 * nz
    my = r1 * nx + r4 * ny + r7 * nz
    mz = r2 * nx + r5 * ny + r8 * nz
    if backward:
        by_outer = nx * y - ny * x
        by_inner = mx * pz - mz * px
        outer_twice = -(nx * x + ny * y)
        inner_twice = -(mx * px + mz * pz)
        # What the inner turn does to x.
        wx, wy = r0 * pz - r2 * px, r3 * pz - r5 * px
        mixed = nx * wy - ny * wx
    else:
        by_outer = nz * x - nx * z
        by_inner = my * px - mx * py
        outer_twice = -(nx * x + nz * z)
        inner_twice = -(mx * px + my * py)
        wx, wz = r1 * px - r0 * py, r7 * px - r6 * py
        mixed = nz * wx - nx * wz
    least = _least_on_box(by_outer, by_inner, outer_twice, mixed, inner_twice, outer, inner)
    lever = _across(px, py, pz, not backward)
    n_outer = _across(nx, ny, nz, backward)
    m_inner = min(_across(mx, my, mz, not backward) + outer, 1.0)
    radius = _across(x, y, z, backward) + lever * inner
    third = n_outer * outer * (radius * outer * outer + 3.0 * lever * inner * (outer + inner))
    return (third + m_inner * lever * inner * inner * inner) / 6.0 - least, by_outer, by_inner


@pasted
def _look(
    targets, points, row, turn, motion, backward, outer_half, inner_half, best, tolerance, memory, scratch, level
):
    """Ask the pieces of a level for their distance at the middle of a cell; keep for the next those that may matter.

    A distance matters below the best so far less the tolerance. Returns the least distance, its slopes by the outer and
    the inner angle, and whether one is missing that no smaller cell would yield.
    """
    r0, r1, r2, r3, r4, r5, r6, r7, r8 = turn
    px, py, pz = points.vertices[row, 0], points.vertices[row, 1], points.vertices[row, 2]
    x = r0 * px + r1 * py + r2 * pz
    y = r3 * px + r4 * py + r5 * pz
    z = r6 * px + r7 * py + r8 * pz
    limit = best - tolerance
    leader = 0
    if motion > COARSE_MM:
        nearest_by_spheres = np.inf
        for k in range(scratch.length[level]):
            piece = scratch.pieces[level, k]
            dx = x - targets.centres[piece, 0]
            dy = y - targets.centres[piece, 1]
            dz = z - targets.centres[piece, 2]
            apart = np.sqrt(dx * dx + dy * dy + dz * dz) - targets.radii[piece]
            if apart < nearest_by_spheres:
                nearest_by_spheres = apart
                leader = k
    least = np.inf
    slope_outer = 0.0
    slope_inner = 0.0
    missing = False
    first = 0
    kept = 0
    for k in range(scratch.length[level]):
        piece = scratch.pieces[level, k]
        dx = x - targets.centres[piece, 0]
        dy = y - targets.centres[piece, 1]
        dz = z - targets.centres[piece, 2]
        most = limit + motion + ROUNDING_MM + targets.radii[piece]
        if most <= 0.0 or dx * dx + dy * dy + dz * dz > most * most:
            continue
        nx, ny, nz = scratch.planes[level, k, 0], scratch.planes[level, k, 1], scratch.planes[level, k, 2]
        if nx != 0.0 or ny != 0.0 or nz != 0.0:
            # The plane that parted them in a cell around still has the piece behind it.
            above = nx * x + ny * y + nz * z - scratch.planes[level, k, 3]
            if above >= limit:
                fall, _, _ = _fall(nx, ny, nz, x, y, z, px, py, pz, turn, backward, outer_half, inner_half)
                if above - min(fall, motion) - ROUNDING_MM >= limit:
                    continue
        if motion > COARSE_MM and k not in (0, leader):
            # In so large a cell a distance at its middle says little of the rest.
            _keep(scratch, level + 1, kept, piece, nx, ny, nz, scratch.planes[level, k, 3])
            kept += 1
            continue
        lower, upper, status = distance(
            targets, piece, points, row, turn, memory, piece, limit + motion + ROUNDING_MM, 0.0, 0.0
        )
        if status == BEYOND:
            continue
        if status == CONTACT:
            # Nothing is nearer, and nothing else is asked.
            least = 0.0
            kept = 0
            missing = False
            break
        fall = motion
        nx, ny, nz = 0.0, 0.0, 0.0
        if status == FAILED:
            # There is no plane to be had; what the point can move at all holds.
            missing = missing or (motion <= tolerance and lower - fall < limit)
        else:
            limit = min(limit, upper - tolerance)
            nx, ny, nz = _separation(targets, piece, points, row, turn, memory)
            length = np.sqrt(nx * nx + ny * ny + nz * nz)
            nx, ny, nz = nx / length, ny / length, nz / length
            fall, by_outer, by_inner = _fall(nx, ny, nz, x, y, z, px, py, pz, turn, backward, outer_half, inner_half)
            fall = min(fall, motion)
            if upper < least:
                least, slope_outer, slope_inner = upper, by_outer, by_inner
                first = kept
        if lower - fall - ROUNDING_MM < limit:
            _keep(scratch, level + 1, kept, piece, nx, ny, nz, nx * x + ny * y + nz * z - lower)
            kept += 1
    scratch.length[level + 1] = kept
    if 0 < first < kept:
        # The nearest is asked first in the cells within, so that the others need to be nearer still.
        _swap(scratch, level + 1, first)
    return least, slope_outer, slope_inner, missing


@compiled
def nearest(
    points: Hulls,
    parts: NDArray[np.int32],
    rows: NDArray[np.int64],
    hulls: Hulls,
    targets: Targets,
    region: Region,
    backward: bool,
    tolerance: float,
    memory: Memory,
    scratch: Scratch,
    found: Found,
) -> None:
    """Find for each of `rows` of `points` how near the pieces of `hulls` come to it, to within `tolerance`, mm.

    `points` is packed as pieces of one vertex each, in the system of their body, `parts` (n,) their place in `targets`.
    The pieces stand in the system that turns with the gantry and the points in that of the couch, or, `backward`, the
    other way round; a body that stands still is one whose angle the region leaves out. `found` comes in with what is
    known and is lowered; angles in it, and then those of the row before, are tried first: neighbours are nearest at
    much the same ones.
    """
    last_gantry = np.nan
    last_couch = np.nan
    for row in rows:
        first = targets.first[parts[row]]
        count = targets.first[parts[row] + 1] - first
        best = found.distance[row]
        if count == 0 or not best > 0.0:
            continue
        for k in range(count):
            scratch.pieces[0, k] = targets.pieces[first + k]
            memory.size[targets.pieces[first + k]] = 0
            scratch.planes[0, k, :3] = 0.0
        scratch.length[0] = count
        px, py, pz = points.vertices[row, 0], points.vertices[row, 1], points.vertices[row, 2]
        lever = _across(px, py, pz, not backward)
        reach = np.sqrt(px * px + py * py + pz * pz)
        missing = False
        guess_gantry, guess_couch = found.gantry[row], found.couch[row]
        start = -2
        while start <= len(region.cells) and not missing and best > 0.0:
            if start < 0 or start == len(region.cells):
                if start == -1:
                    guess_gantry, guess_couch = last_gantry, last_couch
                elif start >= 0:
                    # In the end all pieces where it is nearest, without tolerance: a distance is that of a pose.
                    guess_gantry, guess_couch = found.gantry[row], found.couch[row]
                scratch.stack[0, 0], scratch.stack[0, 1] = guess_gantry, guess_couch
                scratch.stack[0, 2], scratch.stack[0, 3] = 0.0, 0.0
                if np.isnan(guess_gantry):
                    start += 1
                    continue
            else:
                for c in range(4):
                    scratch.stack[0, c] = region.cells[start, c]
            scratch.stack[0, 4] = 0.0
            start += 1
            waiting = 1
            while waiting > 0 and not missing and best > 0.0:
                waiting -= 1
                gantry, couch = scratch.stack[waiting, 0], scratch.stack[waiting, 1]
                half_g, half_c = scratch.stack[waiting, 2], scratch.stack[waiting, 3]
                level = int(scratch.stack[waiting, 4])
                turn = _turn(gantry if region.with_gantry else 0.0, couch if region.with_couch else 0.0, backward)
                turns_g = abs(half_g) if region.with_gantry else 0.0
                turns_c = abs(half_c) if region.with_couch else 0.0
                outer, inner = (turns_c, turns_g) if backward else (turns_g, turns_c)
                moves_outer = reach * chord(outer)
                moves_inner = lever * chord(inner)
                motion = moves_outer + moves_inner
                least, slope_outer, slope_inner, missing = _look(
                    hulls,
                    points,
                    row,
                    turn,
                    motion,
                    backward,
                    outer,
                    inner,
                    best,
                    tolerance if motion > 0.0 else 0.0,
                    memory,
                    scratch,
                    level,
                )
                if least < best:
                    best = least
                    found.gantry[row], found.couch[row] = gantry, couch
                if scratch.length[level + 1] == 0 or motion == 0.0 or missing or best == 0.0:
                    continue
                if level + 2 >= LEVELS:
                    missing = True
                    continue
                step_g, step_c = 0.5 * half_g, 0.5 * half_c
                if not region.line:
                    # Across the axis along which the point moves farther.
                    along_gantry = (moves_outer >= moves_inner) != backward
                    if along_gantry:
                        step_c = 0.0
                    else:
                        step_g = 0.0
                # The half that lies downhill is looked at first, that is put down last: a low best spares the rest.
                slope_g, slope_c = (slope_inner, slope_outer) if backward else (slope_outer, slope_inner)
                nearer = -1.0 if slope_g * step_g + slope_c * step_c > 0.0 else 1.0
                for side in (-nearer, nearer):
                    scratch.stack[waiting, 0] = gantry + side * step_g
                    scratch.stack[waiting, 1] = couch + side * step_c
                    scratch.stack[waiting, 2] = step_g if step_g != 0.0 else half_g
                    scratch.stack[waiting, 3] = step_c if step_c != 0.0 else half_c
                    scratch.stack[waiting, 4] = level + 1
                    waiting += 1
        if missing:
            found.distance[row] = np.nan
        elif best < found.distance[row]:
            found.distance[row] = best
            last_gantry, last_couch = found.gantry[row], found.couch[row]


@compiled
def distances_at(
    a: Hulls,
    b: Hulls,
    pairs: Pairs,
    gantry: float,
    couch: float,
    limit: float,
    memory: Memory,
    lower: NDArray[np.float64],
    upper: NDArray[np.float64],
) -> None:
    """Set bounds of the distance of every pair of pieces at one pose, radians; `lower` alone beyond `limit`, mm.

    `upper` is 0 in contact, infinite beyond the limit, NaN where the iteration gave up.
    """
    turn = turn_between(np.cos(gantry), np.sin(gantry), np.cos(couch), np.sin(couch))
    for p in range(len(pairs.i)):
        low, high, status = distance(a, pairs.i[p], b, pairs.j[p], turn, memory, p, limit, 0.0, 0.0)
        lower[p] = low
        if status == APART:
            upper[p] = high
        elif status == CONTACT:
            upper[p] = 0.0
        elif status == BEYOND:
            upper[p] = np.inf
        else:
            upper[p] = np.nan
