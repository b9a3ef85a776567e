"""The required clearance as a set-up file writes it."""

from collections.abc import Iterator
from typing import Final

from app.files.part_keys import Names
from app.files.reading import Table
from app.files.setup_limits import COVERAGE, MOST_COMPONENTS, REQUIRED_MM, SD_MM
from geometry.machine import Room
from geometry.setup import Component, Required

ROOM_MODEL: Final = "room model"


def required_of(top: Table, room: Room | None) -> Required:
    """Return the required clearance; `room` is None where its own file is at fault."""
    table = top.required_table("required")
    required = Required(
        fixed_mm=table.number("fixed_mm", REQUIRED_MM),
        reason=table.text("reason"),
        k=table.number("k", COVERAGE, default=2.0),
        components=tuple(_components(table, room)),
    )
    if table.sound and not required.of_pair_mm(with_patient=False) > 0.0:
        table.fault("", "0 mm for a pair without the patient", "above 0 mm for every pair")
    return required


def _components(table: Table, room: Room | None) -> Iterator[Component]:
    names = Names()
    if table.flag("with_survey"):
        names = Names({ROOM_MODEL})
        if room is not None and room.survey is None:
            table.fault("with_survey", "true, but the room has no survey", "a room with [survey], or a component")
        elif room is not None and room.survey is not None:
            yield Component(ROOM_MODEL, room.survey.uncertainty_mm)
    for component in table.tables("component", MOST_COMPONENTS):
        yield Component(
            name=names.take(component),
            sd_mm=component.number("sd_mm", SD_MM),
            patient_only=component.flag("patient_only"),
        )
