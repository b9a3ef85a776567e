"""Set-up files: what is read, with the files that they name, and every way in which one can be wrong."""

import shutil
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st
from pydicom.data import get_testdata_file

from app.files.setup_file import read_setup
from geometry.body import Body
from geometry.machine import Mount
from geometry.setup import Isocentre, Setup, Surface
from tests.app.files.documents import (
    ROOM_TEXT,
    SETUP_TEXT,
    Document,
    changed,
    faults_of,
    outcome,
    places,
    room_document,
    setup_document,
    written,
)
from tests.app.files.test_room_file import GARBAGE, TETRAHEDRON

Place = tuple[str | int, ...]


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Return a folder with a room, a mesh, a structure set and a plan for set-ups to name."""
    folder = tmp_path_factory.mktemp("setups")
    written(folder / "test.room.toml", ROOM_TEXT)
    (folder / "corner.obj").write_text(TETRAHEDRON)
    for name in ("rtplan.dcm", "rtstruct.dcm"):
        shutil.copy(str(get_testdata_file(name, download=False)), folder / name)
    return folder


def read_document(folder: Path, document: Document | str) -> Setup:
    return read_setup(written(folder / "x.setup.toml", document))


def imported(source: str) -> Document:
    """Return a set-up whose envelope is the mesh or the structure set of `folder`, with a plan beside it."""
    document = setup_document()
    file = {"file": "corner.obj", "unit": "mm"} if source == "mesh" else {"file": "rtstruct.dcm"}
    document["patient"] = {"position": "HFS", "source": source, "plan": "rtplan.dcm", **file}
    document["patient"]["landmarks"] = {"vertex": [1, 2, 3], "sternal notch": [4, 5, 6]}
    document["isocentre"] = {"from_plan": 1}
    return document


def test_the_whole_set_up_is_read(folder: Path) -> None:
    setup = read_document(folder, SETUP_TEXT)
    assert (setup.name, setup.room.name, setup.notes) == ("Head", "Test room", "two\nlines")
    assert setup.patient_position == "HFP"
    body = setup.patient
    assert isinstance(body, Body)
    assert (body.stature_mm, body.mass_kg, body.build, body.prone) == (1756.0, 80.0, "man", True)
    assert (body.arm_left, body.arm_right, body.legs) == ("above the head", "at the side", "apart")
    assert body.sizes == (("chest_depth_mm", 260.0),)
    assert (setup.on_table.from_head_end_mm, setup.on_table.lateral_mm, setup.on_table.height_mm) == (50.0, 5.0, 20.0)
    assert setup.isocentre == Isocentre("vertex", (10.0, -80.0, -20.0))
    assert (setup.pitch_deg, setup.roll_deg, setup.eccentric_deg, setup.collimator_deg) == (1.0, -1.0, 2.0, 30.0)
    assert setup.fitted == ("cone",)
    assert setup.arm_positions == (("panel", "extended"), ("snout", 120.0))


def test_the_required_clearance_adds_the_survey_and_counts_the_patient_apart(folder: Path) -> None:
    required = read_document(folder, SETUP_TEXT).required
    assert [component.name for component in required.components] == ["room model", "couch sag", "surface"]
    # By hand: 20 + 1.5 * sqrt(3^2 + 2^2) and 20 + 1.5 * sqrt(3^2 + 2^2 + 5^2).
    assert required.of_pair_mm(with_patient=False) == pytest.approx(25.408327, abs=1e-6)
    assert required.of_pair_mm(with_patient=True) == pytest.approx(29.246621, abs=1e-6)


def test_devices_are_couch_parts_of_their_own_kind(folder: Path) -> None:
    device = read_document(folder, SETUP_TEXT).devices[0]
    assert (device.name, device.mount, device.kind) == ("mask frame", Mount.COUCH, "device")


def test_what_is_left_out_has_its_default(folder: Path) -> None:
    document = setup_document()
    for key in ("couch", "fitted", "device", "notes"):
        document = changed(document, (key,), None)
    document["patient"] = {"position": "FFS", "source": "body", "stature_mm": 1700}
    document["required"] = {"fixed_mm": 10, "reason": "because"}
    setup = read_document(folder, document)
    assert setup.patient == Body(1700.0)
    assert (setup.pitch_deg, setup.roll_deg, setup.eccentric_deg) == (0.0, 0.0, 0.0)
    assert setup.collimator_deg is None
    assert (setup.fitted, setup.arm_positions, setup.devices) == ((), (), ())
    assert setup.required.k == 2.0


def test_any_collimator_angle_can_be_asked_for(folder: Path) -> None:
    assert read_document(folder, changed(setup_document(), ("fitted", "collimator_deg"), "any")).collimator_deg is None


@pytest.mark.parametrize("source", ["mesh", "structure set"])
def test_an_imported_envelope_comes_with_landmarks_and_the_plans_isocentre(folder: Path, source: str) -> None:
    setup = read_document(folder, imported(source))
    assert isinstance(setup.patient, Surface)
    assert setup.patient.landmarks_mm == (("vertex", (1.0, 2.0, 3.0)), ("sternal notch", (4.0, 5.0, 6.0)))
    # The isocentre as pydicom shows it in its own rtplan.dcm.
    expected = pytest.approx((235.711172833292, 244.135437110782, -724.97815409918))
    assert setup.isocentre.dicom_mm == expected
    assert setup.patient.isocentre_mm == expected


def test_an_imported_envelope_takes_any_of_the_eight_positions(folder: Path) -> None:
    document = changed(imported("mesh"), ("patient", "plan"), None)
    document["isocentre"] = {"dicom_mm": [10, 20, 30]}
    for position in ("HFS", "HFP", "FFS", "FFP", "HFDR", "HFDL", "FFDR", "FFDL"):
        document["patient"]["position"] = position
        setup = read_document(folder, document)
        assert setup.patient_position == position
        assert setup.isocentre == Isocentre(None, dicom_mm=(10.0, 20.0, 30.0))


def test_tilts_beyond_the_rooms_travel_are_no_fault(folder: Path) -> None:
    # They make every angle "no travel", which is a result.
    setup = read_document(folder, changed(setup_document(), ("couch", "pitch_deg"), 20))
    assert setup.pitch_deg == 20.0
    assert setup.room.couch.pitch.high == 3.0


BODY_FAULTS: list[tuple[Place, object, tuple[str, str, str]]] = [
    (("format",), 2, ("format", "format 2, written by a newer version", "1")),
    (("rom",), "x", ("rom", "an unknown key", "did you mean 'room'")),
    (("room",), None, ("room", "nothing", "text")),
    (("room",), "gone.room.toml", ("room", "'gone.room.toml', no such file", "'test.room.toml'")),
    (("room",), "Test.room.toml", ("room", "'Test.room.toml'", "'test.room.toml'")),
    (("room",), "a\u0000b", ("room", "\\u0000", "printable")),
    (("patient",), None, ("patient", "nothing", "a table [patient]")),
    (("patient", "position"), "HSF", ("patient.position", "'HSF'", "HFS")),
    (("patient", "position"), "HFDR", ("patient.position", "'HFDR' with a body", "HFS, HFP, FFS, FFP")),
    (("patient", "source"), "bodie", ("patient.source", "'bodie'", "did you mean 'body'")),
    (("patient", "stature_mm"), None, ("patient.stature_mm", "nothing", "a number")),
    (("patient", "stature_mm"), 175.6, ("patient.stature_mm", "175.6", "700 to 2300")),
    (("patient", "mass_kg"), -1, ("patient.mass_kg", "-1", "5 to 300")),
    (("patient", "mass_kg"), True, ("patient.mass_kg", "true", "a number")),
    (("patient", "sizes"), {"chest_dept_mm": 1}, ("patient.sizes.chest_dept_mm", "an unknown key", "'chest_depth_mm'")),
    (("patient", "sizes", "chest_depth_mm"), 9000, ("patient.sizes.chest_depth_mm", "9000", "90 to 600")),
    (("patient", "slope_deg"), 5, ("patient", "slope_deg = 5 of a prone body", "0")),
    (("patient", "arm_left"), "up", ("patient.arm_left", "'up'", "'above the head'")),
    (("patient", "build"), "child", ("patient.build", "'child'", "'mean', 'man', 'woman'")),
    (("patient", "file"), "x.obj", ("patient.file", "an unknown key", "one of")),
    (("table", "from_head_end_mm"), None, ("table.from_head_end_mm", "nothing", "a number")),
    (("table", "height_cm"), 2, ("table.height_cm", "an unknown key", "did you mean 'height_mm'")),
    (("isocentre",), {}, ("isocentre", "none of them", "exactly one of landmark, dicom_mm, from_plan")),
    (("isocentre", "from_plan"), 1, ("isocentre", "landmark and from_plan", "exactly one")),
    (("isocentre", "landmark"), "verteks", ("isocentre.landmark", "'verteks'", "did you mean 'vertex'")),
    (("isocentre",), {"dicom_mm": [1, 2, 3]}, ("isocentre.dicom_mm", "for a body", "a landmark")),
    (("isocentre",), {"from_plan": 1}, ("isocentre.from_plan", "1 of 0", "a plan named under [patient]")),
    (("couch", "pitch_deg"), 31, ("couch.pitch_deg", "31", "-30 to 30")),
    (("couch", "roll_deg"), float("nan"), ("couch.roll_deg", "nan", "-30 to 30")),
    (("couch", "eccentric_deg"), float("inf"), ("couch.eccentric_deg", "inf", "-360 to 360")),
    (("fitted", "accessories"), ["con"], ("fitted.accessories", "'con', none of the room's", "did you mean 'cone'")),
    (("fitted", "accessories"), ["cone", "applicator"], ("fitted.accessories", "in slot 'tray'", "one at most")),
    (("fitted", "arms", "panle"), "parked", ("fitted.arms.panle", "an unknown key", "did you mean 'panel'")),
    (("fitted", "arms", "panel"), "parkd", ("fitted.arms.panel", "'parkd'", "did you mean 'parked'")),
    (("fitted", "arms", "panel"), 10, ("fitted.arms.panel", "10", "'parked', 'extended'")),
    (("fitted", "arms", "snout"), 500, ("fitted.arms.snout", "500", "0 to 400")),
    (("fitted", "arms", "snout"), "out", ("fitted.arms.snout", "'out'", "a slide in mm, 0 to 400")),
    (("fitted", "collimator_deg"), "all", ("fitted.collimator_deg", "'all'", "degrees or 'any'")),
    (("fitted", "collimator_deg"), 400, ("fitted.collimator_deg", "400", "-360 to 360")),
    (("required",), None, ("required", "nothing", "a table [required]")),
    (("required", "reason"), None, ("required.reason", "nothing", "text")),
    (("required", "fixed_mm"), -1, ("required.fixed_mm", "-1", "0 to 1000")),
    (("required", "k"), 11, ("required.k", "11", "0 to 10")),
    (("required",), {"fixed_mm": 0, "reason": "x"}, ("required", "0 mm for a pair", "above 0 mm for every pair")),
    (("required", "component", 1, "name"), "couch sag", ("required.component[2] 'couch sag'.name", "taken", "own")),
    (("required", "component", 1, "name"), "room model", ("component[2] 'room model'.name", "taken", "own")),
    (("required", "component", 0, "sd_mm"), 201, ("required.component[1] 'couch sag'.sd_mm", "201", "0 to 200")),
    (("device", 0, "mount"), "couch", ("device[1] 'mask frame'.mount", "an unknown key", "one of")),
    (("device", 0, "name"), "floor", ("device[1] 'floor'.name", "taken", "a name of its own")),
    (("device", 0, "size_mm"), [1, 1, -1], ("device[1] 'mask frame'.size_mm[3]", "-1", "above 0")),
]


def assert_told(folder: Path, document: Document, words: tuple[str, str, str]) -> None:
    faults = faults_of(lambda: read_document(folder, document))
    fitting = [f for f in faults if f.place.endswith(words[0]) and words[1] in f.found and words[2] in f.allowed]
    assert len(fitting) == 1, "\n".join(map(str, faults))
    assert fitting[0].file == str(folder / "x.setup.toml")


@pytest.mark.parametrize(("place", "value", "words"), BODY_FAULTS)
def test_a_fault_names_file_place_found_and_allowed(
    folder: Path, place: Place, value: object, words: tuple[str, str, str]
) -> None:
    assert_told(folder, changed(setup_document(), place, value), words)


IMPORT_FAULTS: list[tuple[Place, object, tuple[str, str, str]]] = [
    (("patient", "file"), "gone.dcm", ("patient.file", "'gone.dcm', no such file", "did you mean")),
    (("patient", "plan"), "gone.dcm", ("patient.plan", "'gone.dcm', no such file", "one of")),
    (("patient", "position"), "FFS", ("patient.plan", "a file for patient position 'HFS'", "'FFS'")),
    (("patient", "stature_mm"), 1700, ("patient.stature_mm", "an unknown key", "one of")),
    (("patient", "landmarks", "navle"), [0, 0, 0], ("patient.landmarks.navle", "an unknown key", "'navel'")),
    (("patient", "landmarks", "navel"), [0, 0], ("patient.landmarks.navel", "a list of 2", "3 numbers")),
    (("isocentre",), {"from_plan": 2}, ("isocentre.from_plan", "2 of 1 isocentres", "1 to 1")),
    (("isocentre",), {"from_plan": 0}, ("isocentre.from_plan", "0", "a whole number, 1 to")),
    (("isocentre",), {"landmark": "navel"}, ("isocentre.landmark", "'navel', not among", "'vertex', 'sternal notch'")),
]


@pytest.mark.parametrize(("place", "value", "words"), IMPORT_FAULTS)
def test_a_fault_with_an_imported_envelope(
    folder: Path, place: Place, value: object, words: tuple[str, str, str]
) -> None:
    assert_told(folder, changed(imported("structure set"), place, value), words)


def test_the_unit_of_a_mesh_must_be_stated(folder: Path) -> None:
    document = changed(imported("mesh"), ("patient", "unit"), None)
    assert_told(folder, document, ("patient.unit", "nothing", "one of 'mm', 'cm', 'm', 'in'"))


def test_a_required_clearance_for_the_patient_alone_is_a_fault(folder: Path) -> None:
    components = [{"name": "surface", "sd_mm": 5, "patient_only": True}]
    document = changed(setup_document(), ("required",), {"fixed_mm": 0, "reason": "x", "component": components})
    assert_told(folder, document, ("required", "0 mm for a pair without the patient", "above 0"))


def test_the_survey_of_a_room_without_one_cannot_count(tmp_path: Path) -> None:
    written(tmp_path / "test.room.toml", changed(room_document(), ("survey",), None))
    assert_told(tmp_path, setup_document(), ("required.with_survey", "no survey", "[survey]"))


def test_a_part_of_the_room_named_as_the_patient_is_a_fault(folder: Path, tmp_path: Path) -> None:
    shutil.copy(folder / "corner.obj", tmp_path)
    written(tmp_path / "test.room.toml", changed(room_document(), ("part", 3, "name"), "patient"))
    document = changed(imported("mesh"), ("patient", "plan"), None)
    document["isocentre"] = {"dicom_mm": [0, 0, 0]}
    assert_told(tmp_path, document, ("room", "a part named 'patient'", "a name of its own"))


def test_faults_of_set_up_room_mesh_and_dicom_come_in_one_go(tmp_path: Path) -> None:
    written(tmp_path / "test.room.toml", changed(room_document(), ("gantry", "travel_deg"), [1, 2]))
    (tmp_path / "rtstruct.dcm").write_bytes(b"no DICOM at all")
    (tmp_path / "open.obj").write_text(TETRAHEDRON.replace("f 2 3 4\n", ""))
    document = changed(imported("structure set"), ("patient", "plan"), None)
    document["device"][0] = {"name": "board", "shape": "mesh", "file": "open.obj", "unit": "mm"}
    document["table"]["height_mm"] = "2 cm"
    faults = faults_of(lambda: read_document(tmp_path, document))
    assert {Path(fault.file).name for fault in faults} == {"test.room.toml", "rtstruct.dcm", "open.obj", "x.setup.toml"}
    assert "table.height_mm" in {fault.place for fault in faults}


@given(data=st.data())
def test_garbage_gives_a_set_up_or_faults_and_nothing_else(folder: Path, data: st.DataObject) -> None:
    document = data.draw(st.sampled_from([setup_document(), imported("mesh")]))
    for _ in range(data.draw(st.integers(1, 3))):
        place = data.draw(st.sampled_from(list(places(document))))
        document = changed(document, place, data.draw(st.one_of(st.none(), GARBAGE)))
    setup = outcome(lambda: read_document(folder, document))
    assert isinstance(setup, Setup) or (isinstance(setup, tuple) and setup)
