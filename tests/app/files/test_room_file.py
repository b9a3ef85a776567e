"""Room files: what is read, and every way in which one can be wrong."""

from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.spatial.transform import Rotation

from app.files.room_file import read_room
from app.files.shapes import placement
from geometry.machine import Mount, Room, Stage
from geometry.scene import faceted_pieces
from geometry.solids import Loft, Placed
from tests.app.files.documents import ROOM_TEXT, changed, faults_of, outcome, places, room_document, written

GARBAGE = st.one_of(
    st.booleans(),
    st.integers(),
    st.integers(min_value=-(10**25), max_value=10**25),
    st.floats(),
    st.text(max_size=30).filter(lambda text: text.isprintable()),
    st.sampled_from([[], {}, [[]], "gantry", "box", "couch", "floor", "../x", 10**400]),
    st.lists(st.one_of(st.floats(), st.text(max_size=3), st.integers()), max_size=4),
    st.dictionaries(st.sampled_from(["name", "points", "x", ""]), st.integers(), max_size=2),
)


@pytest.fixture(scope="module")
def room(tmp_path_factory: pytest.TempPathFactory) -> Room:
    return read_room(written(tmp_path_factory.mktemp("room") / "test.room.toml", ROOM_TEXT))


def part(room: Room, name: str) -> Any:  # noqa: ANN401 - a part with whatever solid
    return next(part for part in room.parts if part.name == name)


def test_the_whole_room_is_read(room: Room) -> None:
    assert (room.name, room.demonstration, room.source_axis_distance_mm) == ("Test room", False, 1000.0)
    assert room.survey is not None
    assert (room.survey.on, room.survey.uncertainty_mm) == ("2025-03-14", 3.0)
    assert (room.gantry.low, room.gantry.high, room.gantry.speed) == (-185.0, 185.0, 6.0)
    assert room.gantry.readout.shown_deg(90.0) == 90.0
    assert room.gantry.readout.shown_deg(0.0) == 180.0
    assert (room.couch.lateral.low, room.couch.lateral.readout.zero) == (-230.0, 1000.0)
    assert (room.couch.head_end_mm, room.couch.eccentric_offset_mm) == (10.0, (0.0, 5.0, 0.0))
    assert [accessory.slot for accessory in room.accessories] == ["tray", "tray"]
    assert [p.name for p in room.parts][:3] == ["floor", "stand", "drum"]


def test_parts_carry_mount_stages_arm_and_colour(room: Room) -> None:
    assert part(room, "pedestal").follows == {Stage.TURNTABLE}
    assert part(room, "table top").follows == frozenset(Stage)
    assert part(room, "panel").mount is Mount.GANTRY
    assert part(room, "panel").arm == "panel"
    assert part(room, "cone").accessory == "cone"
    assert part(room, "pedestal").colour == "#a0b0c0"
    assert part(room, "floor").colour == "#cfd2d4"


def test_solids_have_the_sizes_written(room: Room) -> None:
    assert part(room, "floor").solid.size_mm == (6000.0, 6000.0, 100.0)
    loft = part(room, "head").solid
    assert isinstance(loft, Loft)
    assert [along_mm for along_mm, _ in loft.sections] == [420.0, 600.0, 900.0]
    inside = part(room, "table top").solid.contains(np.array([[0.0, -10.0, -5.0], [0.0, -10.0, -30.0]]))
    assert inside.tolist() == [True, False], "the second point lies in the hole"


def test_a_part_is_turned_about_fixed_directions_in_order_then_shifted(room: Room) -> None:
    # Against scipy: lower case letters turn about fixed directions, in the order given.
    placed = part(room, "panel").solid
    assert isinstance(placed, Placed)
    expected = Rotation.from_euler("xz", [10.0, -5.0], degrees=True).as_matrix()
    np.testing.assert_allclose(placed.matrix[:3, :3], expected, atol=1e-15)
    np.testing.assert_array_equal(placed.matrix[:3, 3], [0.0, 0.0, -600.0])
    three = placement((("y", 30.0), ("x", 20.0), ("z", 100.0)), (0.0, 0.0, 0.0))[:3, :3]
    np.testing.assert_allclose(
        three, Rotation.from_euler("yxz", [30.0, 20.0, 100.0], degrees=True).as_matrix(), atol=1e-15
    )


def test_an_arm_slides_along_a_unit_vector(room: Room) -> None:
    assert room.arm_named("snout").direction == (0.0, 0.6, -0.8)
    assert room.arm_named("snout").travel_mm == (0.0, 400.0)
    assert [position.name for position in room.arm_named("panel").positions] == ["parked", "extended"]


def test_joined_lists_become_every_pair(room: Room) -> None:
    assert [(pair.first, pair.second) for pair in room.joined] == [
        ("drum", "stand"),
        ("pedestal", "floor"),
        ("pedestal", "stand"),
    ]
    assert room.joined[2].reason == "stands on the floor"


def test_an_axis_that_is_left_out_stands_at_zero(tmp_path: Path) -> None:
    document = changed(changed(room_document(), ("couch", "turntable"), None), ("collimator",), None)
    room = read_room(written(tmp_path / "bore.room.toml", document))
    assert (room.couch.turntable.low, room.couch.turntable.high) == (0.0, 0.0)
    assert (room.collimator.low, room.collimator.high) == (0.0, 0.0)


def test_a_room_without_survey_is_read_as_unsurveyed(tmp_path: Path) -> None:
    room = read_room(written(tmp_path / "r.room.toml", changed(room_document(), ("survey",), None)))
    assert room.survey is None
    assert not room.demonstration


# place of the change, what stands there then (None: removed), and what the fault says: place, found, allowed
FAULTS: list[tuple[tuple[str | int, ...], object, tuple[str, str, str]]] = [
    (("nmae",), "x", ("nmae", "an unknown key", "did you mean 'name'")),
    (("gantry", "travl_deg"), [0, 1], ("gantry.travl_deg", "an unknown key", "did you mean 'travel_deg'")),
    (("part", 0, "size_cm"), [1, 1, 1], ("part[1] 'floor'.size_cm", "an unknown key", "did you mean 'size_mm'")),
    (("part", 3, "sections", 0, "at"), 1, ("part[4] 'head'.sections[1].at", "an unknown key", "'along_mm'")),
    (("name",), None, ("name", "nothing", "text")),
    (("name",), 7, ("name", "7", "text")),
    (("name",), "x" * 201, ("name", "201 characters", "1 to 200")),
    (("name",), "a\u0007b", ("name", "\\u0007", "printable")),
    (("demonstration",), 1, ("demonstration", "1", "true or false")),
    (("demonstration",), True, ("survey", "survey of a demonstration", "not both")),
    (("survey", "on"), "2025-03-14", ("survey.on", "'2025-03-14'", "a date without quotes")),
    (("survey", "uncertainty_mm"), 0, ("survey.uncertainty_mm", "0", "above 0, at most 100")),
    (("source_axis_distance_mm",), 100, ("source_axis_distance_mm", "100", "300 to 10000")),
    (("source_axis_distance_mm",), True, ("source_axis_distance_mm", "true", "a number")),
    (("source_axis_distance_mm",), "1000", ("source_axis_distance_mm", "'1000'", "a number")),
    (("source_axis_distance_mm",), float("nan"), ("source_axis_distance_mm", "nan", "300 to 10000")),
    (("source_axis_distance_mm",), float("inf"), ("source_axis_distance_mm", "inf", "300 to 10000")),
    (("source_axis_distance_mm",), 10**400, ("source_axis_distance_mm", "more than 18 digits", "300 to 10000")),
    (("max_excess_mm",), 0.01, ("max_excess_mm", "0.01", "0.05 to 5")),
    (("gantry",), None, ("gantry", "nothing", "a table [gantry]")),
    (("gantry",), 3, ("gantry", "3", "a table [gantry]")),
    (("gantry", "travel_deg"), [10, 100], ("gantry.travel_deg", "[10, 100]", "contains 0")),
    (("gantry", "travel_deg"), [-300, 300], ("gantry.travel_deg", "600", "at most 400")),
    (("gantry", "travel_deg"), [185, -185], ("gantry.travel_deg", "[185, -185]", "low not above high")),
    (("gantry", "travel_deg"), [-361, 0], ("gantry.travel_deg[1]", "-361", "-360 to 360")),
    (("gantry", "travel_deg"), [-1], ("gantry.travel_deg", "a list of 1", "a list of 2 numbers")),
    (("gantry", "readout", "sense"), 0, ("gantry.readout.sense", "0", "1 or -1")),
    (("gantry", "readout", "sense"), 1.0, ("gantry.readout.sense", "1.0", "a whole number")),
    (("couch", "turntable", "travel_deg"), [-190, 0], ("couch.turntable.travel_deg[1]", "-190", "-180 to 180")),
    (("couch", "lateral", "travel_deg"), [0, 1], ("couch.lateral.travel_deg", "an unknown key", "'travel_mm'")),
    (("couch", "lateral", "speed_mm_per_s"), 0, ("couch.lateral.speed_mm_per_s", "0", "above 0")),
    (("part",), [], ("part", "a list of 0", "of 1 to 500")),
    (("part",), {"name": "x"}, ("part", "a single table", "[[part]]")),
    (("part",), [{"name": "x"}] * 501, ("part", "a list of 501", "1 to 500")),
    (("part", 1), 5, ("part[2]", "5", "a table")),
    (("part", 1, "name"), "floor", ("part[2] 'floor'.name", "taken", "a name of its own")),
    (("part", 0, "mount"), "Fixed", ("part[1] 'floor'.mount", "'Fixed'", "did you mean 'fixed'")),
    (("part", 0, "follows"), ["turntable"], ("part[1] 'floor'.follows", "an unknown key", "one of")),
    (("part", 9, "follows"), ["turn"], ("part[10] 'pedestal'.follows[1]", "'turn'", "'turntable'")),
    (("part", 9, "follows"), ["turntable"] * 2, ("part[10] 'pedestal'.follows", "twice", "at most once")),
    (("part", 0, "colour"), "mauve", ("part[1] 'floor'.colour", "'mauve'", "#rrggbb")),
    (("part", 6, "accessory"), "aplicator", ("part[7] 'applicator'.accessory", "'aplicator'", "'applicator'")),
    (("part", 4, "arm"), "pannel", ("part[5] 'panel'.arm", "'pannel'", "did you mean 'panel'")),
    (("part", 0, "shape"), "boks", ("part[1] 'floor'.shape", "'boks'", "did you mean 'box'")),
    (("part", 0, "size_mm"), [1, 0, 1], ("part[1] 'floor'.size_mm[2]", "0", "above 0")),
    (("part", 0, "size_mm"), [1, float("nan"), 1], ("part[1] 'floor'.size_mm[2]", "nan", "above 0")),
    (("part", 0, "turns"), [["w", 1]], ("part[1] 'floor'.turns[1]", "'w'", "'x'")),
    (("part", 0, "turns"), [["x", 1], 5], ("part[1] 'floor'.turns[2]", "no pair", "an axis and degrees")),
    (("part", 1, "end_mm"), [0, 1000, 0], ("part[2] 'stand'", "apart", "0.001 mm or more")),
    (("part", 2, "outer_radius_mm"), 400, ("part[3] 'drum'", "outer_radius_mm = 400", "number from 500")),
    (("part", 3, "sections"), [], ("part[4] 'head'.sections", "a list of 0", "of 2 to 200")),
    (("part", 3, "sections", 1, "along_mm"), 1, ("part[4] 'head'", "sections[1]", "number from 420")),
    (("part", 3, "sections", 0, "outline"), {}, ("part[4] 'head'.sections[1].outline", "none of them", "exactly one")),
    (("part", 3, "sections", 1, "outline", "exponent"), 1, ("outline.exponent", "1", "2 to 20")),
    (("part", 8, "outline"), None, ("part[9] 'table top'.outline", "nothing", "a table")),
    (("part", 8, "outline", "points"), [[0, 0], [1, 0]], ("outline.points", "a list of 2", "3 to 2000")),
    (("part", 8, "outline", "points"), [[0, 0], [1, 0], [0, 0]], ("outline.points", "2 points", "3 or more")),
    (("part", 8, "outline", "points"), [[i, i * i] for i in range(2001)], ("outline.points", "2001", "2000")),
    (("part", 8, "outline", "points", 1), [0, "a"], ("outline.points[2][2]", "'a'", "a number")),
    (("part", 8, "outline", "holes", 0, 1), [0], ("outline.holes[1][2]", "a list of 1", "2 numbers")),
    (("part", 8, "outline", "points"), [[0, 0], [9, 9], [9, 0], [0, 9]], ("outline", "simple polygon", "do not cross")),
    (("arm", 1, "travel_mm"), None, ("arm[2] 'snout'", "direction alone", "together")),
    (("arm", 1, "direction"), [0, 0, 0], ("arm[2] 'snout'.direction", "[0, 0, 0]", "a direction")),
    (("arm", 0, "position"), None, ("arm[1] 'panel'.position", "nothing", "[[arm.position]]")),
    (("arm", 0, "position", 1, "name"), "parked", ("arm[1] 'panel'.position[2] 'parked'.name", "taken", "own")),
    (("part", 5, "arm"), "panel", ("arm", "'panel' with parts on different mounts", "all on one mount")),
    (("part", 5, "arm"), None, ("arm", "'snout' without parts", "parts with arm")),
    (("part", 7, "accessory"), None, ("accessory", "'cone' without parts", "a part with accessory")),
    (("joined", 0, "reason"), None, ("joined[1].reason", "nothing", "text")),
    (("joined", 0, "second"), "stnd", ("joined[1]", "'stnd'", "did you mean 'stand'")),
    (("joined", 0, "second"), "table top", ("joined[1]", "gantry and couch", "a fixed part with one")),
    (("joined", 0, "second"), "head", ("joined[1]", "both of side gantry", "two sides")),
    (("joined", 0, "second"), "patient", ("joined[1]", "'patient'", "always checked")),
    (("joined", 1, "with"), ["floor", "floor"], ("joined[2].with", "twice", "at most once")),
    (("joined", 1), {"first": "stand", "second": "drum", "reason": "x"}, ("joined[2]", "again", "each pair once")),
]


@pytest.mark.parametrize(("place", "value", "words"), FAULTS)
def test_a_fault_names_file_place_found_and_allowed(
    tmp_path: Path, place: tuple[str | int, ...], value: object, words: tuple[str, str, str]
) -> None:
    path = written(tmp_path / "bad.room.toml", changed(room_document(), place, value))
    faults = faults_of(lambda: read_room(path))
    fitting = [f for f in faults if f.place.endswith(words[0]) and words[1] in f.found and words[2] in f.allowed]
    assert len(fitting) == 1, "\n".join(map(str, faults))
    assert fitting[0].file == str(path)


def test_one_change_is_one_fault(tmp_path: Path) -> None:
    # A number at fault must not drag faults along that its writer can do nothing about.
    for place, value, _ in FAULTS:
        if isinstance(value, int | float) and isinstance(place[-1], str) and place[0] != "demonstration":
            path = written(tmp_path / "bad.room.toml", changed(room_document(), place, value))
            assert len(faults_of(lambda path=path: read_room(path))) == 1, place


def test_all_faults_come_in_one_go(tmp_path: Path) -> None:
    document = room_document()
    document["name"] = ""
    document["gantry"]["travel_deg"] = "all"
    document["part"][0]["size_mm"] = [1, 2]
    document["part"][0]["colour"] = 5
    document["part"][1]["end_mm"] = document["part"][1]["start_mm"]
    document["part"][4] |= {"shape": "mesh", "file": "gone.stl", "unit": "foot"}
    document["joined"][0]["first"] = "drumm"
    document["extra"] = 1
    path = written(tmp_path / "bad.room.toml", document)
    found = {fault.place for fault in faults_of(lambda: read_room(path))}
    assert found >= {
        "name",
        "gantry.travel_deg",
        "part[1] 'floor'.size_mm",
        "part[1] 'floor'.colour",
        "part[2] 'stand'",
        "part[5] 'panel'.file",
        "part[5] 'panel'.unit",
        "joined[1]",
        "extra",
    }


def test_very_many_faults_are_cut_short(tmp_path: Path) -> None:
    # So that a hostile file of 200,000 unknown keys is refused as fast as one of 100.
    document = changed(room_document(), ("part", 8, "outline", "points"), [[1, "x"]] * 2000)
    faults = faults_of(lambda: read_room(written(tmp_path / "bad.room.toml", document)))
    assert len(faults) == 101
    assert faults[-1].found == "more faults than these 100"


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("format = 1\nname = ", ("end of document", "nvalid", "TOML 1.0")),
        ("format = 1\nname = 'a'\nname = 'b'\n", ("line 3", "", "TOML 1.0")),
        ("name = 'a'", ("format", "nothing", "1")),
        ("format = 2", ("format", "format 2, written by a newer version", "1")),
        ("format = 0", ("format", "0", "1")),
        ("format = true", ("format", "true", "1")),
        ("format = '1'", ("format", "'1'", "1")),
        ("format = 1\nx = " + "[" * 20_000, ("", "nested too deep", "a few levels")),
        ("format = 1\n" + ".".join("a" * 100_000) + " = 1", ("line 2", "a key of more than 16 levels", "a few levels")),
        ("format = 1\nx = " + "9" * 5000, ("", "cannot be read", "TOML 1.0")),
        ("#" * 2_000_001, ("", "2000001 bytes", "at most 2000000 bytes")),
    ],
)
def test_what_is_no_file_of_this_format_is_refused_at_once(
    tmp_path: Path, text: str, words: tuple[str, str, str]
) -> None:
    faults = faults_of(lambda: read_room(written(tmp_path / "bad.room.toml", text)))
    assert len(faults) == 1
    assert words[0] in faults[0].place
    assert words[1] in faults[0].found
    assert words[2] in faults[0].allowed


def test_a_missing_file_a_folder_and_bytes_that_are_no_text_are_refused(tmp_path: Path) -> None:
    assert "no such file" in faults_of(lambda: read_room(tmp_path / "gone.room.toml"))[0].found
    assert "not a file" in faults_of(lambda: read_room(tmp_path))[0].found
    (tmp_path / "bytes.room.toml").write_bytes(b"format = 1\nname = '\xff'\n")
    fault = faults_of(lambda: read_room(tmp_path / "bytes.room.toml"))[0]
    assert (fault.place, fault.allowed) == ("line 2", "UTF-8 text")


def with_mesh(file: str, unit: str = "mm") -> dict[str, Any]:
    document = room_document()
    document["part"][0] = {"name": "floor", "mount": "fixed", "shape": "mesh", "file": file, "unit": unit}
    return document


# A tetrahedron, corners 0 and 100 along the axes.
TETRAHEDRON = "v 0 0 0\nv 100 0 0\nv 0 100 0\nv 0 0 100\nf 1 3 2\nf 1 2 4\nf 1 4 3\nf 2 3 4\n"


def test_a_mesh_is_found_beside_the_room_and_read_in_its_unit(tmp_path: Path) -> None:
    (tmp_path / "shapes").mkdir()
    (tmp_path / "shapes" / "Corner.obj").write_text(TETRAHEDRON)
    room = read_room(written(tmp_path / "m.room.toml", with_mesh("shapes/Corner.obj", "cm")))
    assert room.parts[0].solid.contains(np.array([[200.0, 200.0, 200.0], [400.0, 400.0, 400.0]])).tolist() == [
        True,
        False,
    ]


@pytest.mark.parametrize(
    ("file", "found", "allowed"),
    [
        ("Cornr.obj", "no such file", "did you mean 'Corner.obj'"),
        ("corner.obj", "'corner.obj'", "'Corner.obj'"),
        ("gone/Corner.obj", "no such file", "the folder"),
        ("sub\\Corner.obj", "sub\\Corner.obj", "/ between folders"),
        ("sub", "not a file", "a file"),
    ],
)
def test_a_path_that_leads_nowhere_is_a_fault_with_the_path(
    tmp_path: Path, file: str, found: str, allowed: str
) -> None:
    (tmp_path / "sub").mkdir()
    (tmp_path / "Corner.obj").write_text(TETRAHEDRON)
    faults = faults_of(lambda: read_room(written(tmp_path / "m.room.toml", with_mesh(file))))
    assert len(faults) == 1
    assert faults[0].place == "part[1] 'floor'.file"
    assert found in faults[0].found
    assert allowed in faults[0].allowed


def test_an_open_mesh_is_a_fault_of_the_mesh_file(tmp_path: Path) -> None:
    (tmp_path / "open.obj").write_text(TETRAHEDRON.replace("f 2 3 4\n", ""))
    faults = faults_of(lambda: read_room(written(tmp_path / "m.room.toml", with_mesh("open.obj"))))
    assert len(faults) == 1
    assert "open.obj" in faults[0].file


@given(data=st.data())
def test_garbage_gives_a_room_or_faults_and_nothing_else(
    tmp_path_factory: pytest.TempPathFactory, data: st.DataObject
) -> None:
    document = room_document()
    for _ in range(data.draw(st.integers(1, 3))):
        place = data.draw(st.sampled_from(list(places(document))))
        document = changed(document, place, data.draw(st.one_of(st.none(), GARBAGE)))
    path = written(tmp_path_factory.mktemp("fuzz") / "f.room.toml", document)
    room = outcome(lambda: read_room(path))
    if isinstance(room, Room):
        assert np.isfinite([room.gantry.low, room.gantry.high, room.source_axis_distance_mm]).all()
        assert all(faceted_pieces(part.solid, room.max_excess_mm)[0] for part in room.parts)
    else:
        assert isinstance(room, tuple)
        assert room
        assert len("".join(map(str, room))) < 100_000


@given(cut=st.integers(0, len(ROOM_TEXT)), extra=st.text(max_size=20))
def test_a_damaged_text_gives_a_room_or_faults(tmp_path_factory: pytest.TempPathFactory, cut: int, extra: str) -> None:
    path = tmp_path_factory.mktemp("cut") / "f.room.toml"
    path.write_bytes((ROOM_TEXT[:cut] + extra + ROOM_TEXT[cut:]).encode("utf-8", "surrogatepass"))
    room = outcome(lambda: read_room(path))
    assert isinstance(room, Room) or (isinstance(room, tuple) and room)
