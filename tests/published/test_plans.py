"""Real plans checked from end to end, against an independent script.

Source: the plan and structure set of dicompyler-core 0.5.6 (`tests.open_data`), in a room of this project. No real plan
with couch angles, tilt, several isocentres or full table positions was found: edited copies stand in for those.
"""

import copy
from functools import cache
from pathlib import Path

import pydicom
import pytest
from pydicom import Dataset

from app.check_command import read_fields
from app.files.dicom import read_external_contour
from app.files.setup_file import read_setup
from app.plan.check import Choices, check_plan
from geometry.assess import Options
from geometry.imported import ContourStack
from geometry.states import State
from geometry.treatment.data import CheckReport
from tests.app.made_plans import ROOM, SETUP, write_setup
from tests.open_data import open_data_folder
from tests.reference.plan_oracle import Opinion, opinions

pytestmark = [pytest.mark.download, pytest.mark.slow]

ISOCENTRE = (72.5304715048, -304.3445582552, -9.3092401018882)


@cache
def skin() -> ContourStack:
    return read_external_contour(open_data_folder() / "rtss.dcm")


@pytest.fixture(autouse=True)
def read_once(monkeypatch: pytest.MonkeyPatch) -> None:
    """Let every set-up of these tests have the same skin: cutting it into pieces takes seconds, once a reading."""
    monkeypatch.setattr("app.files.patient_keys.read_external_contour", lambda *_: skin())


def setup_of(folder: Path) -> Path:
    text = SETUP.replace("dicom_mm = [0, 0, -190]", f"dicom_mm = {list(ISOCENTRE)}")
    text = text.replace("from_head_end_mm = 150", "from_head_end_mm = 250")
    return write_setup(folder, text, ROOM, open_data_folder() / "rtss.dcm")


def edited(beam: Dataset, name: str, *points: dict[str, object]) -> Dataset:
    """Return a copy of a real beam with these values at its first control points, and no more of those."""
    found = copy.deepcopy(beam)
    found.BeamName = name
    found.ControlPointSequence = found.ControlPointSequence[: max(len(points), 1)]
    found.NumberOfControlPoints = len(found.ControlPointSequence)
    for item, values in zip(found.ControlPointSequence, points, strict=False):
        for keyword, value in values.items():
            setattr(item, keyword, value)
    return found


def both(setup: Path, plan: Path, step_deg: float) -> tuple[CheckReport, list[Opinion]]:
    report = check_plan(read_setup(setup), read_fields(plan), Options(), Choices(table="plan"))
    return report, opinions(setup, plan, step_deg=step_deg)


def assert_agreement(report: CheckReport, found: list[Opinion]) -> None:
    for field, opinion in zip(report.fields, found, strict=True):
        assert {State.CONTACT: "contact", State.SHORT: "short"}.get(field.state, "clear") == opinion.state
        assert field.verdict.nearest is not None
        assert field.verdict.nearest.clearance_mm == pytest.approx(opinion.clearance_mm, abs=0.15)
        if field.state is State.PERMITTED:
            assert opinion.within_mm >= 0.0
        if field.state is State.UNPROVED:
            assert opinion.within_mm < 1.0


def test_the_open_plan_as_it_is(tmp_path: Path) -> None:
    setup, plan = setup_of(tmp_path), open_data_folder() / "rtplan.dcm"
    report, found = both(setup, plan, 0.1)
    assert [field.field.name for field in report.fields] == ["3 RAO", "4 AP", "5 LAO", "6 LPO"]
    assert_agreement(report, found)
    assert not any("isocentre" in note for field in report.fields for note in field.notes)
    # It states a lateral position alone, which is taken; the rest is the set-up's.
    assert all("not stated in full" in "; ".join(field.notes) for field in report.fields)


def test_edited_copies_of_the_open_plan(tmp_path: Path) -> None:
    plan = pydicom.dcmread(open_data_folder() / "rtplan.dcm")
    real = plan.BeamSequence[2]
    turning = {"GantryRotationDirection": "CW", "GantryAngle": 100.0}
    stop = {"GantryAngle": 103.0, "GantryRotationDirection": "NONE"}
    table = {"TableTopLateralPosition": -60.0, "TableTopLongitudinalPosition": 40.0, "TableTopVerticalPosition": -190.0}
    plan.BeamSequence = [
        edited(real, "couch 30", {"PatientSupportAngle": 30.0}, {}),
        edited(real, "couch 330", {**turning, "PatientSupportAngle": 330.0}, stop),
        edited(real, "couch 90", {"PatientSupportAngle": 90.0, "GantryAngle": 40.0}, {}),
        edited(
            real,
            "couch arc",
            {"PatientSupportAngle": 3.0, "PatientSupportRotationDirection": "CW", "GantryAngle": 110.0},
            {"PatientSupportAngle": 0.0, "PatientSupportRotationDirection": "NONE"},
        ),
        edited(real, "pitch", {**turning, "TableTopPitchAngle": 2.0}, stop),
        edited(real, "second isocentre", {**turning, "IsocenterPosition": [40.0, -250.0, -60.0]}, stop),
        edited(real, "table", {**turning, **table}, stop),
    ]
    path = tmp_path / "edited.dcm"
    plan.save_as(path)
    report, found = both(setup_of(tmp_path), path, 0.25)
    assert all(field.field.doubts == () for field in report.fields)
    assert_agreement(report, found)
