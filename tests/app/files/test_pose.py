"""One pose, as JSON and as a 3D model."""

import json
from dataclasses import replace
from functools import cache
from pathlib import Path

import numpy as np
import pytest
import trimesh

from app.files.pose_json import pose_json
from app.files.pose_model import part_colour, part_meshes, write_pose_model
from geometry.assess import Pose, assess_pose
from geometry.errors import BadInput
from geometry.frames import R_fixed_gantry, R_fixed_turntable
from geometry.scene import Motion
from geometry.states import State
from tests.app.files.assessments import SETUP, named, plain, provenance

KEYS = [
    "gantry_deg",
    "couch_deg",
    "clearance_mm",
    "slack_mm",
    "state",
    "machine_part",
    "couch_part",
    "machine_point_mm",
    "couch_point_mm",
]
# Single precision at a few metres, in mm.
SINGLE_MM = 1e-3


@cache
def pose() -> Pose:
    return assess_pose(SETUP, 30.0, -20.0)


def test_the_json_has_the_keys_of_the_contract_and_the_pose() -> None:
    content = json.loads(pose_json(pose()))
    assert list(content) == KEYS
    assert (content["gantry_deg"], content["couch_deg"]) == (30.0, 340.0)
    assert content["clearance_mm"] == pose().clearance_mm
    assert content["state"] == pose().state.value
    assert content["machine_part"].startswith("gantry/")
    apart = np.subtract(content["machine_point_mm"], content["couch_point_mm"])
    assert np.linalg.norm(apart) == pytest.approx(content["clearance_mm"], abs=1e-6)


def test_without_a_distance_the_json_has_null() -> None:
    nothing = replace(
        pose(),
        clearance_mm=np.nan,
        slack_mm=np.nan,
        state=State.UNPROVED,
        machine_part=None,
        couch_part=None,
        machine_point_mm=None,
        couch_point_mm=None,
    )
    content = json.loads(pose_json(nothing))
    assert [key for key in KEYS if content[key] is None] == [key for key in KEYS if key not in [*KEYS[:2], "state"]]


def test_a_point_that_is_no_point_is_null() -> None:
    content = json.loads(pose_json(replace(pose(), machine_point_mm=np.array([1.0, np.nan, 2.0]))))
    assert content["machine_point_mm"] is None


def fixed_points(pose: Pose) -> dict[str, np.ndarray]:
    """Return the corners of every part in the fixed system, by the turns of IEC 61217."""
    turns = {
        Motion.GANTRY: R_fixed_gantry(pose.gantry_deg),
        Motion.TURNTABLE: R_fixed_turntable(pose.couch_deg),
        Motion.STILL: np.eye(3),
    }
    return {
        part.label: np.concatenate([piece.vertices for piece in part.pieces]) @ turns[part.motion].T
        for part in pose.scene.parts
    }


def furthest(points: np.ndarray, others: np.ndarray) -> float:
    """Return how far the one set of points reaches from the other, at most."""
    return float(np.linalg.norm(points[:, None] - others[None], axis=2).min(axis=1).max())


def test_glb_has_a_named_node_a_part_in_metres_with_y_up(tmp_path: Path) -> None:
    path = tmp_path / "pose.glb"
    write_pose_model(pose(), provenance(plain()), path)
    scene = trimesh.load_scene(path)
    expected = fixed_points(pose())
    assert set(scene.graph.nodes_geometry) == set(expected)
    for name in scene.graph.nodes_geometry:
        matrix, geometry = scene.graph[name]
        x, y, z = trimesh.transform_points(scene.geometry[geometry].vertices, matrix).T
        fixed = np.column_stack([x, -z, y]) * 1000.0
        assert furthest(fixed, expected[name]) < SINGLE_MM
        assert furthest(expected[name], fixed) < SINGLE_MM


def test_glb_tells_where_it_comes_from_and_is_the_same_each_time(tmp_path: Path) -> None:
    one, other = tmp_path / "one.glb", tmp_path / "other.glb"
    for path in (one, other):
        write_pose_model(pose(), provenance(plain()), path)
    assert one.read_bytes() == other.read_bytes()
    story = dict(trimesh.load_scene(one).metadata["provenance"])
    assert story["Room"] == "Small room"
    assert story["Mark"].startswith("DEMONSTRATION")


@pytest.mark.parametrize("suffix", [".ply", ".stl"])
def test_ply_and_stl_are_in_mm_of_the_fixed_system(suffix: str, tmp_path: Path) -> None:
    path = tmp_path / f"pose{suffix.upper()}"
    write_pose_model(pose(), provenance(plain()), path)
    with path.open("rb") as stream:
        mesh = trimesh.load_mesh(stream, file_type=suffix[1:])
    expected = np.concatenate(list(fixed_points(pose()).values()))
    assert furthest(mesh.vertices, expected) < SINGLE_MM
    assert furthest(expected, mesh.vertices) < SINGLE_MM


def test_ply_says_in_its_header_where_it_comes_from(tmp_path: Path) -> None:
    path = tmp_path / "pose.ply"
    write_pose_model(pose(), provenance(named(plain(), "Größe", "Small room")), path)
    header = path.read_bytes().split(b"end_header")[0]
    assert b"comment Set-up: Gr\\xf6\\xdfe\n" in header
    assert b"comment Mark: DEMONSTRATION" in header
    assert trimesh.load_mesh(path).faces.shape[1] == 3


def test_stl_says_in_its_header_where_it_comes_from(tmp_path: Path) -> None:
    path = tmp_path / "pose.stl"
    write_pose_model(pose(), provenance(plain()), path)
    header = path.read_bytes()[:80]
    assert b"DEMONSTRATION" in header
    assert provenance(plain()).short_fingerprint.encode() in header
    # Readers take a file that begins so for text.
    assert not header.startswith(b"solid")


def test_every_piece_is_in_its_part_and_every_surface_is_closed() -> None:
    for mesh, part in zip(part_meshes(pose()), pose().scene.parts, strict=True):
        assert mesh.name == part.label
        surface = trimesh.Trimesh(mesh.vertices, mesh.faces)
        assert surface.is_watertight
        assert surface.body_count == len(part.pieces)


def test_parts_keep_their_colours_and_patients_get_one() -> None:
    colours = {part.name: part_colour(part) for part in pose().scene.parts}
    assert colours["head"] == "#cfd2d4"
    assert colours["patient"] not in {colours["table top"], colours["floor"]}


def test_another_suffix_is_refused_by_name(tmp_path: Path) -> None:
    with pytest.raises(BadInput, match=r"found the suffix '\.obj'; allowed: one of \.glb, \.ply, \.stl"):
        write_pose_model(pose(), provenance(plain()), tmp_path / "pose.obj")
    assert not list(tmp_path.iterdir())
