"""Surfaces that were measured or drawn elsewhere: closed triangle meshes and stacks of contours."""

from geometry.imported.contours import MOST_CONTOURS, MOST_POINTS, SAME_SLICE_MM, ContourStack
from geometry.imported.mesh import MOST_TRIANGLES, ClosedMesh

__all__ = ["MOST_CONTOURS", "MOST_POINTS", "MOST_TRIANGLES", "SAME_SLICE_MM", "ClosedMesh", "ContourStack"]
