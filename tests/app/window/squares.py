"""Squares in front of an eye, for the tests of what draws them."""

import math

import numpy as np

from app.window.room.camera import Camera
from app.window.room.meshes import plain_mesh
from app.window.room.rendering import DisplayMesh, DrawnSurface, Frame

WHITE, BLACK = (1.0, 1.0, 1.0), (0.0, 0.0, 0.0)
RED, GREEN, BLUE = (1.0, 0.0, 0.0), (0.0, 1.0, 0.0), (0.0, 0.0, 1.0)
SIZE = 100
# From the foot end, the focus in the middle of the picture: 1 mm is a pixel at the focus.
CAMERA = Camera(np.zeros(3), SIZE / 2.0 / math.tan(math.radians(13.0)), 0.0, 0.0)


def square(y_mm: float, half_mm: float = 20.0, *, away: bool = False) -> DisplayMesh:
    """Return a square that faces the eye, or turns its back to it, at a depth of `y_mm` behind the focus."""
    points = half_mm * np.array([[-1.0, 0.0, -1.0], [1.0, 0.0, -1.0], [1.0, 0.0, 1.0], [-1.0, 0.0, 1.0]])
    triangles = np.array([[0, 1, 2], [0, 2, 3]])
    return plain_mesh(points + np.array([0.0, y_mm, 0.0]), triangles[:, ::-1] if away else triangles)


def flat(mesh: DisplayMesh, colour: tuple[float, float, float], opacity: float = 1.0) -> DrawnSurface:
    return DrawnSurface(mesh, np.eye(4), colour, opacity, light=0.0)


def frame_of(*surfaces: DrawnSurface, fine: bool = False, near_mm: float = 10.0) -> Frame:
    return Frame(SIZE, SIZE, CAMERA, near_mm, 5000.0, WHITE, BLACK, surfaces, fine)
