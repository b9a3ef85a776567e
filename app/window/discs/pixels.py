"""What is known of a disc of directions, as pixels."""

from typing import Final

import numpy as np
from numpy.typing import NDArray
from PySide6.QtGui import QColor

from app.clearance_scale import places
from app.window.chart.paint import texture
from app.window.chart.paint_map import colour_table
from app.window.theme import Theme
from geometry.directions.field import Best
from geometry.states import CODE_OF, State

_TABLE: Final = np.array(colour_table(), np.uint32)
# The place in the table that has no colour.
_CLEAR: Final = 255


def disc_pixels(best: Best, across: int, theme: Theme, ratio: float, *, proved: bool) -> NDArray[np.uint32]:
    """Return a disc's device pixels, (across, across), premultiplied ARGB, clear beyond the rim.

    `best` is what is known of fewer pixels, or as many. Before the map is `proved`, "unproved" has no texture. `ratio`
    is device pixels per pixel.
    """
    take = np.arange(across) * best.state.shape[0] // across
    share = places(np.where(best.clearance_mm > 0.0, best.clearance_mm, np.nan))
    index = np.where(np.isnan(share), _CLEAR, np.rint(np.nan_to_num(share) * (_CLEAR - 1))).astype(np.intp)
    pixels = _TABLE[index][take][:, take]
    state = best.state[take][:, take]
    textured = [State.CONTACT, State.NO_TRAVEL, State.SHORT, *([State.UNPROVED] if proved else [])]
    for kind in textured:
        rows, columns = np.nonzero(state == CODE_OF[kind])
        tile = texture(kind, theme, ratio)
        pixels[rows, columns] = _over(tile[rows % len(tile), columns % len(tile)], pixels[rows, columns])
    middle = (np.arange(across) + 0.5) / across * 2.0 - 1.0
    outside = middle[:, None] ** 2 + middle[None, :] ** 2 > 1.0
    pixels[outside] = 0
    return np.ascontiguousarray(pixels, np.uint32)


def _over(top: NDArray[np.uint32], below: NDArray[np.uint32]) -> NDArray[np.uint32]:
    """Return pixels over others, (n,), premultiplied ARGB (Porter and Duff, 1984)."""
    above, under = (pixels.view(np.uint8).reshape(-1, 4) for pixels in (top, below))
    rest = 255 - above[:, 3:].astype(np.uint16)
    mixed = (above + (under * rest + 127) // 255).astype(np.uint8)
    return mixed.view(np.uint32)[:, 0]


def colour_at(share: float) -> QColor:
    """Return the colour of a place on the ramp of clearances, 0 to 1."""
    return QColor.fromRgba(int(_TABLE[round(min(max(share, 0.0), 1.0) * (_CLEAR - 1))]))
