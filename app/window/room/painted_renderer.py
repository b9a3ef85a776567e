"""Frames drawn without OpenGL: by own arithmetic on the processor, with a depth for each pixel.

Sorting faces by depth, as plain painting would, goes wrong where a long table runs past a small head. A depth for each
pixel does not, and compiled it is quicker. Importing this module loads numba; the first frame may compile.
"""

import math
from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray
from PySide6.QtGui import QImage

from app.window.room.painted_kernel import draw_lines, draw_triangles, halved
from app.window.room.rendering import LIGHT_AT, SHINE, SHINE_POWER, Array, DrawnSurface, Frame, Singles

_SPARE_ROWS: Final = 16
# Larger pictures have pixels enough, and would ask for too much memory.
_FINE_PIXELS: Final = 8_000_000
# Towards the light in the eye's system: x right, y down, z away.
_TO_LIGHT: Final = np.array([LIGHT_AT[0], -LIGHT_AT[1], -LIGHT_AT[2]]) / np.linalg.norm(LIGHT_AT)
_HALFWAY: Final = (_TO_LIGHT + np.array([0.0, 0.0, -1.0])) / np.linalg.norm(_TO_LIGHT + np.array([0.0, 0.0, -1.0]))


class PaintedRenderer:
    """A renderer that needs nothing but the processor."""

    def __init__(self) -> None:
        self._pixels = np.empty((0, 0), np.uint32)
        self._nearness = np.empty((0, 0), np.float32)
        self._spare = np.zeros((_SPARE_ROWS, 6), np.float32)

    def draw(self, frame: Frame) -> QImage:
        """Return the picture of the frame, of its size, opaque."""
        finer = 2 if frame.fine and frame.width * frame.height <= _FINE_PIXELS else 1
        width, height = finer * frame.width, finer * frame.height
        if self._pixels.shape != (height, width):
            self._pixels = np.empty((height, width), np.uint32)
            self._nearness = np.empty((height, width), np.float32)
        self._pixels[:] = _backdrop(frame, height)[:, None]
        self._nearness[:] = 1.0 / frame.far_mm
        view = _view(frame, height)
        for surface in frame.surfaces:
            self._draw_surface(surface, view, frame.near_mm, finer)
        small = self._pixels
        if finer > 1:
            small = np.empty((frame.height, frame.width), np.uint32)
            halved(self._pixels, small)
        image = QImage(small.data, frame.width, frame.height, 4 * frame.width, QImage.Format.Format_RGB32)
        # The array goes on being drawn on; the picture is its own.
        return image.copy()

    def close(self) -> None:
        """Let go of the picture's memory."""
        self._pixels = np.empty((0, 0), np.uint32)
        self._nearness = np.empty((0, 0), np.float32)

    def _draw_surface(self, surface: DrawnSurface, view: "_View", near_mm: float, finer: int) -> None:
        rotation = view.turn @ surface.matrix[:3, :3]
        shift = view.turn @ (surface.matrix[:3, 3] - view.eye)
        onto = (rotation * view.stretch[:, None]).T.astype(np.float32)
        by = (shift * view.stretch).astype(np.float32)
        if len(surface.mesh.triangles):
            points = surface.mesh.points @ onto + by
            colours = _shaded(surface, rotation)
            draw_triangles(
                points,
                colours,
                surface.mesh.triangles,
                surface.opacity,
                near_mm,
                self._pixels,
                self._nearness,
                self._spare,
            )
        if surface.edge_colour is not None and len(surface.mesh.edges):
            lines = surface.mesh.edges @ onto + by
            colour = 255.0 * np.array(surface.edge_colour, np.float32)
            draw_lines(lines, colour, surface.opacity, finer, near_mm, self._pixels, self._nearness, self._spare)


@dataclass(frozen=True, eq=False)
class _View:
    """The eye: `turn` (3, 3) brings the fixed system to x right, y down, z away; `stretch` (3,) makes pixels of it."""

    eye: Array
    turn: Array
    stretch: Array


def _view(frame: Frame, height: int) -> _View:
    right, up, back = frame.camera.axes()
    scale = height / 2.0 / math.tan(math.radians(frame.camera.view_angle_deg) / 2.0)
    return _View(frame.camera.eye(), np.array([right, -up, -back]), np.array([scale, scale, 1.0]))


def _shaded(surface: DrawnSurface, rotation: NDArray[np.float64]) -> Singles:
    """Return the colour of each point, (n, 3), 0 to 255 and beyond, in the light that falls on it."""
    normals, own = surface.mesh.normals, surface.mesh.colours
    base = np.asarray(surface.colour, np.float32) if own is None else own
    square = np.maximum(normals @ (_TO_LIGHT @ rotation).astype(np.float32), 0.0)
    light = surface.ambient + surface.diffuse * square
    colours = light[:, None] * base
    if surface.light > 0.0:
        glint = np.maximum(normals @ (_HALFWAY @ rotation).astype(np.float32), 0.0)
        colours = colours + (SHINE * surface.light * glint**SHINE_POWER)[:, None]
    return np.ascontiguousarray(255.0 * colours, dtype=np.float32)


def _backdrop(frame: Frame, height: int) -> NDArray[np.uint32]:
    """Return the colour of each row, (height,)."""
    share = ((np.arange(height) + 0.5) / height)[:, None]
    rows = np.round(255.0 * ((1.0 - share) * np.array(frame.top) + share * np.array(frame.bottom))).astype(np.uint32)
    return np.asarray(0xFF000000 | (rows[:, 0] << 16) | (rows[:, 1] << 8) | rows[:, 2], dtype=np.uint32)
