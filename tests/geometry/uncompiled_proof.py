"""What the kernels prove uncompiled, and what they would prove if parts of them were wrong.

`NUMBA_DISABLE_JIT=1 python -m tests.geometry.uncompiled_proof` prints it as JSON. Compiled, no part can be replaced.
"""

import json
import sys

import numba
import numpy as np

from geometry import kernel
from geometry.scene import build_scene
from geometry.sweep import sweep
from tests.geometry.test_proof_bounds import SHORT_MM, SLANT_CELL_DEG, SLANTING, one_cell, slanting

ROOM_MM = 0.1

_right_rates = kernel._set_rates


def _smaller_rates(a, i, b, j, turn, memory, pair, nx, ny, nz):  # type: ignore[no-untyped-def]  # noqa: ANN001, ANN202
    """Set rates that are a twentieth too small."""
    _right_rates(a, i, b, j, turn, memory, pair, nx, ny, nz)
    memory.rate_a[pair] *= 0.95
    memory.rate_b[pair] *= 0.95


def proved(spare_mm: float) -> list[bool]:
    """Return for each pair of mounts whether its one cell is proved."""
    return [bool(one_cell(slanting(mounts, spare_mm), SLANT_CELL_DEG).slack_mm[0, 0] >= 0.0) for mounts in SLANTING]


def swept(spare_mm: float) -> list[str]:
    """Return for each pair of mounts what the sweep knows of an angle within the cell."""
    angle = np.array([-SLANT_CELL_DEG / 2.0])
    maps = [sweep(build_scene(slanting(mounts, spare_mm)), angle, angle, threads=1) for mounts in SLANTING]
    return ["unknown" if np.isnan([m.clearance_mm, m.slack_mm]).all() else "known" for m in maps]


def main() -> int:
    """Print what is proved."""
    if not numba.config.DISABLE_JIT:
        raise SystemExit("set NUMBA_DISABLE_JIT=1: compiled kernels cannot be changed")
    found: dict[str, object] = {
        "proved": proved(SHORT_MM),
        "proved with room": proved(ROOM_MM),
        "swept with room": swept(ROOM_MM),
    }
    kernel._set_rates = _smaller_rates
    found["proved with smaller rates"] = proved(SHORT_MM)
    kernel._set_rates = _right_rates
    # No query gets anywhere: what is not known must not pass for enough.
    kernel.STEPS = 0
    found["proved without convergence"] = proved(ROOM_MM)
    found["swept without convergence"] = swept(ROOM_MM)
    print(json.dumps(found))
    return 0


if __name__ == "__main__":
    sys.exit(main())
