import os
import shutil
import signal
import subprocess
import sys
import time
import tomllib
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from app.document import document as document_module
from app.document.device_edits import add_box, move_device, remove_device
from app.document.document import Document, open_document
from app.document.edits import add_component, change_component, fit, in_turn, remove_component, set_arm, set_value
from app.document.fields import Edit
from app.document.session import Session
from app.files import atomic
from app.files.fingerprint import fingerprint
from app.files.setup_file import read_setup
from app.saving import setup_writer
from app.saving.setup_writer import ChangedOnDisk, changed_on_disk, save_setup, setup_text
from geometry.errors import BadInput, GeometryError
from geometry.setup import Surface
from tests.app.files.documents import ROOM_TEXT, SETUP_TEXT, faults_of, setup_document, written

SAMPLES = Path("sample_rooms")
SETUPS = sorted(SAMPLES.glob("*/*.setup.toml"))
CUBE = """solid cube
facet normal 0 0 -1
outer loop
vertex 0 0 0
vertex 0 1 0
vertex 1 0 0
endloop
endfacet
facet normal 0 -1 0
outer loop
vertex 0 0 0
vertex 1 0 0
vertex 0 0 1
endloop
endfacet
facet normal -1 0 0
outer loop
vertex 0 0 0
vertex 0 0 1
vertex 0 1 0
endloop
endfacet
facet normal 1 1 1
outer loop
vertex 1 0 0
vertex 0 1 0
vertex 0 0 1
endloop
endfacet
endsolid cube
"""

# The same set-up, written as somebody might who likes it another way.
COMMENTED = '''\
# Written on the train.
format = 1   # never change this
name = 'Head' # a working title
room = "test.room.toml"
notes = """
two
lines"""

# who
[patient] # the patient
  position = "HFP"
  source = "body"
  stature_mm = 1_756 # barefoot
  mass_kg = 8.0e1
  build = "man"
  arm_left = "above the head"
  arm_right = "at the side"
  legs = "apart"

  [patient.sizes] # calipers
  chest_depth_mm = 260 # twice

[table]
from_head_end_mm = 50 # tape measure
lateral_mm = 5
height_mm = 20
# the mattress is soft

# where the beams meet
[isocentre]
landmark = "vertex"
left_mm = 10
head_mm = -80 # from the scout
front_mm = -20

[couch]
pitch_deg = 1
roll_deg = -1
eccentric_deg = 2

[fitted] # to the head
accessories = [
  "cone", # the short one
]
collimator_deg = 30
[fitted.arms]
panel = "extended"
snout = 120

# ---- what must remain free ----

[required]
fixed_mm = 20
k = 1.5 # not 2, see the minutes
reason = "department's rule"
with_survey = true

# measured with a full load
[[required.component]]
name = "couch sag" # at the head end
sd_mm = 2

# skin folds
[[required.component]]
name = "surface"
sd_mm = 5
patient_only = true # of course

# ---- on the table ----

# lent by the neighbours
[[device]]
name = "mask frame"
shape = "box"
size_mm = [300, 400, 20]
centre_mm = [0, -200, 10] # as bought
# to be returned in May
'''
DOTTED = """\
format = 1
name = "Head"
room = "test.room.toml"
notes = "two\\nlines"
patient.position = "HFP"
patient.source = "body"
patient.stature_mm = 1756
patient.mass_kg = 80
patient.build = "man"
patient.sizes.chest_depth_mm = 260
patient.arm_left = "above the head"
patient.arm_right = "at the side"
patient.legs = "apart"
table = { from_head_end_mm = 50, lateral_mm = 5, height_mm = 20 }
isocentre = { landmark = "vertex", left_mm = 10, head_mm = -80, front_mm = -20 }
couch = { pitch_deg = 1, roll_deg = -1, eccentric_deg = 2 }
fitted = { accessories = ["cone"], arms = { panel = "extended", snout = 120 }, collimator_deg = 30 }
device = [ { name = "mask frame", shape = "box", size_mm = [300, 400, 20], centre_mm = [0, -200, 10] } ]

[required]
fixed_mm = 20
k = 1.5
reason = "department's rule"
with_survey = true
component = [ { name = "couch sag", sd_mm = 2 }, { name = "surface", sd_mm = 5, patient_only = true } ]
"""
STYLES = {"plain": SETUP_TEXT, "commented": COMMENTED, "dotted": DOTTED}

EDITS: dict[str, Edit] = {
    "name": set_value("name", 'A "name" with \\ and # in it'),
    "notes": set_value("notes", "one\ntwo \\ \"three\" '''\nfour"),
    "no notes": set_value("notes", ""),
    "position": set_value("patient.position", "FFP"),
    "stature": set_value("patient.stature_mm", 1712.5),
    "no mass": set_value("patient.mass_kg", None),
    "build": set_value("patient.build", "woman"),
    "posture": set_value("patient.arm_right", "on the chest"),
    "size": set_value("patient.sizes.hip_breadth_mm", 401.25),
    "other size": set_value("patient.sizes.chest_depth_mm", 270.0),
    "no size": set_value("patient.sizes.chest_depth_mm", None),
    "place": in_turn(set_value("table.from_head_end_mm", -3.25), set_value("table.height_mm", 0.0)),
    "offsets": in_turn(set_value("isocentre.head_mm", 12.125), set_value("isocentre.front_mm", 0.0)),
    "landmark": set_value("isocentre.landmark", "chin"),
    "couch": in_turn(set_value("couch.pitch_deg", 0.0), set_value("couch.eccentric_deg", -3.5)),
    "collimator": set_value("fitted.collimator_deg", 12.5),
    "any collimator": set_value("fitted.collimator_deg", None),
    "accessory": fit("applicator"),
    "no accessory": fit("cone", fitted=False),
    "arm": set_arm("panel", "parked"),
    "slide": set_arm("snout", 33.5),
    "fixed": set_value("required.fixed_mm", 12.0),
    "k": set_value("required.k", 2.5),
    "reason": set_value("required.reason", "another rule, §3"),
    "survey": change_component(0, sd_mm=4.0),
    "no survey": remove_component(0),
    "sag": change_component(1, name="sag of the couch", sd_mm=2.5, patient_only=True),
    "no sag": remove_component(1),
    "component": add_component("bolus", 1.25, patient_only=True),
    "other component": add_component("wind", 0.5),
    "no components": in_turn(*(remove_component(0) for _ in range(3))),
    "shift": move_device("mask frame", (1.5, -2.0, 0.0)),
    "shift back": move_device("mask frame", (0.0, 0.0, 0.0)),
    "no device": remove_device("mask frame"),
    "box": add_box("wedge", (100.0, 200.5, 50.0), (0.0, -800.0, 25.0)),
    "other box": add_box("pad", (10.0, 20.0, 5.0)),
    "no box": remove_device("wedge"),
}


@pytest.fixture(params=STYLES)
def document(request: pytest.FixtureRequest, tmp_path: Path) -> Document:
    written(tmp_path / "test.room.toml", ROOM_TEXT)
    return open_document(written(tmp_path / "a.setup.toml", STYLES[request.param]))


@pytest.fixture
def commented(tmp_path: Path) -> Document:
    written(tmp_path / "test.room.toml", ROOM_TEXT)
    return open_document(written(tmp_path / "a.setup.toml", COMMENTED))


def saved_path(document: Document) -> Path:
    assert document.path is not None
    return document.path


def comments_of(text: str) -> list[str]:
    """Return the comments of a text without # in its strings."""
    return [line[line.index("#") :].strip() for line in text.splitlines() if "#" in line]


def in_the_folder(path: Path) -> set[str]:
    return {file.name for file in path.parent.iterdir()}


# What is written


@pytest.mark.parametrize("path", SETUPS, ids=lambda path: f"{path.parent.name}-{path.name}")
def test_what_nobody_changed_is_written_as_it_was(path: Path) -> None:
    document = open_document(path)
    assert setup_text(document) == path.read_text(encoding="utf-8")


def test_the_styles_say_the_same(tmp_path: Path) -> None:
    written(tmp_path / "test.room.toml", ROOM_TEXT)
    said = {fingerprint(read_setup(written(tmp_path / "a.setup.toml", text))) for text in STYLES.values()}
    assert len(said) == 1
    assert tomllib.loads(SETUP_TEXT) == setup_document()


@pytest.mark.parametrize("name", [name for name in EDITS if name != "no box"])
def test_each_edit_is_read_back_from_the_file(document: Document, name: str) -> None:
    edited = EDITS[name](document)
    saved = save_setup(edited, saved_path(document))
    assert fingerprint(read_setup(saved_path(document))) == fingerprint(edited.setup)
    assert saved.setup is edited.setup
    assert saved.source.text == saved_path(document).read_text(encoding="utf-8")
    assert in_the_folder(saved_path(document)) == {"a.setup.toml", "test.room.toml"}


@settings(max_examples=25, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(data=st.data())
def test_edits_in_any_order_with_saves_and_undo_between(tmp_path: Path, data: st.DataObject) -> None:
    written(tmp_path / "test.room.toml", ROOM_TEXT)
    path = written(tmp_path / "a.setup.toml", STYLES[data.draw(st.sampled_from(sorted(STYLES)))])
    session = Session(open_document(path))
    for name in data.draw(st.lists(st.sampled_from(["save", "undo", "undo", *EDITS]), min_size=1, max_size=8)):
        if name == "save":
            session.mark_saved(save_setup(session.document, path))
        elif name == "undo":
            session.undo()
        else:
            try:
                session.apply(EDITS[name])
            except GeometryError:
                continue
    saved = save_setup(session.document, path)
    session.mark_saved(saved)
    assert not session.dirty
    assert fingerprint(open_document(path).setup) == fingerprint(session.document.setup)


def test_only_the_lines_that_changed_change(commented: Document) -> None:
    edited = in_turn(
        set_value("isocentre.head_mm", -81.5), set_value("table.height_mm", 25.0), change_component(1, sd_mm=3.0)
    )(commented)
    before, after = COMMENTED.splitlines(), setup_text(edited).splitlines()
    assert [(old, new) for old, new in zip(before, after, strict=True) if old != new] == [
        ("height_mm = 20", "height_mm = 25"),
        ("head_mm = -80 # from the scout", "head_mm = -81.5 # from the scout"),
        ("sd_mm = 2", "sd_mm = 3"),
    ]


KEEPS_ALL_COMMENTS = [
    name
    for name in EDITS
    if (not name.startswith("no ") and name not in {"accessory", "name", "shift back"}) or name == "no notes"
]


@pytest.mark.parametrize("name", KEEPS_ALL_COMMENTS)
def test_comments_stay_in_their_order(commented: Document, name: str) -> None:
    text = setup_text(EDITS[name](commented))
    if name == "notes":
        text = text.replace("# in it", "")
    assert comments_of(text) == comments_of(COMMENTED)


@pytest.mark.parametrize(
    ("name", "gone"),
    [
        ("no sag", ["# measured with a full load", "# at the head end"]),
        ("no device", ["# lent by the neighbours", "# as bought", "# to be returned in May"]),
    ],
)
def test_what_is_taken_out_takes_its_own_comments_along(commented: Document, name: str, gone: list[str]) -> None:
    text = setup_text(EDITS[name](commented))
    assert comments_of(text) == [comment for comment in comments_of(COMMENTED) if comment not in gone]


def test_what_is_added_stands_where_it_belongs(commented: Document) -> None:
    text = setup_text(in_turn(EDITS["component"], EDITS["box"], EDITS["size"], EDITS["shift"])(commented))
    assert "  chest_depth_mm = 260 # twice\n  hip_breadth_mm = 401.25\n\n[table]" in text
    assert 'patient_only = true # of course\n\n[[required.component]]\nname = "bolus"\nsd_mm = 1.25\n' in text
    assert "centre_mm = [0, -200, 10] # as bought\nat_mm = [1.5, -2, 0]\n# to be returned in May\n\n[[device]]" in text
    assert text.endswith(
        '[[device]]\nname = "wedge"\nshape = "box"\nsize_mm = [100, 200.5, 50]\nat_mm = [0, -800, 25]\n'
    )


def test_a_table_that_is_missing_is_put_among_the_others(tmp_path: Path) -> None:
    path = tmp_path / "c_arm_close" / "boost.setup.toml"
    shutil.copytree(SAMPLES / "c_arm_close", path.parent)
    shutil.copy(path.parent / "electron_boost.setup.toml", path)
    text = setup_text(set_value("couch.pitch_deg", 1.5)(open_document(path)))
    assert "front_mm = 10\n\n[couch]\npitch_deg = 1.5\n\n[fitted]\n" in text


@pytest.mark.parametrize("newline", ["\n", "\r\n"])
def test_line_ends_and_byte_order_mark_are_kept(tmp_path: Path, newline: str) -> None:
    written(tmp_path / "test.room.toml", ROOM_TEXT)
    path = tmp_path / "a.setup.toml"
    path.write_bytes(b"\xef\xbb\xbf" + COMMENTED.replace("\n", newline).encode())
    save_setup(EDITS["box"](open_document(path)), path)
    content = path.read_bytes()
    assert content.startswith(b"\xef\xbb\xbf# Written")
    assert content.count(newline.encode()) == content.count(b"\n")
    assert (b"\r" in content) == (newline == "\r\n")


def test_undo_after_a_save_brings_a_device_back_with_its_comments(commented: Document) -> None:
    session = Session(commented)
    session.apply(EDITS["no device"])
    session.mark_saved(save_setup(session.document, saved_path(commented)))
    session.undo()
    session.mark_saved(save_setup(session.document, saved_path(commented)))
    assert saved_path(commented).read_text(encoding="utf-8") == COMMENTED


def test_what_no_text_can_say_is_refused(commented: Document) -> None:
    breast = open_document(SAMPLES / "c_arm_close" / "breast.setup.toml")
    foreign = replace(commented, setup=replace(commented.setup, devices=breast.setup.devices))
    faults = faults_of(lambda: save_setup(foreign, saved_path(commented)))
    assert "no upright box" in faults[0].found
    assert saved_path(commented).read_text(encoding="utf-8") == COMMENTED


# Where it is written


def test_paths_lead_to_the_same_files_from_another_folder(tmp_path: Path) -> None:
    rooms = tmp_path / "rooms"
    rooms.mkdir()
    written(rooms / "test.room.toml", ROOM_TEXT)
    (rooms / "cube.stl").write_text(CUBE, encoding="utf-8")
    text = COMMENTED + '\n[[device]]\nname = "cube"\nshape = "mesh"\nfile = "cube.stl" # printed\nunit = "cm"\n'
    document = open_document(written(rooms / "a.setup.toml", text))
    target = tmp_path / "patients" / "b"
    target.mkdir(parents=True)
    saved = save_setup(document, target / "b.setup.toml")
    content = (target / "b.setup.toml").read_text(encoding="utf-8")
    assert 'room = "../../rooms/test.room.toml"' in content
    assert 'file = "../../rooms/cube.stl" # printed' in content
    assert fingerprint(read_setup(target / "b.setup.toml")) == fingerprint(document.setup)
    assert saved.path == target / "b.setup.toml"
    assert not changed_on_disk(saved)
    # And back again.
    save_setup(saved, rooms / "c.setup.toml")
    assert 'room = "test.room.toml"' in (rooms / "c.setup.toml").read_text(encoding="utf-8")


def test_an_absolute_path_stays_one(tmp_path: Path) -> None:
    room = written(tmp_path / "test.room.toml", ROOM_TEXT)
    text = COMMENTED.replace('room = "test.room.toml"', f'room = "{room.as_posix()}"')
    document = open_document(written(tmp_path / "a.setup.toml", text))
    (tmp_path / "inner").mkdir()
    save_setup(document, tmp_path / "inner" / "a.setup.toml")
    assert f'room = "{room.as_posix()}"' in (tmp_path / "inner" / "a.setup.toml").read_text(encoding="utf-8")


@pytest.mark.skipif(sys.platform == "win32", reason="links need rights there")
def test_a_folder_behind_a_link_does_not_lead_astray(tmp_path: Path) -> None:
    real = tmp_path / "deep" / "down" / "real"
    real.mkdir(parents=True)
    (tmp_path / "link").symlink_to(real)
    written(tmp_path / "test.room.toml", ROOM_TEXT)
    document = open_document(written(tmp_path / "a.setup.toml", COMMENTED))
    save_setup(document, tmp_path / "link" / "a.setup.toml")
    assert fingerprint(read_setup(real / "a.setup.toml")) == fingerprint(document.setup)


def test_a_new_set_up_gets_its_file(tmp_path: Path) -> None:
    written(tmp_path / "test.room.toml", ROOM_TEXT)
    document = document_module.new_document(tmp_path / "test.room.toml")
    saved = save_setup(set_value("name", "First")(document), tmp_path / "first.setup.toml")
    again = open_document(tmp_path / "first.setup.toml")
    assert fingerprint(again.setup) == fingerprint(saved.setup)
    assert (again.path, again.stamp, again.source.text) == (saved.path, saved.stamp, saved.source.text)


# What may not be written


def test_a_file_that_somebody_changed_is_not_replaced_unasked(commented: Document) -> None:
    path = saved_path(commented)
    theirs = COMMENTED.replace("fixed_mm = 20", "fixed_mm = 25")
    assert not changed_on_disk(commented)
    written(path, theirs)
    assert changed_on_disk(commented)
    with pytest.raises(ChangedOnDisk, match="somebody changed"):
        save_setup(EDITS["k"](commented), path)
    assert path.read_text(encoding="utf-8") == theirs
    save_setup(EDITS["k"](commented), path, despite_changes=True)
    assert read_setup(path).required.fixed_mm == 20.0


def test_a_file_that_is_gone_is_made_again(commented: Document) -> None:
    path = saved_path(commented)
    path.unlink()
    save_setup(commented, path)
    assert path.read_text(encoding="utf-8") == COMMENTED


def test_a_room_that_changed_meanwhile_is_told(commented: Document) -> None:
    path = saved_path(commented)
    written(path.parent / "test.room.toml", ROOM_TEXT.replace("[-95, 95]", "[-90, 90]"))
    with pytest.raises(ChangedOnDisk, match="room: found files that changed"):
        save_setup(EDITS["k"](commented), path)
    assert path.read_text(encoding="utf-8") == COMMENTED
    saved = save_setup(EDITS["k"](commented), path, despite_changes=True)
    assert saved.setup.room.couch.turntable.low == -90.0
    assert saved.setup.required.k == 2.5
    assert fingerprint(read_setup(path)) == fingerprint(saved.setup)


def test_an_envelope_that_changed_meanwhile_is_told(tmp_path: Path) -> None:
    written(tmp_path / "test.room.toml", ROOM_TEXT)
    (tmp_path / "skin.stl").write_text(CUBE, encoding="utf-8")
    text = (
        'format = 1\nname = "Imported"\nroom = "test.room.toml"\n[patient]\nposition = "HFS"\nsource = "mesh"\n'
        'file = "skin.stl"\nunit = "m"\nlandmarks = { vertex = [0, 0, 900] }\n[table]\nfrom_head_end_mm = 10\n'
        '[isocentre]\ndicom_mm = [100, 100, 100]\n[required]\nfixed_mm = 10\nreason = "a test"\n'
    )
    document = open_document(written(tmp_path / "a.setup.toml", text))
    edited = in_turn(set_value("isocentre.dicom_mm[1]", 90.0), set_value("patient.position", "HFDL"))(document)
    save_setup(edited, tmp_path / "a.setup.toml")
    assert "dicom_mm = [100, 90, 100]" in (tmp_path / "a.setup.toml").read_text(encoding="utf-8")
    other = set_value("isocentre.landmark", "vertex")(open_document(tmp_path / "a.setup.toml"))
    saved = save_setup(other, tmp_path / "a.setup.toml")
    assert saved.setup.isocentre.landmark == "vertex"
    (tmp_path / "skin.stl").write_text(CUBE.replace("1 0 0", "2 0 0"), encoding="utf-8")
    with pytest.raises(ChangedOnDisk, match="patient: found files that changed"):
        save_setup(saved, tmp_path / "a.setup.toml")
    again = save_setup(saved, tmp_path / "a.setup.toml", despite_changes=True)
    assert isinstance(again.setup.patient, Surface)
    assert fingerprint(again.setup) != fingerprint(saved.setup)


@pytest.mark.parametrize("despite", [False, True])
def test_a_text_that_says_something_else_is_not_written(
    commented: Document, monkeypatch: pytest.MonkeyPatch, *, despite: bool
) -> None:
    monkeypatch.setattr(setup_writer, "setup_text", lambda *_: COMMENTED)
    with pytest.raises(BadInput, match=r"on_table.*a text that would say something else"):
        save_setup(EDITS["place"](commented), saved_path(commented), despite_changes=despite)
    assert saved_path(commented).read_text(encoding="utf-8") == COMMENTED
    assert in_the_folder(saved_path(commented)) == {"a.setup.toml", "test.room.toml"}


def test_a_text_that_cannot_be_read_is_not_written(commented: Document, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(setup_writer, "setup_text", lambda *_: "format = ")
    faults = faults_of(lambda: save_setup(commented, saved_path(commented)))
    assert faults[0].file == str(saved_path(commented))
    assert saved_path(commented).read_text(encoding="utf-8") == COMMENTED


def test_a_folder_that_is_not_there_is_told(commented: Document, tmp_path: Path) -> None:
    faults = faults_of(lambda: save_setup(commented, tmp_path / "none" / "a.setup.toml"))
    assert "no folder" in faults[0].found
    assert faults[0].file == str(tmp_path / "none" / "a.setup.toml")


# What goes wrong while it is written


@pytest.mark.parametrize("call", range(1, 8))
@pytest.mark.parametrize("error", [OSError(28, "No space left on device"), KeyboardInterrupt()])
def test_whatever_step_fails_the_file_is_whole(
    commented: Document, monkeypatch: pytest.MonkeyPatch, call: int, error: BaseException
) -> None:
    path = saved_path(commented)
    edited = EDITS["box"](commented)
    left = [call]

    def failing(real: Callable[..., object]) -> Callable[..., object]:
        def step(*args: object, **more: object) -> object:
            left[0] -= 1
            if left[0] == 0:
                raise error
            return real(*args, **more)

        return step

    monkeypatch.setattr(atomic.os, "fsync", failing(os.fsync))
    monkeypatch.setattr(atomic.os.path, "realpath", failing(os.path.realpath))
    monkeypatch.setattr(Path, "replace", failing(Path.replace))
    try:
        save_setup(edited, path)
    except (BadInput, KeyboardInterrupt):
        assert path.read_text(encoding="utf-8") == COMMENTED
    else:
        assert left[0] > 0, "the error was swallowed"
        assert fingerprint(read_setup(path)) == fingerprint(edited.setup)
    assert in_the_folder(path) == {"a.setup.toml", "test.room.toml"}


_SAVER = """
import sys
from pathlib import Path
from app.document.document import open_document
from app.document.edits import set_value
from app.saving.setup_writer import save_setup
path = Path(sys.argv[1])
document = open_document(path)
print("ready", flush=True)
for height in range(1, 1000):
    document = save_setup(set_value("table.height_mm", float(height))(document), path)
"""


@pytest.mark.skipif(sys.platform == "win32", reason="no SIGKILL there")
def test_a_process_killed_while_saving_loses_nothing(commented: Document) -> None:
    path = saved_path(commented)
    process = subprocess.Popen([sys.executable, "-c", _SAVER, str(path)], stdout=subprocess.PIPE)
    assert process.stdout is not None
    try:
        assert process.stdout.readline() == b"ready\n"
        deadline = time.monotonic() + 0.3
        # Every state that a reader can meet on the way is a whole set-up.
        seen = set()
        while time.monotonic() < deadline:
            seen.add(read_setup(path).on_table.height_mm)
    finally:
        process.send_signal(signal.SIGKILL)
        process.wait()
        process.stdout.close()
    left = read_setup(path).on_table.height_mm
    assert seen
    assert left in {20.0, *map(float, range(1, 1000))}
    assert comments_of(path.read_text(encoding="utf-8")) == comments_of(COMMENTED)
