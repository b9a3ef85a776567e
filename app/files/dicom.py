"""What DICOM files tell of a patient's surface and of a plan.

The one place for pydicom; `app.plan_files.plan_dicom` reads beams through it. Only the elements named are read. Names,
numbers and dates of patients never reach the program.
Sources: DICOM PS3.3 sections C.8.8.5, C.8.8.6 and C.8.8.8 (RT Structure Set), C.8.8.12, C.8.8.14 and C.8.8.25 (RT Plan,
RT Ion Plan).
"""

import struct
import warnings
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, Final, TypeAlias

import numpy as np
from numpy.typing import NDArray

from app.files.input_file import bad, checked_file, refused
from app.files.wording import described, did_you_mean, one_of, printable
from geometry.errors import BadInput, Fault, GeometryError
from geometry.frames import PATIENT_POSITIONS
from geometry.imported import MOST_CONTOURS, MOST_POINTS, SAME_SLICE_MM, ContourStack
from geometry.outlines import LARGEST_MM

if TYPE_CHECKING:
    from pydicom import Dataset

Array = NDArray[np.float64]
Point = tuple[float, float, float]
# A sequence's item or a whole file, for modules that may not import pydicom.
Item: TypeAlias = "Dataset"

LARGEST_FILE_BYTES: Final = 200_000_000
# CLOSEDPLANAR_XOR outlines are holes where they overlap; an envelope fills holes.
_CLOSED: Final = ("CLOSED_PLANAR", "CLOSEDPLANAR_XOR")
_DEFLATED: Final = "1.2.840.10008.1.2.1.99"
# What damaged files make pydicom raise, beside errors of its own.
_DAMAGED: Final = (
    ArithmeticError,
    AttributeError,
    EOFError,
    LookupError,
    MemoryError,
    OSError,
    RuntimeError,
    TypeError,
    ValueError,
    struct.error,
)
_SAME_ISOCENTRE_MM: Final = 0.01
_MOST_FAULTS: Final = 20


def read_external_contour(path: Path | str, roi_name: str | None = None) -> ContourStack:
    """Return the outer contour of a patient from an RT Structure Set, in DICOM patient axes, mm.

    It is the structure of the type EXTERNAL, or the one that `roi_name` names, whatever its type.

    Raises BadInput: no RT Structure Set, none or several such structures, contours that are not closed, not in axial
    planes or not numbers, too many of them.
    """
    dataset = read_elements(
        path, "RTSTRUCT", ["StructureSetROISequence", "ROIContourSequence", "RTROIObservationsSequence"]
    )
    with reading(path, "structures"):
        number, name = _external(path, dataset, roi_name)
    structure = f"structure '{printable(name)}'"
    with reading(path, structure):
        contours = _contours(path, dataset, number, structure)
    try:
        return ContourStack(contours)
    except GeometryError as error:
        raise refused(path, structure, error) from error


def structure_patient_position(path: Path | str) -> str | None:
    """Return the patient position that an RT Structure Set states, None where it states none, as most do.

    Raises BadInput for a file that is none or a position that is not one of the eight of `frames`.
    """
    dataset = read_elements(path, "RTSTRUCT", ["PatientPosition"])
    with reading(path, "Patient Position"):
        return position_of(path, dataset, "Patient Position")


def read_plan_isocentres(path: Path | str) -> tuple[Point, ...]:
    """Return the isocentres of an RT Plan or RT Ion Plan in DICOM patient axes, mm, each once, in the beams' order.

    Raises BadInput for a file that is none, or without an isocentre, or with one that is no point.
    """
    dataset = read_elements(path, "RTPLAN", ["BeamSequence", "IonBeamSequence"])
    found: list[Point] = []
    with reading(path, "Beam Sequence"):
        for place, control_point in _control_points(dataset):
            with reading(path, f"{place}, Isocenter Position"):
                values = decimal_numbers(control_point, "IsocenterPosition")
            if not len(values):
                continue
            if len(values) != 3 or not np.all(np.abs(values) <= LARGEST_MM):
                raise bad(
                    path,
                    f"{place}, Isocenter Position",
                    f"{values.tolist()[:4]}",
                    f"3 numbers within ±{LARGEST_MM:g} mm",
                )
            if all(np.linalg.norm(values - point) > _SAME_ISOCENTRE_MM for point in found):
                found.append((float(values[0]), float(values[1]), float(values[2])))
    if not found:
        raise bad(path, "Beam Sequence", "no Isocenter Position", "a plan with an isocentre")
    return tuple(found)


def read_plan_patient_position(path: Path | str) -> str | None:
    """Return the patient position of an RT Plan or RT Ion Plan, None where it states none.

    Raises BadInput for a file that is none, a position that is not one of the eight of `frames`, or several.
    """
    dataset = read_elements(path, "RTPLAN", ["PatientSetupSequence"])
    with reading(path, "Patient Setup Sequence"):
        stated = [
            position_of(path, setup, f"Patient Setup Sequence item {k}, Patient Position")
            for k, setup in enumerate(items_of(dataset, "PatientSetupSequence"), start=1)
        ]
    positions = sorted({position for position in stated if position is not None})
    if len(positions) > 1:
        raise bad(path, "Patient Setup Sequence", one_of(positions), "one patient position for all beams")
    return positions[0] if positions else None


def read_elements(path: Path | str, modality: str, keywords: list[str]) -> "Dataset":
    """Return a dataset with the elements named, if the file is DICOM and of the modality."""
    file = checked_file(path, LARGEST_FILE_BYTES)
    # pydicom takes more than half a second to import.
    import pydicom  # noqa: PLC0415

    # Contents are checked here, element by element; pydicom would warn of some and let others pass.
    pydicom.config.settings.reading_validation_mode = pydicom.config.IGNORE
    wanted = ["SpecificCharacterSet", "Modality", *keywords]
    with reading(path, "", "content that is no DICOM", "a DICOM file"):
        try:
            meta = pydicom.filereader.read_file_meta_info(file)
            if str(meta.get("TransferSyntaxUID", "")) == _DEFLATED:
                # A small file could fill the memory.
                raise bad(path, "Transfer Syntax UID", "a deflated file", "a file that is not compressed")
            headless = False
        except pydicom.errors.InvalidDicomError:
            # Some programs leave out the file's head. Whether the rest is DICOM shows in what is found there.
            headless = True
        dataset = pydicom.dcmread(file, force=headless, specific_tags=wanted)
        found = str(dataset.get("Modality", ""))
        cut_short = any(_cut_short(dataset, keyword) for keyword in keywords)
    if cut_short:
        raise bad(path, "", "a file that is cut short", "a whole file")
    if not found and headless:
        raise bad(path, "", "content that is no DICOM", "a DICOM file")
    if found != modality:
        raise bad(path, "Modality", described(found) if found else "nothing", f"'{modality}'")
    return dataset


def _cut_short(dataset: "Dataset", keyword: str) -> bool:
    """Tell whether the file ended before an element did, which pydicom lets pass."""
    element = dataset.get_item(keyword) if keyword in dataset else None
    value, length = getattr(element, "value", None), getattr(element, "length", None)
    return isinstance(value, bytes) and length not in (None, 0xFFFFFFFF, len(value))


@contextmanager
def reading(
    path: Path | str, place: str, found: str = "a value that cannot be read", allowed: str = "what DICOM PS3.3 says"
) -> Iterator[None]:
    """Turn whatever pydicom raises over a damaged element into BadInput, and keep its warnings quiet."""
    from pydicom.errors import BytesLengthException, InvalidDicomError  # noqa: PLC0415

    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            yield
    except (*_DAMAGED, BytesLengthException, InvalidDicomError) as error:
        raise bad(path, place, f"{found} ({type(error).__name__})", allowed) from error


def items_of(dataset: "Dataset", keyword: str) -> list["Dataset"]:
    """Return the items of a sequence, none where it is missing."""
    return list(dataset.get(keyword) or [])


def text_of(dataset: "Dataset", keyword: str) -> str:
    """Return an element as text, empty where it is missing."""
    value = dataset.get(keyword) or ""
    # A backslash parts values: text of several ones is given back as the file has it.
    return (
        str(value) if isinstance(value, str) or not isinstance(value, Sequence) else "\\".join(map(str, value))
    ).strip()


def whole_number(dataset: "Dataset", keyword: str) -> int | None:
    """Return an element as a whole number, None where it is missing."""
    value = dataset.get(keyword)
    return None if value is None else int(value)


def decimal_numbers(dataset: "Dataset", keyword: str) -> Array:
    """Return a decimal string element as an array, empty where it is missing.

    Contours have so many numbers that they are taken from the bytes, past pydicom's objects for each.
    """
    if keyword not in dataset:
        return np.empty(0)
    value = dataset.get_item(keyword).value
    if isinstance(value, bytes):
        text = value.decode("ascii").strip(" \0")
        return np.array(text.split("\\") if text else [], dtype=np.float64)
    return np.atleast_1d(np.array([] if value is None else value, dtype=np.float64))


def numbers_of(dataset: "Dataset", keyword: str) -> Array:
    """Return an element of numbers, decimal strings or binary ones, as an array, empty where it is missing or empty."""
    value = dataset.get(keyword)
    return np.atleast_1d(np.array([] if value is None or value == "" else value, dtype=np.float64))


def beams_of(dataset: "Dataset") -> Iterator[tuple[str, "Dataset", list["Dataset"]]]:
    """Yield a plan's beams, photons, electrons and ions, each with its place in words and its control points."""
    for kind, inner in (("Beam", "ControlPointSequence"), ("Ion Beam", "IonControlPointSequence")):
        for i, beam in enumerate(items_of(dataset, f"{kind.replace(' ', '')}Sequence"), start=1):
            yield f"{kind} Sequence item {i}", beam, items_of(beam, inner)


def _control_points(dataset: "Dataset") -> Iterator[tuple[str, "Dataset"]]:
    """Yield the control points of a plan's beams, each with its place in words."""
    for place, _, control_points in beams_of(dataset):
        for k, control_point in enumerate(control_points, start=1):
            yield f"{place}, control point {k}", control_point


def position_of(path: Path | str, dataset: "Dataset", place: str) -> str | None:
    """Return the patient position of a dataset, None for nothing. BadInput for none of the eight of `frames`."""
    position = text_of(dataset, "PatientPosition")
    if position and position not in PATIENT_POSITIONS:
        raise bad(path, place, described(position), one_of(PATIENT_POSITIONS))
    return position or None


def _external(path: Path | str, dataset: "Dataset", roi_name: str | None) -> tuple[int, str]:
    """Return number and name of the structure that is asked for."""
    rois = [
        (whole_number(item, "ROINumber"), text_of(item, "ROIName"))
        for item in items_of(dataset, "StructureSetROISequence")
    ]
    names = {number: name for number, name in rois if number is not None}
    if not names:
        raise bad(path, "Structure Set ROI Sequence", "no structures", "a structure of type EXTERNAL")
    if roi_name is not None:
        numbers = [number for number, name in names.items() if name == roi_name.strip()]
        place, allowed = "ROI Name", did_you_mean(roi_name, names.values())
        found = f"{len(numbers)} structures of the name '{printable(roi_name)}'"
    else:
        observations = items_of(dataset, "RTROIObservationsSequence")
        external = {
            whole_number(o, "ReferencedROINumber")
            for o in observations
            if text_of(o, "RTROIInterpretedType") == "EXTERNAL"
        }
        numbers = [number for number in names if number in external]
        place, found = "RT ROI Interpreted Type", f"{len(numbers)} structures of type EXTERNAL"
        allowed = f"exactly one, or the name of one of {one_of(names.values())}"
    if len(numbers) != 1:
        raise bad(path, place, found, allowed)
    return numbers[0], names[numbers[0]]


def _contours(path: Path | str, dataset: "Dataset", number: int, structure: str) -> tuple[tuple[float, Array], ...]:
    """Return height and points of each contour of a structure, or raise all their faults at once."""
    items = [
        (f"ROI Contour Sequence item {i}, Contour Sequence item {k} ({structure})", contour)
        for i, roi in enumerate(items_of(dataset, "ROIContourSequence"), start=1)
        if whole_number(roi, "ReferencedROINumber") == number
        for k, contour in enumerate(items_of(roi, "ContourSequence"), start=1)
    ]
    if not items:
        raise bad(path, "ROI Contour Sequence", f"no contours of {structure}", "contours on 2 slices or more")
    if len(items) > MOST_CONTOURS:
        raise bad(path, structure, f"{len(items)} contours", f"at most {MOST_CONTOURS}")
    contours: list[tuple[float, Array]] = []
    faults: list[Fault] = []
    points = 0
    for place, item in items:
        try:
            contours.append(_contour(path, place, item))
        except BadInput as error:
            faults.extend(error.faults)
        points += len(contours[-1][1]) if contours else 0
        if points > MOST_POINTS:
            raise bad(path, structure, f"more than {MOST_POINTS} points", f"at most {MOST_POINTS}")
        if len(faults) >= _MOST_FAULTS:
            break
    if faults:
        raise BadInput(faults)
    return tuple(contours)


def _contour(path: Path | str, place: str, item: "Dataset") -> tuple[float, Array]:
    with reading(path, place):
        kind, stated = text_of(item, "ContourGeometricType"), whole_number(item, "NumberOfContourPoints")
    if kind not in _CLOSED:
        raise bad(path, f"{place}, Contour Geometric Type", described(kind), one_of(_CLOSED))
    place = f"{place}, Contour Data"
    with reading(path, place, "what is no list of numbers"):
        values = decimal_numbers(item, "ContourData")
    count, rest = divmod(len(values), 3)
    if rest or count < 3 or count != (count if stated is None else stated):
        expected = "3 or more points of 3 numbers" if stated is None else f"{max(stated, 3)} points of 3 numbers"
        raise bad(path, place, f"{len(values)} numbers", expected)
    points = values.reshape(-1, 3)
    wrong = np.flatnonzero(~np.all(np.abs(points) <= LARGEST_MM, axis=1))
    if len(wrong):
        raise bad(
            path, place, f"point {wrong[0] + 1} at {points[wrong[0]].tolist()}", f"numbers within ±{LARGEST_MM:g} mm"
        )
    heights = points[:, 2]
    if np.ptp(heights) > SAME_SLICE_MM:
        found = f"z from {heights.min():g} to {heights.max():g} mm"
        raise bad(path, place, found, f"one z: contours in axial planes, within {SAME_SLICE_MM:g} mm")
    return float(heights[0]), points[:, :2]
