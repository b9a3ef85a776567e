"""Which colour each part of the room is drawn in."""

from typing import Final

import numpy as np

from app.clearance_scale import EDGE_COLOURS, places
from app.colours import rgb
from app.window.room.rendering import Array, Colour
from app.window.theme import Theme
from geometry.scene import ScenePart, Side

# How much of the theme's material goes into a colour that the room's file asks for.
_MATERIAL_SHARE: Final = 0.15
_DARK_SHARE: Final = 0.72
_LIFTED_SHARE: Final = 0.16
_RAMP: Final = np.array([rgb(colour) for colour in EDGE_COLOURS])
# Where on the scale of clearance, 0 to 1, colours begin and end to go over to a neutral: 150 to 300 mm.
_FADING: Final = (0.8, 1.0)


def mixed(first: Colour, second: Colour, share: float) -> Colour:
    """Return a colour with `share`, 0 to 1, of the second."""
    red, green, blue = (a + share * (b - a) for a, b in zip(first, second, strict=True))
    return red, green, blue


def part_colour(part: ScenePart, theme: Theme) -> Colour:
    """Return what a part is drawn in: the file's colour, brought nearer to the theme's, or the theme's own."""
    if part.kind == "patient":
        return rgb(theme.patient)
    material = theme.device if part.kind == "device" else _material_of_side(part.side, theme)
    if part.colour is None:
        return rgb(material)
    asked = mixed(rgb(part.colour), rgb(material), _MATERIAL_SHARE)
    if theme.dark:
        # White is too bright in the dark, and black cannot be told from it.
        return mixed(mixed((0.0, 0.0, 0.0), asked, _DARK_SHARE), rgb(theme.faint), _LIFTED_SHARE)
    return asked


def edge_colour(colour: Colour, theme: Theme) -> Colour:
    """Return the colour of lines on a surface: told from it, no louder than that."""
    return mixed(colour, rgb(theme.ink), 0.24 if theme.dark else 0.40)


def backdrop(theme: Theme) -> tuple[Colour, Colour]:
    """Return the colours behind the room, top and bottom."""
    canvas = rgb(theme.canvas)
    if theme.dark:
        return mixed(canvas, rgb(theme.panel), 0.15), mixed(canvas, rgb(theme.panel), 0.9)
    return mixed(canvas, rgb(theme.window), 0.25), mixed(rgb(theme.window), rgb(theme.line), 0.35)


def clearance_colours(distances_mm: Array, theme: Theme) -> Array:
    """Return red, green and blue, (n, 3), for distances (n,) on the scale of clearance.

    Towards its far end, and for no distance at all, the colour goes over to a neutral: the eye is to find what is near.
    """
    placed = places(distances_mm)
    known = np.nan_to_num(placed, nan=1.0)
    steps = np.linspace(0.0, 1.0, len(_RAMP))
    colours = np.stack([np.interp(known, steps, _RAMP[:, channel]) for channel in range(3)], axis=-1)
    far = np.interp(known, _FADING, (0.0, 1.0))[:, None]
    faded: Array = (1.0 - far) * colours + far * np.array(neutral(theme))
    return faded


def neutral(theme: Theme) -> Colour:
    """Return the colour of what has nothing to say."""
    return mixed(rgb(theme.room), rgb(theme.canvas), 0.2)


def _material_of_side(side: Side, theme: Theme) -> str:
    return {Side.GANTRY: theme.gantry, Side.COUCH: theme.couch, Side.ROOM: theme.room}[side]
