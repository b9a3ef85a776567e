"""A solid told by outlines on parallel slices."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from geometry.decompose import Faceted

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class ContourStack:
    """A solid told by outlines on slices across z."""

    contours: tuple[tuple[float, Array], ...]
    max_slab_mm: float = 20.0

    def faceted(self, max_excess_mm: float) -> Faceted:
        """Return the pieces."""
        raise NotImplementedError

    def contains(self, points: Array) -> NDArray[np.bool_]:
        """Tell which of `points` lie in the solid."""
        raise NotImplementedError
