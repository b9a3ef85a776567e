"""Edits of what lies on the table with the patient. What is not allowed raises GeometryError."""

from dataclasses import replace
from typing import Final

import numpy as np

from app.document.document import Document
from app.document.fields import Edit, NumberField, own_name, with_setup
from app.files.part_keys import MOST_PARTS
from app.files.values import LARGEST_MM, Limits
from app.files.wording import did_you_mean, printable
from geometry.errors import GeometryError
from geometry.machine import Mount, Part
from geometry.scene import patient_solids
from geometry.solids import Box, Placed, Solid

_ANY_MM: Final = Limits(-LARGEST_MM, LARGEST_MM)
_SIZE_MM: Final = Limits(0.0, LARGEST_MM, above=True)
_AXES: Final = ("x", "y", "z")


def device_position_mm(device: Part) -> tuple[float, float, float]:
    """Return how far a device is shifted from where its shape is drawn, table-top coordinates."""
    if not isinstance(device.solid, Placed):
        return 0.0, 0.0, 0.0
    x, y, z = (float(value) for value in device.solid.matrix[:3, 3])
    return x, y, z


def position_field(device: str, axis: int) -> NumberField:
    """Return the position of a device along a table-top axis (0, 1, 2) as a number."""
    label, text = (
        ("Across", "Table-top X: to the right for someone who looks towards the gantry."),
        ("Along", "Table-top Y: towards the table's head end."),
        ("Up", "Table-top Z: up from the table's surface."),
    )[axis]

    def write(document: Document, value: float | None) -> Document:
        position = list(device_position_mm(_device(document, device)))
        position[axis] = value or 0.0
        return move_device(device, (position[0], position[1], position[2]))(document)

    return NumberField(
        f"device.{device}.{_AXES[axis]}",
        f"device {device}",
        label,
        "mm",
        text,
        _ANY_MM,
        5.0,
        lambda document: device_position_mm(_device(document, device))[axis],
        write,
    )


def move_device(name: str, position_mm: tuple[float, float, float]) -> Edit:
    """Return the edit that shifts a device to this far from where its shape is drawn, mm, table-top coordinates."""

    def edit(document: Document) -> Document:
        for axis, value in zip(_AXES, position_mm, strict=True):
            if not _ANY_MM.hold(value):
                raise GeometryError(f"device '{name}' at {axis} = {value:g} mm; allowed: {_ANY_MM} mm")
        device = _device(document, name)
        moved = replace(device, solid=_placed(device.solid, position_mm))
        return with_setup(document, devices=tuple(moved if d.name == name else d for d in document.setup.devices))

    return edit


def shift_device(name: str, by_mm: tuple[float, float, float]) -> Edit:
    """Return the edit that shifts a device by so much from where it is, mm, table-top coordinates."""

    def edit(document: Document) -> Document:
        x, y, z = (a + b for a, b in zip(device_position_mm(_device(document, name)), by_mm, strict=True))
        return move_device(name, (x, y, z))(document)

    return edit


def remove_device(name: str) -> Edit:
    """Return the edit that takes a device off the table."""

    def edit(document: Document) -> Document:
        _device(document, name)
        return with_setup(document, devices=tuple(d for d in document.setup.devices if d.name != name))

    return edit


def add_box(
    name: str, size_mm: tuple[float, float, float], position_mm: tuple[float, float, float] = (0.0, 0.0, 0.0)
) -> Edit:
    """Return the edit that adds a box as a device: its size, and its centre in table-top coordinates, mm."""

    def edit(document: Document) -> Document:
        setup = document.setup
        if len(setup.devices) >= MOST_PARTS:
            raise GeometryError(f"devices = {len(setup.devices) + 1}; allowed: at most {MOST_PARTS}")
        taken = [part.name for part in (*setup.room.parts, *setup.devices)]
        taken += [part for part, _ in patient_solids(setup.patient)]
        for axis, size in zip(_AXES, size_mm, strict=True):
            if not _SIZE_MM.hold(size):
                raise GeometryError(f"device, size {axis} = {size:g} mm; allowed: {_SIZE_MM} mm")
        box = Part(own_name("device", name, taken), Mount.COUCH, Box(size_mm), kind="device")
        added = with_setup(document, devices=(*setup.devices, box))
        return move_device(box.name, position_mm)(added)

    return edit


def _device(document: Document, name: str) -> Part:
    names = [device.name for device in document.setup.devices]
    if name not in names:
        raise GeometryError(f"device = '{printable(name)}'; allowed: {did_you_mean(name, names)}")
    return document.setup.devices[names.index(name)]


def _placed(solid: Solid, position_mm: tuple[float, float, float]) -> Solid:
    """Return a solid as a file's reader makes it: moved only where it is turned or shifted."""
    inner, matrix = (solid.solid, solid.matrix.copy()) if isinstance(solid, Placed) else (solid, np.eye(4))
    matrix[:3, 3] = position_mm
    return inner if np.array_equal(matrix, np.eye(4)) else Placed(inner, matrix)
