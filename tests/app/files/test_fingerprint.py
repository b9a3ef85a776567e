"""The fingerprint follows what is read, not what the files look like."""

import shutil
from dataclasses import replace
from pathlib import Path

import pytest
from pydicom.data import get_testdata_file

from app.files.fingerprint import fingerprint, short_fingerprint
from app.files.room_file import read_room
from app.files.setup_file import read_setup
from geometry.imported import ContourStack
from geometry.setup import Surface
from tests.app.files.documents import (
    ROOM_TEXT,
    SETUP_TEXT,
    Document,
    as_toml,
    changed,
    places,
    room_document,
    setup_document,
    value_at,
    written,
)
from tests.app.files.test_room_file import TETRAHEDRON


@pytest.fixture
def setup_path(tmp_path: Path) -> Path:
    written(tmp_path / "test.room.toml", ROOM_TEXT)
    return written(tmp_path / "x.setup.toml", SETUP_TEXT)


def numbers_in(document: Document) -> list[tuple[str | int, ...]]:
    """Return the place of every number but the format's."""
    return [
        place
        for place in places(document)
        if place != ("format",) and isinstance(value_at(document, place), int | float)
        if not isinstance(value_at(document, place), bool)
    ]


def test_it_is_sixty_four_hexadecimal_digits_and_short_form_its_first_sixteen(setup_path: Path) -> None:
    setup = read_setup(setup_path)
    whole = fingerprint(setup)
    assert len(whole) == 64
    assert set(whole) <= set("0123456789abcdef")
    assert short_fingerprint(setup) == whole[:16]
    assert fingerprint(setup.room) != whole


def test_comments_blanks_order_of_keys_and_folders_leave_it_alone(setup_path: Path, tmp_path: Path) -> None:
    before = fingerprint(read_setup(setup_path))
    other = tmp_path / "elsewhere"
    other.mkdir()
    rewritten = dict(reversed([(key, value) for key, value in room_document().items()]))
    text = "\n".join(f"# a comment\n  {key}   = {as_toml(value)}" for key, value in rewritten.items())
    written(other / "renamed.room.toml", text)
    document = changed(setup_document(), ("room",), "elsewhere/renamed.room.toml")
    document["fitted"] = dict(reversed(list(document["fitted"].items())))
    document["fitted"]["arms"] = dict(reversed(list(document["fitted"]["arms"].items())))
    assert fingerprint(read_setup(written(tmp_path / "other.setup.toml", document))) == before


def test_whole_numbers_and_decimals_are_the_same_and_so_are_the_zeros(tmp_path: Path) -> None:
    whole = changed(room_document(), ("couch", "head_end_mm"), 0)
    signed = changed(room_document(), ("couch", "head_end_mm"), -0.0)
    prints = {fingerprint(read_room(written(tmp_path / "r.room.toml", document))) for document in (whole, signed)}
    assert len(prints) == 1


def test_every_number_of_a_room_changes_it(tmp_path: Path) -> None:
    document = room_document()
    seen = {fingerprint(read_room(written(tmp_path / "r.room.toml", document)))}
    tried = numbers_in(document)
    for place in tried:
        value = value_at(document, place)
        other = -value if place[-1] == "sense" else value + 1e-3
        seen.add(fingerprint(read_room(written(tmp_path / "r.room.toml", changed(document, place, other)))))
    assert len(tried) > 100
    assert len(seen) == 1 + len(tried)


def test_every_number_of_a_set_up_changes_it(setup_path: Path) -> None:
    document = setup_document()
    seen = {fingerprint(read_setup(setup_path))}
    tried = numbers_in(document)
    for place in tried:
        other = changed(document, place, value_at(document, place) + 0.125)
        seen.add(fingerprint(read_setup(written(setup_path, other))))
    assert len(tried) > 20
    assert len(seen) == 1 + len(tried)


@pytest.mark.parametrize(
    ("place", "value"),
    [
        (("patient", "position"), "FFP"),
        (("patient", "arm_left"), "at the side"),
        (("patient", "legs"), "together"),
        (("isocentre", "landmark"), "navel"),
        (("fitted", "accessories"), ["applicator"]),
        (("fitted", "arms", "panel"), "parked"),
        (("fitted", "collimator_deg"), "any"),
        (("required", "with_survey"), False),
        (("required", "component", 0, "patient_only"), True),
        (("device",), None),
    ],
)
def test_every_choice_of_a_set_up_changes_it(setup_path: Path, place: tuple[str | int, ...], value: object) -> None:
    before = fingerprint(read_setup(setup_path))
    assert fingerprint(read_setup(written(setup_path, changed(setup_document(), place, value)))) != before


@pytest.mark.parametrize(
    ("place", "value"),
    [
        (("part", 9, "follows"), ["turntable", "eccentric"]),
        (("part", 6, "mount"), "gantry"),
        (("part", 3, "axis"), "x"),
        (("part", 4, "turns", 0, 0), "y"),
        (("joined", 1, "with"), ["floor"]),
        (("collimator",), None),
    ],
)
def test_every_choice_of_a_room_changes_it(tmp_path: Path, place: tuple[str | int, ...], value: object) -> None:
    before = fingerprint(read_room(written(tmp_path / "a.room.toml", ROOM_TEXT)))
    document = changed(room_document(), place, value)
    assert fingerprint(read_room(written(tmp_path / "b.room.toml", document))) != before


def test_the_room_counts_in_the_set_up(setup_path: Path, tmp_path: Path) -> None:
    before = fingerprint(read_setup(setup_path))
    written(tmp_path / "test.room.toml", ROOM_TEXT.replace("outer_radius_mm = 900", "outer_radius_mm = 901"))
    assert fingerprint(read_setup(setup_path)) != before


def test_a_mesh_counts_with_its_vertices_and_its_unit_not_its_name(tmp_path: Path) -> None:
    def of(name: str, content: str, unit: str = "mm") -> str:
        (tmp_path / name).write_text(content)
        part = {"name": "pedestal", "mount": "couch", "shape": "mesh", "file": name, "unit": unit}
        return fingerprint(read_room(written(tmp_path / "m.room.toml", changed(room_document(), ("part", 9), part))))

    first = of("a.obj", TETRAHEDRON)
    assert of("b.obj", "# the same\n" + TETRAHEDRON) == first
    assert of("a.obj", TETRAHEDRON.replace("v 100 0 0", "v 100.001 0 0")) != first
    assert of("a.obj", TETRAHEDRON, "cm") != first


def test_contours_count_with_their_points(tmp_path: Path, setup_path: Path) -> None:
    shutil.copy(str(get_testdata_file("rtstruct.dcm", download=False)), tmp_path / "s.dcm")
    document = setup_document()
    document["patient"] = {"position": "HFS", "source": "structure set", "file": "s.dcm"}
    document["isocentre"] = {"dicom_mm": [0, 0, 0]}
    setup = read_setup(written(setup_path, document))
    assert isinstance(setup.patient, Surface)
    assert isinstance(setup.patient.solid, ContourStack)
    (z_mm, points), *others = setup.patient.solid.contours
    moved = points.copy()
    moved[0, 0] += 1e-6
    solid = replace(setup.patient.solid, contours=((z_mm, moved), *others))
    assert fingerprint(replace(setup, patient=replace(setup.patient, solid=solid))) != fingerprint(setup)
