"""The parts in one pose as a 3D model: the very pieces that clearances are computed with.

- GLB (glTF 2.0 binary): metres, Y up, that is (x, y, z) = (X, Z, -Y) / 1000 of the fixed system; one named node a part,
  `SIDE/PART`; where the model comes from stands in the scene's `extras`.
- PLY (binary): mm in the fixed system, coloured faces; where it comes from stands in comments of the header.
- STL (binary): mm in the fixed system, all parts in one; the header's 80 bytes hold name, fingerprint and mark.

Coordinates are single precision in all three.
"""

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import BinaryIO, Final

import numpy as np
import trimesh
from numpy.typing import NDArray
from trimesh.visual.material import PBRMaterial

from app.colours import linear_light, rgb
from app.files.atomic import write_atomically
from app.files.provenance import Provenance
from geometry.assess import Pose
from geometry.errors import BadInput, Fault
from geometry.frames import Array, R_fixed_gantry, R_fixed_turntable, transform
from geometry.scene import Motion, ScenePart, Side

_COLOUR_OF_SIDE: Final = {Side.GANTRY: "#cfd2d4", Side.COUCH: "#8fa3b5", Side.ROOM: "#d8d2c4"}
_COLOUR_OF_KIND: Final = {"patient": "#d9b08c", "device": "#7f9e86"}

# Rows give glTF's x, y, z, m, from the fixed system's X, Y, Z, mm.
_GLTF_FROM_FIXED: Final = np.array([[1.0, 0.0, 0.0], [0.0, 0.0, 1.0], [0.0, -1.0, 0.0]]) / 1000.0
_STL_HEADER_BYTES: Final = 80


@dataclass(frozen=True, eq=False)
class PartMesh:
    """A part's pieces in the fixed system: `vertices` (n, 3), mm; `faces` (m, 3); `colour` "#rrggbb"."""

    name: str
    vertices: Array
    faces: NDArray[np.int64]
    colour: str


def write_pose_model(pose: Pose, provenance: Provenance, path: Path) -> None:
    """Write the model in the format that the path's suffix names. BadInput for another suffix, or where it cannot."""
    convert = format_of(path)
    content = convert(part_meshes(pose), provenance)

    def write(stream: BinaryIO) -> None:
        stream.write(content)

    write_atomically(path, write)


def format_of(path: Path) -> Callable[[list[PartMesh], Provenance], bytes]:
    """Return what turns meshes into a file of the path's suffix. Raises BadInput for one that is not known."""
    convert = _FORMATS.get(path.suffix.lower())
    if convert is None:
        found = f"the suffix '{path.suffix}'" if path.suffix else "no suffix"
        raise BadInput([Fault(str(path), "", found, f"one of {', '.join(_FORMATS)}")])
    return convert


def part_meshes(pose: Pose) -> list[PartMesh]:
    """Return every part of the pose, placed."""
    return [_part_mesh(part, pose) for part in pose.scene.parts]


def T_fixed_motion(motion: Motion, gantry_deg: float, couch_deg: float) -> Array:
    """Return the homogeneous matrix, (4, 4), from the system in which a part's pieces are given to the fixed one."""
    turns = {
        Motion.GANTRY: R_fixed_gantry(gantry_deg),
        Motion.TURNTABLE: R_fixed_turntable(couch_deg),
        Motion.STILL: np.eye(3),
    }
    return transform(turns[motion], np.zeros(3))


def part_colour(part: ScenePart) -> str:
    """Return the colour that a part is drawn in, "#rrggbb"."""
    return part.colour or _COLOUR_OF_KIND.get(part.kind, _COLOUR_OF_SIDE[part.side])


def _part_mesh(part: ScenePart, pose: Pose) -> PartMesh:
    matrix = T_fixed_motion(part.motion, pose.gantry_deg, pose.couch_deg)
    pieces = [piece.placed(matrix) for piece in part.pieces]
    starts = np.cumsum([0, *(len(piece.vertices) for piece in pieces)])
    return PartMesh(
        part.label,
        np.concatenate([piece.vertices for piece in pieces]),
        np.concatenate([piece.faces + start for piece, start in zip(pieces, starts, strict=False)]),
        part_colour(part),
    )


def _glb(parts: list[PartMesh], provenance: Provenance) -> bytes:
    scene = trimesh.Scene(metadata={"provenance": [list(line) for line in provenance.lines()]})
    for part in parts:
        mesh = trimesh.Trimesh(part.vertices @ _GLTF_FROM_FIXED.T, part.faces, process=False)
        # glTF's colour factors are linear light.
        factor = [*(linear_light(channel) for channel in rgb(part.colour)), 1.0]
        material = PBRMaterial(  # type: ignore[no-untyped-call]
            name=part.name, baseColorFactor=factor, metallicFactor=0.0, roughnessFactor=0.8
        )
        mesh.visual = trimesh.visual.TextureVisuals(material=material)  # type: ignore[no-untyped-call]
        scene.add_geometry(mesh, node_name=part.name, geom_name=part.name)
    return bytes(trimesh.exchange.gltf.export_glb(scene))  # type: ignore[no-untyped-call]


def _ply(parts: list[PartMesh], provenance: Provenance) -> bytes:
    mesh = _joined(parts)
    content = bytes(trimesh.exchange.ply.export_ply(mesh, encoding="binary"))
    first, rest = content.split(b"\n", 1)
    # The header is ASCII; other letters of names are written as escapes.
    comments = [f"comment {label}: {text}".encode("ascii", "backslashreplace") for label, text in provenance.lines()]
    return b"\n".join([first, *comments, rest])


def _stl(parts: list[PartMesh], provenance: Provenance) -> bytes:
    content = bytes(trimesh.exchange.stl.export_stl(_joined(parts)))
    mark = " DEMONSTRATION" if provenance.is_demonstration else ""
    header = f"Wideberth {provenance.version}, mm, planning aid{mark}, {provenance.short_fingerprint}"
    return header.encode("ascii").ljust(_STL_HEADER_BYTES)[:_STL_HEADER_BYTES] + content[_STL_HEADER_BYTES:]


def _joined(parts: list[PartMesh]) -> trimesh.Trimesh:
    starts = np.cumsum([0, *(len(part.vertices) for part in parts)])
    colours = [
        np.tile([*(round(255 * channel) for channel in rgb(part.colour)), 255], (len(part.faces), 1)) for part in parts
    ]
    return trimesh.Trimesh(
        np.concatenate([part.vertices for part in parts]),
        np.concatenate([part.faces + start for part, start in zip(parts, starts, strict=False)]),
        face_colors=np.concatenate(colours).astype(np.uint8),
        process=False,
    )


_FORMATS: Final = {".glb": _glb, ".ply": _ply, ".stl": _stl}
