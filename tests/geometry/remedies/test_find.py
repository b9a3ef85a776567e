"""What stands in the way, and what would help: against formulas, brute force and a distance library (coal or fcl)."""

import math
from collections.abc import Callable
from dataclasses import replace
from functools import cache
from itertools import product
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from app.files.setup_file import read_setup
from geometry.assess import Options, Pose, assess, assess_pose
from geometry.errors import Cancelled
from geometry.frames import source_direction_dicom
from geometry.machine import Accessory, Arm, ArmPosition, Axis, Mount, Part
from geometry.remedies.angles import clamped_deg
from geometry.remedies.find import Remedy, RemedyKind, find_remedies, obstacles_at
from geometry.remedies.shift import shifts_of
from geometry.remedies.trials import smallest
from geometry.scene import build_scene
from geometry.setup import OnTable, Setup, Surface
from geometry.solids import Box
from geometry.states import State
from tests.geometry.small_rooms import CORNER_DEG, REQUIRED_MM, half_width_deg, post, setup_with
from tests.reference.distances import LeastDistances, hull_distance_mm
from tests.reference.poses import asked, standing_parts

SAMPLES = Path(__file__).resolve().parents[3] / "sample_rooms"
CASES = [
    ("c_arm_wide/lung_imaging.setup.toml", 45.0, -60.0),
    ("c_arm_close/electron_boost.setup.toml", 45.0, 10.0),
    ("cobalt/spine_prone.setup.toml", 45.0, -60.0),
    ("closed_bore/chest_wing_board.setup.toml", 0.0, 0.0),
]
OPTIONS = Options()


@cache
def found_for(name: str, gantry_deg: float, couch_deg: float) -> tuple[Remedy, ...]:
    return tuple(find_remedies(read_setup(SAMPLES / name), gantry_deg, couch_deg, OPTIONS))


def of_kind(setup: Setup, gantry_deg: float, couch_deg: float, kind: RemedyKind) -> list[Remedy]:
    return [remedy for remedy in find_remedies(setup, gantry_deg, couch_deg, OPTIONS) if remedy.kind is kind]


def couch_tolerance_deg(setup: Setup) -> float:
    """Return the couch's readout tolerance, deg: 0 if it cannot turn."""
    turntable = setup.room.couch.turntable
    return OPTIONS.couch_tolerance_deg if turntable.high > turntable.low else 0.0


def block(name: str, x_mm: float, size_mm: float = 20.0) -> Part:
    """Return a device: a cube on the table, its face away from the middle at `x_mm`."""
    return Part(name, Mount.COUCH, Box((size_mm,) * 3, (x_mm - size_mm / 2.0, 0.0, 0.0)), kind="device")


@pytest.mark.parametrize(("name", "gantry_deg", "couch_deg"), CASES)
def test_every_remedy_is_permitted_and_clear_in_the_librarys_eyes_too(
    name: str, gantry_deg: float, couch_deg: float
) -> None:
    found = found_for(name, gantry_deg, couch_deg)
    assert found
    for remedy in found:
        pose = assess_pose(remedy.setup, remedy.gantry_deg, remedy.couch_deg, OPTIONS)
        assert pose.state is State.PERMITTED is remedy.state
        assert (pose.clearance_mm, pose.slack_mm) == (remedy.clearance_mm, remedy.slack_mm)
        library = LeastDistances(remedy.setup)
        # A couch that cannot turn has no tolerance.
        around = couch_tolerance_deg(remedy.setup)
        for g, c in [(0.0, 0.0), *product((-1.0, 1.0), (-around, around))]:
            assert library.at(remedy.gantry_deg + g, remedy.couch_deg + c).slack_mm >= 0.0, remedy.text


@pytest.mark.parametrize(("name", "gantry_deg", "couch_deg"), CASES)
def test_every_pair_that_is_short_is_named_and_no_other(name: str, gantry_deg: float, couch_deg: float) -> None:
    setup = read_setup(SAMPLES / name)
    found = obstacles_at(build_scene(setup), gantry_deg, couch_deg)
    said = {(o.machine_part.label, o.couch_part.label): o.clearance_mm for o in found}
    parts = [part for part in standing_parts(setup) if part.label in {label for pair in said for label in pair}]
    # All pairs of the parts that are named anywhere.
    for first, second in product(parts, parts):
        if (first.side, second.side) in {("gantry", "couch"), ("room", "couch")} and asked(first, second, setup):
            true = min(
                hull_distance_mm(a, b)
                for a in first.at(gantry_deg, couch_deg)
                for b in second.at(gantry_deg, couch_deg)
            )
            if (first.label, second.label) in said:
                assert said[first.label, second.label] == pytest.approx(true, abs=1e-6)
            else:
                scene = build_scene(setup)
                by_label = {part.label: part for part in scene.parts}
                assert true >= scene.required_mm(by_label[first.label], by_label[second.label])
    slack = assess_pose(setup, gantry_deg, couch_deg, OPTIONS).slack_mm
    assert -found[0].missing_mm == pytest.approx(slack)
    assert [o.missing_mm for o in found] == sorted((o.missing_mm for o in found), reverse=True)


def test_a_permitted_pose_has_no_obstacle_and_needs_no_remedy() -> None:
    setup = setup_with([post("post", 90.0, 560.0)])
    assert obstacles_at(build_scene(setup), 0.0, 0.0) == ()
    assert list(find_remedies(setup, 0.0, 0.0)) == []


@pytest.mark.parametrize("sense", [1.0, -1.0])
def test_the_smallest_shift_leaves_none_smaller(sense: float) -> None:
    # The head's inner face stands at 450 mm. What is on the table at +X gets away from it when the patient goes to +X.
    setup = setup_with(devices=[block("block", 445.0)])
    pose = (90.0, 0.0)
    (remedy,) = (
        r for r in of_kind(setup, *pose, RemedyKind.SHIFT) if r.setup.on_table.lateral_mm > setup.on_table.lateral_mm
    )
    assert "to the patient's left" in remedy.text
    assert f"{remedy.size:g} mm" in remedy.text
    assert remedy.text.endswith("devices stay")
    assert remedy.setup.on_table.lateral_mm == setup.on_table.lateral_mm + remedy.size
    # 5 mm are there and 10 are required; the corners come 1 mm nearer within the tolerances.
    assert 5.0 + remedy.size - REQUIRED_MM == pytest.approx(1.0, abs=1.5)
    for size in range(1, int(remedy.size)):
        shifted = replace(setup, on_table=replace(setup.on_table, lateral_mm=setup.on_table.lateral_mm + size))
        assert assess_pose(shifted, *pose, OPTIONS).state is not State.PERMITTED
    opposite = replace(setup, on_table=replace(setup.on_table, lateral_mm=sense * remedy.size))
    assert (assess_pose(opposite, *pose, OPTIONS).state is State.PERMITTED) == (sense > 0.0)


def test_a_shift_cannot_help_against_the_patient_and_never_sinks_into_the_table() -> None:
    large = Surface(Box((900.0, 100.0, 100.0)), "invented")
    setup = replace(setup_with(), patient=large, on_table=OnTable(0.0, height_mm=0.0))
    assert of_kind(setup, 90.0, 0.0, RemedyKind.SHIFT) == []
    down = shifts_of(setup)[5]
    low = replace(setup_with(devices=[block("block", 445.0)]), on_table=OnTable(0.0, height_mm=7.0))
    assert all(r.setup.on_table.height_mm >= 0.0 for r in of_kind(low, 90.0, 0.0, RemedyKind.SHIFT))
    assert down.of(low, 7.0).on_table.height_mm == 0.0


@pytest.mark.parametrize(
    ("position", "plus", "minus"),
    [
        ("HFS", "left", "right"),
        ("HFP", "right", "left"),
        ("FFS", "right", "left"),
        ("FFP", "left", "right"),
        ("HFDR", "back", "front"),
        ("HFDL", "front", "back"),
        ("FFDR", "front", "back"),
        ("FFDL", "back", "front"),
    ],
)
def test_a_shift_across_is_told_in_the_patients_own_sides(position: str, plus: str, minus: str) -> None:
    # Which of the patient's axes table-top +X is: arXiv:1406.0014, table 1.
    to_plus, to_minus = shifts_of(replace(setup_with(), patient_position=position))[:2]
    assert to_plus.words == f"to the patient's {plus} (table-top +X)"
    assert to_minus.words == f"to the patient's {minus} (table-top −X)"


def test_a_travel_that_ends_is_reached_by_a_shift() -> None:
    setup = setup_with()
    couch = replace(setup.room.couch, longitudinal=Axis(-4000.0, 0.0))
    room = replace(setup.room, couch=couch)
    # The isocentre lies 50 mm from the head end: T = 50 is 50 mm beyond the travel.
    beyond = replace(setup, room=room)
    excess = -min(0.0, 0.0 - float(build_scene(beyond).couch.T_mm[1]))
    assert build_scene(beyond).no_travel
    found = of_kind(beyond, 0.0, 0.0, RemedyKind.SHIFT)
    assert [remedy.size for remedy in found] == [math.ceil(excess)]
    assert not build_scene(found[0].setup).no_travel


def test_a_device_an_accessory_and_an_arm_in_the_way_go_one_by_one() -> None:
    blocked = setup_with(devices=[block("block", 445.0), block("other", 200.0)])
    (remedy,) = of_kind(blocked, 90.0, 0.0, RemedyKind.DEVICE)
    assert remedy.text == "Without block"
    assert [device.name for device in remedy.setup.devices] == ["other"]

    tip = Part("tip", Mount.GANTRY, Box((20.0, 20.0, 20.0), (0.0, 0.0, 60.0)), accessory="long tip")
    panel = Part("panel", Mount.GANTRY, Box((200.0, 20.0, 20.0), (0.0, 0.0, -60.0)), arm="imager")
    plain = setup_with()
    positions = (
        ArmPosition("out"),
        ArmPosition("in", shift_mm=(0.0, 0.0, -300.0)),
        ArmPosition("near", (0.0, 0.0, -5.0)),
    )
    room = replace(
        plain.room,
        parts=(*plain.room.parts, tip, panel),
        accessories=(Accessory("long tip"), Accessory("unused")),
        arms=(Arm("imager", positions),),
    )
    (fitted,) = of_kind(
        replace(plain, room=room, fitted=("unused", "long tip"), arm_positions=(("imager", "in"),)),
        0.0,
        0.0,
        RemedyKind.ACCESSORY,
    )
    assert fitted.text == "Long tip off"
    assert fitted.setup.fitted == ("unused",)
    (arm,) = of_kind(replace(plain, room=room), 0.0, 0.0, RemedyKind.ARM)
    assert arm.text == "Imager in"
    assert dict(arm.setup.arm_positions) == {"imager": "in"}


def test_an_arm_slides_no_farther_than_it_must() -> None:
    snout = Part("snout", Mount.GANTRY, Box((20.0, 20.0, 20.0), (0.0, 0.0, 50.0)), arm="snout")
    plain = setup_with()
    arm = Arm("snout", (), direction=(0.0, 0.0, 1.0), travel_mm=(0.0, 300.0))
    setup = replace(
        plain, room=replace(plain.room, parts=(*plain.room.parts, snout), arms=(arm,)), arm_positions=(("snout", 12.0),)
    )
    (remedy,) = of_kind(setup, 0.0, 0.0, RemedyKind.ARM)
    assert remedy.text == f"Snout by +{remedy.size:g} mm, to {12.0 + remedy.size:g} mm"
    # 2 mm are there, 10 are required; within 1 deg corners come a little nearer.
    assert remedy.size == pytest.approx(9.0, abs=1.0)
    less = replace(setup, arm_positions=(("snout", 12.0 + remedy.size - 1.0),))
    assert assess_pose(less, 0.0, 0.0, OPTIONS).state is not State.PERMITTED


@pytest.mark.parametrize("collimator_deg", [0.0, None])
def test_the_collimator_turns_as_little_as_will_do(collimator_deg: float | None) -> None:
    # A bar across the beam that clears a tall post beside the isocentre once it is turned away from it.
    bar = Part("bar", Mount.COLLIMATOR, Box((600.0, 20.0, 20.0), (0.0, 0.0, 100.0)))
    pole = Part("pole", Mount.FIXED, Box((20.0, 20.0, 300.0), (250.0, 0.0, 0.0)))
    plain = setup_with()
    setup = replace(
        plain, room=replace(plain.room, parts=(*plain.room.parts, bar, pole)), collimator_deg=collimator_deg
    )
    (remedy,) = of_kind(setup, 0.0, 0.0, RemedyKind.COLLIMATOR)
    assert remedy.size == 15.0
    assert remedy.setup.collimator_deg in {15.0, 345.0}
    assert ("not any angle" in remedy.text) == (collimator_deg is None)


def test_the_other_pair_has_the_same_direction() -> None:
    setup = setup_with([post("post", 30.0, 560.0)], turntable=Axis(-185.0, 185.0))
    (remedy,) = of_kind(setup, 30.0, 10.0, RemedyKind.OTHER_PAIR)
    assert remedy.setup is setup
    assert (remedy.gantry_deg, remedy.couch_deg) == (-30.0, -170.0)
    assert source_direction_dicom(-30.0, -170.0) == pytest.approx(source_direction_dicom(30.0, 10.0))
    narrow = setup_with([post("post", 30.0, 560.0)])
    assert of_kind(narrow, 30.0, 10.0, RemedyKind.OTHER_PAIR) == []


@settings(max_examples=12)
@given(at_deg=st.floats(-150.0, 150.0), off_deg=st.floats(-1.0, 1.0))
def test_the_nearest_gantry_angle_is_the_next_whole_one_clear_of_the_post(at_deg: float, off_deg: float) -> None:
    setup = setup_with([post("post", at_deg, 560.0)])
    gantry_deg = at_deg + off_deg
    turned = [r for r in of_kind(setup, gantry_deg, 0.0, RemedyKind.ANGLES) if r.couch_deg == 0.0]
    # Clear from here on, the tolerance included.
    half = CORNER_DEG + half_width_deg(560.0) + OPTIONS.gantry_tolerance_deg
    ends = math.floor(at_deg - half), math.ceil(at_deg + half)
    expected = min(abs(end - gantry_deg) for end in ends)
    assert len(turned) == 1
    # A proof to 0.25 deg may need the next one.
    assert expected - 1e-6 <= turned[0].size <= expected + 1.0 + 1e-6
    assert "Gantry by" in turned[0].text


def test_with_an_assessment_the_nearest_of_both_is_the_nearest_of_its_permitted_angles() -> None:
    setup = read_setup(SAMPLES / CASES[0][0])
    coarse = replace(OPTIONS, gantry_step_deg=2.0, couch_step_deg=2.0, edge_deg=0.5)
    assessment = assess(setup, coarse)
    found = [r for r in find_remedies(setup, 44.0, -60.0, coarse, assessment) if r.kind is RemedyKind.ANGLES]
    rows, columns = np.nonzero(assessment.state == 4)
    ways = np.hypot(assessment.map.gantry_deg[columns] - 44.0, assessment.map.couch_deg[rows] + 60.0)
    assert min(r.size for r in found) <= ways.min() + 1e-9


def test_angles_beyond_the_travel_are_led_back_to_it() -> None:
    (remedy,) = find_remedies(setup_with(), 0.0, 120.0)
    assert (remedy.gantry_deg, remedy.couch_deg) == (0.0, 95.0)
    assert "within the travel" in remedy.text


@pytest.mark.parametrize(
    ("angle_deg", "expected"), [(10.0, 10.0), (-184.0, -184.0), (350.0, -10.0), (100.0, 95.0), (-530.0, -170.0)]
)
def test_an_angle_is_put_on_the_travel(angle_deg: float, expected: float) -> None:
    travel = Axis(-185.0, 95.0)
    assert clamped_deg(travel, angle_deg) == expected


def lipschitz(knots: list[float]) -> Callable[[float], float]:
    """Return a function through slacks 10 mm apart that changes by no more than 1 mm a mm."""
    slacks = [knots[0]]
    for knot in knots[1:]:
        slacks.append(slacks[-1] + min(max(knot - slacks[-1], -10.0), 10.0))
    return lambda size: float(np.interp(size, np.arange(len(slacks)) * 10.0, slacks))


@given(st.lists(st.floats(-60.0, 30.0), min_size=2, max_size=12))
def test_the_smallest_change_is_the_first_that_any_step_of_1_mm_finds(knots: list[float]) -> None:
    slack = lipschitz([-abs(knots[0]) - 1.0, *knots[1:]])
    pose = object()

    def tried(size: float) -> Pose | None:
        return pose if slack(size) >= 0.0 else None  # type: ignore[return-value]

    most = 10.0 * (len(knots) - 1)
    found = smallest(slack, tried, most)
    first = next((size for size in range(1, int(most) + 1) if slack(size) >= 0.0), None)
    assert (found is None) == (first is None)
    assert found is None or found[0] == first


def test_what_cannot_be_proved_is_never_found_and_ends() -> None:
    tries: list[float] = []

    def tried(size: float) -> Pose | None:
        tries.append(size)
        return None

    assert smallest(lambda _: 1.0, tried, 1e9) is None
    assert len(tries) < 20
    assert smallest(lambda _: math.nan, tried, 50.0) is None


class Stopping:
    """A progress that stops after the first report."""

    def __init__(self) -> None:
        self.reported = 0

    def report(self, fraction: float, message: str) -> None:
        assert 0.0 <= fraction <= 1.0
        assert message
        self.reported += 1

    def cancelled(self) -> bool:
        return self.reported > 0


def test_it_can_be_stopped() -> None:
    setup = setup_with(devices=[block("block", 445.0)])
    with pytest.raises(Cancelled):
        list(find_remedies(setup, 90.0, 0.0, progress=Stopping()))


def test_remedies_come_as_they_are_found() -> None:
    setup = setup_with(devices=[block("block", 445.0)])
    first = next(find_remedies(setup, 90.0, 0.0))
    assert first.state is State.PERMITTED
