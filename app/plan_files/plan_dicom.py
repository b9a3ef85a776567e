"""The fields of an RT Plan or RT Ion Plan.

Sources: DICOM PS3.3 C.8.8.12 to C.8.8.14 (RT General Plan, Patient Setup, Beams), C.8.8.25 (RT Ion Beams). An element
that is missing at a control point after the first has the value of the one before. Directions of rotation: the gantry's
is seen from the isocentre, where CW is the rising angle of IEC 61217; those of the patient support and the eccentric
axis are seen from above, where CC is.
"""

import math
from collections.abc import Iterator
from pathlib import Path
from typing import Final

from app.files.dicom import (
    Item,
    beams_of,
    items_of,
    numbers_of,
    position_of,
    read_elements,
    reading,
    text_of,
    whole_number,
)
from app.files.input_file import bad
from app.files.wording import described, one_of, printable
from app.plan_files.turns import snapped_deg, turned
from geometry.errors import BadInput, Fault
from geometry.outlines import LARGEST_MM
from geometry.treatment.data import PlanField

MOST_BEAMS: Final = 500
MOST_CONTROL_POINTS: Final = 100_000
_MOST_FAULTS: Final = 20
_MOST_DEG: Final = 720.0
# Values of one field that differ by less than this are one value, deg and mm.
_SAME: Final = 0.01
_GANTRY_SENSE: Final = {"CW": 1, "CC": -1, "NONE": 0, "": 0}
_SEEN_FROM_ABOVE: Final = {"CW": -1, "CC": 1, "NONE": 0, "": 0}
_TABLE: Final = ("TableTopLateralPosition", "TableTopLongitudinalPosition", "TableTopVerticalPosition")
# What stands in or on the beam and is no applicator: named, since it may stick out.
_ADDED: Final = (
    ("NumberOfBoli", "a bolus"),
    ("NumberOfBlocks", "a block"),
    ("NumberOfWedges", "a wedge"),
    ("NumberOfCompensators", "a compensator"),
    ("NumberOfRangeShifters", "a range shifter"),
)


def read_plan_fields(path: Path | str) -> tuple[PlanField, ...]:
    """Return the fields of a plan in the order of its file.

    Raises BadInput, with up to 20 faults: no plan, no beams, too many of them, no control points, values that are no
    numbers or out of range, directions that DICOM does not know.
    """
    dataset = read_elements(path, "RTPLAN", ["BeamSequence", "IonBeamSequence", "PatientSetupSequence"])
    with reading(path, "Beam Sequence"):
        beams = list(beams_of(dataset))
    if not 1 <= len(beams) <= MOST_BEAMS:
        raise bad(path, "Beam Sequence", f"{len(beams)} beams", f"1 to {MOST_BEAMS}")
    points = sum(len(control_points) for _, _, control_points in beams)
    if points > MOST_CONTROL_POINTS:
        raise bad(path, "Beam Sequence", f"{points} control points", f"at most {MOST_CONTROL_POINTS}")
    positions = dict(_positions(path, dataset))
    fields: list[PlanField] = []
    faults: list[Fault] = []
    for place, beam, control_points in beams:
        try:
            with reading(path, place):
                fields.append(_Beam(path, place, beam, control_points).field(positions))
        except BadInput as error:
            faults.extend(error.faults)
            if len(faults) >= _MOST_FAULTS:
                break
    if faults:
        raise BadInput(faults)
    return tuple(fields)


def _positions(path: Path | str, dataset: Item) -> Iterator[tuple[int | None, str | None]]:
    """Yield the patient position of each patient set-up by its number."""
    with reading(path, "Patient Setup Sequence"):
        for k, setup in enumerate(items_of(dataset, "PatientSetupSequence"), start=1):
            place = f"Patient Setup Sequence item {k}, Patient Position"
            yield whole_number(setup, "PatientSetupNumber"), position_of(path, setup, place)


class _Beam:
    """Reads one beam. `doubts` gathers, in words, why it cannot be proved as it stands."""

    def __init__(self, path: Path | str, place: str, beam: Item, control_points: list[Item]) -> None:
        if not control_points:
            raise bad(path, place, "no control points", "1 or more")
        self._path = path
        self._place = place
        self._beam = beam
        self._points = control_points
        self._doubts: list[str] = []
        self._fit_doubts: list[str] = []
        self._arm_doubts: list[str] = []

    def field(self, positions: dict[int | None, str | None]) -> PlanField:
        """Return the beam as a field; `positions` are those of the plan's patient set-ups by number."""
        gantry = self._turned("gantry", "GantryAngle", "GantryRotationDirection", _GANTRY_SENSE)
        couch = self._turned("couch", "PatientSupportAngle", "PatientSupportRotationDirection", _SEEN_FROM_ABOVE)
        number = whole_number(self._beam, "BeamNumber")
        lateral_mm, longitudinal_mm, vertical_mm = (self._held(keyword, LARGEST_MM, "mm") for keyword in _TABLE)
        eccentric_deg = self._held("TableTopEccentricAngle", _MOST_DEG, "deg")
        isocentre_mm = self._isocentre()
        collimator_deg = self._collimator()
        patient_position = self._position(positions)
        self._look_for_what_has_no_model()
        self._count_the_control_points()
        left_out = [
            words
            for words, stated in (
                ("isocentre position", isocentre_mm),
                ("patient position", patient_position),
                ("collimator angle", collimator_deg),
            )
            if not stated
        ]
        return PlanField(
            name=printable(text_of(self._beam, "BeamName")) or f"beam {self._place.rsplit(' ', 1)[-1]}",
            points_deg=tuple(zip(gantry, couch, strict=True)),
            collimator_deg=collimator_deg,
            pitch_deg=self._tilt("TableTopPitchAngle"),
            roll_deg=self._tilt("TableTopRollAngle"),
            eccentric_deg=None if eccentric_deg is None else snapped_deg(eccentric_deg),
            isocentre_mm=isocentre_mm,
            table_mm=(lateral_mm, longitudinal_mm, vertical_mm),
            patient_position=patient_position,
            applicator=self._applicator(),
            is_setup=text_of(self._beam, "TreatmentDeliveryType") == "SETUP",
            source_axis_distance_mm=self._source_axis_distance(),
            doubts=tuple(dict.fromkeys(self._doubts)),
            fit_doubts=tuple(self._fit_doubts),
            arm_doubts=tuple(self._arm_doubts),
            notes=(*self._notes(), *(f"no {words} in the plan: the set-up's is taken" for words in left_out)),
            place=self._place if number is None else f"{self._place}, beam number {number}",
        )

    def _values(self, keyword: str, most: float, unit: str, count: int = 1) -> list[tuple[float, ...]]:
        """Return an element at each control point, missing ones carried on; empty where none has it."""
        found: list[tuple[float, ...]] = []
        first_missing = 0
        for k, item in enumerate(self._points, start=1):
            place = f"{self._place}, control point {k}, {_in_words(keyword)}"
            with reading(self._path, place, "what is no number"):
                values = tuple(float(value) for value in numbers_of(item, keyword))
            if not values:
                if found:
                    found.append(found[-1])
                else:
                    first_missing += 1
                continue
            if len(values) != count or not all(abs(value) <= most for value in values):
                allowed = f"{count} numbers" if count > 1 else "a number"
                raise bad(self._path, place, f"{list(values)[:4]}", f"{allowed} within ±{most:g} {unit}")
            found.append(values)
        if found and first_missing:
            self._doubts.append(f"{_in_words(keyword)} is missing at the first control point")
        return [found[0]] * first_missing + found if found else []

    def _senses(self, keyword: str, known: dict[str, int]) -> list[int]:
        found = [0]
        for k, item in enumerate(self._points, start=1):
            stated = text_of(item, keyword)
            if stated not in known:
                place = f"{self._place}, control point {k}, {_in_words(keyword)}"
                raise bad(self._path, place, described(stated), one_of(word for word in known if word))
            found.append(known[stated] if stated else found[-1])
        return found[1:]

    def _turned(self, axis: str, keyword: str, direction: str, known: dict[str, int]) -> tuple[float, ...]:
        angles = [value for (value,) in self._values(keyword, _MOST_DEG, "deg")]
        if not angles:
            place = f"{self._place}, {_in_words(keyword)}"
            raise bad(self._path, place, "no value at any control point", "an angle at the first control point")
        path = turned(axis, angles, self._senses(direction, known))
        self._doubts.extend(path.doubts)
        return path.angles_deg

    def _collimator(self) -> tuple[float, ...]:
        angles = [value for (value,) in self._values("BeamLimitingDeviceAngle", _MOST_DEG, "deg")]
        # One that turns counts as all that it can sweep: which way it turns does not matter.
        return tuple(snapped_deg(angle) for angle in angles)

    def _held(self, keyword: str, most: float, unit: str) -> float | None:
        """Return a value that must not change during the field, None where nothing is stated."""
        values = [value for (value,) in self._values(keyword, most, unit)]
        if not values:
            return None
        if max(values) - min(values) > _SAME:
            self._doubts.append(
                f"{_in_words(keyword)} changes during the field, from {min(values):g} to {max(values):g} {unit}"
            )
        return values[0]

    def _tilt(self, keyword: str) -> float | None:
        angle = self._held(keyword, _MOST_DEG, "deg")
        if angle is None:
            return None
        # DICOM states pitch and roll in [0, 360).
        turned_deg = snapped_deg(angle)
        return turned_deg - 360.0 if turned_deg > 180.0 else turned_deg

    def _isocentre(self) -> tuple[float, float, float] | None:
        found = self._values("IsocenterPosition", LARGEST_MM, "mm", 3)
        if not found:
            return None
        if any(math.dist(point, found[0]) > _SAME for point in found):
            self._doubts.append("the isocentre changes during the field")
        x, y, z = found[0]
        return x, y, z

    def _position(self, positions: dict[int | None, str | None]) -> str | None:
        number = whole_number(self._beam, "ReferencedPatientSetupNumber")
        if number in positions:
            return positions[number]
        stated = {position for position in positions.values() if position is not None}
        if len(stated) > 1:
            self._doubts.append(f"patient position: the plan states {one_of(sorted(stated))}, and which is not told")
        return stated.pop() if len(stated) == 1 else None

    def _applicator(self) -> str:
        """Return what the plan says is fitted to the head, in its own words."""
        named = []
        for sequence, keywords in (
            ("ApplicatorSequence", ("ApplicatorID", "ApplicatorDescription", "ApplicatorType")),
            ("SnoutSequence", ("SnoutID", "AccessoryCode")),
        ):
            for item in items_of(self._beam, sequence):
                words = [text_of(item, keyword) for keyword in keywords]
                named.append(printable(next((word for word in words if word), "an applicator without a name")))
        if not named and text_of(self._beam, "RadiationType") == "ELECTRON":
            self._fit_doubts.append("electrons, and the plan names no applicator")
        return "; ".join(named)

    def _source_axis_distance(self) -> float | None:
        place = f"{self._place}, Source-Axis Distance"
        with reading(self._path, place, "what is no number"):
            values = numbers_of(self._beam, "SourceAxisDistance")
        if len(values) and not 0.0 < values[0] <= LARGEST_MM:
            raise bad(self._path, place, f"{values.tolist()[:4]}", f"above 0, at most {LARGEST_MM:g} mm")
        return float(values[0]) if len(values) else None

    def _look_for_what_has_no_model(self) -> None:
        """Doubt what turns or slides in the plan and has no counterpart in a room."""
        pitch_deg = self._tilt("GantryPitchAngle")
        if pitch_deg is not None and abs(pitch_deg) > _SAME:
            self._doubts.append(f"the gantry is pitched by {pitch_deg:g} deg, which no room describes")
        snout_mm = self._held("SnoutPosition", LARGEST_MM, "mm")
        if snout_mm is not None:
            self._arm_doubts.append(f"the plan has the snout {snout_mm:g} mm from the isocentre")
        if text_of(self._beam, "PatientSupportType") == "CHAIR":
            self._doubts.append("the patient sits on a chair, which no room describes")

    def _count_the_control_points(self) -> None:
        """Doubt control points that are not those which the plan counts, or not in their order."""
        stated, present = whole_number(self._beam, "NumberOfControlPoints"), len(self._points)
        if stated is not None and stated != present:
            self._doubts.append(f"the plan counts {stated} control points and has {present}")
        indices = [whole_number(item, "ControlPointIndex") for item in self._points]
        wrong = next((k for k, index in enumerate(indices) if index is not None and index != k), None)
        if wrong is not None:
            self._doubts.append(f"control points out of order: number {wrong + 1} has the index {indices[wrong]}")

    def _notes(self) -> Iterator[str]:
        added = [words for keyword, words in _ADDED if whole_number(self._beam, keyword)]
        added += [
            f"accessory '{printable(text_of(item, 'GeneralAccessoryID'))}'"
            for item in items_of(self._beam, "GeneralAccessorySequence")
        ]
        if added:
            yield f"the plan has {', '.join(added)}: see that the set-up has it too where it stands out"


def _in_words(keyword: str) -> str:
    """Return a keyword of DICOM as people read it: GantryAngle as Gantry Angle."""
    return "".join(f" {letter}" if letter.isupper() else letter for letter in keyword).strip()
