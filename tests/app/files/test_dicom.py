"""RT Structure Sets and RT Plans: pydicom's own files, and invented ones with one thing wrong each.

Outside source: the files that the pydicom package carries. What they hold was read from them with pydicom alone.
"""

from collections.abc import Callable
from pathlib import Path
from random import Random

import numpy as np
import pydicom
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from pydicom import Dataset
from pydicom.data import get_testdata_file
from pydicom.uid import DeflatedExplicitVRLittleEndian, ExplicitVRLittleEndian

from app.files import dicom
from app.files.dicom import (
    read_external_contour,
    read_plan_isocentres,
    read_plan_patient_position,
    structure_patient_position,
)
from geometry.errors import BadInput, Fault
from geometry.imported import ContourStack

OWN_STRUCTURES = Path(str(get_testdata_file("rtstruct.dcm")))
OWN_PLAN = Path(str(get_testdata_file("rtplan.dcm")))
SQUARE = [-50.0, -40.0, 50.0, -40.0, 50.0, 40.0, -50.0, 40.0]


def item(**elements: object) -> Dataset:
    dataset = Dataset()
    for keyword, value in elements.items():
        setattr(dataset, keyword, value)
    return dataset


def contour(z: float, kind: str = "CLOSED_PLANAR", data: list[object] | None = None) -> Dataset:
    points = np.insert(np.array(SQUARE).reshape(-1, 2), 2, z, axis=1).ravel().tolist()
    return item(ContourGeometricType=kind, NumberOfContourPoints=4, ContourData=points if data is None else data)


def structures() -> Dataset:
    """Return an invented structure set: an outer contour of three slices, and a ball within."""
    return item(
        PatientName="Nobody^Invented",
        PatientID="invented-1",
        Modality="RTSTRUCT",
        StructureSetROISequence=[item(ROINumber=7, ROIName="Skin"), item(ROINumber=8, ROIName="Ball")],
        ROIContourSequence=[
            item(ReferencedROINumber=8, ContourSequence=[contour(0.0), contour(5.0)]),
            item(ReferencedROINumber=7, ContourSequence=[contour(0.0), contour(4.0), contour(8.0)]),
        ],
        RTROIObservationsSequence=[
            item(ReferencedROINumber=7, RTROIInterpretedType="EXTERNAL"),
            item(ReferencedROINumber=8, RTROIInterpretedType="ORGAN"),
        ],
    )


def plan() -> Dataset:
    """Return an invented plan of two beams with an isocentre each, the second beam's given twice."""
    first, second = [1.0, 2.0, 3.0], [1.0, 2.0, -40.0]
    return item(
        PatientName="Nobody^Invented",
        Modality="RTPLAN",
        PatientSetupSequence=[item(PatientPosition="FFP"), item(PatientPosition="FFP")],
        BeamSequence=[
            item(ControlPointSequence=[item(IsocenterPosition=first), item(CumulativeMetersetWeight=1.0)]),
            item(ControlPointSequence=[item(IsocenterPosition=second), item(IsocenterPosition=second)]),
        ],
    )


@pytest.fixture
def saved(tmp_path: Path) -> Callable[[Dataset], Path]:
    def save(dataset: Dataset) -> Path:
        path = tmp_path / "file.dcm"
        dataset.file_meta = pydicom.dataset.FileMetaDataset()
        dataset.file_meta.TransferSyntaxUID = ExplicitVRLittleEndian
        dataset.file_meta.MediaStorageSOPClassUID = "1.2.840.10008.5.1.4.1.1.481.3"
        dataset.file_meta.MediaStorageSOPInstanceUID = "1.2.3"
        pydicom.dcmwrite(path, dataset, enforce_file_format=True)
        return path

    return save


def fault_of(read: Callable[[Path], object], path: Path) -> str:
    with pytest.raises(BadInput) as caught:
        read(path)
    assert all(fault.file == str(path) and fault.found and fault.allowed for fault in caught.value.faults)
    return str(caught.value)


def test_the_external_structure_of_pydicoms_own_file() -> None:
    """Three contours on z = -200, -190 and -180, 400 x 300 mm; half a slice of 5 mm more at either end."""
    stack = read_external_contour(OWN_STRUCTURES)
    assert [z for z, _ in stack.contours] == [-200.0, -190.0, -180.0]
    faceted = stack.faceted(0.5)
    (piece,) = faceted.pieces
    np.testing.assert_allclose(piece.min(axis=0), [-200.0, -150.0, -205.0])
    np.testing.assert_allclose(piece.max(axis=0), [200.0, 150.0, -175.0])
    assert faceted.excess_mm <= 0.1


def test_positions_and_isocentres_of_pydicoms_own_files() -> None:
    assert structure_patient_position(OWN_STRUCTURES) == "HFS"
    assert read_plan_patient_position(OWN_PLAN) == "HFS"
    np.testing.assert_allclose(read_plan_isocentres(OWN_PLAN), [[235.711172833292, 244.135437110782, -724.97815409918]])


def test_the_external_structure_is_found_by_type_or_name(saved: Callable[[Dataset], Path]) -> None:
    path = saved(structures())
    assert [z for z, _ in read_external_contour(path).contours] == [0.0, 4.0, 8.0]
    assert [z for z, _ in read_external_contour(path, "Ball").contours] == [0.0, 5.0]
    np.testing.assert_array_equal(read_external_contour(path).contours[0][1].ravel(), SQUARE)
    assert structure_patient_position(path) is None


def test_a_plans_isocentres_come_once_each_and_its_position_is_read(saved: Callable[[Dataset], Path]) -> None:
    path = saved(plan())
    assert read_plan_isocentres(path) == ((1.0, 2.0, 3.0), (1.0, 2.0, -40.0))
    assert read_plan_patient_position(path) == "FFP"


def test_an_ion_plans_isocentre_is_read(saved: Callable[[Dataset], Path]) -> None:
    ion = plan()
    del ion.BeamSequence
    ion.IonBeamSequence = [item(IonControlPointSequence=[item(IsocenterPosition=[5.0, 6.0, 7.0])])]
    assert read_plan_isocentres(saved(ion)) == ((5.0, 6.0, 7.0),)


def test_nothing_that_names_a_patient_is_read(
    saved: Callable[[Dataset], Path], monkeypatch: pytest.MonkeyPatch
) -> None:
    seen: list[Dataset] = []
    original = pydicom.dcmread
    monkeypatch.setattr(pydicom, "dcmread", lambda *a, **k: seen.append(original(*a, **k)) or seen[-1])
    path = saved(structures())
    read_external_contour(path)
    assert {element.keyword for element in seen[0]} <= {
        "SpecificCharacterSet",
        "Modality",
        "StructureSetROISequence",
        "ROIContourSequence",
        "RTROIObservationsSequence",
    }


def no_external(s: Dataset) -> None:
    s.RTROIObservationsSequence[0].RTROIInterpretedType = "ORGAN"


def two_external(s: Dataset) -> None:
    s.RTROIObservationsSequence[1].RTROIInterpretedType = "EXTERNAL"


def no_structures(s: Dataset) -> None:
    del s.StructureSetROISequence


def no_contours(s: Dataset) -> None:
    del s.ROIContourSequence[1].ContourSequence


def open_contour(s: Dataset) -> None:
    s.ROIContourSequence[1].ContourSequence[1].ContourGeometricType = "OPEN_PLANAR"


def tilted(s: Dataset) -> None:
    s.ROIContourSequence[1].ContourSequence[2] = contour(
        0.0, data=[0.0, 0.0, 8.0, 9.0, 0.0, 8.0, 9.0, 9.0, 9.5, 0, 9, 8]
    )


def one_slice(s: Dataset) -> None:
    s.ROIContourSequence[1].ContourSequence = [contour(3.0), contour(3.0)]


def points_missing(s: Dataset) -> None:
    s.ROIContourSequence[1].ContourSequence[0].NumberOfContourPoints = 5


def two_points(s: Dataset) -> None:
    s.ROIContourSequence[1].ContourSequence[0] = item(
        ContourGeometricType="CLOSED_PLANAR", ContourData=[0.0, 0.0, 0.0, 1.0, 1.0, 0.0]
    )


def far_away(s: Dataset) -> None:
    s.ROIContourSequence[1].ContourSequence[0] = contour(0.0, data=["1e30", *([0.0] * 11)])


def other_modality(s: Dataset) -> None:
    s.Modality = "RTDOSE"


@pytest.mark.parametrize(
    ("spoil", "message"),
    [
        (
            no_external,
            "RT ROI Interpreted Type: found 0 structures of type EXTERNAL; allowed: exactly one.*'Skin', 'Ball'",
        ),
        (two_external, "found 2 structures of type EXTERNAL; allowed: exactly one"),
        (no_structures, "Structure Set ROI Sequence: found no structures; allowed: a structure of type EXTERNAL"),
        (no_contours, "ROI Contour Sequence: found no contours of structure 'Skin'; allowed: contours on 2 slices"),
        (
            open_contour,
            "item 2, Contour Sequence item 2 .*Contour Geometric Type: found 'OPEN_PLANAR'; .*'CLOSED_PLANAR'",
        ),
        (tilted, "item 2, Contour Sequence item 3 .*Contour Data: found z from 8 to 9.5 mm; allowed: one z"),
        (one_slice, "structure 'Skin': found contours on 1 slices; allowed: 2 or more"),
        (points_missing, "Contour Data: found 12 numbers; allowed: 5 points of 3 numbers"),
        (two_points, "Contour Data: found 6 numbers; allowed: 3 or more points of 3 numbers"),
        (far_away, r"Contour Data: found point 1 at \[1e\+30, 0.0, 0.0\]; allowed: numbers within ±100000 mm"),
        (other_modality, "Modality: found 'RTDOSE'; allowed: 'RTSTRUCT'"),
    ],
)
def test_a_structure_set_with_one_thing_wrong_is_refused_by_place(
    saved: Callable[[Dataset], Path], spoil: Callable[[Dataset], None], message: str
) -> None:
    dataset = structures()
    spoil(dataset)
    path = saved(dataset)
    with pytest.raises(BadInput, match=message):
        read_external_contour(path)


@pytest.mark.parametrize("text", [b"nan", b"inf", b"abc", b"1,5", b"\xff"])
def test_contour_data_that_are_no_numbers_are_refused(saved: Callable[[Dataset], Path], text: bytes) -> None:
    path = saved(structures())
    content = path.read_bytes()
    assert content.count(b"-50.0\\-40.0\\4.0") == 1
    spoilt = text.ljust(5)
    path.write_bytes(content.replace(b"-50.0\\-40.0\\4.0", spoilt + b"\\-40.0\\4.0"))
    message = fault_of(read_external_contour, path)
    assert "Contour Sequence item 2" in message
    assert "Contour Data: found" in message


def test_all_faults_of_a_structure_come_at_once(saved: Callable[[Dataset], Path]) -> None:
    dataset = structures()
    open_contour(dataset)
    tilted(dataset)
    points_missing(dataset)
    with pytest.raises(BadInput) as caught:
        read_external_contour(saved(dataset))
    assert len(caught.value.faults) == 3


def test_a_name_that_is_not_there_gets_a_hint(saved: Callable[[Dataset], Path]) -> None:
    path = saved(structures())
    message = fault_of(lambda p: read_external_contour(p, "skin"), path)
    assert "ROI Name: found 0 structures of the name 'skin'; allowed: did you mean 'Skin'?" in message


def test_huge_counts_are_refused(saved: Callable[[Dataset], Path], monkeypatch: pytest.MonkeyPatch) -> None:
    path = saved(structures())
    monkeypatch.setattr(dicom, "MOST_CONTOURS", 2)
    assert "structure 'Skin': found 3 contours; allowed: at most 2" in fault_of(read_external_contour, path)
    monkeypatch.setattr(dicom, "MOST_CONTOURS", 3)
    monkeypatch.setattr(dicom, "MOST_POINTS", 11)
    assert "found more than 11 points; allowed: at most 11" in fault_of(read_external_contour, path)
    monkeypatch.setattr(dicom, "LARGEST_FILE_BYTES", 100)
    assert "allowed: at most 100 bytes" in fault_of(read_external_contour, path)


def test_a_deflated_file_is_refused(tmp_path: Path) -> None:
    dataset = structures()
    dataset.file_meta = pydicom.dataset.FileMetaDataset()
    dataset.file_meta.TransferSyntaxUID = DeflatedExplicitVRLittleEndian
    dataset.file_meta.MediaStorageSOPClassUID = "1.2.840.10008.5.1.4.1.1.481.3"
    dataset.file_meta.MediaStorageSOPInstanceUID = "1.2.3"
    path = tmp_path / "deflated.dcm"
    pydicom.dcmwrite(path, dataset, enforce_file_format=True)
    assert "Transfer Syntax UID: found a deflated file; allowed" in fault_of(read_external_contour, path)


def several_positions(p: Dataset) -> None:
    p.PatientSetupSequence[1].PatientPosition = "HFS"


def sitting(p: Dataset) -> None:
    p.PatientSetupSequence[1].PatientPosition = "SITTING"


@pytest.mark.parametrize(
    ("spoil", "message"),
    [
        (several_positions, "Patient Setup Sequence: found 'FFP', 'HFS'; allowed: one patient position"),
        (sitting, "Patient Setup Sequence item 2, Patient Position: found 'SITTING'; allowed: 'HFS', "),
        (other_modality, "Modality: found 'RTDOSE'; allowed: 'RTPLAN'"),
    ],
)
def test_a_plans_position_is_refused_where_it_is_none(
    saved: Callable[[Dataset], Path], spoil: Callable[[Dataset], None], message: str
) -> None:
    dataset = plan()
    spoil(dataset)
    assert message in fault_of(read_plan_patient_position, saved(dataset))


def test_a_plan_may_leave_the_position_out(saved: Callable[[Dataset], Path]) -> None:
    dataset = plan()
    del dataset.PatientSetupSequence
    assert read_plan_patient_position(saved(dataset)) is None


@pytest.mark.parametrize(
    ("value", "message"),
    [
        ([1.0, 2.0], "Beam Sequence item 2, control point 2, Isocenter Position: found [1.0, 2.0]; allowed: 3 numbers"),
        (["1e9", 0.0, 0.0], "Isocenter Position: found [1000000000.0, 0.0, 0.0]; allowed: 3 numbers within"),
    ],
)
def test_an_isocentre_that_is_no_point_is_refused(
    saved: Callable[[Dataset], Path], value: list[object], message: str
) -> None:
    dataset = plan()
    dataset.BeamSequence[1].ControlPointSequence[1].IsocenterPosition = value
    assert message in fault_of(read_plan_isocentres, saved(dataset))


def test_a_plan_without_an_isocentre_is_refused(saved: Callable[[Dataset], Path]) -> None:
    dataset = plan()
    del dataset.BeamSequence
    assert "Beam Sequence: found no Isocenter Position; allowed: a plan with" in fault_of(
        read_plan_isocentres, saved(dataset)
    )


@pytest.mark.parametrize("read", [read_external_contour, read_plan_isocentres, read_plan_patient_position])
def test_what_is_no_dicom_file_is_refused(tmp_path: Path, read: Callable[[Path], object]) -> None:
    text = tmp_path / "notes.txt"
    text.write_text("no DICOM at all\n" * 50)
    assert "content that is no DICOM" in fault_of(read, text)
    (tmp_path / "empty.dcm").touch()
    assert "an empty file" in fault_of(read, tmp_path / "empty.dcm")
    assert "no such file" in fault_of(read, tmp_path / "missing.dcm")
    assert "not a file" in fault_of(read, tmp_path)


def test_a_file_that_is_cut_short_is_refused(saved: Callable[[Dataset], Path]) -> None:
    path = saved(structures())
    whole = path.read_bytes()
    start = whole.index(b"-50.0\\-40.0\\8.0")
    for end in (start, start + 20, len(whole) - 60):
        path.write_bytes(whole[:end])
        fault_of(lambda p: read_external_contour(p, "Skin"), path)


@given(st.sampled_from(["structures", "plan"]), st.randoms(use_true_random=False))
@settings(max_examples=60, suppress_health_check=[HealthCheck.function_scoped_fixture])
def test_whatever_is_in_a_file_the_answer_is_a_value_or_a_fault(tmp_path: Path, kind: str, random: Random) -> None:
    source = OWN_STRUCTURES if kind == "structures" else OWN_PLAN
    content = bytearray(source.read_bytes())
    for _ in range(random.choice([1, 4, 40])):
        at = random.randrange(len(content))
        content[at : at + random.choice([1, 1, 9])] = bytes(
            random.randrange(256) for _ in range(random.choice([0, 1, 5]))
        )
    path = tmp_path / "damaged.dcm"
    path.write_bytes(bytes(content))
    faults: tuple[Fault, ...] = ()
    value: object = None
    try:
        value = read_external_contour(path) if kind == "structures" else read_plan_isocentres(path)
    except BadInput as error:
        faults = error.faults
    assert isinstance(value, ContourStack | tuple) or {fault.file for fault in faults} == {str(path)}
