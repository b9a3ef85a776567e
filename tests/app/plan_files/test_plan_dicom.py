"""Fields of RT Plans: pydicom's own file, the open data set, and invented beams in copies of the first.

Outside source: the plans that the packages pydicom and dicompyler-core carry. What they hold was read with pydicom.
"""

from collections.abc import Callable
from pathlib import Path

import numpy as np
import pydicom
import pytest
from pydicom import Dataset

from app.plan_files import plan_dicom
from app.plan_files.plan_dicom import read_plan_fields
from geometry.errors import BadInput, Fault
from geometry.treatment.data import PlanField
from tests.app.made_plans import OWN_PLAN, OWN_STRUCTURES, arc, beam, point, static, write_plan
from tests.open_data import open_data_folder


@pytest.fixture
def read(tmp_path: Path) -> Callable[..., tuple[PlanField, ...]]:
    def written(*beams: Dataset, **options: bool) -> tuple[PlanField, ...]:
        return read_plan_fields(write_plan(tmp_path / "plan.dcm", beams, **options))

    return written


def fault_of(path: Path) -> str:
    with pytest.raises(BadInput) as caught:
        read_plan_fields(path)
    assert all(fault.file == str(path) and fault.found and fault.allowed for fault in caught.value.faults)
    return str(caught.value)


def test_pydicoms_own_plan() -> None:
    (field,) = read_plan_fields(OWN_PLAN)
    assert field.name == "Field 1"
    assert field.points_deg == ((0.0, 0.0), (0.0, 0.0))
    assert not field.is_arc
    assert field.collimator_deg == (0.0, 0.0)
    assert field.patient_position == "HFS"
    assert field.isocentre_mm == pytest.approx((235.711172833292, 244.135437110782, -724.97815409918))
    assert field.table_mm == (None, None, None)
    assert field.pitch_deg is None
    assert field.source_axis_distance_mm == 1000.0
    assert field.doubts == field.fit_doubts == field.notes == ()


@pytest.mark.download
def test_the_open_plan() -> None:
    fields = read_plan_fields(open_data_folder() / "rtplan.dcm")
    assert [(field.name, field.points_deg[0]) for field in fields] == [
        ("3 RAO", (327.0, 0.0)),
        ("4 AP", (0.0, 0.0)),
        ("5 LAO", (56.0, 0.0)),
        ("6 LPO", (150.0, 0.0)),
    ]
    # Its couch angles are about 5e-9.
    assert {couch for field in fields for _, couch in field.points_deg} == {0.0}
    assert all(field.doubts == () and not field.is_arc for field in fields)


def test_absent_values_carry_on(read: Callable[..., tuple[PlanField, ...]]) -> None:
    points = [
        point(10.0, 330.0, GantryRotationDirection="CW", BeamLimitingDeviceAngle=30.0, TableTopPitchAngle=2.0),
        point(20.0),
        point(None, 350.0, PatientSupportRotationDirection="CC"),
        point(30.0, 355.0),
    ]
    points[1].PatientSupportRotationDirection = "CC"
    points[2].GantryRotationDirection = "NONE"
    (field,) = read(beam("b", points[:3]))
    assert field.points_deg == ((10.0, 330.0), (20.0, 330.0), (20.0, 350.0))
    assert field.collimator_deg == (30.0, 30.0, 30.0)
    assert field.pitch_deg == 2.0
    (other,) = read(beam("b", points))
    assert any("gantry turns from 20 to 30" in doubt for doubt in other.doubts)


def test_the_senses_of_gantry_and_couch(read: Callable[..., tuple[PlanField, ...]]) -> None:
    """Clockwise seen from the isocentre is the gantry's rising angle; seen from above it is the couch's falling one."""
    forth, back, couch = read(
        arc("forth", 181.0, 179.0, "CW"),
        arc("back", 179.0, 181.0, "CC"),
        beam("couch", [point(30.0, 20.0, PatientSupportRotationDirection="CW"), point(None, 340.0)]),
    )
    assert forth.points_deg == ((181.0, 0.0), (539.0, 0.0))
    assert back.points_deg == ((179.0, 0.0), (-179.0, 0.0))
    assert couch.points_deg == ((30.0, 20.0), (30.0, -20.0))
    assert forth.doubts == back.doubts == couch.doubts == ()


def test_everything_that_a_field_can_state(read: Callable[..., tuple[PlanField, ...]]) -> None:
    applicator = Dataset()
    applicator.ApplicatorID = "A15"
    stated = static(
        "full",
        0.0,
        TableTopPitchAngle=358.0,
        TableTopRollAngle=1.5,
        TableTopEccentricAngle=10.0,
        TableTopLateralPosition=1.0,
        TableTopLongitudinalPosition=2.0,
        TableTopVerticalPosition=-3.0,
    )
    stated.ApplicatorSequence = [applicator]
    stated.RadiationType = "ELECTRON"
    stated.NumberOfBlocks = 1
    stated.TreatmentDeliveryType = "SETUP"
    (field,) = read(stated)
    assert (field.pitch_deg, field.roll_deg, field.eccentric_deg) == (-2.0, 1.5, 10.0)
    assert field.table_mm == (1.0, 2.0, -3.0)
    assert field.applicator == "A15"
    assert field.is_setup
    assert field.fit_doubts == ()
    assert any("block" in note for note in field.notes)


def test_an_ion_plan_is_read_and_its_snout_asked_about(read: Callable[..., tuple[PlanField, ...]]) -> None:
    (field,) = read(arc("ions", 80.0, 100.0, "CW", SnoutPosition=250.0), ions=True)
    assert field.points_deg == ((80.0, 0.0), (100.0, 0.0))
    assert any("snout" in doubt and "250" in doubt for doubt in field.arm_doubts)
    assert field.place.startswith("Ion Beam Sequence item 1")


def doubtful(**elements: object) -> Dataset:
    first = point(0.0, 0.0, BeamLimitingDeviceAngle=0.0)
    return beam("doubtful", [first, point(None, None, **elements)])


@pytest.mark.parametrize(
    ("stated", "words"),
    [
        (doubtful(IsocenterPosition=[0.0, 0.0, -150.0]), "isocentre changes"),
        (beam("x", [point(0, 0, TableTopPitchAngle=0.0), point(None, None, TableTopPitchAngle=2.0)]), "Pitch"),
        (beam("x", [point(0, 0, TableTopLateralPosition=0), point(None, None, TableTopLateralPosition=9)]), "Lateral"),
        (static("x", 0.0, GantryPitchAngle=5.0), "gantry is pitched by 5"),
        (beam("x", [point(None, 0.0), point(30.0)]), "Gantry Angle is missing at the first"),
        (beam("x", [point(0.0, 0.0)], PatientSupportType="CHAIR"), "chair"),
        (arc("x", 180.0, 180.0), "whole turn, or none"),
    ],
)
def test_what_cannot_be_proved_as_it_stands_is_a_doubt(
    stated: Dataset, words: str, read: Callable[..., tuple[PlanField, ...]]
) -> None:
    (field,) = read(stated)
    assert any(words in doubt for doubt in field.doubts)


def test_electrons_without_an_applicator_are_asked_about(read: Callable[..., tuple[PlanField, ...]]) -> None:
    electrons = static("e", 0.0)
    electrons.RadiationType = "ELECTRON"
    (field,) = read(electrons)
    assert any("electrons" in doubt for doubt in field.fit_doubts)


@pytest.mark.parametrize(
    ("change", "words"),
    [
        (lambda b: delattr(b.ControlPointSequence[0], "GantryAngle"), ("Gantry Angle", "no value")),
        (lambda b: delattr(b.ControlPointSequence[0], "PatientSupportAngle"), ("Patient Support Angle", "no value")),
        (lambda b: setattr(b.ControlPointSequence[0], "GantryAngle", 1e5), ("control point 1, Gantry Angle", "100000")),
        (lambda b: setattr(b.ControlPointSequence[0], "GantryAngle", [1.0, 2.0]), ("Gantry Angle", "[1.0, 2.0]")),
        (lambda b: setattr(b.ControlPointSequence[0], "IsocenterPosition", [1.0, 2.0]), ("Isocenter Position",)),
        (
            lambda b: setattr(b.ControlPointSequence[1], "GantryRotationDirection", "LEFT"),
            ("control point 2, Gantry Rotation Direction", "'LEFT'", "'CW', 'CC', 'NONE'"),
        ),
        (lambda b: setattr(b, "ControlPointSequence", []), ("no control points",)),
        (lambda b: setattr(b, "SourceAxisDistance", -1.0), ("Source-Axis Distance",)),
    ],
)
def test_bad_values_are_told_with_their_place(
    change: Callable[[Dataset], None], words: tuple[str, ...], tmp_path: Path
) -> None:
    wrong = static("wrong", 0.0)
    change(wrong)
    told = fault_of(write_plan(tmp_path / "plan.dcm", [static("right", 0.0), wrong]))
    assert "Beam Sequence item 2" in told
    assert all(word in told for word in words)


def test_no_beams_other_files_and_too_many_of_them(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    assert "0 beams" in fault_of(write_plan(tmp_path / "none.dcm", []))
    assert "RTPLAN" in fault_of(OWN_STRUCTURES)
    assert "no such file" in fault_of(tmp_path / "gone.dcm")
    plan = write_plan(tmp_path / "many.dcm", [static(f"{k}", 0.0) for k in range(4)])
    monkeypatch.setattr(plan_dicom, "MOST_CONTROL_POINTS", 7)
    assert "8 control points" in fault_of(plan)
    monkeypatch.setattr(plan_dicom, "MOST_BEAMS", 3)
    assert "4 beams" in fault_of(plan)


def test_a_wrong_position_is_a_fault_and_several_are_a_doubt(tmp_path: Path) -> None:
    assert "Patient Position" in fault_of(write_plan(tmp_path / "p.dcm", [static("x", 0.0)], "SITTING"))
    plan = pydicom.dcmread(write_plan(tmp_path / "two.dcm", [static("x", 0.0), static("y", 0.0)]))
    second = Dataset()
    second.PatientPosition, second.PatientSetupNumber = "FFS", 2
    plan.PatientSetupSequence.append(second)
    plan.BeamSequence[0].ReferencedPatientSetupNumber = 2
    del plan.BeamSequence[1].ReferencedPatientSetupNumber
    plan.save_as(tmp_path / "two.dcm")
    one, other = read_plan_fields(tmp_path / "two.dcm")
    assert one.patient_position == "FFS"
    assert one.doubts == ()
    assert other.patient_position is None
    assert any("patient position" in doubt for doubt in other.doubts)


def test_nothing_that_names_a_patient_is_read(monkeypatch: pytest.MonkeyPatch) -> None:
    seen: list[Dataset] = []
    original = pydicom.dcmread
    monkeypatch.setattr(pydicom, "dcmread", lambda *a, **k: seen.append(original(*a, **k)) or seen[-1])
    read_plan_fields(OWN_PLAN)
    assert {element.keyword for element in seen[0]} <= {
        "SpecificCharacterSet",
        "Modality",
        "BeamSequence",
        "IonBeamSequence",
        "PatientSetupSequence",
    }


def test_damaged_files_end_in_a_fault_or_in_fields(tmp_path: Path) -> None:
    content = write_plan(tmp_path / "plan.dcm", [arc("a", 0.0, 90.0), static("b", 10.0)]).read_bytes()
    rng = np.random.default_rng(5)
    path = tmp_path / "broken.dcm"
    faults: list[Fault] = []
    fields: list[PlanField] = []
    for _ in range(100):
        broken = np.frombuffer(content, np.uint8).copy()
        broken[rng.integers(400, len(broken), rng.integers(1, 8))] = rng.integers(256)
        path.write_bytes(broken[: rng.integers(400, len(broken))] if rng.random() < 0.2 else broken)
        try:
            fields += read_plan_fields(path)
        except BadInput as error:
            faults += error.faults
    assert faults
    assert all(fault.found and fault.allowed for fault in faults)
    assert fields
    assert all(abs(angle) < 2000.0 for field in fields for pair in field.points_deg for angle in pair)


@pytest.mark.parametrize(
    ("stated", "indices", "words"),
    [
        (3, (0, 1), "counts 3 control points and has 2"),
        (1, (0, 1), "counts 1 control points and has 2"),
        (2, (1, 0), "number 1 has the index 1"),
        (2, (0, 2), "number 2 has the index 2"),
    ],
)
def test_control_points_that_are_not_those_that_are_counted_are_a_doubt(
    stated: int, indices: tuple[int, int], words: str, read: Callable[..., tuple[PlanField, ...]]
) -> None:
    item = arc("arc", 80.0, 100.0)
    item.NumberOfControlPoints = stated
    for control_point, index in zip(item.ControlPointSequence, indices, strict=True):
        control_point.ControlPointIndex = index
    (field,) = read(item)
    assert any(words in doubt for doubt in field.doubts)
    item.NumberOfControlPoints = 2
    for index, control_point in enumerate(item.ControlPointSequence):
        control_point.ControlPointIndex = index
    assert read(item)[0].doubts == ()


def test_what_a_plan_leaves_out_is_named(tmp_path: Path, read: Callable[..., tuple[PlanField, ...]]) -> None:
    item = static("bare", 0.0)
    assert read(item)[0].notes == ()
    del item.ControlPointSequence[0].IsocenterPosition
    del item.ControlPointSequence[0].BeamLimitingDeviceAngle
    path = write_plan(tmp_path / "bare.dcm", [item])
    plan = pydicom.dcmread(path)
    del plan.PatientSetupSequence[0].PatientPosition
    plan.save_as(path)
    told = "; ".join(read_plan_fields(path)[0].notes)
    for words in ("isocentre position", "patient position", "collimator angle"):
        assert f"no {words} in the plan: the set-up's is taken" in told


def test_a_name_of_several_values_is_told_as_the_file_has_it(read: Callable[..., tuple[PlanField, ...]]) -> None:
    assert read(static("left\\right", 0.0))[0].name == "left\\right"
