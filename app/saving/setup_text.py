"""A set-up as the text of its file: what changed is changed in the text that it came from, the rest stays."""

from collections.abc import Callable, Mapping
from dataclasses import replace
from difflib import SequenceMatcher
from pathlib import Path
from typing import Final, TypeVar

import numpy as np
import tomlkit
from numpy.typing import NDArray

from app.document.device_edits import device_position_mm
from app.document.document import Document
from app.document.edits import FIELDS
from app.files.required_keys import ROOM_MODEL
from app.files.setup_references import move_references, parsed
from app.saving.toml_edits import Place, Value, with_item, with_value, without_item, without_value
from geometry.body import Body
from geometry.errors import GeometryError
from geometry.machine import Part, Room
from geometry.setup import Component
from geometry.solids import Box, Placed, Solid

Array = NDArray[np.float64]
Named = TypeVar("Named", Component, Part)

# Where a table that is missing is put: after those before it here.
_ORDER: Final = ("patient", "table", "isocentre", "couch", "fitted", "required", "device")
_COMPONENTS: Final = ("required", "component")
_DEVICES: Final = ("device",)
_OFFSETS: Final = ("left_mm", "head_mm", "front_mm")


def setup_text(document: Document, folder: Path | None = None) -> str:
    """Return the set-up as the text of a file in `folder`, that of its source unless given.

    Raises GeometryError for what no text can say, which no edit makes.
    """
    source = document.source
    text = source.text
    for change in (_fields, _isocentre, _fitted, _components, _devices):
        text = change(text, document)
    if folder is not None and folder != source.folder:
        content = parsed(text)
        move_references(content, source.folder, folder)
        text = tomlkit.dumps(content)
    return text


def _put(text: str, place: Place, value: Value | None) -> str:
    """Return the text with a value at a place; None takes it away."""
    return without_value(text, place) if value is None else with_value(text, place, value, _ORDER)


def _fields(text: str, document: Document) -> str:
    """Return the text with every number, word and text that changed and whose key is its place."""
    as_read = replace(document, setup=document.source.setup)
    for field in FIELDS:
        top = field.key.split(".")[0]
        if top in {"options", "isocentre"}:
            continue
        if top == "patient" and field.key != "patient.position" and not _both_bodies(document):
            continue
        value = field.read(document)
        if value != field.read(as_read):
            empty = "any" if field.key == "fitted.collimator_deg" else None
            text = _put(text, _place(field.key), empty if value is None else value)
    if document.setup.demonstration != document.source.setup.demonstration:
        text = _put(text, ("demonstration",), document.setup.demonstration)
    return text


def _place(key: str) -> Place:
    return tuple(key.split("."))


def _both_bodies(document: Document) -> bool:
    return isinstance(document.setup.patient, Body) and isinstance(document.source.setup.patient, Body)


def _isocentre(text: str, document: Document) -> str:
    old, new = document.source.setup.isocentre, document.setup.isocentre
    if new == old:
        return text
    if new.landmark is None:
        for key in ("from_plan", "landmark", *_OFFSETS):
            text = _put(text, ("isocentre", key), None)
        return _put(text, ("isocentre", "dicom_mm"), list(new.dicom_mm or ()))
    for key in ("from_plan", "dicom_mm"):
        text = _put(text, ("isocentre", key), None)
    if new.landmark != old.landmark:
        text = _put(text, ("isocentre", "landmark"), new.landmark)
    before = old.offset_mm if old.landmark is not None else (0.0, 0.0, 0.0)
    for key, was, value in zip(_OFFSETS, before, new.offset_mm, strict=True):
        if value != was:
            text = _put(text, ("isocentre", key), value)
    return text


def _fitted(text: str, document: Document) -> str:
    old, new = document.source.setup, document.setup
    if new.fitted != old.fitted:
        text = _put(text, ("fitted", "accessories"), list(new.fitted))
    was, now = dict(old.arm_positions), dict(new.arm_positions)
    for arm in [*was, *(arm for arm in now if arm not in was)]:
        if now.get(arm) != was.get(arm):
            text = _put(text, ("fitted", "arms", arm), now.get(arm))
    return text


# Lists of tables


def _components(text: str, document: Document) -> str:
    old, new = document.source.setup.required.components, document.setup.required.components
    if new == old:
        return text
    surveyed = _of_survey(document.source.setup.room)
    if parsed(text)["required"].get("with_survey", False):
        # The first component is not among the tables: it is the survey's.
        old = old[1:]
        if new[:1] == (surveyed,):
            new = new[1:]
        else:
            text = _put(text, ("required", "with_survey"), None)
    text, old = _renamed(text, old, new)
    text, kept = _listed(text, _COMPONENTS, old, new, _component_values)
    for index, (was, component) in enumerate(zip(kept, new, strict=True)):
        if was is not None and component.sd_mm != was.sd_mm:
            text = _put(text, (*_COMPONENTS, index, "sd_mm"), component.sd_mm)
        if was is not None and component.patient_only != was.patient_only:
            text = _put(text, (*_COMPONENTS, index, "patient_only"), component.patient_only)
    return text


def _component_values(component: Component) -> Mapping[str, Value]:
    values: dict[str, Value] = {"name": component.name, "sd_mm": component.sd_mm}
    return values | ({"patient_only": True} if component.patient_only else {})


def _of_survey(room: Room) -> Component | None:
    return None if room.survey is None else Component(ROOM_MODEL, room.survey.uncertainty_mm)


def _renamed(text: str, old: tuple[Component, ...], new: tuple[Component, ...]) -> tuple[str, tuple[Component, ...]]:
    """Give the tables the names of components that stand in the same place under another name."""
    if len(old) != len(new):
        return text, old
    was, now = {c.name for c in old}, {c.name for c in new}
    renamed = list(old)
    for index, (before, after) in enumerate(zip(old, new, strict=True)):
        if after.name not in was and before.name not in now:
            text = _put(text, (*_COMPONENTS, index, "name"), after.name)
            renamed[index] = replace(before, name=after.name)
    return text, tuple(renamed)


def _listed(
    text: str,
    path: tuple[str, ...],
    old: tuple[Named, ...],
    new: tuple[Named, ...],
    values_of: Callable[[Named], Mapping[str, Value]],
) -> tuple[str, list[Named | None]]:
    """Make a list of tables hold those of `new`, in order, by taking out and putting in as few as that takes.

    Returns beside the text, for each of `new`, the one of `old` whose table it has, None for one that was put in.
    """
    matcher = SequenceMatcher(None, [item.name for item in old], [item.name for item in new], autojunk=False)
    kept: dict[int, int] = {}
    for first, second, count in matcher.get_matching_blocks():
        kept.update({second + i: first + i for i in range(count)})
    for index in reversed(range(len(old))):
        if index not in kept.values():
            text = without_item(text, path, index)
    for index, item in enumerate(new):
        if index not in kept:
            text = with_item(text, path, index, values_of(item))
    return text, [old[kept[index]] if index in kept else None for index in range(len(new))]


def _devices(text: str, document: Document) -> str:
    old, new = document.source.setup.devices, document.setup.devices
    if new == old:
        return text
    # A table stands for a device that is drawn as it was; a name that nothing has keeps the others from matching.
    drawn_anew = tuple(device if _drawn_as(device, new) else replace(device, name="") for device in old)
    text, kept = _listed(text, _DEVICES, drawn_anew, new, _device_values)
    for index, (was, device) in enumerate(zip(kept, new, strict=True)):
        if was is not None and device_position_mm(was) != device_position_mm(device):
            text = _put(text, (*_DEVICES, index, "at_mm"), list(device_position_mm(device)))
    return text


def _drawn_as(device: Part, devices: tuple[Part, ...]) -> bool:
    """Tell whether the device of that name among `devices` is the same, but for a shift."""
    other = next((d for d in devices if d.name == device.name), None)
    if other is None or device.colour != other.colour:
        return False
    (solid, turn), (other_solid, other_turn) = _drawn(device), _drawn(other)
    return (solid is other_solid or solid == other_solid) and bool(np.array_equal(turn, other_turn))


def _drawn(device: Part) -> tuple[Solid, Array]:
    """Return a device's shape before any shift, and how it is turned."""
    if isinstance(device.solid, Placed):
        return device.solid.solid, device.solid.matrix[:3, :3]
    return device.solid, np.eye(3)


def _device_values(device: Part) -> Mapping[str, Value]:
    solid, turn = _drawn(device)
    if not isinstance(solid, Box) or not np.array_equal(turn, np.eye(3)):
        raise GeometryError(f"device '{device.name}' is no upright box; allowed: a box, or a device of the file")
    values: dict[str, Value] = {"name": device.name}
    if device.colour is not None:
        values["colour"] = device.colour
    values |= {"shape": "box", "size_mm": list(solid.size_mm)}
    if any(solid.centre_mm):
        values["centre_mm"] = list(solid.centre_mm)
    if any(device_position_mm(device)):
        values["at_mm"] = list(device_position_mm(device))
    return values
