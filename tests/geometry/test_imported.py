"""Imported surfaces: their pieces contain them, stand out no more than stated, and bad surfaces are refused.

The true solids are told by closed forms or by counting voxels here, never by the code under test.
"""

import math
from collections.abc import Iterator
from itertools import pairwise

import numpy as np
import pytest
import shapely
import trimesh
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray
from scipy.spatial import ConvexHull
from scipy.spatial.transform import Rotation

from geometry.decompose import Faceted
from geometry.errors import GeometryError
from geometry.imported import ClosedMesh, ContourStack
from geometry.imported.hulls import distance_beyond, hull_of, simpler_hull
from geometry.imported.mesh import MOST_SURFACES

Array = NDArray[np.float64]
Flags = NDArray[np.bool_]
VOXEL_MM = 20.0


def outside_mm(faceted: Faceted, points: Array) -> float:
    """Return how far the worst of the points lies beyond all pieces' planes: at most 0 where the pieces hold all."""
    beyond = np.full(len(points), np.inf)
    for piece in faceted.pieces:
        planes = ConvexHull(piece).equations
        beyond = np.minimum(beyond, (points @ planes[:, :3].T + planes[:, 3]).max(axis=1))
    return float(beyond.max())


def samples(faceted: Faceted, rng: np.random.Generator, each: int = 40) -> Array:
    """Return vertices of the pieces and random points between them."""
    drawn = []
    for piece in faceted.pieces:
        weights = rng.dirichlet(np.full(len(piece), 0.2), each)
        drawn += [piece, weights @ piece]
    return np.vstack(drawn)


def assert_sound(faceted: Faceted) -> None:
    for piece in faceted.pieces:
        assert len(ConvexHull(piece).vertices) == len(piece) >= 4


class Voxels:
    """Cubes that hang together, as a closed surface and as the plainest possible solid."""

    def __init__(self, filled: Flags, turn: Rotation) -> None:
        self.filled = np.pad(filled, 1)
        self.turn = turn
        corners, faces = [], []
        for axis in range(3):
            for side in (1, -1):
                seen = self.filled & ~np.roll(self.filled, -side, axis=axis)
                u, v = ((axis + 1) % 3, (axis + 2) % 3) if side == 1 else ((axis + 2) % 3, (axis + 1) % 3)
                for cell in np.argwhere(seen):
                    base = cell + (np.eye(3)[axis] if side == 1 else 0)
                    square = [base, base + np.eye(3)[u], base + np.eye(3)[u] + np.eye(3)[v], base + np.eye(3)[v]]
                    at = 4 * len(faces) // 2
                    faces += [[at, at + 1, at + 2], [at, at + 2, at + 3]]
                    corners += square
        unique, index = np.unique(np.array(corners), axis=0, return_inverse=True)
        self.vertices = turn.apply(unique * VOXEL_MM)
        self.faces = index.ravel()[np.array(faces)]

    def distance_mm(self, points: Array) -> Array:
        """Return the distance of each point to the nearest cube."""
        local = self.turn.inv().apply(points) / VOXEL_MM
        low = np.argwhere(self.filled)[None]
        gap = np.maximum(np.maximum(low - local[:, None], local[:, None] - low - 1), 0.0)
        nearest: Array = np.linalg.norm(gap, axis=2).min(axis=1) * VOXEL_MM
        return nearest

    def random_points(self, rng: np.random.Generator, count: int) -> Array:
        cells = np.argwhere(self.filled)
        return self.turn.apply((cells[rng.integers(len(cells), size=count)] + rng.random((count, 3))) * VOXEL_MM)


def grown_blob(rng: np.random.Generator, shape: tuple[int, int, int], size: int) -> Flags:
    """Return a random connected set of voxels."""
    filled = np.zeros(shape, dtype=bool)
    filled[tuple(int(n) // 2 for n in shape)] = True
    while filled.sum() < size:
        rim = np.zeros_like(filled)
        for axis in range(3):
            for step in (1, -1):
                moved = np.roll(filled, step, axis=axis)
                edge = [slice(None)] * 3
                edge[axis] = slice(0, 1) if step == 1 else slice(-1, None)
                moved[tuple(edge)] = False
                rim |= moved
        free = np.argwhere(rim & ~filled)
        filled[tuple(free[rng.integers(len(free))])] = True
    return filled


@given(st.integers(0, 2**32 - 1), st.booleans(), st.integers(5, 25))
@settings(max_examples=4)
def test_pieces_of_any_voxel_surface_contain_it_and_stand_out_no_more_than_stated(
    seed: int, turned: bool, size: int
) -> None:
    """Straight ones have faces and edges exactly where cuts are made; turned ones are in general position."""
    rng = np.random.default_rng(seed)
    turn = Rotation.random(rng=rng) if turned else Rotation.identity()
    solid = Voxels(grown_blob(rng, (3, 4, 6), size), turn)
    mesh = ClosedMesh(solid.vertices, solid.faces, most_pieces=20)
    faceted = mesh.faceted(0.5)
    assert_sound(faceted)
    assert len(faceted.pieces) <= 20
    assert outside_mm(faceted, solid.random_points(rng, 2000)) <= 1e-6
    assert outside_mm(faceted, solid.vertices) <= 1e-6
    assert solid.distance_mm(samples(faceted, rng)).max() <= faceted.excess_mm + 1e-6


def test_the_solid_inside_a_mesh_is_that_of_its_voxels() -> None:
    rng = np.random.default_rng(5)
    solid = Voxels(grown_blob(rng, (5, 5, 5), 40), Rotation.random(rng=rng))
    mesh = ClosedMesh(solid.vertices, solid.faces)
    low, high = solid.vertices.min(axis=0) - 5.0, solid.vertices.max(axis=0) + 5.0
    points = rng.uniform(low, high, (4000, 3))
    np.testing.assert_array_equal(mesh.contains(points), solid.distance_mm(points) == 0.0)


def test_a_convex_mesh_is_one_piece_without_excess() -> None:
    box = trimesh.creation.box((100.0, 200.0, 300.0))
    faceted = ClosedMesh(box.vertices, box.faces).faceted(0.5)
    assert faceted.excess_mm == 0.0
    np.testing.assert_array_equal(sorted(map(tuple, faceted.pieces[0])), sorted(map(tuple, box.vertices)))


def test_a_fine_sphere_becomes_one_simpler_piece_about_it() -> None:
    """Closed form: no point of a hull about a sphere of 100 mm is nearer to its middle than the facets of the mesh."""
    sphere = trimesh.creation.icosphere(4, 100.0)
    faceted = ClosedMesh(sphere.vertices, sphere.faces).faceted(0.5)
    (piece,) = faceted.pieces
    assert len(piece) < 0.5 * len(sphere.vertices)
    assert outside_mm(faceted, sphere.vertices) <= 0.0
    farthest = np.linalg.norm(piece, axis=1).max()
    assert farthest - 100.0 <= faceted.excess_mm <= 3.0


def test_a_ring_keeps_its_hole() -> None:
    """Closed form of a torus, 100 and 30 mm; the mesh is inscribed, so that its solid lies within 0.5 mm of it."""
    torus = trimesh.creation.torus(100.0, 30.0, major_sections=48, minor_sections=24)
    faceted = ClosedMesh(torus.vertices, torus.faces).faceted(0.5)
    rng = np.random.default_rng(2)

    def beyond_torus_mm(points: Array) -> Array:
        return np.hypot(np.hypot(points[:, 0], points[:, 1]) - 100.0, points[:, 2]) - 30.0

    points = rng.uniform(-130.0, 130.0, (20000, 3))
    inside = points[beyond_torus_mm(points) < -0.6]
    assert ClosedMesh(torus.vertices, torus.faces).contains(inside).all()
    assert outside_mm(faceted, np.vstack([inside, torus.vertices])) <= 1e-9
    assert beyond_torus_mm(samples(faceted, rng)).max() <= faceted.excess_mm <= 15.0


def test_legs_side_by_side_are_parted_though_they_join_above() -> None:
    """A fold that a hull would fill: two legs of 100 x 100 mm, 60 mm apart, under a trunk."""
    filled = np.zeros((13, 5, 14), dtype=bool)
    filled[:, :, 8:] = True
    filled[:5, :, :8] = True
    filled[8:, :, :8] = True
    solid = Voxels(filled, Rotation.identity())
    faceted = ClosedMesh(solid.vertices, solid.faces).faceted(0.5)
    assert len(faceted.pieces) <= 12
    assert faceted.excess_mm <= 10.0
    gap = np.array([[6.5, 2.5, 4.0]]) * VOXEL_MM + VOXEL_MM
    assert outside_mm(faceted, gap) > 20.0


def test_surfaces_may_overlap_lie_inside_another_and_be_inside_out() -> None:
    big, small = trimesh.creation.box((100.0,) * 3), trimesh.creation.box((20.0,) * 3)
    across = trimesh.creation.box((300.0, 30.0, 30.0))
    small.invert()
    across.invert()
    all_three = trimesh.util.concatenate([big, small, across])
    mesh = ClosedMesh(all_three.vertices, all_three.faces)
    faceted = mesh.faceted(0.5)
    rng = np.random.default_rng(3)
    points = rng.uniform(-160.0, 160.0, (5000, 3))
    in_big = np.all(np.abs(points) <= 50.0, axis=1)
    in_across = np.all(np.abs(points) <= [150.0, 15.0, 15.0], axis=1)
    np.testing.assert_array_equal(mesh.contains(points), in_big | in_across)
    assert outside_mm(faceted, points[in_big | in_across]) <= 0.0


def test_a_body_takes_at_most_200_pieces() -> None:
    """An invented body of capsules whose arms touch the trunk; the capsules are the closed form."""
    capsules = [
        ((0, 0, 250), (0, 0, 620), 120.0),
        ((0, 0, 740), (0, 0, 800), 85.0),
        ((0, 0, 600), (0, 0, 740), 60.0),
        *(((s * 150, 0, 600), (s * 175, 0, 100), 45.0) for s in (-1, 1)),
        *(((s * 85, 0, 250), (s * 100, 0, -650), 75.0) for s in (-1, 1)),
    ]
    pieces = []
    for start, end, radius in capsules:
        line = np.subtract(end, start)
        capsule = trimesh.creation.capsule(height=float(np.linalg.norm(line)), radius=radius, count=[24, 24])
        capsule.apply_transform(trimesh.geometry.align_vectors([0, 0, 1], line))
        capsule.apply_translation(start)
        pieces.append(capsule)
    body = trimesh.util.concatenate(pieces)
    faceted = ClosedMesh(body.vertices, body.faces).faceted(0.5)
    assert outside_mm(faceted, body.vertices) <= 1e-9
    assert len(faceted.pieces) <= 200


@pytest.mark.parametrize("most", [1, 7])
def test_there_are_never_more_pieces_than_allowed(most: int) -> None:
    torus = trimesh.creation.torus(100.0, 30.0, major_sections=24, minor_sections=12)
    faceted = ClosedMesh(torus.vertices, torus.faces, wanted_excess_mm=0.5, most_pieces=most).faceted(0.5)
    assert len(faceted.pieces) <= most
    assert outside_mm(faceted, torus.vertices) <= 1e-9


def bad_meshes() -> Iterator[tuple[str, Array, NDArray[np.int64], str]]:
    box = trimesh.creation.box((10.0, 10.0, 10.0))
    vertices, faces = np.array(box.vertices), np.array(box.faces)
    yield "open", vertices, faces[:-1], "3 open edges; allowed: a closed surface"
    yield "not a number", np.where(vertices == vertices[0], np.nan, vertices), faces, "vertex 1 = .*nan.*; allowed"
    yield "too far away", vertices * 1e5, faces, "allowed: numbers from -100000 to 100000"
    yield "empty", np.empty((0, 3)), np.empty((0, 3), dtype=int), "allowed: 4 or more"
    yield "no faces", vertices, np.empty((0, 3), dtype=int), "0 triangles; allowed: 4 to 200000"
    yield "plane points", vertices[:, :2], faces, r"shape \(8, 2\); allowed"
    yield "no such vertex", vertices, faces + 3, "vertices 3 to 10; allowed: 0 to 7"
    yield "too many", vertices, np.tile(faces, (20_000, 1)), "240000 triangles; allowed: 4 to 200000"
    yield "flat", vertices * [1.0, 1.0, 0.0], faces, "volume = 0 mm³; allowed: 1"
    yield "one face turned", vertices, np.vstack([faces[:1, ::-1], faces[1:]]), "3 edges with triangles turned opposite"
    many = trimesh.util.concatenate([box.copy().apply_translation((20.0 * k, 0, 0)) for k in range(MOST_SURFACES + 1)])
    yield "too many surfaces", np.array(many.vertices), np.array(many.faces), "101 surfaces .*; allowed: at most 100"


@pytest.mark.parametrize(("vertices", "faces", "message"), [case[1:] for case in bad_meshes()], ids=lambda _: "")
def test_a_bad_mesh_is_refused_with_what_was_found_and_what_is_allowed(
    vertices: Array, faces: NDArray[np.int64], message: str
) -> None:
    with pytest.raises(GeometryError, match=message):
        ClosedMesh(vertices, faces)


def circle(radius: float, centre: tuple[float, float] = (0.0, 0.0), count: int = 60) -> Array:
    turn = np.linspace(0.0, 2.0 * math.pi, count, endpoint=False)
    return np.column_stack([np.cos(turn), np.sin(turn)]) * radius + np.array(centre)


def distance_to_stack_mm(contours: list[tuple[float, Array]], points: Array) -> Array:
    """Return the distance of points to outlines drawn out by half of the distance between equal slices."""
    heights = np.array([z for z, _ in contours])
    half = np.min(np.diff(np.unique(heights))) / 2.0
    distances = []
    for z, outline in contours:
        across = shapely.distance(shapely.Polygon(outline).buffer(0), shapely.points(points[:, :2]))
        along = np.maximum(np.abs(points[:, 2] - z) - half, 0.0)
        distances.append(np.hypot(across, along))
    nearest: Array = np.min(distances, axis=0)
    return nearest


def test_a_stack_of_circles_is_a_cylinder_that_goes_half_a_slice_further() -> None:
    stack = ContourStack(tuple((z, circle(80.0)) for z in (-10.0, -5.0, 0.0, 5.0)))
    points = np.array([[0, 0, -12.4], [0, 0, -12.6], [0, 79, 7.4], [0, 0, 7.6], [81, 0, 0]], dtype=float)
    assert stack.contains(points).tolist() == [True, False, True, False, False]
    faceted = stack.faceted(0.5)
    (piece,) = faceted.pieces
    assert (piece[:, 2].min(), piece[:, 2].max()) == pytest.approx((-12.5, 7.5), abs=1e-5)
    assert np.hypot(*piece[:, :2].T).max() - 80.0 <= faceted.excess_mm <= 2.5


@given(st.integers(0, 2**32 - 1))
@settings(max_examples=4)
def test_pieces_contain_random_contours_and_straight_lines_between_them(seed: int) -> None:
    """Star-shaped outlines that wander and change from slice to slice, corner to corner."""
    rng = np.random.default_rng(seed)
    corners, gap = 24, 4.0
    turn = np.linspace(0.0, 2.0 * math.pi, corners, endpoint=False)
    radii = 60.0 + np.cumsum(rng.normal(0.0, 1.5, (8, corners)), axis=0) + 25.0 * np.cos(3.0 * turn + rng.random())
    drift = np.cumsum(rng.normal(0.0, 1.0, (8, 2)), axis=0)
    rings = np.maximum(radii, 8.0)[:, :, None] * np.column_stack([np.cos(turn), np.sin(turn)]) + drift[:, None]
    contours = [(gap * k, ring) for k, ring in enumerate(rings)]
    stack = ContourStack(tuple(contours), most_pieces=40)
    faceted = stack.faceted(0.5)
    assert_sound(faceted)
    part = rng.random((7, corners, 1))
    between = rings[:-1] * (1.0 - part) + rings[1:] * part
    lines = np.concatenate([between, (np.arange(7)[:, None, None] + part) * gap], axis=2).reshape(-1, 3)
    assert outside_mm(faceted, lines) <= 1e-6
    points = rng.uniform([-150, -150, -3], [150, 150, 31], (4000, 3))
    inside = stack.contains(points)
    assert inside.any()
    assert outside_mm(faceted, points[inside]) <= 1e-6
    np.testing.assert_array_less(0.0, distance_to_stack_mm(contours, points[~inside]))
    # The solid between two slices is what is in either; against the nearest slice alone it is that much larger.
    step = max(shapely.hausdorff_distance(shapely.Polygon(a), shapely.Polygon(b)) for a, b in pairwise(rings))
    assert distance_to_stack_mm(contours, samples(faceted, rng)).max() <= faceted.excess_mm + step


def test_straight_lines_are_contained_where_a_fold_is_cut() -> None:
    """A horseshoe that leans: 3 mm aside from slice to slice, 3 mm apart. Its corners move on straight lines."""
    arms = [(-60, -60), (60, -60), (60, 60), (30, 60), (30, -20), (-30, -20), (-30, 60), (-60, 60)]
    rings = np.array([np.add(arms, [3.0 * k, 1.0 * k]) for k in range(12)])
    faceted = ContourStack(tuple((3.0 * k, ring) for k, ring in enumerate(rings))).faceted(0.5)
    assert len(faceted.pieces) > 2
    along = np.linspace(0.0, 11.0, 89)
    lines = np.vstack([np.column_stack([ring[0] + 3.0 * along, ring[1] + along, 3.0 * along]) for ring in rings[0]])
    assert outside_mm(faceted, lines) <= 1e-6
    assert outside_mm(faceted, np.array([[18.0 + 0.0, 46.0, 18.0]])) > 5.0


def test_legs_that_part_from_a_trunk_are_pieces_of_their_own() -> None:
    legs = [(5.0 * k, circle(50.0, (s * 70.0, 0.0))) for k in range(10) for s in (-1, 1)]
    trunk = [(5.0 * k, np.array([[-120.0, -50], [120, -50], [120, 50], [-120, 50]])) for k in range(10, 16)]
    faceted = ContourStack(tuple(trunk + legs)).faceted(0.5)
    assert outside_mm(faceted, np.array([[0.0, 0.0, 20.0]])) > 5.0
    assert outside_mm(faceted, np.array([[70.0, 0.0, 20.0], [-70.0, 0.0, 20.0], [0.0, 0.0, 60.0]])) <= 0.0


def test_holes_and_overlaps_on_a_slice_are_filled() -> None:
    square = np.array([[-50.0, -50], [50, -50], [50, 50], [-50, 50]])
    slices = [(z, outline) for z in (0.0, 4.0) for outline in (square, square * 0.5, np.add(square, [60.0, 0.0]))]
    stack = ContourStack(tuple(slices))
    assert stack.contains(
        np.array([[0.0, 0.0, 2.0], [40.0, 0.0, 2.0], [109.0, 0.0, 2.0], [111.0, 0.0, 2.0]])
    ).tolist() == [
        True,
        True,
        True,
        False,
    ]


def test_an_outline_that_crosses_itself_or_has_no_width_is_kept() -> None:
    bow_tie = np.array([[-50.0, -30], [50, 30], [50, -30], [-50, 30]])
    needle = np.array([[100.0, 0.0], [150.0, 0.0], [200.0, 0.0]])
    spike = np.array([[0.0, 100], [20, 100], [20, 120], [20, 180], [20, 120], [0, 120]])
    contours = [(z, outline) for z in (0.0, 3.0) for outline in (bow_tie, needle, spike)]
    faceted = ContourStack(tuple(contours)).faceted(0.5)
    points = np.vstack([np.column_stack([outline, np.full(len(outline), z)]) for z, outline in contours])
    assert outside_mm(faceted, points) <= 1e-9
    assert outside_mm(faceted, np.array([[45.0, 20.0, 1.0], [-45.0, 20.0, 1.0]])) <= 0.0


def test_slices_may_come_in_any_order_and_heights_may_differ_by_rounding() -> None:
    contours = [(z, circle(40.0, (x, 0.0))) for z, x in ((10.0, 0.0), (0.0, 0.0), (5.004, 60.0), (5.0, -60.0))]
    stack = ContourStack(tuple(contours))
    assert stack.contains(np.array([[60.0, 0.0, 5.0], [-60.0, 0.0, 5.0], [0.0, 0.0, -2.4]])).all()


def bad_stacks() -> Iterator[tuple[list[tuple[float, Array]], str]]:
    ring = circle(50.0)
    yield [], "contours on 0 slices; allowed: 2 or more"
    yield [(0.0, ring), (0.005, ring)], "contours on 1 slices; allowed: 2 or more"
    yield [(0.0, ring), (3.0, ring[:2])], r"contour 2 of shape \(2, 2\); allowed: 3 or more"
    yield [(0.0, ring), (math.nan, ring)], "z of contour 2 = nan"
    yield [(0.0, ring), (3.0, np.where(ring == ring[4], math.inf, ring))], r"point 5 of contour 2 = \[inf"
    yield [(0.0, ring), (3.0, ring * 1e9)], "allowed: numbers from -100000 to 100000"
    yield [(float(k), ring) for k in range(2001)], "2001 contours; allowed: at most 2000"
    yield (
        [(0.0, np.tile(ring, (5000, 1))), (1.0, np.tile(ring, (5000, 1)))],
        "600000 points .*; allowed: at most 500000",
    )


@pytest.mark.parametrize(("contours", "message"), list(bad_stacks()), ids=lambda _: "")
def test_bad_contours_are_refused_with_what_was_found_and_what_is_allowed(
    contours: list[tuple[float, Array]], message: str
) -> None:
    with pytest.raises(GeometryError, match=message):
        ContourStack(tuple(contours))


def test_a_simpler_hull_contains_the_hull_and_stays_near_it() -> None:
    rng = np.random.default_rng(4)
    for _ in range(2):
        points = rng.normal(size=(1000, 3)) * [40.0, 25.0, 10.0]
        points /= np.linalg.norm(points / [40.0, 25.0, 10.0], axis=1)[:, None]
        hull = hull_of(points)
        simpler = simpler_hull(hull, 0.5)
        assert len(simpler.vertices) < 0.5 * len(hull.vertices)
        assert simpler.holds(hull.vertices, 0.0)
        assert distance_beyond(hull, simpler.vertices) <= 1.5


def test_distance_to_a_hull_against_the_closed_form_of_a_box() -> None:
    corners = np.array([[x, y, z] for x in (-1.0, 1.0) for y in (-2.0, 2.0) for z in (-3.0, 3.0)])
    rng = np.random.default_rng(6)
    for point in rng.uniform(-8.0, 8.0, (50, 3)):
        expected = float(np.linalg.norm(np.maximum(np.abs(point) - [1.0, 2.0, 3.0], 0.0)))
        assert distance_beyond(hull_of(corners), point[None]) == pytest.approx(expected, abs=1e-9)


@pytest.mark.parametrize("flat", [np.eye(3)[:1], np.eye(3)[:2], np.eye(3), np.zeros((5, 3))])
def test_flat_points_are_given_a_little_thickness(flat: Array) -> None:
    hull = hull_of(100.0 * flat)
    assert hull.holds(100.0 * flat, 0.0)
    assert 0.0 < hull.volume_mm3 < 100.0
