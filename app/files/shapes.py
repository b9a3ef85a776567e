"""Solids as room and set-up files write them: a shape with its keys, turned and shifted."""

from collections.abc import Callable, Mapping
from typing import Final, Literal

import numpy as np

from app.files import values
from app.files.meshes import read_mesh
from app.files.outline_keys import outline_of
from app.files.reading import Table
from app.files.values import LARGEST_MM, Limits, Problem, Refused
from geometry.frames import Array, rotation_x, rotation_y, rotation_z, transform
from geometry.outlines import Outline
from geometry.solids import Box, Cylinder, Extrusion, Frustum, Loft, Placed, Ring, Solid

Unit = Literal["mm", "cm", "m", "in"]

AXES: Final[tuple[Literal["x", "y", "z"], ...]] = ("x", "y", "z")
UNITS: Final[tuple[Unit, ...]] = ("mm", "cm", "m", "in")
ORIGIN: Final = (0.0, 0.0, 0.0)
_SIZE: Final = Limits(0.0, LARGEST_MM, above=True)
_SIZE_OR_TIP: Final = Limits(0.0, LARGEST_MM)
_MOST_SECTIONS: Final = 200
_MOST_TURNS: Final = 10


def solid_of(table: Table) -> Solid | None:
    """Return the solid of a part or a device in the coordinates of its mount, None after a fault."""
    solid = _shape_of(table)
    turns = table.checked("turns", _turns, (), ())
    at_mm = table.vector("at_mm", default=ORIGIN)
    if solid is None or (not turns and at_mm == ORIGIN):
        return solid
    matrix = placement(turns, at_mm)
    return table.built(lambda: Placed(solid, matrix))


def placement(turns: tuple[tuple[str, float], ...], at_mm: tuple[float, float, float]) -> Array:
    """Return the matrix, shape (4, 4), that turns about the fixed axes in the order given, then shifts. Degrees, mm."""
    rotation = np.eye(3)
    for axis, angle_deg in turns:
        rotation = {"x": rotation_x, "y": rotation_y, "z": rotation_z}[axis](angle_deg) @ rotation
    return transform(rotation, np.array(at_mm))


def _shape_of(table: Table) -> Solid | None:
    names = tuple(_SHAPES)
    shape = table.choice("shape", names)
    if table.raw("shape") != shape:
        table.ignore_rest()
        return None
    return _SHAPES[shape](table)


def mesh_of(table: Table) -> Solid | None:
    """Return the closed surface that `file` and `unit` name, in mm, None after a fault."""
    path = table.file("file")
    unit = table.choice("unit", UNITS)
    return table.attempted(lambda: read_mesh(path, unit)) if path is not None else None


def _turns(value: object) -> tuple[tuple[str, float], ...]:
    return values.each(values.items(value, _MOST_TURNS), _turn)


def _turn(value: object) -> tuple[str, float]:
    if not isinstance(value, list) or len(value) != 2:
        raise Refused([Problem("", "no pair", 'an axis and degrees, such as ["x", 10]')])
    return values.choice(value[0], AXES), values.number(value[1], Limits(-360.0, 360.0))


def _box(table: Table) -> Solid | None:
    size_mm = table.vector("size_mm", _SIZE)
    centre_mm = table.vector("centre_mm", default=ORIGIN)
    return table.built(lambda: Box(size_mm, centre_mm))


def _cylinder(table: Table) -> Solid | None:
    radius_mm = table.number("radius_mm", _SIZE)
    start_mm, end_mm = table.vector("start_mm"), table.vector("end_mm")
    return table.built(lambda: Cylinder(radius_mm, start_mm, end_mm))


def _frustum(table: Table) -> Solid | None:
    start_radius_mm = table.number("start_radius_mm", _SIZE_OR_TIP)
    end_radius_mm = table.number("end_radius_mm", _SIZE_OR_TIP)
    start_mm, end_mm = table.vector("start_mm"), table.vector("end_mm")
    return table.built(lambda: Frustum(start_radius_mm, end_radius_mm, start_mm, end_mm))


def _extrusion(table: Table) -> Solid | None:
    axis = table.choice("axis", AXES)
    low_mm, high_mm = table.interval("along_mm")
    outline = _outline_at(table)
    return table.built(lambda: Extrusion(outline, axis, low_mm, high_mm)) if outline is not None else None


def _loft(table: Table) -> Solid | None:
    axis = table.choice("axis", AXES)
    sections = []
    for section in table.tables("sections", _MOST_SECTIONS, fewest=2):
        along_mm = section.number("along_mm")
        outline = _outline_at(section)
        if outline is not None:
            sections.append((along_mm, outline))
    return table.built(lambda: Loft(tuple(sections), axis))


def _ring(table: Table) -> Solid | None:
    inner_radius_mm = table.number("inner_radius_mm", _SIZE)
    outer_radius_mm = table.number("outer_radius_mm", _SIZE)
    start_mm, end_mm = table.vector("start_mm"), table.vector("end_mm")
    arc_deg = table.pair("arc_deg", Limits(-360.0, 360.0)) if table.has("arc_deg") else None
    return table.built(lambda: Ring(inner_radius_mm, outer_radius_mm, start_mm, end_mm, arc_deg))


def _outline_at(table: Table) -> Outline | None:
    outline = table.required_table("outline")
    return outline_of(outline)


_SHAPES: Final[Mapping[str, Callable[[Table], Solid | None]]] = {
    "box": _box,
    "cylinder": _cylinder,
    "frustum": _frustum,
    "extrusion": _extrusion,
    "loft": _loft,
    "ring": _ring,
    "mesh": mesh_of,
}
