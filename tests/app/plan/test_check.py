"""From plans to verdicts: matching a plan to a set-up, and the verdicts of an independent script.

Outside source: pydicom's own rtplan.dcm and rtstruct.dcm, as they are and with edited beams.
"""

import datetime
import json
import re
from collections.abc import Callable, Sequence
from pathlib import Path

import numpy as np
import pytest
from pydicom import Dataset

from app.check_command import read_fields
from app.files.provenance import provenance_of
from app.files.setup_file import read_setup
from app.plan.check import Choices, check_plan
from app.plan.dry_run import dry_run
from app.plan_files.check_json import check_json
from geometry.assess import Options
from geometry.errors import BadInput
from geometry.states import State
from geometry.treatment.data import CheckReport
from tests.app.made_plans import (
    BODY,
    ISOCENTRE,
    OWN_PLAN,
    ROOM,
    SETUP,
    arc,
    beam,
    point,
    static,
    write_plan,
    write_setup,
)
from tests.reference.plan_oracle import Opinion, opinions

Check = Callable[..., CheckReport]


@pytest.fixture
def check(tmp_path: Path) -> Check:
    def run(
        *beams: Dataset, setup: str = SETUP, position: str = "HFS", choices: Choices | None = None, ions: bool = False
    ) -> CheckReport:
        plan = write_plan(tmp_path / "plan.dcm", beams, position, ions=ions)
        given = read_setup(write_setup(tmp_path, setup))
        return check_plan(given, read_fields(plan), Options(), choices, str(plan))

    return run


def notes_of(report: CheckReport, field: int = 0) -> str:
    return "; ".join(report.fields[field].notes)


def reason_of(report: CheckReport, field: int = 0) -> str:
    return report.fields[field].verdict.reason


# Isocentres


def test_pydicoms_own_plan_is_checked_from_end_to_end(tmp_path: Path) -> None:
    report = check_plan(read_setup(write_setup(tmp_path, BODY)), read_fields(OWN_PLAN), Options())
    (field,) = report.fields
    assert field.state is State.PERMITTED
    assert report.permitted
    assert field.scene.setup.collimator_deg == 0.0
    # Of a body made from sizes nobody knows DICOM coordinates.
    assert any("DICOM coordinates" in note for note in report.notes)
    assert field.notes == ()


def test_isocentres_in_dicom_coordinates_are_taken_as_they_are(check: Check) -> None:
    report = check(static("same", 0.0), static("other", 0.0, IsocenterPosition=[30.0, -20.0, -190.0]))
    assert report.fields[0].notes == ()
    assert "30.0 mm left, 20.0 mm to the front from the set-up's" in notes_of(report, 1)
    assert report.fields[1].scene.setup.isocentre.dicom_mm == (30.0, -20.0, -190.0)
    # Head first supine: the patient's left is the table's X, the front is up; the isocentre stays where it is.
    shift = report.fields[1].scene.couch.T_mm - report.fields[0].scene.couch.T_mm
    assert shift == pytest.approx([-30.0, 0.0, -20.0])
    assert [step.kind for step in report.moves[0].steps] == ["table"]


def test_with_a_landmark_the_first_isocentre_is_the_set_ups_and_others_lie_apart_from_it(check: Check) -> None:
    beams = [static(f"{z}", 0.0, IsocenterPosition=[235.0, 244.0, z]) for z in (-725.0, -665.0)]
    report = check(*beams, setup=BODY)
    assert report.fields[0].scene.setup.isocentre == report.setup.isocentre
    assert "60.0 mm to the head from the first field's" in notes_of(report, 1)
    assert report.fields[1].scene.setup.isocentre.offset_mm == (0.0, 60.0, -100.0)
    shift = report.fields[1].scene.couch.T_mm - report.fields[0].scene.couch.T_mm
    assert shift == pytest.approx([0.0, -60.0, 0.0])


# Patient and table


def test_another_patient_position_is_named_and_blocks(check: Check) -> None:
    report = check(static("a", 0.0), static("b", 30.0), position="FFS")
    assert [field.state for field in report.fields] == [State.UNPROVED] * 2
    assert reason_of(report) == "the plan has the patient FFS, the set-up HFS"
    assert report.moves[0].state is State.UNPROVED
    assert not report.permitted


def test_table_positions_that_agree_are_not_told(check: Check) -> None:
    held = check(static("a", 0.0)).fields[0].scene.couch.T_mm
    names = ("Lateral", "Longitudinal", "Vertical")
    stated = {f"TableTop{name}Position": round(float(value), 2) for name, value in zip(names, held, strict=True)}
    report = check(static("a", 0.0, **stated))
    assert report.notes == report.fields[0].notes == ()


def table_arc(**changes: float) -> Dataset:
    stated = {"TableTopLateralPosition": 0.0, "TableTopLongitudinalPosition": 60.0, "TableTopVerticalPosition": -170.0}
    return arc("table", 90.0, 135.0, **{**stated, **changes})


def test_table_positions_that_differ_are_named_and_checked_both_ways(check: Check) -> None:
    differs = table_arc(TableTopLateralPosition=-330.0)
    both, plan, setup = (check(differs, choices=Choices(table=table)) for table in ("both", "plan", "setup"))
    assert "lateral -330.0 mm" in notes_of(both)
    assert any("worse" in note for note in both.notes)
    assert plan.fields[0].scene.couch.T_mm == pytest.approx([-330.0, 60.0, -170.0], abs=0.01)
    assert setup.fields[0].scene.setup.on_table == both.setup.on_table
    assert plan.fields[0].verdict.nearest is not None
    assert setup.fields[0].verdict.nearest is not None
    nearest = {report.fields[0].verdict.nearest.clearance_mm for report in (plan, setup)}  # type: ignore[union-attr]
    assert both.fields[0].verdict.nearest is not None
    assert both.fields[0].verdict.nearest.clearance_mm == min(nearest) < max(nearest)


def test_table_positions_in_part_are_checked_with_the_set_ups_for_the_rest(check: Check) -> None:
    beams = [
        arc("part", 90.0, 135.0, TableTopLateralPosition=-330.0),
        table_arc(TableTopLateralPosition=-330.0, TableTopLongitudinalPosition=40.0, TableTopVerticalPosition=-170.0),
    ]
    held = check(arc("none", 90.0, 135.0)).fields[0].scene.couch.T_mm
    beams[1].ControlPointSequence[0].TableTopLongitudinalPosition = round(float(held[1]), 2)
    beams[1].ControlPointSequence[0].TableTopVerticalPosition = round(float(held[2]), 2)
    report = check(*beams)
    part, full = report.fields
    assert "lateral -330.0 mm; not stated in full" in notes_of(report)
    plan = check(*beams, choices=Choices(table="plan")).fields[0]
    assert plan.scene.couch.T_mm == pytest.approx([-330.0, held[1], held[2]], abs=0.01)
    assert part.state is full.state
    assert part.verdict.nearest is not None
    assert full.verdict.nearest is not None
    assert part.verdict.nearest.clearance_mm == pytest.approx(full.verdict.nearest.clearance_mm, abs=0.2)


DEVICE = '\n[[device]]\nname = "rest"\nshape = "box"\nsize_mm = [60, 60, 250]\ncentre_mm = [-270, -300, 125]\n'


def test_devices_stay_or_move_along_with_a_patient_who_lies_elsewhere(check: Check) -> None:
    held = check(static("a", 180.0)).fields[0].scene.couch.T_mm
    moved = {"TableTopLateralPosition": float(held[0]) - 200.0}
    report = check(static("a", 180.0, **moved), setup=SETUP + DEVICE, choices=Choices(table="plan"))
    assert "moved along with the patient, the worse is told" in notes_of(report)
    (field,) = report.fields
    assert field.table_settled
    assert field.table_as
    assert f"its figures are for {field.table_as}" in field.notes
    # With the set-up's table alone nothing is in doubt.
    plain = check(static("a", 180.0, **moved), setup=SETUP + DEVICE, choices=Choices(table="setup"))
    assert plain.fields[0].table_as == ""
    assert "moved along" not in notes_of(plain)


def test_a_device_that_would_move_along_towards_the_machine_is_the_worse(check: Check) -> None:
    # The table goes 300 mm to the right under a patient who stays in the room, and so does a device that moves along.
    device = DEVICE.replace("-270", "240").replace("-300", "-150")
    moved = {"TableTopLateralPosition": -300.0}
    found = {
        table: check(static("a", 90.0, **moved), setup=SETUP + device, choices=Choices(table=table)).fields[0]
        for table in ("setup", "plan", "both")
    }
    places = {table: field.verdict.nearest for table, field in found.items()}
    assert places["setup"] is not None
    assert places["plan"] is not None
    assert found["setup"].labels(places["setup"]) == ("gantry/block", "couch/rest")
    assert found["plan"].labels(places["plan"]) == ("gantry/block", "couch/rest")
    # On the isocentre's side of the block, at x = 410 mm, the device ends at 240 + 30 mm.
    assert places["plan"].clearance_mm == pytest.approx(140.0, abs=0.2)
    assert "moved along" in found["plan"].table_as


def test_rows_say_which_table_their_figures_are_for(check: Check) -> None:
    differs = table_arc(TableTopLateralPosition=-330.0)
    report = check(static("none", 0.0), differs)
    none, both = report.fields
    assert (none.table_as, none.table_settled) == ("", True)
    assert both.table_as in ("the table where the plan has it", "the table where the set-up has it")
    assert not both.table_settled
    assert report.moves[0].table_as
    values = json.loads(check_json(report, provenance_of(report.scene, Options(), datetime.date(2026, 3, 4))))
    assert [field["table_settled"] for field in values["fields"]] == [True, False]
    assert values["fields"][1]["table_as"] == both.table_as
    assert values["moves"][0]["table_as"] == report.moves[0].table_as
    rows = dry_run(report)
    assert any("no instruction" in remark for remark in rows.fields[1].remarks)
    assert not any("mm" in step for step in rows.moves[0].steps if step.startswith("table"))


def test_table_positions_beyond_the_travel_are_no_travel(check: Check) -> None:
    report = check(table_arc(TableTopVerticalPosition=900.0))
    assert report.fields[0].state is State.NO_TRAVEL
    assert "vertical" in reason_of(report)


def test_table_positions_that_do_not_follow_the_isocentres_are_named(check: Check) -> None:
    beams = [table_arc(), table_arc(IsocenterPosition=[0.0, 0.0, -150.0])]
    beams[1].BeamName = "second"
    assert any("40.0 mm" in note for note in check(*beams, choices=Choices(table="plan")).notes)
    fitting = [table_arc(), table_arc(TableTopLongitudinalPosition=20.0, IsocenterPosition=[0.0, 0.0, -150.0])]
    fitting[1].BeamName = "second"
    assert check(*fitting, choices=Choices(table="plan")).notes == ()


# Tilt, collimator, machine


def test_tilt_and_collimator_are_the_plans(check: Check) -> None:
    setup = SETUP.replace('collimator_deg = "any"', "collimator_deg = 10").replace("roll_deg = 0", "roll_deg = 1")
    report = check(static("a", 0.0, TableTopPitchAngle=358.0, BeamLimitingDeviceAngle=330.0), setup=setup)
    taken = report.fields[0].scene.setup
    assert (taken.pitch_deg, taken.roll_deg, taken.collimator_deg) == (-2.0, 1.0, 330.0)
    told = notes_of(report)
    assert "pitch: -2 deg in the plan" in told
    assert "roll: none in the plan, 1 deg" in told
    assert "collimator: 330 deg in the plan, which is taken, 10" in told


def test_an_eccentric_angle_is_taken_on_the_axis_travel(tmp_path: Path) -> None:
    room = ROOM.replace("[couch.pitch]", "[couch.eccentric]\ntravel_deg = [-20, 20]\n[couch.pitch]")
    plan = write_plan(tmp_path / "plan.dcm", [static("a", 0.0, TableTopEccentricAngle=350.0)])
    report = check_plan(read_setup(write_setup(tmp_path, room=room)), read_fields(plan), Options())
    assert report.fields[0].scene.setup.eccentric_deg == -10.0
    assert report.fields[0].state is State.PERMITTED
    assert "eccentric: 350 deg in the plan" in notes_of(report)


def test_a_collimator_that_turns_in_a_field_counts_as_all_that_it_sweeps(check: Check) -> None:
    first = point(0.0, 0.0, GantryRotationDirection="CW", BeamLimitingDeviceAngle=0.0)
    report = check(beam("a", [first, point(90.0, None, BeamLimitingDeviceAngle=90.0)]))
    assert report.fields[0].scene.setup.collimator_deg is None


def test_a_plan_for_another_machine_is_a_doubt(check: Check) -> None:
    other, near = static("a", 0.0), static("b", 0.0)
    other.SourceAxisDistance, near.SourceAxisDistance = 800.0, 1005.0
    report = check(other, near)
    assert report.fields[0].state is State.UNPROVED
    assert "another machine" in reason_of(report)
    assert report.fields[1].state is State.PERMITTED
    assert "1005" in notes_of(report, 1)


# What is fitted


def with_applicator(name: str) -> Dataset:
    item = Dataset()
    item.ApplicatorID, item.ApplicatorType = name, "ELECTRON_SQUARE"
    found = static("electrons", 0.0)
    found.RadiationType = "ELECTRON"
    found.ApplicatorSequence = [item]
    return found


def test_an_applicator_is_found_by_its_name(check: Check) -> None:
    report = check(with_applicator("ELECTRON_APPLICATOR_15"), setup=SETUP + '\n[[device]]\nname = "bolus"\n' + BOX)
    assert report.fields[0].scene.setup.fitted == ("electron applicator 15",)
    assert report.fields[0].state is not State.UNPROVED
    assert "fitted: 'electron applicator 15'" in notes_of(report)


BOX = 'shape = "box"\nsize_mm = [100, 100, 10]\ncentre_mm = [0, -500, 5]\n'


def test_an_applicator_that_is_not_found_is_a_doubt_until_somebody_says_what_it_is(check: Check) -> None:
    beams = [with_applicator("A15")]
    report = check(*beams)
    assert report.fields[0].state is State.UNPROVED
    assert "'A15'" in reason_of(report)
    assert "'electron applicator 15', 'cone'" in reason_of(report)
    for words, fitted in ((("cone",), ("cone",)), (("none",), ()), ((), ())):
        for name in ("electrons", "1", "all"):
            said = check(*beams, choices=Choices(fits={name: words}))
            assert said.fields[0].scene.setup.fitted == fitted
            assert said.permitted


def test_what_cannot_be_fitted_and_fields_that_are_not_there_are_faults(check: Check) -> None:
    with pytest.raises(BadInput) as caught:
        check(static("a", 0.0), choices=Choices(fits={"1": ("conee",), "b": ("cone",)}))
    told = str(caught.value)
    assert "did you mean 'cone'" in told
    assert "no field 'b'" in told


def test_what_the_set_up_has_fitted_and_the_plan_does_not_name_is_told(check: Check) -> None:
    setup = SETUP.replace("[fitted]", '[fitted]\naccessories = ["cone"]')
    report = check(static("a", 0.0), setup=setup)
    assert "the set-up has 'cone' fitted, the plan names nothing" in notes_of(report)
    assert report.fields[0].scene.setup.fitted == ("cone",)


def test_ions_with_a_snout_are_permitted_once_its_arm_is_told(check: Check) -> None:
    ions = static("ions", 0.0, SnoutPosition=200.0)
    assert "snout" in reason_of(check(ions, ions=True))
    for words in (("none",), (), ("cone",)):
        assert "snout" in reason_of(check(ions, ions=True, choices=Choices(fits={"1": words})))
    told = check(ions, ions=True, choices=Choices(fits={"all": ("kV source=extended",)}))
    assert told.permitted
    assert "the plan has the snout 200 mm from the isocentre; 'kV source' at 'extended' was said" in notes_of(told)


def test_what_is_said_against_the_plans_own_words_is_told(check: Check) -> None:
    said = check(with_applicator("electron applicator 15"), choices=Choices(fits={"1": ("cone",)}))
    assert "the plan names the applicator 'electron applicator 15'; 'cone' was said to be fitted" in notes_of(said)
    same = check(with_applicator("cone"), choices=Choices(fits={"1": ("cone",)}))
    assert "was said" not in notes_of(same)


def test_an_arm_that_is_said_leaves_the_plans_applicator_fitted(check: Check) -> None:
    report = check(with_applicator("cone"), choices=Choices(fits={"1": ("kV source=extended",)}))
    assert report.fields[0].scene.setup.fitted == ("cone",)
    doubted = check(with_applicator("A15"), choices=Choices(fits={"1": ("kV source=extended",)}))
    assert "'A15'" in reason_of(doubted)


@pytest.mark.parametrize(
    ("names", "fits", "words"),
    [
        (("a", "1"), {"1": ("cone",)}, "'1', which is the name of one field"),
        (("a", "all"), {"all": ("cone",)}, "'all', which is the name of one field"),
        (("a", "b"), {"1": ("cone",), "a": ("none",)}, "'1' and 'a', which are one field"),
    ],
)
def test_a_name_that_may_mean_two_fields_is_refused(
    names: tuple[str, str], fits: dict[str, tuple[str, ...]], words: str, check: Check
) -> None:
    with pytest.raises(BadInput) as caught:
        check(*(static(name, 0.0) for name in names), choices=Choices(fits=fits))
    assert words in str(caught.value)


def test_set_up_fields_are_marked(check: Check) -> None:
    image = static("image", 90.0)
    image.TreatmentDeliveryType = "SETUP"
    report = check(image, static("a", 0.0))
    assert [field.field.is_setup for field in report.fields] == [True, False]
    assert "a set-up field" in notes_of(report)


# Against an independent script


def compared(setup: Path, plan: Path, report: CheckReport, step_deg: float) -> list[tuple[State, Opinion]]:
    found = opinions(setup, plan, step_deg=step_deg)
    return list(zip([field.state for field in report.fields], found, strict=True))


def assert_agreement(pairs: Sequence[tuple[State, Opinion]], report: CheckReport) -> None:
    """Contact and short are the same; nothing permitted is short within the tolerances; what is unproved all but is."""
    for (state, opinion), field in zip(pairs, report.fields, strict=True):
        on_path = {State.CONTACT: "contact", State.SHORT: "short"}.get(state, "clear")
        assert on_path == opinion.state, opinion
        nearest = field.verdict.nearest
        assert nearest is not None
        assert nearest.clearance_mm == pytest.approx(opinion.clearance_mm, abs=0.15)
        if state is State.PERMITTED:
            assert opinion.within_mm >= 0.0
            assert field.verdict.least_clearance_mm <= nearest.clearance_mm
        if state is State.UNPROVED:
            assert opinion.within_mm < 1.0


def test_verdicts_are_those_of_an_independent_script(tmp_path: Path) -> None:
    turning = {"PatientSupportRotationDirection": "CW", "BeamLimitingDeviceAngle": 0.0}
    beams = [
        static("ap", 0.0),
        static("couch 30", 70.0, 30.0),
        arc("couch 330", 100.0, 118.0, "CW", 330.0),
        arc("couch 90", 88.0, 80.0, "CC", 90.0),
        beam("couch arc", [point(110.0, 20.0, **turning), point(None, 340.0)]),
        arc("pitch", 110.0, 118.0, TableTopPitchAngle=2.0, TableTopRollAngle=359.0),
        arc("low isocentre", 118.0, 110.0, "CC", IsocenterPosition=[0.0, 60.0, -190.0]),
        arc("high isocentre", 118.0, 110.0, "CC", IsocenterPosition=[150.0, -120.0, -190.0]),
        table_arc(TableTopLateralPosition=-120.0, TableTopVerticalPosition=-230.0, BeamLimitingDeviceAngle=90.0),
    ]
    setup, plan = write_setup(tmp_path), write_plan(tmp_path / "plan.dcm", beams)
    report = check_plan(read_setup(setup), read_fields(plan), Options(), Choices(table="plan"))
    pairs = compared(setup, plan, report, step_deg=0.1)
    assert_agreement(pairs, report)
    assert len({state for state, _ in pairs}) >= 2


def test_random_fields_never_permit_what_an_independent_script_finds_short(tmp_path: Path) -> None:
    rng = np.random.default_rng(8)
    # A wider table, so that much of it is short.
    room = re.sub(r"size_mm = \[500, 2000, 60\]", "size_mm = [700, 2000, 60]", ROOM)
    beams = []
    for k in range(12):
        couch = float(rng.choice([0.0, 30.0, 90.0, 330.0]))
        start = float(np.round(rng.uniform(60.0, 150.0), 1))
        isocentre = [float(x) for x in np.round(np.array(ISOCENTRE) + rng.uniform(-80.0, 80.0, 3), 1)]
        tilt = float(np.round(rng.uniform(-3.0, 3.0), 1))
        turned = float(rng.choice([0.0, 90.0]))
        stated = {"IsocenterPosition": isocentre, "TableTopPitchAngle": tilt, "BeamLimitingDeviceAngle": turned}
        beams.append(arc(f"{k}", start, start + 2.0, "CW", couch, **stated))
    setup, plan = write_setup(tmp_path, room=room), write_plan(tmp_path / "plan.dcm", beams)
    report = check_plan(read_setup(setup), read_fields(plan), Options())
    pairs = compared(setup, plan, report, step_deg=0.5)
    assert_agreement(pairs, report)
    states = [state for state, _ in pairs]
    assert min(states.count(State.PERMITTED), states.count(State.CONTACT)) >= 2
