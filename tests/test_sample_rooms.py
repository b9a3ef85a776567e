"""The invented rooms and set-ups that come with the program.

Ranges of dimensions: common practice in radiotherapy rooms, no source.
"""

from dataclasses import replace
from functools import cache
from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray

from app.files.room_file import read_room
from app.files.setup_file import read_setup
from geometry.errors import GeometryError
from geometry.machine import Axis, Room
from geometry.scene import Scene, ScenePart, Side, build_scene
from geometry.setup import Isocentre
from geometry.sweep import grid_deg, sweep

Array = NDArray[np.float64]

FOLDER = Path(__file__).parent.parent / "sample_rooms"
ROOMS = ["c_arm_close", "c_arm_wide", "closed_bore", "cobalt", "particle_snout"]
SETUPS = sorted(path.relative_to(FOLDER).as_posix() for path in FOLDER.glob("*/*.setup.toml"))
TURNING = [name for name in SETUPS if not name.startswith("closed_bore")]

# What a chart of these rooms may cost, told in pieces.
MOST_PIECES = {"gantry": 40, "couch": 30, "patient": 80, "device": 40, "room": 350}


@cache
def room_of(name: str) -> Room:
    return read_room(FOLDER / name / f"{name}.room.toml")


@cache
def scene_of(name: str) -> Scene:
    return build_scene(read_setup(FOLDER / name))


def first_scene_of(room: str) -> Scene:
    return scene_of(next(name for name in SETUPS if name.startswith(f"{room}/")))


def vertices_of(scene: Scene, *names: str) -> Array:
    """Return the vertices of the named parts, (n, 3), mm, in the system of their motion."""
    parts = [part for part in scene.parts if part.name in names]
    assert len(parts) == len(names), f"of {names} there are {[part.name for part in parts]}"
    return np.concatenate([piece.vertices for part in parts for piece in part.pieces])


def travel_of(axis: Axis) -> tuple[float, float]:
    return axis.low, axis.high


@cache
def level(scene: Scene) -> Scene:
    """Return the scene with a level table, so that its sizes can be read off the axes."""
    if scene.setup.pitch_deg == scene.setup.roll_deg == 0.0:
        return scene
    return build_scene(replace(scene.setup, pitch_deg=0.0, roll_deg=0.0))


def table_of(scene: Scene) -> Array:
    """Return the vertices of what the patient lies on, (n, 3), mm."""
    return vertices_of(scene, *(part.name for part in scene.parts if part.name in {"table top", "head extension"}))


# What there is


def test_the_rooms_are_these() -> None:
    assert sorted(path.name for path in FOLDER.iterdir() if path.is_dir()) == ROOMS


@pytest.mark.parametrize("room", ROOMS)
def test_a_room_is_a_demonstration_and_has_two_setups_or_more(room: str) -> None:
    found = room_of(room)
    assert found.demonstration
    assert found.survey is None
    assert found.name.startswith("Demonstration")
    assert sum(name.startswith(f"{room}/") for name in SETUPS) >= 2


@pytest.mark.parametrize("name", SETUPS)
def test_a_setup_is_a_demonstration_within_travel(name: str) -> None:
    scene = scene_of(name)
    assert scene.setup.demonstration
    assert scene.setup.room == room_of(Path(name).parent.name)
    assert scene.no_travel == ()


def test_setups_cover_what_the_rooms_are_there_to_show() -> None:
    setups = {name: scene_of(name).setup for name in SETUPS}
    assert {"c_arm_wide/head.setup.toml", "c_arm_wide/tall_heavy.setup.toml"} <= set(setups)
    assert any("electron applicator 15" in setup.fitted for setup in setups.values())
    extended = dict(setups["c_arm_wide/lung_imaging.setup.toml"].arm_positions)
    assert extended == {"portal imager": "extended", "kV source": "extended", "kV panel": "extended"}
    snouts = {dict(setup.arm_positions).get("snout") for setup in setups.values()}
    assert any(isinstance(slide, float | int) and slide > 0 for slide in snouts)
    assert {setup.patient_position for setup in setups.values()} >= {"HFS", "HFP"}
    assert any(setup.pitch_deg != 0.0 and setup.roll_deg != 0.0 for setup in setups.values())


# Dimensions


@pytest.mark.parametrize("room", ROOMS)
def test_travel_is_of_common_size(room: str) -> None:
    found = room_of(room)
    couch = found.couch
    if room == "particle_snout":
        assert found.gantry.high - found.gantry.low > 180.0
    else:
        assert -185.0 <= found.gantry.low <= -180.0
        assert 180.0 <= found.gantry.high <= 185.0
    assert 900.0 <= couch.longitudinal.high - couch.longitudinal.low <= 1500.0
    assert couch.vertical.low >= -650.0
    assert couch.vertical.high <= 400.0
    if room == "closed_bore":
        assert travel_of(couch.turntable) == (0.0, 0.0)
        assert travel_of(couch.lateral) == (0.0, 0.0)
    else:
        assert -95.0 <= couch.turntable.low <= -90.0
        assert 90.0 <= couch.turntable.high <= 95.0
        assert 200.0 <= couch.lateral.high <= 250.0
        assert couch.lateral.low == -couch.lateral.high
    for tilt in (couch.pitch, couch.roll):
        assert travel_of(tilt) in {(0.0, 0.0), (-3.0, 3.0)}


@pytest.mark.parametrize("room", ROOMS)
def test_floor_and_table_are_of_common_size(room: str) -> None:
    scene = first_scene_of(room)
    assert -1350.0 <= vertices_of(scene, "floor")[:, 2].max() <= -1200.0
    table = table_of(level(scene))
    assert 500.0 <= np.ptp(table[:, 0]) <= 550.0
    assert 50.0 <= np.ptp(table[:, 2]) <= 80.0


@pytest.mark.parametrize(
    ("room", "part"),
    [("c_arm_wide", "touch guard"), ("c_arm_close", "touch guard"), ("cobalt", "trimmer bars")],
)
def test_isocentre_to_head_face(room: str, part: str) -> None:
    assert 350.0 <= vertices_of(first_scene_of(room), part)[:, 2].min() <= 500.0


@pytest.mark.parametrize(
    ("room", "part"),
    [
        ("c_arm_wide", "head cover"),
        ("c_arm_close", "treatment head"),
        ("cobalt", "source head"),
        ("particle_snout", "nozzle"),
    ],
)
def test_head_width(room: str, part: str) -> None:
    head = vertices_of(first_scene_of(room), part)
    near_isocentre = np.abs(head[:, 1]) < 500.0
    assert 600.0 <= np.ptp(head[near_isocentre, 0]) <= 900.0


@pytest.mark.parametrize(
    ("room", "part"),
    [
        ("c_arm_wide", "face plate"),
        ("c_arm_close", "gantry body"),
        ("cobalt", "hub"),
        ("particle_snout", "turning wall"),
    ],
)
def test_isocentre_to_gantry_face(room: str, part: str) -> None:
    assert 900.0 <= vertices_of(first_scene_of(room), part)[:, 1].min() <= 1300.0


def test_source_axis_distances() -> None:
    distances = {room: room_of(room).source_axis_distance_mm for room in ROOMS}
    assert distances.pop("particle_snout") > 2000.0
    assert distances.pop("cobalt") == 800.0
    assert set(distances.values()) == {1000.0}


def test_accessories_end_where_such_accessories_end() -> None:
    setup = scene_of("c_arm_close/electron_boost.setup.toml").setup
    applicator = vertices_of(build_scene(setup), "applicator end frame")
    assert applicator[:, 2].min() == pytest.approx(50.0, abs=0.5)
    cone = vertices_of(build_scene(replace(setup, fitted=("cone",))), "cone")
    assert 200.0 <= cone[:, 2].min() <= 280.0


def test_snout_reaches_as_near_as_a_cone_and_no_nearer() -> None:
    setup = scene_of("particle_snout/head.setup.toml").setup
    arm = setup.room.arm_named("snout")
    assert arm.travel_mm is not None
    forward = build_scene(replace(setup, arm_positions=(("snout", arm.travel_mm[1]),)))
    assert 200.0 <= vertices_of(forward, "touch guard")[:, 2].min() <= 280.0
    back = build_scene(replace(setup, arm_positions=()))
    assert vertices_of(back, "touch guard")[:, 2].min() > 600.0


def test_panels_stand_at_common_distances() -> None:
    scene = scene_of("c_arm_wide/lung_imaging.setup.toml")
    assert -800.0 <= vertices_of(scene, "portal panel")[:, 2].max() <= -400.0
    assert vertices_of(scene, "kV panel")[:, 0].max() == pytest.approx(-500.0, abs=50.0)


def test_bore_diameter() -> None:
    wall = vertices_of(first_scene_of("closed_bore"), "bore wall")
    assert 700.0 <= 2.0 * np.hypot(wall[:, 0], wall[:, 2]).min() <= 1000.0


# Pieces


@pytest.mark.parametrize("name", SETUPS)
def test_pieces_are_few(name: str) -> None:
    counts = dict.fromkeys(MOST_PIECES, 0)
    for part in scene_of(name).parts:
        counts[part.side.value if part.kind == "machine" else part.kind] += len(part.pieces)
    too_many = {key: count for key, count in counts.items() if count > MOST_PIECES[key]}
    assert too_many == {}
    assert min(counts["gantry"], counts["couch"], counts["patient"], counts["room"]) > 0


# Bodies on tables


@pytest.mark.parametrize("name", SETUPS)
def test_patient_lies_on_the_table(name: str) -> None:
    scene = level(scene_of(name))
    table = table_of(scene)
    patient = np.concatenate([p.vertices for part in scene.parts if part.kind == "patient" for p in part.pieces])
    assert patient[:, 2].min() - table[:, 2].max() == pytest.approx(scene.setup.on_table.height_mm, abs=0.01)
    assert table[:, 1].min() < patient[:, 1].min()
    assert patient[:, 1].max() < table[:, 1].max()


@pytest.mark.parametrize("name", SETUPS)
def test_devices_rest_on_the_table(name: str) -> None:
    scene = level(scene_of(name))
    surface_mm = table_of(scene)[:, 2].max()
    devices = [part for part in scene.parts if part.kind == "device"]
    lowest = [min(piece.vertices[:, 2].min() for piece in part.pieces) - surface_mm for part in devices]
    assert all(height_mm > -1e-6 for height_mm in lowest)
    assert not devices or min(lowest) == pytest.approx(0.0, abs=1e-6)


# Charts


def permitted(scene: Scene, gantry_step_deg: float, couch_deg: Array) -> NDArray[np.bool_]:
    """Return where every pair keeps its required clearance, shape (couch, gantry)."""
    gantry = scene.setup.room.gantry
    found = sweep(scene, grid_deg(gantry.low, gantry.high, gantry_step_deg), couch_deg)
    assert not np.isnan(found.clearance_mm).any()
    return found.slack_mm >= 0.0


@pytest.mark.parametrize("name", SETUPS)
def test_gantry_keeps_clear_of_the_room(name: str) -> None:
    scene = scene_of(name)
    machines = replace(scene, parts=tuple(part for part in scene.parts if part.side is not Side.COUCH))
    if name.startswith("closed_bore"):
        # All that turns is joined to the covers that it turns behind.
        with pytest.raises(GeometryError, match="no part to keep clear of"):
            permitted(machines, 5.0, np.zeros(1))
    else:
        assert permitted(machines, 5.0, np.zeros(1)).all()


@pytest.mark.parametrize(
    ("room", "position_mm"),
    [
        ("c_arm_wide", (0.0, 300.0, -240.0)),
        ("c_arm_wide", (0.0, -450.0, -650.0)),
        ("c_arm_close", (0.0, 300.0, -160.0)),
        ("c_arm_close", (0.0, -500.0, -550.0)),
    ],
    ids=["wide, under the isocentre", "wide, down and out", "close, under the isocentre", "close, down and out"],
)
def test_gantry_turns_the_whole_way_about_an_empty_couch(room: str, position_mm: tuple[float, float, float]) -> None:
    moved = with_table_at(first_scene_of(room), np.array(position_mm))
    empty = replace(moved, parts=tuple(part for part in moved.parts if part.kind == "machine"))
    assert permitted(empty, 3.0, np.zeros(1)).all()


def with_table_at(scene: Scene, position_mm: Array) -> Scene:
    """Return the scene of a head-first supine patient with no accessory and the table's origin at a place, (3,)."""
    setup = replace(scene.setup, fitted=())
    assert setup.patient_position == "HFS"
    offset = np.array(setup.isocentre.offset_mm) - (position_mm - scene.couch.T_mm)
    left, head, front = (float(value) for value in offset)
    moved = build_scene(replace(setup, isocentre=Isocentre(setup.isocentre.landmark, (left, head, front))))
    np.testing.assert_allclose(moved.couch.T_mm, position_mm, atol=1e-6)
    assert moved.no_travel == ()
    return moved


@pytest.mark.parametrize("name", TURNING)
def test_chart_has_permitted_and_forbidden_angles(name: str) -> None:
    scene = scene_of(name)
    turntable = scene.setup.room.couch.turntable
    free = permitted(scene, 15.0, grid_deg(turntable.low, turntable.high, 30.0))
    assert 0.02 < free.mean() < 0.98
    assert free[:, free.shape[1] // 2].any()
    assert not free[0].all() or not free[-1].all()


def test_closed_bore_has_a_patient_who_fits_and_one_who_does_not() -> None:
    shares = {name: permitted(scene_of(name), 30.0, np.zeros(1)).mean() for name in SETUPS if name not in TURNING}
    assert shares == {
        "closed_bore/chest_wing_board.setup.toml": 0.0,
        "closed_bore/prostate.setup.toml": 1.0,
    }


def test_required_clearance_is_of_common_size() -> None:
    for name in SETUPS:
        required = scene_of(name).setup.required
        assert 20.0 <= required.of_pair_mm(with_patient=False) < required.of_pair_mm(with_patient=True) <= 40.0
        assert {component.name for component in required.components} >= {"room model", "couch sag", "patient surface"}


def test_every_part_says_its_colour() -> None:
    def colourless(parts: tuple[ScenePart, ...]) -> list[str]:
        return [part.label for part in parts if part.colour is None and part.kind != "patient"]

    assert [label for name in SETUPS for label in colourless(scene_of(name).parts)] == []
