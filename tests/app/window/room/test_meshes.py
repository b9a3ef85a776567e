import numpy as np
import pytest

from app.window.room.meshes import MeshStore, display_mesh
from geometry.frames import moved, rotation_x, rotation_z, transform
from geometry.pieces import ConvexPiece, convex_piece
from tests.app.window.scenes import scene_of


def box(low: tuple[float, float, float], high: tuple[float, float, float]) -> ConvexPiece:
    ends = np.array([low, high], dtype=float)
    return convex_piece(
        np.array([[ends[i, 0], ends[j, 1], ends[k, 2]] for i in (0, 1) for j in (0, 1) for k in (0, 1)])
    )


def prism(sides: int, radius: float, low: float, high: float) -> ConvexPiece:
    angles = np.arange(sides) * 2.0 * np.pi / sides
    ring = radius * np.stack([np.cos(angles), np.sin(angles)], axis=-1)
    return convex_piece(np.concatenate([np.c_[ring, np.full(sides, z)] for z in (low, high)]))


def area_of(mesh: object) -> float:
    corners = mesh.points[mesh.triangles].astype(float)
    return (
        float(np.linalg.norm(np.cross(corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0]), axis=1).sum()) / 2
    )


def test_a_box_keeps_its_faces_flat_and_its_twelve_edges() -> None:
    mesh = display_mesh([box((0, 0, 0), (100, 200, 300))])
    assert len(mesh.edges) == 12
    assert area_of(mesh) == pytest.approx(2 * (100 * 200 + 100 * 300 + 200 * 300))
    assert np.abs(mesh.normals).max(axis=1) == pytest.approx(np.ones(len(mesh.normals)), abs=1e-5)


def test_light_on_a_cylinder_is_smooth_and_only_its_rims_are_edges() -> None:
    mesh = display_mesh([prism(36, 100.0, 0.0, 50.0)])
    assert len(mesh.edges) == 2 * 36
    side = np.abs(mesh.normals[:, 2]) < 0.5
    outwards = mesh.points[side, :2] / 100.0
    assert mesh.normals[side, :2] == pytest.approx(outwards, abs=1e-3)


def test_what_lies_between_pieces_of_a_part_is_left_out() -> None:
    halves = [prism(36, 100.0, 0.0, 50.0), prism(36, 100.0, 50.0, 120.0)]
    mesh = display_mesh(halves)
    whole = display_mesh([prism(36, 100.0, 0.0, 120.0)])
    assert area_of(mesh) == pytest.approx(area_of(whole))
    # No line where they meet.
    assert len(mesh.edges) == 2 * 36


def test_a_face_that_two_pieces_share_outside_is_kept() -> None:
    mesh = display_mesh([box((0, 0, 0), (100, 100, 100)), box((0, 0, 0), (100, 100, 100))])
    assert area_of(mesh) >= 6 * 100 * 100 - 1e-6


@pytest.mark.parametrize("name", ["c_arm_wide/head", "closed_bore/prostate"])
def test_nothing_that_can_be_seen_is_lost(name: str) -> None:
    """A ray from outside meets the surface where it enters the first of the part's pieces."""
    random = np.random.default_rng(4)
    for part in scene_of(name).parts:
        mesh = display_mesh(part.pieces)
        corners = mesh.points[mesh.triangles].astype(float)
        points = np.concatenate([piece.vertices for piece in part.pieces])
        centre, size = points.mean(axis=0), np.ptp(points, axis=0).max()
        for _ in range(4):
            out = random.normal(size=3)
            out /= np.linalg.norm(out)
            target = points[random.integers(len(points), size=3)].mean(axis=0)
            start = centre + 3.0 * size * out
            along = (target - start) / np.linalg.norm(target - start)
            # Where a piece is only grazed the ray may go either way (NaN).
            expected = np.min([_enters(piece, start, along) for piece in part.pieces])
            if np.isfinite(expected):
                assert _meets(corners, start, along) == pytest.approx(expected, abs=0.3), part.label


def _enters(piece: ConvexPiece, start: np.ndarray, along: np.ndarray) -> float:
    corners = piece.vertices[piece.faces]
    normals = np.cross(corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0])
    lengths = np.linalg.norm(normals, axis=1)
    normals, anchors = (normals / lengths[:, None])[lengths > 1e-3], corners[lengths > 1e-3, 0]
    rate, height = normals @ along, np.einsum("ij,ij->i", normals, start - anchors)
    if (height[np.abs(rate) < 1e-12] > 0).any():
        return np.inf
    crossing = -height / np.where(np.abs(rate) < 1e-12, 1.0, rate)
    first, last = crossing[rate < -1e-12].max(), crossing[rate > 1e-12].min()
    if abs(last - first) < 1.0:
        return np.nan
    return float(first) if first < last else np.inf


def _meets(corners: np.ndarray, start: np.ndarray, along: np.ndarray) -> float:
    one, other = corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0]
    normal = np.cross(one, other)
    rate = normal @ along
    distance = np.einsum("ij,ij->i", normal, corners[:, 0] - start) / np.where(rate == 0, 1, rate)
    points = start + distance[:, None] * along - corners[:, 0]
    square = np.einsum("ij,ij->i", normal, normal)
    u = np.einsum("ij,ij->i", np.cross(points, other), normal) / square
    v = np.einsum("ij,ij->i", np.cross(one, points), normal) / square
    inside = (rate < 0) & (u >= -1e-6) & (v >= -1e-6) & (u + v <= 1 + 1e-6)
    return float(distance[inside].min())


def test_the_store_finds_moved_pieces_again_and_tells_where_they_are() -> None:
    store = MeshStore()
    pieces = [box((0, 0, 0), (100, 200, 300)), prism(12, 50.0, 300.0, 400.0)]
    mesh, first = store.mesh_of(pieces, 40.0, with_edges=True)
    assert np.array_equal(first, np.eye(4))
    matrix = transform(rotation_z(30.0) @ rotation_x(12.0), np.array([5.0, -700.0, 33.0]))
    again, found = store.mesh_of([piece.placed(matrix) for piece in pieces], 40.0, with_edges=True)
    assert again is mesh
    assert found == pytest.approx(matrix, abs=1e-8)


def test_the_store_is_not_deceived_by_other_shapes_with_the_same_faces() -> None:
    store = MeshStore()
    piece = box((0, 0, 0), (100, 200, 300))
    mesh, _ = store.mesh_of([piece], 40.0, with_edges=True)
    grown = ConvexPiece(piece.vertices * [1.0, 1.0, 1.1], piece.faces, piece.neighbour_counts, piece.neighbours)
    mirrored = ConvexPiece(piece.vertices * [1.0, 1.0, -1.0], piece.faces, piece.neighbour_counts, piece.neighbours)
    for other in (grown, mirrored):
        remade, matrix = store.mesh_of([other], 40.0, with_edges=True)
        assert remade is not mesh
        assert np.array_equal(matrix, np.eye(4))
        assert np.ptp(remade.points, axis=0) == pytest.approx(np.ptp(other.vertices, axis=0), rel=1e-5)
    # One of two pieces moved by itself is another part.
    pair = [piece, prism(12, 50.0, 300.0, 400.0)]
    both, _ = store.mesh_of(pair, 40.0, with_edges=True)
    apart = [piece, pair[1].placed(transform(np.eye(3), np.array([0.0, 0.0, 1.0])))]
    assert store.mesh_of(apart, 40.0, with_edges=True)[0] is not both


def test_the_store_forgets_the_oldest() -> None:
    store = MeshStore(capacity=2)
    pieces = [box((0, 0, 0), (size, 10, 10)) for size in (10, 20, 30)]
    meshes = [store.mesh_of([piece], 40.0, with_edges=True)[0] for piece in pieces]
    assert store.mesh_of([pieces[2]], 40.0, with_edges=True)[0] is meshes[2]
    assert store.mesh_of([pieces[0]], 40.0, with_edges=True)[0] is not meshes[0]


def test_moved_points_land_on_moved_pieces() -> None:
    part = next(part for part in scene_of("c_arm_wide/head").parts if part.label == "couch/trunk")
    store = MeshStore()
    store.mesh_of(part.pieces, 75.0, with_edges=False)
    shifted = [piece.placed(transform(rotation_z(3.0), np.array([1.0, 2.0, 3.0]))) for piece in part.pieces]
    mesh, matrix = store.mesh_of(shifted, 75.0, with_edges=False)
    corners = np.concatenate([piece.vertices for piece in shifted])
    placed = moved(matrix, mesh.points.astype(float))
    apart = np.linalg.norm(placed[:, None] - corners[None], axis=2).min(axis=1)
    assert apart.max() < 1e-3
