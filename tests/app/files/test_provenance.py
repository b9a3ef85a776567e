"""Every export can tell where it comes from."""

import math
from dataclasses import replace

from app import __version__
from app.cautions import CAUTIONS
from app.files.fingerprint import fingerprint
from app.files.provenance import joined_lines, provenance_of
from app.files.setup_lines import setup_lines
from geometry.assess import Options
from geometry.machine import Axis, JoinedPair, Readout
from geometry.scene import build_scene
from geometry.setup import Required
from tests.app.files.assessments import (
    DAY,
    REQUIRED,
    ROOM,
    SETUP,
    SURVEY,
    plain,
    provenance,
    room_with,
    setup_in,
    unsurveyed,
    without_travel,
)


def told(label: str) -> list[str]:
    return [text for name, text in provenance(plain()).lines() if name == label]


def test_it_names_room_set_up_fingerprints_version_and_date() -> None:
    assert told("Room") == ["Small room"]
    assert told("Set-up") == ["Small set-up"]
    assert told("Fingerprint") == [f"{fingerprint(SETUP)} (set-up with its room)"]
    assert told("Fingerprint of the room") == [fingerprint(ROOM)]
    assert told("Program") == [f"Wideberth {__version__}"]
    assert told("Date") == ["2026-03-04"]
    assert told("Caution") == list(CAUTIONS)


def test_it_names_what_was_asked_for() -> None:
    options = Options(0.5, 2.0, 0.125, 0.75, 1.25)
    lines = dict(provenance_of(plain().scene, options, DAY).lines())
    assert lines["Grid"] == "gantry every 0.5°, couch every 2°"
    assert lines["Edge resolution of the proof"] == "0.125°"
    assert lines["Readout tolerances"] == "gantry ±0.75°, couch ±1.25°"


def test_required_clearance_stands_with_its_sum_and_its_reason() -> None:
    # 20 + 2 · √(2²) and 20 + 2 · √(2² + 5²), by hand.
    assert told("Required clearance, machine and room alone") == [
        "24.00 mm = 20 + 2 × √(2²); one standard deviation in mm: couch sag 2"
    ]
    assert told("Required clearance, with patient or device") == [
        (
            f"{20 + 2 * math.sqrt(29):.2f} mm = 20 + 2 × √(2² + 5²); "
            "one standard deviation in mm: couch sag 2, patient surface 5"
        )
    ]
    assert told("Reason for the required clearance") == ["the rule of a test"]


def test_a_single_required_value_has_no_sum() -> None:
    setup = replace(SETUP, required=Required(30.0, "asked for"))
    lines = dict(provenance_of(build_scene(setup), Options(), DAY).lines())
    assert lines["Required clearance, with patient or device"] == "30.00 mm"


def test_joined_pairs_are_told_with_their_reasons() -> None:
    assert told("Joined, not checked") == [
        "drum with stand: the drum turns in the stand",
        "pedestal with floor: it stands on the floor",
    ]
    pairs = (JoinedPair("a", "b", "glued"), JoinedPair("a", "c", "glued"), JoinedPair("a", "d", "screwed"))
    assert joined_lines(pairs) == ("a with b, c: glued", "a with d: screwed")


def test_marks_tell_demonstrations_unsurveyed_rooms_and_missing_travel() -> None:
    assert provenance(plain()).marks == ("DEMONSTRATION: invented room and set-up",)
    assert provenance(plain()).is_demonstration
    assert provenance(unsurveyed()).marks == ("UNSURVEYED: nobody has surveyed this room",)
    assert not provenance(unsurveyed()).is_demonstration
    stuck = provenance(without_travel())
    assert stuck.marks[-1].startswith("NO TRAVEL")
    assert stuck.no_travel == ("couch lateral = -400.0 mm is 170.0 mm outside its travel -230 to 230",)


def test_the_survey_is_told_in_words() -> None:
    assert provenance(plain()).survey == "demonstration: invented room"
    assert provenance(unsurveyed()).survey == "unsurveyed"
    surveyed = setup_in(room_with(demonstration=False, survey=SURVEY), demonstration=False)
    of_survey = provenance_of(build_scene(surveyed), Options(), DAY)
    assert of_survey.survey == "surveyed by a physicist on 2025-03-14, tape measure, ±3 mm (one standard deviation)"
    assert of_survey.marks == ()


def test_a_row_of_a_table_carries_caution_and_marks_in_ascii() -> None:
    caution = provenance(without_travel()).caution
    assert caution.isascii()
    assert caution.startswith("Planning aid only")
    assert "DEMONSTRATION" in caution
    assert "NO TRAVEL" in caution


def test_the_surface_of_a_patient_is_not_told_by_its_source() -> None:
    lines = (*provenance(plain()).lines(), *setup_lines(plain().scene))
    assert not any("a box" in text for _, text in lines)


def test_inputs_hold_the_couch_position_on_both_scales() -> None:
    couch = replace(ROOM.couch, lateral=Axis(-230.0, 230.0, readout=Readout(1000.0, -1, 1.0)))
    setup = setup_in(room_with(couch=couch), on_table=replace(SETUP.on_table, lateral_mm=25.0), required=REQUIRED)
    lines = dict(setup_lines(build_scene(setup)))
    # The patient's mid-line is 25 mm to the right of the table's, so the table goes 25 mm to the left.
    assert lines["Couch lateral"] == "-25.0 mm; the machine shows 1025.0 mm"
    # Isocentre 250 mm from the vertex, which is 40 mm from the head end; 125 mm above the table.
    assert lines["Couch longitudinal"] == "290.0 mm"
    assert lines["Couch vertical"] == "-125.0 mm"
    assert lines["Isocentre"] == "DICOM (0, 0, 600) mm"
    assert lines["Collimator"] == "any angle"
