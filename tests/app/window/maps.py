"""Maps of plain numbers for the charts' tests; nothing in them was computed from a room."""

from collections.abc import Callable

import numpy as np
from numpy.typing import ArrayLike, NDArray

from geometry.states import CODE_OF, State
from geometry.sweep import ClearanceMap, grid_deg
from tests.app.files.assessments import plain

Array = NDArray[np.float64]

TRAVEL = (-185.0, 185.0)
COUCH_TRAVEL = (-95.0, 95.0)
REQUIRED_MM = 25.0


def flat_map(
    clearance_mm: float | Callable[[Array, Array], Array],
    step_deg: float = 10.0,
    couch_deg: ArrayLike | None = None,
    gantry_deg: ArrayLike | None = None,
) -> ClearanceMap:
    """Return a map with one clearance everywhere, or those of a function of gantry and couch angles."""
    gantry = grid_deg(*TRAVEL, step_deg) if gantry_deg is None else np.array(gantry_deg)
    couch = grid_deg(*COUCH_TRAVEL, step_deg) if couch_deg is None else np.array(couch_deg)
    values = np.full((len(couch), len(gantry)), np.nan)
    values[:] = clearance_mm(gantry[None, :], couch[:, None]) if callable(clearance_mm) else clearance_mm
    shape = values.shape
    return ClearanceMap(
        plain().scene,
        gantry,
        couch,
        values,
        values - REQUIRED_MM,
        np.full(shape, 0, np.int32),
        np.full(shape, 2, np.int32),
        np.full((*shape, 3), np.nan),
        np.full((*shape, 3), np.nan),
    )


def all_in(state: State, found: ClearanceMap) -> NDArray[np.int8]:
    """Return states of a map, all the same."""
    return np.full(found.clearance_mm.shape, CODE_OF[state], np.int8)
