"""A clearance map as pixels: colours by an own colour table, textures by a tile a state."""

from typing import Final

import numpy as np
from numpy.typing import NDArray
from PySide6.QtCore import QRectF
from PySide6.QtGui import QColor, QImage, QPainter, QPainterPath

from app.clearance_scale import EDGE_COLOURS, places
from app.window.chart.paint import texture
from app.window.chart.view import Place, cells_at
from app.window.theme import Theme
from geometry.states import CODE_OF, State
from geometry.sweep import ClearanceMap

Array = NDArray[np.float64]
Codes = NDArray[np.int8]

# The last index stands for "no colour".
_STEPS: Final = 254
_NO_COLOUR: Final = 255
_TEXTURED: Final = (State.CONTACT, State.NO_TRAVEL, State.SHORT, State.UNPROVED)


def colour_table() -> list[int]:
    """Return the ramp of clearances as 256 ARGB values, the last of them clear."""
    edges = [QColor(colour) for colour in EDGE_COLOURS]
    at = np.linspace(0.0, 1.0, len(edges))
    steps = np.linspace(0.0, 1.0, _STEPS + 1)
    red, green, blue = (
        np.rint(np.interp(steps, at, [channel(colour) for colour in edges])).astype(int)
        for channel in (QColor.red, QColor.green, QColor.blue)
    )
    return [*(0xFF000000 | r << 16 | g << 8 | b for r, g, b in zip(red, green, blue, strict=True)), 0]


TABLE: Final = [int(value) for value in colour_table()]


def exact_codes(found: ClearanceMap) -> Codes:
    """Return what exact distances say by themselves, codes (m, n); "permitted" here still needs the proof."""
    codes = np.full(found.clearance_mm.shape, CODE_OF[State.PERMITTED], np.int8)
    codes[found.slack_mm < 0.0] = CODE_OF[State.SHORT]
    codes[np.isnan(found.clearance_mm) | np.isnan(found.slack_mm)] = CODE_OF[State.UNPROVED]
    codes[found.clearance_mm == 0.0] = CODE_OF[State.CONTACT]
    return codes


class Cells:
    """A map laid out on pixels: which cell each device pixel of a rectangle lies in.

    The cells reach half-way to the next grid angle and end with the travel, whatever the steps of the grid.
    """

    def __init__(self, found: ClearanceMap, codes: Codes, across: Place, upwards: Place, ratio: float) -> None:
        self._found = found
        self._codes = codes
        self._ratio = ratio
        self._target = QRectF(across.start, upwards.stop, across.stop - across.start, upwards.start - upwards.stop)
        self._columns = cells_at(
            found.gantry_deg, angles_of_pixels(across, self._target.left(), self._target.width(), ratio)
        )
        self._rows = cells_at(
            found.couch_deg, angles_of_pixels(upwards, self._target.top(), self._target.height(), ratio)
        )
        self._inside = (self._rows[:, None] >= 0) & (self._columns[None, :] >= 0)
        # The buffers must live as long as the images that share them.
        self._indices = self._index_pixels()
        self._image = _indexed_image(self._indices, len(self._columns))

    def paint_colours(self, painter: QPainter) -> None:
        """Paint the clearances, and nothing where there is none."""
        painter.drawImage(self._target, self._image)

    def paint_textures(self, painter: QPainter, theme: Theme, clean: QPainterPath | None) -> None:
        """Paint the texture of every state but "permitted"; an area `clean` of textures shows the colours alone."""
        codes = np.where(self._inside, self._on_pixels(self._codes), CODE_OF[State.NO_TRAVEL])
        height, width = len(self._rows), len(self._columns)
        layer = np.zeros((height, width), np.uint32)
        for state in _TEXTURED:
            there = codes == CODE_OF[state]
            if there.any():
                np.copyto(layer, tiled(texture(state, theme, self._ratio), layer.shape), where=there)
        image = QImage(layer.data, width, height, 4 * width, QImage.Format.Format_ARGB32_Premultiplied)
        painter.drawImage(self._target, image)
        if clean is not None and not clean.isEmpty():
            painter.save()
            painter.setClipPath(clean)
            painter.drawImage(self._target, self._image)
            painter.restore()

    def _index_pixels(self) -> NDArray[np.uint8]:
        clearance = self._found.clearance_mm
        share = places(np.where(clearance > 0.0, clearance, np.nan))
        index = np.where(np.isnan(share), _NO_COLOUR, np.rint(np.nan_to_num(share) * _STEPS)).astype(np.uint8)
        pixels = np.where(self._inside, self._on_pixels(index), np.uint8(_NO_COLOUR))
        # Rows of an image start at multiples of four bytes.
        return np.ascontiguousarray(np.pad(pixels, ((0, 0), (0, -pixels.shape[1] % 4))))

    def _on_pixels(self, cells: NDArray[np.generic]) -> NDArray[np.generic]:
        return cells[self._rows][:, self._columns]


def angles_of_pixels(place: Place, first: float, extent: float, ratio: float) -> Array:
    """Return the angle at the centre of every device pixel from `first` on."""
    count = max(round(extent * ratio), 1)
    pixels = first + (np.arange(count) + 0.5) * extent / count
    return np.asarray(place.window.low + (pixels - place.start) / place.pixels_per_deg)


def _indexed_image(pixels: NDArray[np.uint8], width: int) -> QImage:
    height, stride = pixels.shape
    image = QImage(pixels.data, width, height, stride, QImage.Format.Format_Indexed8)
    image.setColorTable(TABLE)
    return image


def tiled(tile: NDArray[np.uint32], shape: tuple[int, ...]) -> NDArray[np.uint32]:
    """Return an image of a shape (rows, columns) filled with a tile."""
    rows, columns = np.arange(shape[0]) % len(tile), np.arange(shape[1]) % len(tile)
    return tile[rows][:, columns]
