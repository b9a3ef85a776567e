"""From a set-up to placed pieces, against the reference's own kinematics."""

import math
from dataclasses import replace

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.spatial import ConvexHull
from scipy.spatial.transform import Rotation

from geometry.errors import GeometryError
from geometry.machine import Arm, ArmPosition, Axis, Couch, Mount, Part, Room
from geometry.pieces import ConvexPiece
from geometry.scene import Motion, Scene, ScenePart, Side, build_scene, with_required
from geometry.setup import Component, Isocentre, OnTable, Required, Setup, Surface
from geometry.solids import Box, Cylinder
from tests.reference.poses import placement_of, standing_parts
from tests.reference.rooms import random_setup

Array = NDArray[np.float64]

AXIS_OF = {Motion.GANTRY: "Y", Motion.TURNTABLE: "Z"}


def outside_mm(points: Array, hull_points: Array) -> float:
    """Return by how much points stand out of the hull of others; 0 or less for none."""
    planes = ConvexHull(hull_points).equations
    return float((points @ planes[:, :3].T + planes[:, 3]).max())


def same_hull(piece: ConvexPiece, points: Array) -> bool:
    return outside_mm(piece.vertices, points) < 1e-7 and outside_mm(points, piece.vertices) < 1e-7


def part_named(scene: Scene, name: str) -> ScenePart:
    return next(part for part in scene.parts if part.name == name)


@pytest.mark.parametrize("seed", range(12))
def test_every_piece_stands_where_the_reference_has_it(seed: int) -> None:
    rng = np.random.default_rng(seed)
    setup = random_setup(rng)
    scene, reference = build_scene(setup), standing_parts(setup)
    gantry_deg, couch_deg = rng.uniform(-180, 180, 2)
    assert [part.label for part in scene.parts] == [part.label for part in reference]
    for part, standing in zip(scene.parts, reference, strict=True):
        assert part.kind == standing.kind
        assert len(part.pieces) == len(standing.pieces)
        turn = Rotation.identity()
        if part.motion in AXIS_OF:
            angle_deg = gantry_deg if part.motion is Motion.GANTRY else couch_deg
            turn = Rotation.from_euler(AXIS_OF[part.motion], angle_deg, degrees=True)
        matrix = np.eye(4)
        matrix[:3, :3] = turn.as_matrix()
        for piece, points in zip(part.pieces, standing.at(gantry_deg, couch_deg), strict=True):
            assert same_hull(piece.placed(matrix), points)


@pytest.mark.parametrize("seed", range(6))
def test_where_the_stages_go(seed: int) -> None:
    setup = random_setup(np.random.default_rng(100 + seed))
    scene, placement = build_scene(setup), placement_of(setup)
    assert scene.p_isocentre_tabletop == pytest.approx(placement.isocentre, abs=1e-9)
    assert scene.couch.T_mm == pytest.approx(placement.table, abs=1e-9)
    assert scene.no_travel == ()


# A plain room for what can be told by hand: one part on each mount, no facets.

FREE = Axis(-1000.0, 1000.0)
COUCH = Couch(Axis(-90, 90), Axis(-5, 5), FREE, FREE, FREE, Axis(-3, 3), Axis(-3, 3), head_end_mm=500.0)
SLIDE = Arm("slide", (), direction=(0.0, 0.0, -2.0), travel_mm=(10.0, 60.0))
SWING = Arm(
    "swing",
    (ArmPosition("parked"), ArmPosition("out", (0.0, 0.0, 5.0), "x", 90.0, (0.0, 100.0, 0.0))),
)
PARTS = (
    Part("head", Mount.GANTRY, Box((100.0, 100.0, 100.0), (0.0, 0.0, 600.0))),
    Part("slider", Mount.GANTRY, Box((10.0, 10.0, 10.0), (0.0, 0.0, 400.0)), arm="slide"),
    Part("panel", Mount.GANTRY, Box((10.0, 20.0, 30.0), (0.0, 100.0, -400.0)), arm="swing"),
    Part("cone", Mount.COLLIMATOR, Box((40.0, 40.0, 90.0), (30.0, 0.0, 350.0)), accessory="cone"),
    Part("table", Mount.COUCH, Box((500.0, 1000.0, 40.0), (0.0, 0.0, -20.0))),
    Part("wall", Mount.FIXED, Box((100.0, 2000.0, 2000.0), (1500.0, 0.0, 0.0))),
)
PATIENT = Surface(Box((300.0, 200.0, 900.0), (0.0, 0.0, 0.0)), "a box", (("navel", (0.0, -100.0, 50.0)),))


def plain(**changes: object) -> Setup:
    """Return the plain set-up; `changes` to its fields."""
    room = Room("plain", True, None, 1000.0, Axis(-180, 180), FREE, COUCH, PARTS, (SLIDE, SWING))
    setup = Setup(
        "plain",
        room,
        PATIENT,
        "HFS",
        OnTable(100.0, 20.0, 30.0),
        Isocentre("navel", (5.0, 10.0, -15.0)),
        Required(20.0, "plain"),
    )
    return replace(setup, **changes)


def middle_of(scene: Scene, name: str) -> Array:
    return np.concatenate([piece.vertices for piece in part_named(scene, name).pieces]).mean(axis=0)


def test_the_patient_lies_where_the_tape_measure_says() -> None:
    # By hand: head-first supine, the box reaches 450 up and down from its middle, 100 to front and back. Its top is
    # 100 from the head end at 500, its lowest point 30 above the table, its mid-line at 20.
    scene = build_scene(plain())
    # The isocentre: navel (0, -100, 50), 5 to the left, 10 to the head, 15 to the back, of the middle.
    middle = np.array([20.0, 500.0 - 100.0 - 450.0, 30.0 + 100.0])
    isocentre = middle + np.array([5.0, 50.0 + 10.0, 100.0 - 15.0])
    assert scene.p_isocentre_tabletop == pytest.approx(isocentre, abs=1e-9)
    assert scene.couch.T_mm == pytest.approx(-isocentre, abs=1e-9)
    assert middle_of(scene, "patient") == pytest.approx(middle - isocentre, abs=1e-9)
    assert middle_of(scene, "table") == pytest.approx([0.0, 0.0, -20.0] - isocentre, abs=1e-9)
    assert part_named(scene, "patient").side is Side.COUCH


def test_only_fitted_accessories_are_there() -> None:
    assert "cone" not in {part.name for part in build_scene(plain()).parts}
    assert "cone" in {part.name for part in build_scene(plain(fitted=("cone",))).parts}


@pytest.mark.parametrize("collimator_deg", [0.0, 30.0, 90.0, -77.0])
def test_a_stated_collimator_angle_turns_about_z(collimator_deg: float) -> None:
    scene = build_scene(plain(fitted=("cone",), collimator_deg=collimator_deg))
    angle = math.radians(collimator_deg)
    expected = [30.0 * math.cos(angle), 30.0 * math.sin(angle), 350.0]
    assert middle_of(scene, "cone") == pytest.approx(expected, abs=1e-9)


def test_any_collimator_angle_counts_as_every_angle() -> None:
    whole_turn = part_named(build_scene(plain(fitted=("cone",))), "cone")
    around = np.concatenate([piece.vertices for piece in whole_turn.pieces])
    for collimator_deg in np.linspace(-180.0, 180.0, 145):
        at_angle = part_named(build_scene(plain(fitted=("cone",), collimator_deg=float(collimator_deg))), "cone")
        for piece in at_angle.pieces:
            assert outside_mm(piece.vertices, around) <= 1e-9
    # The farthest corner is at (50, 20): facets stand out by no more than what is stated.
    assert np.hypot(around[:, 0], around[:, 1]).max() <= math.hypot(50.0, 20.0) + whole_turn.excess_mm + 1e-9
    assert 0.0 < whole_turn.excess_mm <= 0.5


@pytest.mark.parametrize("seed", range(4))
def test_any_collimator_angle_holds_every_angle_of_random_parts(seed: int) -> None:
    setup = random_setup(np.random.default_rng(300 + seed))
    collimator = {part.name for part in setup.room.parts if part.mount is Mount.COLLIMATOR}
    any_angle = build_scene(replace(setup, collimator_deg=None, fitted=("cone",)))
    planes = {
        name: [ConvexHull(piece.vertices).equations for piece in part_named(any_angle, name).pieces]
        for name in collimator
    }
    for collimator_deg in np.random.default_rng(seed).uniform(-180, 180, 8):
        scene = build_scene(replace(setup, collimator_deg=float(collimator_deg), fitted=("cone",)))
        for name in collimator:
            for piece in part_named(scene, name).pieces:
                depth = [(piece.vertices @ p[:, :3].T + p[:, 3]).max() for p in planes[name]]
                assert min(depth) <= 1e-7


def test_arms_stand_where_they_are_put() -> None:
    # By hand. Swung by 90 about X through (0, 100, 0), then lifted by 5: (0, 100, -400) goes to (0, 500, 5).
    parked, out = build_scene(plain()), build_scene(plain(arm_positions=(("swing", "out"), ("slide", 25.0))))
    assert middle_of(parked, "panel") == pytest.approx([0.0, 100.0, -400.0], abs=1e-9)
    assert middle_of(out, "panel") == pytest.approx([0.0, 500.0, 5.0], abs=1e-9)
    # A slide starts at the low end of its travel, along a direction of any length.
    assert middle_of(parked, "slider") == pytest.approx([0.0, 0.0, 390.0], abs=1e-9)
    assert middle_of(out, "slider") == pytest.approx([0.0, 0.0, 375.0], abs=1e-9)


@pytest.mark.parametrize(
    ("chosen", "message"),
    [
        (("swing", "outt"), "swing.*outt.*parked.*out"),
        (("swing", 10.0), "swing.*10.*named positions"),
        (("slide", 61.0), "slide.*61.*10.*60"),
        (("slide", 9.0), "slide.*9.*10.*60"),
        (("slide", math.nan), "slide.*nan.*10.*60"),
    ],
)
def test_an_arm_cannot_be_put_elsewhere(chosen: tuple[str, str | float], message: str) -> None:
    with pytest.raises(GeometryError, match=message):
        build_scene(plain(arm_positions=(chosen,)))


def test_an_isocentre_needs_a_known_place() -> None:
    with pytest.raises(GeometryError, match=r"landmark.*'chin'.*navel"):
        build_scene(plain(isocentre=Isocentre("chin")))
    with pytest.raises(GeometryError, match="isocentre"):
        build_scene(plain(isocentre=Isocentre(None)))


@pytest.mark.parametrize(
    ("changes", "named"),
    [
        # The table top's origin lies 25 right, 10 towards the head and 215 below the isocentre: see above.
        (
            {"on_table": OnTable(100.0, 1100.0, 30.0)},
            ["couch lateral = -1105.0 mm is 105.0 mm outside", "-1000 to 1000"],
        ),
        ({"on_table": OnTable(-1100.0, 20.0, 30.0)}, ["couch longitudinal = -1210.0 mm is 210.0 mm outside"]),
        ({"on_table": OnTable(100.0, 20.0, 1000.0)}, ["couch vertical = -1185.0 mm is 185.0 mm outside"]),
        ({"pitch_deg": 3.5}, ["couch pitch = 3.5 deg is 0.5 deg outside its travel -3 to 3"]),
        ({"roll_deg": -4.0}, ["couch roll = -4.0 deg is 1.0 deg outside its travel -3 to 3"]),
        ({"eccentric_deg": 6.0}, ["couch eccentric = 6.0 deg is 1.0 deg outside its travel -5 to 5"]),
    ],
)
def test_what_lies_beyond_the_travel_is_named_with_its_excess(changes: dict[str, object], named: list[str]) -> None:
    found = build_scene(plain(**changes)).no_travel
    assert len(found) == 1
    assert all(words in found[0] for words in named)


def test_every_stage_beyond_its_travel_is_named() -> None:
    found = build_scene(plain(pitch_deg=4.0, roll_deg=4.0, on_table=OnTable(100.0, 1500.0, 30.0))).no_travel
    assert [words.split(" =")[0] for words in found] == ["couch lateral", "couch pitch", "couch roll"]


def test_a_collimator_beyond_its_travel_is_named() -> None:
    setup = plain(collimator_deg=170.0)
    narrow = replace(setup, room=replace(setup.room, collimator=Axis(-165.0, 165.0)))
    assert [words.split(" =")[0] for words in build_scene(narrow).no_travel] == ["collimator"]
    assert build_scene(replace(narrow, collimator_deg=200.0)).no_travel == ()  # 200 is -160
    assert build_scene(replace(narrow, collimator_deg=None)).no_travel == ()


def test_the_very_end_of_a_travel_belongs_to_it() -> None:
    # T_x = -(lateral + 5): at lateral 995 the couch stands at its very end.
    assert build_scene(plain(on_table=OnTable(100.0, 995.0, 30.0), pitch_deg=3.0, roll_deg=0.0)).no_travel == ()
    assert build_scene(plain(on_table=OnTable(100.0, 995.01, 30.0))).no_travel != ()


def test_required_clearance_of_pairs() -> None:
    # By hand: 10 + 2 sqrt(3² + 4²) = 20 with the patient, 10 + 2 * 3 = 16 without.
    rule = Required(10.0, "by hand", 2.0, (Component("room", 3.0), Component("motion", 4.0, patient_only=True)))
    device = Part("board", Mount.COUCH, Cylinder(50.0, (0.0, 0.0, 10.0), (0.0, 0.0, 40.0)), kind="device")
    scene = build_scene(plain(required=rule, devices=(device,)))
    head, table = part_named(scene, "head"), part_named(scene, "table")
    assert scene.required_mm(head, table) == pytest.approx(16.0)
    for name in ("patient", "board"):
        assert scene.required_mm(head, part_named(scene, name)) == pytest.approx(20.0)
        assert scene.required_mm(part_named(scene, name), head) == pytest.approx(20.0)
    same = build_scene(with_required(scene.setup, 33.0, "one value"))
    assert {same.required_mm(head, part) for part in same.parts} == {33.0}
    assert same.setup.required.reason == "one value"


def test_excess_is_stated_part_by_part() -> None:
    scene = build_scene(
        plain(devices=(Part("tube", Mount.COUCH, Cylinder(80.0, (0, 0, 100), (0, 200, 100)), kind="device"),))
    )
    assert part_named(scene, "table").excess_mm == 0.0
    assert 0.0 < part_named(scene, "tube").excess_mm <= scene.setup.room.max_excess_mm
