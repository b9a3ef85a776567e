"""What is drawn of the room, told to a renderer: one frame at a time, from nothing but plain arrays.

A renderer is told everything with every frame and remembers what it has seen, so that nothing can get out of step.
It may live on a thread of its own.
"""

from dataclasses import dataclass, field
from typing import Final, Protocol

import numpy as np
from numpy.typing import NDArray
from PySide6.QtGui import QImage

from app.window.room.camera import Camera

Array = NDArray[np.float64]
Singles = NDArray[np.float32]
Indices = NDArray[np.int32]
Colour = tuple[float, float, float]

# One light, over the left shoulder of whoever looks: right, up, back.
LIGHT_AT: Final = (-0.45, 0.65, 1.0)
AMBIENT: Final = 0.46
DIFFUSE: Final = 0.60
SHINE: Final = 0.06
SHINE_POWER: Final = 18.0


@dataclass(frozen=True, eq=False)
class DisplayMesh:
    """A surface to draw, known by its identity; never changed once made.

    `points` (n, 3) mm, `normals` (n, 3) unit, `triangles` (m, 3) counter-clockwise seen from outside. `edges` (k, 2, 3)
    are the two ends of each line that is drawn on the surface. `colours` (n, 3), 0 to 1, or None where the surface has
    one colour.
    """

    points: Singles
    normals: Singles
    triangles: Indices
    edges: Singles
    colours: Singles | None = None


@dataclass(frozen=True, eq=False)
class DrawnSurface:
    """A mesh where it stands: `matrix` (4, 4) maps the mesh to the fixed system, mm.

    `opacity` is 0 to 1. `light` says how much light and shade change its colour, 0 (it is drawn as it is) to 1.
    `edge_colour` is None where the mesh's edges are not drawn.
    """

    mesh: DisplayMesh
    matrix: Array
    colour: Colour
    opacity: float = 1.0
    edge_colour: Colour | None = None
    light: float = 1.0

    @property
    def ambient(self) -> float:
        """How bright the surface is where no light falls, 0 to 1."""
        return 1.0 - self.light * (1.0 - AMBIENT)

    @property
    def diffuse(self) -> float:
        """How much brighter it is where light falls square."""
        return self.light * DIFFUSE


@dataclass(frozen=True, eq=False)
class Frame:
    """All that a picture is made of: `width` and `height` in pixels of the device, backdrop from `top` to `bottom`.

    `fine` asks for smooth edges; without it speed counts. Near and far planes are distances from the eye, mm.
    """

    width: int
    height: int
    camera: Camera
    near_mm: float
    far_mm: float
    top: Colour
    bottom: Colour
    surfaces: tuple[DrawnSurface, ...] = field(default=())
    fine: bool = False


class Renderer(Protocol):
    """What makes pictures. All calls come from one and the same thread."""

    def draw(self, frame: Frame) -> QImage:
        """Return the picture of the frame, of its size, opaque."""
        ...

    def close(self) -> None:
        """Give back what the renderer holds; it is not used afterwards."""
        ...
