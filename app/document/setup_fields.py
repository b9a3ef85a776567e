"""The fields of a set-up besides its patient: names, place, isocentre, couch, what must remain free, readouts."""

from collections.abc import Callable
from dataclasses import replace
from typing import Any, Final

import numpy as np

from app.document.document import Document
from app.document.fields import ChoiceField, NumberField, TextField, at, put, replaced
from app.files import values
from app.files.axis_keys import LARGEST_TILT
from app.files.patient_keys import LANDMARKS
from app.files.setup_limits import (
    COVERAGE,
    EDGE_DEG,
    FROM_HEAD_END_MM,
    HEIGHT_MM,
    LATERAL_MM,
    OFFSET_MM,
    REQUIRED_MM,
    TOLERANCE_DEG,
    WHOLE_TURN_DEG,
)
from app.files.values import LARGEST_MM, Limits
from geometry.errors import GeometryError
from geometry.scene import landmarks_patient
from geometry.setup import Isocentre, Surface

IN_DICOM: Final = "DICOM coordinates"
_ISOCENTRE: Final = ("setup", "isocentre")
_REQUIRED: Final = ("setup", "required")
# Digits after the point of an offset that is worked out rather than typed, mm.
_DIGITS: Final = 3


def with_required(document: Document, **changes: Any) -> Document:  # noqa: ANN401 - as the fields of Required
    """Return the document with other values of its required clearance, which has to be above 0 for every pair."""
    required = replace(document.setup.required, **changes)
    if not required.of_pair_mm(with_patient=False) > 0.0:
        raise GeometryError("required clearance of a pair without the patient = 0 mm; allowed: above 0 mm")
    changed: Document = replaced(document, _REQUIRED, required)
    return changed


def _required(name: str) -> Callable[[Document, Any], Document]:
    return lambda document, value: with_required(document, **{name: value})


# The isocentre


def _origins(document: Document) -> tuple[str, ...]:
    patient = document.setup.patient
    if not isinstance(patient, Surface):
        return LANDMARKS
    known = landmarks_patient(patient)
    return (*(name for name in LANDMARKS if name in known), IN_DICOM)


def _with_origin(document: Document, origin: str) -> Document:
    """Return the document with its isocentre told from somewhere else; between the two kinds the point stays put."""
    isocentre, known = document.setup.isocentre, landmarks_patient(document.setup.patient)
    if origin == IN_DICOM:
        if isocentre.landmark is None:
            return document
        left, head, front = isocentre.offset_mm
        x, y, z = (round(float(v), _DIGITS) for v in known[isocentre.landmark] + np.array([left, -front, head]))
        return _at_dicom(document, (x, y, z))
    landmark = next(name for name in LANDMARKS if name == origin)
    offset_mm = isocentre.offset_mm
    if isocentre.dicom_mm is not None:
        x, y, z = (round(float(v), _DIGITS) for v in np.array(isocentre.dicom_mm) - known[landmark])
        offset_mm = (x, z, -y + 0.0)
    return _with_isocentre(document, Isocentre(landmark, offset_mm))


def _at_dicom(document: Document, point_mm: tuple[float, float, float]) -> Document:
    if not isinstance(document.setup.patient, Surface):
        raise GeometryError("isocentre in DICOM coordinates, in a body made from sizes; allowed: from a landmark")
    return _with_isocentre(document, Isocentre(None, dicom_mm=point_mm))


def _with_isocentre(document: Document, isocentre: Isocentre) -> Document:
    patient, as_read = document.setup.patient, document.source.setup.patient
    if isinstance(patient, Surface) and isinstance(as_read, Surface):
        # The envelope knows the plan's isocentre while that is the one in use, as when the file is read.
        in_use = isocentre.dicom_mm is not None and isocentre.dicom_mm == as_read.isocentre_mm
        patient = replace(patient, isocentre_mm=as_read.isocentre_mm if in_use else None)
    return replace(document, setup=replace(document.setup, patient=patient, isocentre=isocentre))


def _offset(axis: int) -> Callable[[Document, Any], Document]:
    def write(document: Document, value: float) -> Document:
        if document.setup.isocentre.landmark is None:
            raise GeometryError("isocentre in DICOM coordinates, with a distance; allowed: a distance to a landmark")
        changed: Document = replaced(document, (*_ISOCENTRE, "offset_mm", axis), value)
        return changed

    return write


def _dicom(axis: int) -> NumberField:
    name, direction = (("x", "to the patient's left"), ("y", "to the back"), ("z", "to the head"))[axis]

    def read(document: Document) -> float | None:
        point = document.setup.isocentre.dicom_mm
        return None if point is None else point[axis]

    def write(document: Document, value: float | None) -> Document:
        point = document.setup.isocentre.dicom_mm
        if point is None or value is None:
            raise GeometryError("isocentre from a landmark, with DICOM coordinates; allowed: one of the two")
        x, y, z = (value if i == axis else point[i] for i in range(3))
        return _at_dicom(document, (x, y, z))

    return NumberField(
        f"isocentre.dicom_mm[{axis}]",
        "isocentre",
        f"DICOM {name}",
        "mm",
        f"DICOM patient coordinates, {name} {direction}.",
        Limits(-LARGEST_MM, LARGEST_MM),
        5.0,
        read,
        write,
    )


# The table of fields

NAME: Final = TextField(
    "name", "", "Name", "As printed on every export.", values.text, at(("setup", "name")), put(("setup", "name"))
)
NOTES: Final = TextField(
    "notes", "", "Notes", "Anything worth knowing.", values.note, at(("setup", "notes")), put(("setup", "notes"))
)
REASON: Final = TextField(
    "required.reason",
    "required clearance",
    "Reason",
    "Why this much. Printed on every export.",
    values.text,
    at((*_REQUIRED, "reason")),
    put((*_REQUIRED, "reason")),
)
ORIGIN: Final = ChoiceField(
    "isocentre.landmark",
    "isocentre",
    "From",
    "Where the distances start: a landmark on the skin at the front of the mid-line, or the top of the head.",
    _origins,
    lambda document: document.setup.isocentre.landmark or IN_DICOM,
    _with_origin,
    lambda word: word[:1].upper() + word[1:],
)
OFFSETS: Final = tuple(
    NumberField(
        f"isocentre.{key}",
        "isocentre",
        label,
        "mm",
        text,
        OFFSET_MM,
        5.0,
        at((*_ISOCENTRE, "offset_mm", axis)),
        _offset(axis),
        axes=(stage,),
    )
    for axis, (key, label, text, stage) in enumerate(
        (
            ("left_mm", "To the left", "From the landmark to the patient's left. Negative: to the right.", "lateral"),
            ("head_mm", "To the head", "From the landmark to the head. Negative: to the feet.", "longitudinal"),
            ("front_mm", "To the front", "From the landmark to the front. Negative: into the body.", "vertical"),
        )
    )
)
DICOM: Final = tuple(_dicom(axis) for axis in range(3))
TABLE: Final = tuple(
    NumberField(f"table.{name}", "table", label, "mm", text, limits, 5.0, at(path), put(path), axes=(stage,))
    for name, label, text, limits, stage in (
        (
            "from_head_end_mm",
            "From head end",
            "Along the table from its head end to the patient's nearest point. Negative: it lies beyond.",
            FROM_HEAD_END_MM,
            "longitudinal",
        ),
        (
            "lateral_mm",
            "Lateral",
            "Table-top X of the patient's mid-line. Positive: to the right for someone who looks towards the gantry.",
            LATERAL_MM,
            "lateral",
        ),
        (
            "height_mm",
            "Height",
            "Gap between the table's surface and the patient's lowest point: mattress, board.",
            HEIGHT_MM,
            "vertical",
        ),
    )
    for path in [("setup", "on_table", name)]
)
COUCH: Final = tuple(
    NumberField(f"couch.{name}_deg", "couch", label, "°", text, limits, 0.5, at(path), put(path), axes=(name,))
    for name, label, text, limits in (
        ("pitch", "Pitch", "Positive: the head end goes up.", LARGEST_TILT),
        ("roll", "Roll", "Positive: the table's right side goes down, seen towards the gantry.", LARGEST_TILT),
        ("eccentric", "Eccentric", "Turn of the table about the eccentric axis.", WHOLE_TURN_DEG),
    )
    for path in [("setup", f"{name}_deg")]
)
COLLIMATOR: Final = NumberField(
    "fitted.collimator_deg",
    "fitted",
    "Collimator",
    "°",
    "At any angle, every part on the collimator counts as what it sweeps in a whole turn.",
    WHOLE_TURN_DEG,
    5.0,
    at(("setup", "collimator_deg")),
    put(("setup", "collimator_deg")),
    none="any angle",
    axes=("collimator",),
)
FIXED: Final = NumberField(
    "required.fixed_mm",
    "required clearance",
    "Fixed part",
    "mm",
    "What has to remain free whatever the components say.",
    REQUIRED_MM,
    1.0,
    at((*_REQUIRED, "fixed_mm")),
    _required("fixed_mm"),
)
K: Final = NumberField(
    "required.k",
    "required clearance",
    "k",
    "",
    "How many standard deviations of the components, taken in quadrature, are added to the fixed part.",
    COVERAGE,
    0.1,
    at((*_REQUIRED, "k")),
    _required("k"),
)
OPTIONS: Final = tuple(
    NumberField(f"options.{name}", "readout", label, "°", text, limits, step, at(path), put(path))
    for name, label, text, limits, step in (
        (
            "gantry_tolerance_deg",
            "Gantry tolerance",
            "How far the true gantry angle may be from its readout.",
            TOLERANCE_DEG,
            0.1,
        ),
        (
            "couch_tolerance_deg",
            "Couch tolerance",
            "How far the true couch angle may be from its readout.",
            TOLERANCE_DEG,
            0.1,
        ),
        ("edge_deg", "Edge", "How finely the edge of what is permitted is proved. Finer takes longer.", EDGE_DEG, 0.05),
    )
    for path in [("options", name)]
)
