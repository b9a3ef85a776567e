"""Exact clearance and slack at many single pairs of angles, each pair of pieces asked afresh.

The distance kernel is the program's own; which pairs of pieces need it, and what follows from pose to pose, is not:
nothing is carried here.
"""

from concurrent.futures import ThreadPoolExecutor

import numpy as np
from numba import njit
from numpy.typing import NDArray

from geometry.kernel import FAILED, distance
from geometry.planes import Plane, planes_of
from geometry.scene import Scene
from geometry.tasks import scratch_for

Array = NDArray[np.float64]

# Poses of one call into compiled code.
CHUNK = 512


@njit(nogil=True, cache=True, error_model="numpy")
def _ask(a, b, pairs, turns, memory, bound, clearance, slack):  # noqa: ANN001, ANN202
    """Lower clearance and slack of each pose, `turns` (n, 9) from b's system to a's, to those of this plane."""
    for pose in range(len(turns)):
        t = turns[pose]
        turn = (t[0], t[1], t[2], t[3], t[4], t[5], t[6], t[7], t[8])
        first = 0
        for p in range(len(pairs.i)):
            i, j = pairs.i[p], pairs.j[p]
            x, y, z = b.centres[j]
            dx = a.centres[i, 0] - (t[0] * x + t[1] * y + t[2] * z)
            dy = a.centres[i, 1] - (t[3] * x + t[4] * y + t[5] * z)
            dz = a.centres[i, 2] - (t[6] * x + t[7] * y + t[8] * z)
            bound[p] = np.sqrt(dx * dx + dy * dy + dz * dz) - a.radii[i] - b.radii[j] - 1e-6
            if bound[p] < bound[first]:
                first = p
        for step in range(-1, len(pairs.i)):
            p = first if step < 0 else step
            required = pairs.required[p]
            if bound[p] >= clearance[pose] and bound[p] - required >= slack[pose]:
                continue
            # Nothing is known of the pair: a query from a cold start.
            memory.size[p] = 0
            low, _, status = distance(a, pairs.i[p], b, pairs.j[p], turn, memory, p, np.inf, 0.0, 0.0)
            if status == FAILED:
                clearance[pose] = np.nan
                slack[pose] = np.nan
                break
            clearance[pose] = min(clearance[pose], low)
            slack[pose] = min(slack[pose], low - required)


class Exact:
    """Exact clearance and slack of a scene at many single pairs of angles."""

    def __init__(self, scene: Scene, threads: int = 1) -> None:
        self.planes = planes_of(scene)
        self.threads = threads

    def at(self, gantry_deg: Array, couch_deg: Array) -> tuple[Array, Array]:
        """Return clearance and slack, mm, at each of n pairs of angles; NaN where a query failed."""
        clearance = np.full(len(gantry_deg), np.inf)
        slack = np.full(len(gantry_deg), np.inf)
        chunks = [slice(k, k + CHUNK) for k in range(0, len(gantry_deg), CHUNK)]
        for plane in self.planes:
            turns = _turns(plane, gantry_deg, couch_deg)

            def work(chunk: slice, plane: Plane = plane, turns: Array = turns) -> None:
                memory, _ = scratch_for(plane.pairs)
                bound = np.empty(len(plane.pairs.i))
                _ask(plane.a, plane.b, plane.pairs, turns[chunk], memory, bound, clearance[chunk], slack[chunk])

            if self.threads == 1:
                for chunk in chunks:
                    work(chunk)
            else:
                with ThreadPoolExecutor(self.threads) as pool:
                    list(pool.map(work, chunks))
        return clearance, slack


def _turns(plane: Plane, gantry_deg: Array, couch_deg: Array) -> Array:
    """Return Ry(-gantry) Rz(couch), row by row, (n, 9), with 0 for an angle that the plane does not turn with."""
    g = np.radians(gantry_deg) * plane.with_gantry
    c = np.radians(couch_deg) * plane.with_couch
    zero, one = np.zeros_like(g), np.ones_like(g)
    back = np.array([[np.cos(g), zero, -np.sin(g)], [zero, one, zero], [np.sin(g), zero, np.cos(g)]])
    turned = np.array([[np.cos(c), -np.sin(c), zero], [np.sin(c), np.cos(c), zero], [zero, zero, one]])
    return np.ascontiguousarray(np.einsum("ijn,jkn->nik", back, turned).reshape(-1, 9))
