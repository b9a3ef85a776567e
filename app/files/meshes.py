"""Surface meshes from STL, OBJ and PLY files."""

import warnings
from pathlib import Path
from typing import TYPE_CHECKING, Final, Literal, get_args

import numpy as np

from app.files.input_file import bad, checked_file, refused
from app.files.wording import described, one_of
from geometry.errors import BadInput, GeometryError
from geometry.imported import MOST_TRIANGLES, ClosedMesh
from geometry.outlines import LARGEST_MM

if TYPE_CHECKING:
    from trimesh import Trimesh

Unit = Literal["mm", "cm", "m", "in"]

LARGEST_FILE_BYTES: Final = 200_000_000
_UNIT_MM: Final[dict[str, float]] = {"mm": 1.0, "cm": 10.0, "m": 1000.0, "in": 25.4}
_FORMATS: Final = ("stl", "obj", "ply")
# Vertices nearer to each other than this count as one, mm. STL files repeat a vertex for each triangle, and a rounded
# text may write it in two ways.
_SAME_VERTEX_MM: Final = 1e-4


def read_mesh(path: Path | str, unit: Unit) -> ClosedMesh:
    """Return the closed surface of an STL, OBJ or PLY file in mm; its lengths are in `unit`.

    Colours, materials and textures are left aside, and no other file is opened. All groups and objects of the file
    count. Triangles that are turned the wrong way round are turned back where that can be told.

    Raises BadInput, with file, place, found and allowed.
    """
    if unit not in get_args(Unit):
        raise bad(path, "unit", described(unit), one_of(get_args(Unit)))
    file = checked_file(path, LARGEST_FILE_BYTES)
    kind = file.suffix.lower().removeprefix(".")
    if kind not in _FORMATS:
        raise bad(path, "", f"a file name that ends in {described(file.suffix)}", one_of(f".{end}" for end in _FORMATS))
    mesh = _loaded(file, kind)
    try:
        return _closed(mesh, _UNIT_MM[unit])
    except GeometryError as error:
        raise refused(path, "surface", error) from error


def _loaded(file: Path, kind: str) -> "Trimesh":
    # trimesh takes a second to import.
    import trimesh  # noqa: PLC0415

    try:
        # A damaged file makes NumPy warn before trimesh refuses it.
        with warnings.catch_warnings(), file.open("rb") as stream:
            warnings.simplefilter("ignore")
            # Given a stream, trimesh knows no folder that it could load other files from.
            mesh = trimesh.load_mesh(stream, file_type=kind, process=False, skip_materials=True)
    except Exception as error:
        raise _unreadable(file, kind, f"{type(error).__name__}: {error}") from error
    if not len(mesh.faces):
        raise _unreadable(file, kind, "no triangles")
    if len(mesh.faces) > MOST_TRIANGLES:
        raise bad(file, "surface", f"{len(mesh.faces)} triangles", f"at most {MOST_TRIANGLES}: simplify it first")
    return mesh


def _unreadable(file: Path, kind: str, reason: str) -> BadInput:
    return bad(file, "", f"content that is no {kind.upper()} surface ({reason:.100})", "a surface of triangles")


def _closed(mesh: "Trimesh", unit_mm: float) -> ClosedMesh:
    import trimesh  # noqa: PLC0415

    vertices = np.asarray(mesh.vertices, dtype=np.float64) * unit_mm
    faces = np.asarray(mesh.faces, dtype=np.int64)
    if not np.all(np.abs(vertices) <= LARGEST_MM):
        # Refused with its place; what follows could not cope with it.
        return ClosedMesh(vertices, faces)
    bare = trimesh.Trimesh(vertices, faces, process=False)
    bare.merge_vertices(digits_vertex=round(-np.log10(_SAME_VERTEX_MM)))
    if not bare.is_winding_consistent:
        trimesh.repair.fix_winding(bare)  # type: ignore[no-untyped-call]
    return ClosedMesh(np.array(bare.vertices, dtype=np.float64), np.array(bare.faces, dtype=np.int64))
