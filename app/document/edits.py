"""Edits of a document: pure functions, `Document` to `Document`. What is not allowed raises GeometryError.

A number, a word or a text that every set-up has is a field (`setup_fields`, `patient_fields`): `set_value` edits
those. Accessories, arms and the components of the required clearance, of which there may be any number, have
their functions here, devices theirs in `app.document.device_edits`.
"""

from typing import Any, Final

from app.document import patient_fields, setup_fields
from app.document.document import Document
from app.document.fields import ChoiceField, Edit, NumberField, TextField, own_name, with_setup
from app.document.setup_fields import with_required
from app.files.setup_limits import MOST_COMPONENTS, SD_MM
from app.files.values import Limits
from app.files.wording import described, did_you_mean, one_of, printable
from geometry.errors import GeometryError
from geometry.machine import Arm
from geometry.setup import Component

Field = NumberField | ChoiceField | TextField

FIELDS: Final[tuple[Field, ...]] = (
    setup_fields.NAME,
    setup_fields.NOTES,
    patient_fields.POSITION,
    *setup_fields.TABLE,
    setup_fields.ORIGIN,
    *setup_fields.OFFSETS,
    *setup_fields.DICOM,
    *setup_fields.COUCH,
    patient_fields.STATURE,
    patient_fields.MASS,
    patient_fields.BUILD,
    *patient_fields.BODY_SIZES,
    *patient_fields.POSTURE,
    patient_fields.SLOPE,
    setup_fields.COLLIMATOR,
    setup_fields.FIXED,
    setup_fields.REASON,
    setup_fields.K,
    *setup_fields.OPTIONS,
)
_BY_KEY: Final = {field.key: field for field in FIELDS}


def field_named(key: str) -> Field:
    """Return the field of a key ("table.height_mm"); KeyError if there is none."""
    return _BY_KEY[key]


def set_value(key: str, value: float | str | None) -> Edit:
    """Return the edit that gives the field of `key` another value; None empties a number that may be empty."""
    field: Any = field_named(key)
    return lambda document: field.changed(document, value)


# Accessories and arms


def fit(name: str, *, fitted: bool = True) -> Edit:
    """Return the edit that fits an accessory, in place of any other in its slot, or takes it off."""

    def edit(document: Document) -> Document:
        known = {accessory.name: accessory for accessory in document.setup.room.accessories}
        if name not in known:
            raise GeometryError(f"accessory = '{printable(name)}'; allowed: {did_you_mean(name, known)}")
        slot = known[name].slot
        kept = {
            other for other in document.setup.fitted if other != name and (slot is None or known[other].slot != slot)
        }
        if not fitted:
            kept = {other for other in document.setup.fitted if other != name}
        wanted = kept | {name} if fitted else kept
        return with_setup(document, fitted=tuple(other for other in known if other in wanted))

    return edit


def arm_place(document: Document, arm: Arm) -> str | float:
    """Return where an arm is: its position by name, or its slide in mm."""
    chosen = dict(document.setup.arm_positions).get(arm.name)
    if chosen is not None:
        return chosen
    if arm.positions:
        return arm.positions[0].name
    return arm.travel_mm[0] if arm.travel_mm is not None else 0.0


def set_arm(name: str, place: str | float) -> Edit:
    """Return the edit that puts an arm in a named position, or slides it, mm."""

    def edit(document: Document) -> Document:
        arms = {arm.name: arm for arm in document.setup.room.arms}
        if name not in arms:
            raise GeometryError(f"arm = '{printable(name)}'; allowed: {did_you_mean(name, arms)}")
        _check_place(arms[name], place)
        chosen = {**dict(document.setup.arm_positions), name: place}
        return with_setup(document, arm_positions=tuple((arm, chosen[arm]) for arm in arms if arm in chosen))

    return edit


def slide_field(arm: Arm) -> NumberField:
    """Return the slide of an arm that slides as a number."""
    limits = Limits(*(arm.travel_mm or (0.0, 0.0)))

    def read(document: Document) -> float | None:
        place = arm_place(document, arm)
        return None if isinstance(place, str) else float(place)

    def write(document: Document, value: float | None) -> Document:
        return set_arm(arm.name, limits.low if value is None else value)(document)

    return NumberField(
        f"fitted.arms.{arm.name}", "arm", arm.name, "mm", "How far the arm has slid.", limits, 5.0, read, write
    )


def _check_place(arm: Arm, place: str | float) -> None:
    names = [position.name for position in arm.positions]
    slide = "" if arm.travel_mm is None else f"a slide, {Limits(*arm.travel_mm)} mm"
    allowed = " or ".join(part for part in (one_of(names) if names else "", slide) if part)
    held = place in names if isinstance(place, str) else arm.travel_mm and Limits(*arm.travel_mm).hold(place)
    if not held:
        raise GeometryError(f"arm '{arm.name}' = {described(place)}; allowed: {allowed}")


# Components of the required clearance


def component_field(index: int) -> NumberField:
    """Return the standard deviation of a component, counted from 0, as a number."""

    def write(document: Document, value: float | None) -> Document:
        return change_component(index, sd_mm=value or 0.0)(document)

    return NumberField(
        f"required.component[{index}].sd_mm",
        "required clearance",
        "Standard deviation",
        "mm",
        "One standard deviation of this contribution.",
        SD_MM,
        0.5,
        lambda document: document.setup.required.components[index].sd_mm,
        write,
    )


def add_component(name: str, sd_mm: float, *, patient_only: bool = False) -> Edit:
    """Return the edit that adds a contribution to the required clearance."""

    def edit(document: Document) -> Document:
        components = document.setup.required.components
        if len(components) >= MOST_COMPONENTS:
            raise GeometryError(f"components = {len(components) + 1}; allowed: at most {MOST_COMPONENTS}")
        added = Component(own_name("component", name, [c.name for c in components]), _sd(sd_mm), patient_only)
        return with_required(document, components=(*components, added))

    return edit


def change_component(
    index: int, *, name: str | None = None, sd_mm: float | None = None, patient_only: bool | None = None
) -> Edit:
    """Return the edit that changes what is given of a component, counted from 0."""

    def edit(document: Document) -> Document:
        components = document.setup.required.components
        _check_index("component", index, len(components))
        component = components[index]
        others = [c.name for i, c in enumerate(components) if i != index]
        changed = Component(
            component.name if name is None else own_name("component", name, others),
            component.sd_mm if sd_mm is None else _sd(sd_mm),
            component.patient_only if patient_only is None else patient_only,
        )
        return with_required(document, components=(*components[:index], changed, *components[index + 1 :]))

    return edit


def remove_component(index: int) -> Edit:
    """Return the edit that takes a component, counted from 0, out."""

    def edit(document: Document) -> Document:
        components = document.setup.required.components
        _check_index("component", index, len(components))
        return with_required(document, components=components[:index] + components[index + 1 :])

    return edit


def _sd(value: float) -> float:
    if not SD_MM.hold(value):
        raise GeometryError(f"standard deviation = {value:g} mm; allowed: {SD_MM} mm")
    return float(value) + 0.0


def _check_index(kind: str, index: int, count: int) -> None:
    if not 0 <= index < count:
        raise GeometryError(f"{kind} {index + 1} of {count}; allowed: 1 to {count}")


def in_turn(*edits: Edit) -> Edit:
    """Return the edit that does several, one after the other, as one step."""

    def edit(document: Document) -> Document:
        for each in edits:
            document = each(document)
        return document

    return edit
