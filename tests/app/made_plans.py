"""A room, a set-up and plans to check, all invented: what the tests of `check` share.

The plans are copies of pydicom's own rtplan.dcm with other beams. The set-up's patient is pydicom's own rtstruct.dcm: a
block of 400 x 300 mm, 30 mm along the patient.
"""

import copy
from collections.abc import Sequence
from pathlib import Path

import pydicom
from pydicom import Dataset
from pydicom.data import get_testdata_file
from pydicom.sequence import Sequence as Items

OWN_PLAN = Path(str(get_testdata_file("rtplan.dcm")))
OWN_STRUCTURES = Path(str(get_testdata_file("rtstruct.dcm")))
ISOCENTRE = (0.0, 0.0, -190.0)

ROOM = """
format = 1
name = "Test room"
demonstration = true
source_axis_distance_mm = 1000
[gantry]
travel_deg = [-185, 185]
speed_deg_per_s = 6
[collimator]
travel_deg = [-175, 175]
[couch]
[couch.turntable]
travel_deg = [-95, 95]
speed_deg_per_s = 3
[couch.lateral]
travel_mm = [-400, 400]
[couch.longitudinal]
travel_mm = [-500, 1500]
[couch.vertical]
travel_mm = [-800, 600]
[couch.pitch]
travel_deg = [-3, 3]
[couch.roll]
travel_deg = [-3, 3]
[[accessory]]
name = "electron applicator 15"
slot = "tray"
[[accessory]]
name = "cone"
slot = "tray"
[[arm]]
name = "kV source"
[[arm.position]]
name = "parked"
shift_mm = [0, 800, 0]
[[arm.position]]
name = "extended"
[[part]]
name = "head"
mount = "gantry"
shape = "box"
size_mm = [500, 500, 300]
at_mm = [0, 0, 620]
[[part]]
name = "block"
mount = "collimator"
shape = "box"
size_mm = [420, 160, 60]
at_mm = [0, 0, 440]
[[part]]
name = "applicator frame"
mount = "collimator"
accessory = "electron applicator 15"
shape = "box"
size_mm = [200, 200, 340]
at_mm = [0, 0, 240]
[[part]]
name = "cone tube"
mount = "collimator"
accessory = "cone"
shape = "cylinder"
radius_mm = 40
start_mm = [0, 0, 250]
end_mm = [0, 0, 410]
[[part]]
name = "tube"
mount = "gantry"
arm = "kV source"
shape = "box"
size_mm = [200, 200, 200]
at_mm = [900, 0, 0]
[[part]]
name = "table top"
mount = "couch"
shape = "box"
size_mm = [500, 2000, 60]
at_mm = [0, -1000, -30]
[[part]]
name = "pedestal"
mount = "couch"
follows = ["turntable"]
shape = "box"
size_mm = [300, 300, 400]
at_mm = [0, -1300, -900]
[[part]]
name = "wall"
mount = "fixed"
shape = "box"
size_mm = [100, 3000, 3000]
at_mm = [-1500, 0, 0]
"""

SETUP = """
format = 1
name = "Test set-up"
room = "test.room.toml"
demonstration = true
[patient]
position = "HFS"
source = "structure set"
file = "{structures}"
[table]
from_head_end_mm = 150
lateral_mm = 0
height_mm = 20
[isocentre]
dicom_mm = [0, 0, -190]
[couch]
pitch_deg = 0
roll_deg = 0
[fitted]
collimator_deg = "any"
[required]
fixed_mm = 20
reason = "a test"
k = 2
[[required.component]]
name = "patient"
sd_mm = 5
patient_only = true
"""

BODY = """
format = 1
name = "Test set-up"
room = "test.room.toml"
demonstration = true
[patient]
position = "HFS"
source = "body"
stature_mm = 1700
[table]
from_head_end_mm = 50
height_mm = 20
[isocentre]
landmark = "xiphoid"
front_mm = -100
[required]
fixed_mm = 20
reason = "a test"
"""


def write_setup(folder: Path, setup: str = SETUP, room: str = ROOM, structures: Path = OWN_STRUCTURES) -> Path:
    """Write room and set-up into a folder and return the set-up's path."""
    (folder / "test.room.toml").write_text(room, encoding="utf-8")
    path = folder / "test.setup.toml"
    path.write_text(setup.replace("{structures}", structures.as_posix()), encoding="utf-8")
    return path


def point(gantry: float | None = None, couch: float | None = None, **elements: object) -> Dataset:
    """Return a control point; what is None is left out."""
    item = Dataset()
    if gantry is not None:
        item.GantryAngle = gantry
    if couch is not None:
        item.PatientSupportAngle = couch
    for keyword, value in elements.items():
        setattr(item, keyword, value)
    return item


def beam(name: str, points: Sequence[Dataset], isocentre: Sequence[float] = ISOCENTRE, **elements: object) -> Dataset:
    """Return a beam with an isocentre at its first control point, unless that has one."""
    item = Dataset()
    item.BeamName = name
    item.BeamNumber = 1
    item.ReferencedPatientSetupNumber = 1
    item.TreatmentDeliveryType = "TREATMENT"
    item.SourceAxisDistance = 1000.0
    copied = [copy.deepcopy(one) for one in points]
    if "IsocenterPosition" not in copied[0]:
        copied[0].IsocenterPosition = list(isocentre)
    item.ControlPointSequence = Items(copied)
    for keyword, value in elements.items():
        setattr(item, keyword, value)
    return item


def static(name: str, gantry: float, couch: float = 0.0, **elements: object) -> Dataset:
    """Return a static beam; `elements` stand at its first control point."""
    return beam(name, [point(gantry, couch, **{"BeamLimitingDeviceAngle": 0.0, **elements}), point()])


def arc(name: str, start: float, stop: float, way: str = "CW", couch: float = 0.0, **elements: object) -> Dataset:
    """Return an arc of two control points; `elements` stand at its first control point."""
    first = point(start, couch, **{"GantryRotationDirection": way, "BeamLimitingDeviceAngle": 0.0, **elements})
    return beam(name, [first, point(stop, GantryRotationDirection="NONE")])


def write_plan(path: Path, beams: Sequence[Dataset], position: str = "HFS", *, ions: bool = False) -> Path:
    """Write a copy of pydicom's own plan with these beams."""
    plan = pydicom.dcmread(OWN_PLAN)
    numbered = [copy.deepcopy(one) for one in beams]
    for number, one in enumerate(numbered, start=1):
        one.BeamNumber = number
    if ions:
        for one in numbered:
            one.IonControlPointSequence = one.ControlPointSequence
            del one.ControlPointSequence
        del plan.BeamSequence
        plan.IonBeamSequence = Items(numbered)
        plan.SOPClassUID = "1.2.840.10008.5.1.4.1.1.481.8"
    else:
        plan.BeamSequence = Items(numbered)
    plan.PatientSetupSequence[0].PatientPosition = position
    plan.save_as(path)
    return path
