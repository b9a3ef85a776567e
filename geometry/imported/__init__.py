"""Surfaces that were measured or drawn elsewhere: closed triangle meshes and stacks of contours."""

from geometry.imported.contours import ContourStack
from geometry.imported.mesh import ClosedMesh

__all__ = ["ClosedMesh", "ContourStack"]
