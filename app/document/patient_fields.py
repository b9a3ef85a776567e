"""The fields of the patient: position, body sizes and posture."""

from collections.abc import Callable
from dataclasses import replace
from typing import Any, Final, get_args

from app.document.document import Document
from app.document.fields import ChoiceField, NumberField, replaced
from app.files.setup_limits import BODY_POSITIONS, SLOPE_DEG
from app.files.values import Limits
from geometry.body import ArmPosture, Body, LegPosture
from geometry.body_sizes import MASS_RANGE_KG, SIZES, STATURE_RANGE_MM, Build, sizes_of, usual_mass_kg
from geometry.errors import GeometryError
from geometry.frames import PATIENT_POSITIONS

_GROUP: Final = "body"
_POSITION_WORDS: Final = {
    "HFS": "head first, on the back",
    "HFP": "head first, on the front",
    "FFS": "feet first, on the back",
    "FFP": "feet first, on the front",
    "HFDR": "head first, on the right side",
    "HFDL": "head first, on the left side",
    "FFDR": "feet first, on the right side",
    "FFDL": "feet first, on the left side",
}


def body_of(document: Document) -> Body | None:
    """Return the body that is made from sizes, None for an imported envelope."""
    patient = document.setup.patient
    return patient if isinstance(patient, Body) else None


def positions(document: Document) -> tuple[str, ...]:
    """Return the patient positions that this envelope can be in."""
    if body_of(document) is not None:
        return BODY_POSITIONS
    return (document.setup.patient_position,) if document.source.names_dicom else PATIENT_POSITIONS


def position_shown(position: str) -> str:
    """Return a patient position with its words."""
    return f"{position}, {_POSITION_WORDS[position]}"


def _body(document: Document) -> Body:
    body = body_of(document)
    if body is None:
        raise GeometryError("body sizes of an imported envelope; allowed: a patient made from sizes")
    return body


def _with_body(document: Document, **changes: Any) -> Document:  # noqa: ANN401 - as the fields of Body
    # What a body may be, it checks itself.
    body = replace(_body(document), **changes)
    changed: Document = replaced(document, ("setup", "patient"), body)
    return changed


def _with_position(document: Document, position: str) -> Document:
    if body_of(document) is not None:
        document = _with_body(document, prone=position.endswith("P"))
    changed: Document = replaced(document, ("setup", "patient_position"), position)
    return changed


def _reader(name: str) -> Callable[[Document], Any]:
    return lambda document: getattr(_body(document), name)


def _writer(name: str) -> Callable[[Document, Any], Document]:
    return lambda document, value: _with_body(document, **{name: value})


def _posture(name: str, label: str, text: str, words: tuple[str, ...]) -> ChoiceField:
    return ChoiceField(
        f"patient.{name}",
        _GROUP,
        label,
        text,
        lambda _: words,
        _reader(name),
        _writer(name),
        lambda word: word[:1].upper() + word[1:],
    )


def _usual_mass_kg(document: Document) -> float:
    body = _body(document)
    return usual_mass_kg(body.stature_mm, body.build)


def _size(name: str, label: str, text: str) -> NumberField:
    limits = Limits(SIZES[name].low, SIZES[name].high)

    def read(document: Document) -> float | None:
        return dict(_body(document).sizes).get(name)

    def write(document: Document, value: float | None) -> Document:
        sizes: dict[str, float | None] = {**dict(_body(document).sizes), name: value}
        kept = [(key, sizes.get(key)) for key in SIZES]
        return _with_body(document, sizes=tuple((key, size) for key, size in kept if size is not None))

    def usual(document: Document) -> float:
        body = _body(document)
        return sizes_of(body.stature_mm, body.mass_kg, body.build, ())[name]

    help_text = f"As you measure it on the lying patient: {text}."
    return NumberField(
        f"patient.sizes.{name}", _GROUP, label, "mm", help_text, limits, 5.0, read, write, "not measured", usual
    )


POSITION: Final = ChoiceField(
    "patient.position",
    "patient",
    "Position",
    "Patient position as DICOM names it. Head first: the head is nearer to the gantry at couch 0.",
    positions,
    lambda document: document.setup.patient_position,
    _with_position,
    position_shown,
)
STATURE: Final = NumberField(
    "patient.stature_mm",
    _GROUP,
    "Stature",
    "mm",
    "Height of the standing patient.",
    Limits(*STATURE_RANGE_MM),
    10.0,
    _reader("stature_mm"),
    _writer("stature_mm"),
)
MASS: Final = NumberField(
    "patient.mass_kg",
    _GROUP,
    "Mass",
    "kg",
    "Scales the girths.",
    Limits(*MASS_RANGE_KG),
    1.0,
    _reader("mass_kg"),
    _writer("mass_kg"),
    "not known",
    _usual_mass_kg,
)
SLOPE: Final = NumberField(
    "patient.slope_deg",
    _GROUP,
    "Slope",
    "°",
    "Head, trunk and arms raised from the hips by a sloped board. 0 for a prone patient.",
    SLOPE_DEG,
    1.0,
    _reader("slope_deg"),
    _writer("slope_deg"),
)
BUILD: Final = _posture("build", "Build", "Which averages the sizes start from.", get_args(Build))
POSTURE: Final = (
    _posture("arm_left", "Left arm", "Where the patient's left arm lies.", get_args(ArmPosture)),
    _posture("arm_right", "Right arm", "Where the patient's right arm lies.", get_args(ArmPosture)),
    _posture("legs", "Legs", "How the legs lie.", get_args(LegPosture)),
)
BODY_SIZES: Final = tuple(
    _size(*row)
    for row in (
        ("head_breadth_mm", "Head breadth", "over the ears"),
        ("head_length_mm", "Head length", "forehead to back of the head"),
        ("bideltoid_breadth_mm", "Shoulder breadth", "over the shoulders"),
        ("forearm_forearm_breadth_mm", "Forearm breadth", "over the forearms, arms at the side"),
        ("chest_breadth_mm", "Chest breadth", "at the nipples, without arms"),
        ("chest_depth_mm", "Chest depth", "at the nipples, front to back"),
        ("waist_breadth_mm", "Waist breadth", "at the navel"),
        ("waist_depth_mm", "Waist depth", "at the navel, front to back"),
        ("hip_breadth_mm", "Hip breadth", "over the hips"),
        ("shoulder_elbow_length_mm", "Upper arm length", "top of the shoulder to elbow"),
        ("forearm_hand_length_mm", "Forearm length", "elbow to finger tip"),
        ("biceps_circumference_mm", "Biceps girth", "round the upper arm"),
        ("foot_length_mm", "Foot length", "heel to toes"),
    )
)
