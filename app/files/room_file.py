"""Room files, `*.room.toml`. The format is described in sample_rooms/README.md."""

from pathlib import Path
from typing import Final

from app.files.axis_keys import collimator_of, couch_of, gantry_of
from app.files.part_keys import parts_of
from app.files.reading import Reading, Table
from app.files.room_options import accessories_of, arms_of, joined_of
from app.files.toml_source import parsed_toml
from app.files.values import Limits
from app.files.wording import printable
from geometry.machine import Accessory, Arm, Part, Room, Survey

ROOM_FORMAT: Final = 1


def read_room(path: str | Path) -> Room:
    """Return the room that a file describes. Raises BadInput with every fault of the file."""
    path = Path(path)
    reading = Reading(path, parsed_toml(path, ROOM_FORMAT))
    return reading.finished(_room(reading.top))


def _room(top: Table) -> Room:
    demonstration = top.flag("demonstration")
    survey = _survey(top)
    if demonstration and survey is not None:
        top.fault("survey", "a survey of a demonstration", "[survey] or demonstration = true, not both")
    accessories = tuple(accessories_of(top))
    arms = tuple(arms_of(top))
    found = list(parts_of(top, {accessory.name for accessory in accessories}, {arm.name for arm in arms}))
    parts = tuple(part for _, _, part in found if part is not None)
    if top.sound:
        _check_used(top, accessories, arms, parts)
    return Room(
        name=top.text("name"),
        demonstration=demonstration,
        survey=survey,
        source_axis_distance_mm=top.number("source_axis_distance_mm", Limits(300.0, 10_000.0)),
        gantry=gantry_of(top),
        collimator=collimator_of(top),
        couch=couch_of(top),
        parts=parts,
        arms=arms,
        accessories=accessories,
        joined=joined_of(top, {name: mount for name, mount, _ in found if name}),
        max_excess_mm=top.number("max_excess_mm", Limits(0.05, 5.0), default=0.5),
        notes=top.note("notes"),
    )


def _survey(top: Table) -> Survey | None:
    table = top.table("survey")
    if table is None:
        return None
    return Survey(
        by=table.text("by"),
        on=table.day("on"),
        method=table.text("method"),
        uncertainty_mm=table.number("uncertainty_mm", Limits(0.0, 100.0, above=True)),
    )


def _check_used(top: Table, accessories: tuple[Accessory, ...], arms: tuple[Arm, ...], parts: tuple[Part, ...]) -> None:
    """Note a fault for an accessory or arm without parts and for an arm whose parts ride on two mounts."""
    for accessory in accessories:
        if not any(part.accessory == accessory.name for part in parts):
            top.fault("accessory", f"'{printable(accessory.name)}' without parts", "a part with accessory = its name")
    for arm in arms:
        mounts = {part.mount for part in parts if part.arm == arm.name}
        if len(mounts) != 1:
            shown = "with parts on different mounts" if mounts else "without parts"
            top.fault("arm", f"'{printable(arm.name)}' {shown}", "parts with arm = its name, all on one mount")
