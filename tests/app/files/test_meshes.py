"""Mesh files: every format and unit gives the same solid, and bad files are refused by name."""

from collections.abc import Callable
from pathlib import Path
from random import Random
from typing import cast

import numpy as np
import pytest
import trimesh
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from app.files import meshes
from app.files.meshes import Unit, read_mesh
from geometry.errors import BadInput, Fault
from geometry.imported import ClosedMesh


def wedge() -> trimesh.Trimesh:
    """Return an invented solid without symmetry, so that swapped axes would show: a box with one corner drawn out."""
    box = trimesh.creation.box((40.0, 60.0, 90.0))
    box.vertices[7] += [15.0, 20.0, 25.0]
    return box


def written(folder: Path, name: str, content: str | bytes) -> Path:
    path = folder / name
    path.write_bytes(content.encode() if isinstance(content, str) else content)
    return path


def exported(mesh: trimesh.Trimesh, kind: str) -> bytes:
    content = cast("str | bytes", mesh.export(file_type=kind))
    return content.encode() if isinstance(content, str) else content


def fault_of(path: Path, unit: str = "mm") -> str:
    with pytest.raises(BadInput) as caught:
        read_mesh(path, cast("Unit", unit))
    assert all(fault.file == str(path) and fault.found and fault.allowed for fault in caught.value.faults)
    return str(caught.value)


@pytest.mark.parametrize("kind", ["stl", "stl_ascii", "obj", "ply"])
@pytest.mark.parametrize(("unit", "unit_mm"), [("mm", 1.0), ("cm", 10.0), ("m", 1000.0), ("in", 25.4)])
def test_formats_and_units_give_the_same_solid(tmp_path: Path, kind: str, unit: Unit, unit_mm: float) -> None:
    """The inch is 25.4 mm by definition (international yard and pound agreement, 1959)."""
    small = wedge()
    small.apply_scale(1.0 / unit_mm)
    mesh = read_mesh(written(tmp_path, f"wedge.{kind[:3].upper()}", exported(small, kind)), unit)
    assert (len(mesh.vertices), len(mesh.faces)) == (8, 12)
    ours, theirs = (sorted(map(tuple, np.round(vertices, 2))) for vertices in (mesh.vertices, wedge().vertices))
    # STL and PLY hold single precision.
    np.testing.assert_allclose(ours, theirs, atol=0.011)
    points = np.random.default_rng(1).uniform(-60.0, 60.0, (500, 3))
    surely = np.abs(points) < [19.0, 29.0, 44.0]
    assert mesh.contains(points[surely.all(axis=1)]).all()


def test_groups_materials_and_polygons_of_an_obj_file(tmp_path: Path) -> None:
    """Two cubes in two groups, faces of four corners; the library of materials that is named does not exist."""
    lines = ["mtllib /nowhere/colours.mtl"]
    corners = [(x, y, z) for x in (0, 10) for y in (0, 10) for z in (0, 10)]
    quads = [(1, 2, 4, 3), (5, 7, 8, 6), (1, 5, 6, 2), (3, 4, 8, 7), (1, 3, 7, 5), (2, 6, 8, 4)]
    for k in range(2):
        lines += [f"o cube{k}", *(f"v {x + 30 * k} {y} {z}" for x, y, z in corners), "usemtl red"]
        lines += ["f " + " ".join(str(n + 8 * k) for n in quad) for quad in quads]
    mesh = read_mesh(written(tmp_path, "cubes.obj", "\n".join(lines)), "mm")
    assert len(mesh.faces) == 24
    assert mesh.contains(np.array([[5.0, 5.0, 5.0], [35.0, 5.0, 5.0], [20.0, 5.0, 5.0]])).tolist() == [
        True,
        True,
        False,
    ]


def test_no_other_file_is_opened(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    written(tmp_path, "colours.mtl", "newmtl red\nmap_Kd picture.png\n")
    path = written(tmp_path, "wedge.obj", b"mtllib colours.mtl\nusemtl red\n" + exported(wedge(), "obj"))
    opened: list[str] = []
    for kind, name in ((Path, "open"), (Path, "read_bytes"), (trimesh.resolvers.FilePathResolver, "get")):
        original = getattr(kind, name)

        def noting(self: object, *args: object, _original: Callable[..., object] = original) -> object:
            opened.append(str(args[0]) if isinstance(self, trimesh.resolvers.FilePathResolver) else str(self))
            return _original(self, *args)

        monkeypatch.setattr(kind, name, noting)
    read_mesh(path, "mm")
    assert opened == [str(path)]


def test_triangles_that_are_turned_the_wrong_way_are_turned_back(tmp_path: Path) -> None:
    mixed = wedge()
    mixed.faces[::3] = mixed.faces[::3, ::-1]
    mesh = read_mesh(written(tmp_path, "mixed.stl", exported(mixed, "stl")), "mm")
    assert mesh.contains(np.zeros((1, 3))).all()


def test_a_surface_with_a_hole_is_refused(tmp_path: Path) -> None:
    mesh = wedge()
    mesh.faces = mesh.faces[1:]
    assert "surface: found a surface with 3 open edges; allowed: a closed surface" in fault_of(
        written(tmp_path, "open.ply", exported(mesh, "ply"))
    )


def test_too_many_triangles_are_refused(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(meshes, "MOST_TRIANGLES", 11)
    assert "found 12 triangles; allowed: at most 11" in fault_of(written(tmp_path, "a.stl", exported(wedge(), "stl")))


def test_a_large_file_is_refused_unread(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(meshes, "LARGEST_FILE_BYTES", 100)
    assert "684 bytes; allowed: at most 100 bytes" in fault_of(written(tmp_path, "a.stl", exported(wedge(), "stl")))


@pytest.mark.parametrize("value", ["nan", "inf", "-1e30"])
def test_coordinates_that_are_no_place_are_refused(tmp_path: Path, value: str) -> None:
    text = exported(wedge(), "obj").decode().replace("v -20.00000000", f"v {value}", 1)
    assert f"v {value} " in text
    assert "allowed: numbers from -100000 to 100000" in fault_of(written(tmp_path, "a.obj", text))


@pytest.mark.parametrize(
    ("name", "content", "message"),
    [
        ("a.stl", b"", "an empty file; allowed: a file with content"),
        ("a.step", b"ISO-10303-21;", r"a file name that ends in '.step'; allowed: '.stl', '.obj', '.ply'"),
        ("a", b"solid", "a file name that ends in ''"),
        ("a.stl", b"\x00" * 84, "content that is no STL surface"),
        ("a.stl", b"\x00" * 80 + b"\xff\xff\xff\xff" + b"\x00" * 50, "content that is no STL surface"),
        ("a.obj", b"v 1 2\nf 1 2 3\n", "content that is no OBJ surface"),
        ("a.obj", b"just words\n", "content that is no OBJ surface"),
        (
            "a.ply",
            b"ply\nformat ascii 1.0\nelement vertex 999999999999\nend_header\n",
            "content that is no PLY surface",
        ),
        ("a.ply", b"not a ply", "content that is no PLY surface"),
    ],
)
def test_damaged_files_are_refused(tmp_path: Path, name: str, content: bytes, message: str) -> None:
    assert message in fault_of(written(tmp_path, name, content))


def test_missing_files_folders_and_units_are_refused(tmp_path: Path) -> None:
    assert "no such file; allowed: an existing file" in fault_of(tmp_path / "none.stl")
    assert "not a file; allowed: a file" in fault_of(tmp_path)
    assert "unit: found 'ft'; allowed: 'mm', 'cm', 'm', 'in'" in fault_of(tmp_path / "none.stl", "ft")


@given(st.sampled_from(["stl", "obj", "ply", "stl_ascii"]), st.randoms(use_true_random=False))
@settings(max_examples=40, suppress_health_check=[HealthCheck.function_scoped_fixture])
def test_whatever_is_in_a_file_the_answer_is_a_solid_or_a_fault(tmp_path: Path, kind: str, random: Random) -> None:
    content = bytearray(exported(wedge(), kind))
    for _ in range(random.choice([1, 4, 40])):
        at = random.randrange(len(content))
        content[at : at + random.choice([1, 1, 9])] = bytes(
            random.randrange(256) for _ in range(random.choice([0, 1, 5]))
        )
    path = written(tmp_path, f"damaged.{kind[:3]}", bytes(content))
    faults: tuple[Fault, ...] = ()
    solid = None
    try:
        solid = read_mesh(path, "mm")
    except BadInput as error:
        faults = error.faults
    assert isinstance(solid, ClosedMesh) or [fault.file for fault in faults] == [str(path)]
