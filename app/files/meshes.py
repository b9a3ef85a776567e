"""Surface meshes: STL, OBJ and PLY."""

from pathlib import Path
from typing import Literal

from geometry.imported import ClosedMesh


def read_mesh(path: Path | str, unit: Literal["mm", "cm", "m", "in"]) -> ClosedMesh:
    """Return the closed surface of a file."""
    raise NotImplementedError
