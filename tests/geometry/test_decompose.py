"""Cutting concave polygons and turning pieces: nothing is lost, little is added, every part is convex."""

import math
from itertools import pairwise

import numpy as np
import pytest
import shapely
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray
from scipy.spatial import ConvexHull
from scipy.spatial.transform import Rotation

from geometry.decompose import convex_parts, corners, revolved
from geometry.errors import GeometryError
from geometry.outlines import MOST_VERTICES, regular_polygon

Array = NDArray[np.float64]

few = settings(max_examples=20, deadline=None)

ELL = ((0, 0), (100, 0), (100, 20), (20, 20), (20, 100), (0, 100))
CHANNEL = ((0, 0), (100, 0), (100, 100), (80, 100), (80, 20), (20, 20), (20, 100), (0, 100))
COMB = (
    (0, 0),
    (90, 0),
    (90, 50),
    (70, 50),
    (70, 20),
    (60, 20),
    (60, 50),
    (30, 50),
    (30, 20),
    (20, 20),
    (20, 50),
    (0, 50),
)
TABLE = ((-265, 0), (265, 0), (265, -20), (200, -70), (-200, -70), (-265, -20))
CORE = ((-240, -10), (-190, -60), (190, -60), (240, -10))
BORE = shapely.Polygon(700.0 * regular_polygon(48), [400.0 * regular_polygon(48)])


def reflex_count(polygon: shapely.Polygon) -> int:
    """The number of corners of more than 180 deg inside of the polygon."""
    count = 0
    for ring in (polygon.exterior, *polygon.interiors):
        points = np.array(shapely.orient_polygons(polygon).exterior.coords if ring is polygon.exterior else ring.coords)
        if ring is not polygon.exterior and shapely.is_ccw(ring):
            points = points[::-1]
        arriving = np.diff(points, axis=0)
        leaving = np.roll(arriving, -1, axis=0)
        count += int(np.sum(arriving[:, 0] * leaving[:, 1] < arriving[:, 1] * leaving[:, 0]))
    return count


def assert_cut(polygon: shapely.Polygon, parts: tuple[Array, ...]) -> None:
    """The parts are convex, counter-clockwise, made of the polygon's own vertices, and their union is the polygon."""
    vertices = {tuple(point) for ring in (polygon.exterior, *polygon.interiors) for point in ring.coords}
    for part in parts:
        edges = np.roll(part, -1, axis=0) - part
        after = np.roll(edges, -1, axis=0)
        assert len(part) >= 3
        assert np.all(edges[:, 0] * after[:, 1] - edges[:, 1] * after[:, 0] > 0.0)
        assert {tuple(point) for point in part} <= vertices
    union = shapely.union_all([shapely.Polygon(part) for part in parts])
    assert union.symmetric_difference(polygon).area <= 1e-9 * polygon.area
    assert sum(shapely.Polygon(part).area for part in parts) == pytest.approx(polygon.area, rel=1e-9)


@pytest.mark.parametrize(
    ("polygon", "count"),
    [
        (shapely.Polygon(TABLE), 1),
        (shapely.Polygon(ELL), 2),
        (shapely.Polygon(CHANNEL), 3),
        (shapely.Polygon(COMB), 4),
        # A frame of convex rings needs a part for each corner of the hole less what two opposite cuts can share.
        (shapely.Polygon(TABLE, [CORE]), 4),
    ],
)
def test_known_polygons_take_the_fewest_parts(polygon: shapely.Polygon, count: int) -> None:
    parts = convex_parts(polygon)
    assert_cut(polygon, parts)
    assert len(parts) == count


@pytest.mark.parametrize(
    "polygon",
    [
        BORE,
        shapely.Polygon(
            BORE.exterior, [80.0 * regular_polygon(16) + (x, y) for x in (-300, 0, 300) for y in (-300, 300)]
        ),
        # A hole that touches the edge at one point, and vertices in the middle of straight sides.
        shapely.Polygon(((0, 0), (10, 0), (10, 10), (0, 10)), [((5, 0), (7, 5), (3, 5))]),
        shapely.Polygon(((0, 0), (5, 0), (10, 0), (10, 5), (10, 10), (5, 10), (5, 7), (5, 5), (2, 5), (0, 5))),
    ],
)
def test_polygons_with_holes_and_straight_corners_are_cut_whole(polygon: shapely.Polygon) -> None:
    parts = convex_parts(polygon)
    vertices = np.array([point for part in parts for point in part])
    assert shapely.distance(shapely.points(vertices), polygon).max() == 0.0
    assert_cut(polygon, parts)
    # Source: Hertel and Mehlhorn 1983 (from memory): no corner keeps more than two diagonals.
    assert len(parts) <= 2 * reflex_count(polygon) + 1


@given(st.integers(0, 2**32 - 1), st.integers(4, 60), st.floats(0.0, 0.95), st.floats(-5000.0, 5000.0))
@few
def test_star_shaped_polygons_are_cut_whole(seed: int, size: int, roughness: float, shift: float) -> None:
    random = np.random.default_rng(seed)
    turn = np.cumsum(random.uniform(0.1, 1.0, size))
    turn *= 2.0 * math.pi / turn[-1]
    radii = 200.0 * (1.0 - roughness * random.uniform(0.0, 1.0, size))
    polygon = shapely.Polygon(np.column_stack([radii * np.cos(turn) + shift, radii * np.sin(turn)]))
    parts = convex_parts(polygon)
    assert_cut(polygon, parts)
    assert len(parts) <= 2 * reflex_count(polygon) + 1


@pytest.mark.parametrize("dent", [1e-3, 1e-6, 1e-9, 1e-11, 1e-13])
def test_dents_down_to_rounding_lose_nothing(dent: float) -> None:
    polygon = shapely.Polygon(
        ((0, 0), (250, dent), (500, 0), (500, 80), (300, 80 - dent), (20, 80 - 3 * dent), (0, 80))
    )
    parts = convex_parts(polygon)
    union = shapely.union_all([shapely.Polygon(part) for part in parts])
    assert union.buffer(1e-9).covers(polygon)
    assert union.area == pytest.approx(polygon.area, rel=1e-9)
    for part in parts:
        # Every part can be made a prism that a hull code takes for a solid.
        ends = [np.column_stack([part, np.full(len(part), z)]) for z in (0.0, 100.0)]
        assert len(ConvexHull(np.vstack(ends)).vertices) == 2 * len(part)


@pytest.mark.parametrize(
    "polygon",
    [
        shapely.Polygon(((0, 0), (10, 10), (10, 0), (0, 10))),
        shapely.Polygon(),
        shapely.Polygon(regular_polygon(MOST_VERTICES + 1)),
    ],
)
def test_polygons_that_cannot_be_cut_are_refused(polygon: shapely.Polygon) -> None:
    with pytest.raises(GeometryError, match="allowed"):
        convex_parts(polygon)


def test_corners_leave_out_what_is_straight_or_inside() -> None:
    square = [(0.0, 0.0), (5.0, -1e-13), (10.0, 0.0), (10.0, 10.0), (4.0, 4.0), (0.0, 10.0), (0.0, 0.0)]
    assert sorted(map(tuple, corners(np.array(square)))) == [(0.0, 0.0), (0.0, 10.0), (10.0, 0.0), (10.0, 10.0)]
    assert corners(np.array([(0.0, 0.0), (5.0, 5.0), (10.0, 10.0)])).shape == (0, 2)


def random_piece(random: np.random.Generator, centre: Array) -> Array:
    points = random.normal(0.0, 60.0, (12, 3)) + centre
    return points[ConvexHull(points).vertices]


def inside_piece(points: Array, piece: Array) -> NDArray[np.bool_]:
    planes = ConvexHull(piece).equations
    return np.all(points @ planes[:, :3].T + planes[:, 3] <= 1e-9 * np.abs(piece).max(), axis=1)


@given(st.integers(0, 2**32 - 1), st.integers(1, 3), st.floats(0.05, 2.0))
@few
def test_all_that_pieces_sweep_in_a_turn_lies_in_their_solids_of_revolution(seed: int, count: int, most: float) -> None:
    random = np.random.default_rng(seed)
    pieces = [random_piece(random, random.uniform(-300.0, 300.0, 3)) for _ in range(count)]
    turned = revolved(pieces, most)
    assert 1 <= len(turned.pieces) <= count
    for piece in pieces:
        weights = random.dirichlet(np.full(len(piece), 0.3), 300)
        swept = Rotation.from_euler("z", random.uniform(0.0, 360.0, (300, 1)), degrees=True).apply(weights @ piece)
        held = np.any([inside_piece(swept, solid) for solid in turned.pieces], axis=0)
        assert held.all()
    assert turned.excess_mm <= most


@given(st.integers(0, 2**32 - 1), st.floats(0.05, 2.0))
@few
def test_excess_over_the_solid_of_revolution_is_stated(seed: int, most: float) -> None:
    random = np.random.default_rng(seed)
    piece = random_piece(random, random.uniform(-300.0, 300.0, 3))
    turned = revolved([piece], most)
    # The true solid of revolution in the half-plane (r, z), from the piece's vertices and their feet on the axis.
    profile = np.column_stack([np.hypot(piece[:, 0], piece[:, 1]), piece[:, 2]])
    half_plane = shapely.MultiPoint(np.vstack([profile, profile * (0.0, 1.0)])).convex_hull
    vertices = turned.pieces[0]
    radii = np.hypot(vertices[:, 0], vertices[:, 1])
    observed = shapely.distance(shapely.points(radii, vertices[:, 2]), half_plane).max()
    assert observed <= turned.excess_mm + 1e-9
    assert turned.excess_mm <= most
    assert len(ConvexHull(vertices).vertices) == len(vertices)


def test_volume_of_a_turned_box_against_its_closed_form() -> None:
    x, y, z = 600.0, 300.0, 200.0
    box = np.array([[i, j, k] for i in (-x / 2, x / 2) for j in (-y / 2, y / 2) for k in (-z - 450.0, -450.0)])
    turned = revolved([box], 0.5)
    (piece,) = turned.pieces
    # Source: closed form, a prism over a regular n-gon about the circle through the box's corners.
    radius = math.hypot(x, y) / 2.0
    sides = len(piece) // 2
    assert ConvexHull(piece).volume == pytest.approx(sides * math.tan(math.pi / sides) * radius**2 * z, rel=1e-9)
    assert turned.excess_mm == pytest.approx(radius / math.cos(math.pi / sides) - radius, abs=1e-9)
    assert turned.excess_mm <= 0.5


def test_volume_of_a_turned_cone_against_its_closed_form() -> None:
    rim = 30.0 * regular_polygon(24)
    cone = np.vstack([np.column_stack([rim, np.zeros(24)]), [[0.0, 0.0, 20.0]]])
    (piece,) = revolved([cone], 0.1).pieces
    # Source: closed form, a pyramid has a third of base times height; the tip is one vertex.
    sides = len(piece) - 1
    assert ConvexHull(piece).volume == pytest.approx(sides * math.tan(math.pi / sides) * 30.0**2 * 20.0 / 3.0, rel=1e-9)


def test_what_lies_in_another_solid_of_revolution_is_left_out() -> None:
    post = np.array([[i, j, k] for i in (-5.0, 5.0) for j in (-5.0, 5.0) for k in (-300.0, 0.0)])
    posts = [post + np.array([a, b, 0.0]) for a in (-100.0, 100.0) for b in (-100.0, 100.0)]
    inner = np.array([[i, j, k] for i in (-50.0, 50.0) for j in (-50.0, 50.0) for k in (-200.0, -100.0)])
    apart = inner + np.array([0.0, 0.0, 400.0])
    assert len(revolved([*posts, inner], 0.5).pieces) == 1
    assert len(revolved([*posts, inner, apart], 0.5).pieces) == 2


@pytest.mark.parametrize(
    "piece",
    [
        np.zeros((4, 2)),
        np.full((4, 3), math.nan),
        np.full((4, 3), 1e9),
        np.array([[0.0, 0.0, z] for z in (0.0, 1.0, 2.0, 3.0)]),
        np.array([[x, 0.0, 5.0] for x in (0.0, 1.0, 2.0, 3.0)]),
    ],
)
def test_pieces_without_volume_or_sense_are_refused(piece: Array) -> None:
    with pytest.raises(GeometryError, match="piece"):
        revolved([piece], 0.5)


def test_neighbouring_parts_share_their_edges_exactly() -> None:
    # Around a bore no radius may pass between two parts, however it is rounded.
    cuts = [edge for part in convex_parts(BORE) for edge in pairwise(map(tuple, [*part, part[0]]))]
    assert len(set(cuts)) == len(cuts)
    rings = [shapely.orient_polygons(BORE).exterior, *shapely.orient_polygons(BORE).interiors]
    sides = {edge for ring in rings for edge in pairwise(ring.coords)}
    inner = set(cuts) - sides
    assert inner == {(end, start) for start, end in inner}
    assert sides <= set(cuts)
