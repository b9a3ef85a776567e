"""What hangs together."""

import numpy as np
from numpy.typing import NDArray

Indices = NDArray[np.int64]


def connected(count: int, pairs: Indices) -> Indices:
    """Return the number of the connected part that each of `count` things belongs to, shape (count,), from 0.

    `pairs`, shape (n, 2), are the numbers of things that touch each other.
    """
    from scipy.sparse import coo_array  # noqa: PLC0415 - SciPy takes long to import
    from scipy.sparse.csgraph import connected_components  # noqa: PLC0415

    graph = coo_array((np.ones(len(pairs)), (pairs[:, 0], pairs[:, 1])), shape=(count, count))
    parts: Indices = connected_components(graph, directed=False)[1].astype(np.int64)
    return parts
