"""The fastest ways that the distance libraries have to the least distance of two bodies: broad-phase managers.

The same convex hulls in two managers of dynamic trees of boxes; only the gantry's objects are moved, into the couch's
system. Each query returns the least distance of all pairs, 0 or less in contact.
"""

from collections.abc import Callable, Sequence
from typing import Any

import coal
import fcl
import numpy as np
from numpy.typing import NDArray

from geometry.pieces import ConvexPiece

Array = NDArray[np.float64]
Query = Callable[[Array], float]


def coal_query(moved: Sequence[ConvexPiece], still: Sequence[ConvexPiece]) -> Query:
    """Return a query by coal: least distance with `moved` turned by a matrix, (3, 3)."""

    def objects(pieces: Sequence[ConvexPiece]) -> tuple[list[Any], Any]:
        made = []
        for piece in pieces:
            vertices = coal.StdVec_Vec3s()
            for vertex in piece.vertices:
                vertices.append(vertex)
            made.append(coal.CollisionObject(coal.Convex.convexHull(vertices, False, "")))
        manager = coal.DynamicAABBTreeCollisionManager()
        for one in made:
            manager.registerObject(one)
        manager.setup()
        return made, manager

    movers, manager = objects(moved)
    _kept, other = objects(still)
    callback = coal.DistanceCallBackDefault()

    def query(turn: Array) -> float:
        for mover in movers:
            mover.setRotation(turn)
            mover.computeAABB()
        manager.update()
        callback.init()
        manager.distance(other, callback)
        return float(callback.data.result.min_distance)

    # The managers do not hold on to what stands still.
    query.kept = _kept  # type: ignore[attr-defined]
    return query


def fcl_query(moved: Sequence[ConvexPiece], still: Sequence[ConvexPiece]) -> Query:
    """Return the same by python-fcl."""

    def objects(pieces: Sequence[ConvexPiece]) -> tuple[list[Any], Any]:
        made = []
        for piece in pieces:
            faces = np.column_stack([np.full(len(piece.faces), 3), piece.faces]).astype(np.int32).ravel()
            made.append(fcl.CollisionObject(fcl.Convex(piece.vertices, len(piece.faces), faces), fcl.Transform()))
        manager = fcl.DynamicAABBTreeCollisionManager()
        manager.registerObjects(made)
        manager.setup()
        return made, manager

    movers, manager = objects(moved)
    _kept, other = objects(still)

    def query(turn: Array) -> float:
        transform = fcl.Transform(turn, np.zeros(3))
        for mover in movers:
            mover.setTransform(transform)
        manager.update()
        data = fcl.DistanceData()
        manager.distance(other, data, fcl.defaultDistanceCallback)
        return float(data.result.min_distance)

    query.kept = _kept  # type: ignore[attr-defined]
    return query
