"""Solids: their pieces contain them, the stated excess holds, volumes and membership agree with closed forms.

Points of the true solids and distances to them are computed here from closed forms, not by the code under test.
"""

import math
from collections.abc import Callable

import numpy as np
import pytest
import shapely
from hypothesis import assume, given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray
from scipy.spatial import ConvexHull
from scipy.spatial.transform import Rotation

from geometry.errors import GeometryError
from geometry.outlines import CircleOutline, EllipseOutline, PolygonOutline, RoundedRectangle
from geometry.solids import Box, Cylinder, Extrusion, Faceted, Frustum, Group, Loft, Placed, Ring, Solid

Array = NDArray[np.float64]
Vector = tuple[float, float, float]

few = settings(max_examples=20, deadline=None)
seeds = st.integers(0, 2**32 - 1)
radii = st.floats(0.5, 800.0)
points = st.tuples(*[st.floats(-800.0, 800.0)] * 3)
excesses = st.floats(0.1, 3.0)

CHANNEL = (
    (-265.0, 0.0),
    (265.0, 0.0),
    (265.0, -70.0),
    (240.0, -70.0),
    (240.0, -15.0),
    (-240.0, -15.0),
    (-265.0, -70.0),
)
HOLE = ((-100.0, -5.0), (100.0, -5.0), (100.0, -10.0), (-100.0, -10.0))


def in_pieces(where: Array, faceted: Faceted) -> NDArray[np.bool_]:
    """Tell which points lie in any piece, by the half-spaces of its hull, to 1e-9 of the size."""
    held = np.zeros(len(where), dtype=bool)
    for piece in faceted.pieces:
        planes = ConvexHull(piece).equations
        size = np.abs(piece).max()
        held |= np.all(where @ planes[:, :3].T + planes[:, 3] <= 1e-9 * size, axis=1)
    return held


def points_of_pieces(faceted: Faceted, random: np.random.Generator) -> Array:
    """All vertices, and random points of every piece, most of them near its edges."""
    mixed = [random.dirichlet(np.full(len(piece), 0.1), 20) @ piece for piece in faceted.pieces]
    return np.vstack([*faceted.pieces, *mixed])


def volume(faceted: Faceted) -> float:
    return float(sum(ConvexHull(piece).volume for piece in faceted.pieces))


def across_and_along(where: Array, start: Vector, end: Vector) -> tuple[Array, Array]:
    """Distance from the axis and position along it, mm."""
    axis = np.subtract(end, start) / math.dist(start, end)
    along = (where - start) @ axis
    return np.linalg.norm(where - start - along[:, None] * axis, axis=1), along


def about_axis(radius: Array, turn: Array, along: Array, start: Vector, end: Vector) -> Array:
    """Points at a distance from an axis, a turn about it from wherever, and a position along it."""
    axis = np.subtract(end, start) / math.dist(start, end)
    first = np.cross(axis, np.eye(3)[np.argmin(np.abs(axis))])
    first /= np.linalg.norm(first)
    second = np.cross(axis, first)
    across = np.cos(turn)[:, None] * first + np.sin(turn)[:, None] * second
    return start + radius[:, None] * across + along[:, None] * axis


def frustum_points(frustum: Frustum, random: np.random.Generator, count: int = 500) -> Array:
    """Points of the true frustum, many on its surface."""
    length = math.dist(frustum.start_mm, frustum.end_mm)
    share = np.clip(random.uniform(-0.1, 1.1, count), 0.0, 1.0)
    radius = frustum.start_radius_mm + share * (frustum.end_radius_mm - frustum.start_radius_mm)
    radius *= np.minimum(random.uniform(0.0, 2.0, count), 1.0)
    turn = random.uniform(0.0, 2.0 * math.pi, count)
    return about_axis(radius, turn, share * length, frustum.start_mm, frustum.end_mm)


def frustum_distances(where: Array, frustum: Frustum, of_surface: bool = False) -> Array:
    """Exact distances from a frustum, or from its surface.

    They are those from a trapezium in the half-plane of distance from the axis and position along it.
    """
    length = math.dist(frustum.start_mm, frustum.end_mm)
    corners = [(0.0, 0.0), (frustum.start_radius_mm, 0.0), (frustum.end_radius_mm, length), (0.0, length)]
    radius, along = across_and_along(where, frustum.start_mm, frustum.end_mm)
    profile = shapely.LineString(corners) if of_surface else shapely.Polygon(corners)
    distances: Array = shapely.distance(shapely.points(radius, along), profile)
    return distances


@given(seeds, st.tuples(*[st.floats(0.5, 2000.0)] * 3), points)
@few
def test_box_is_its_own_piece(seed: int, size: Vector, centre: Vector) -> None:
    faceted = Box(size, centre).faceted(0.5)
    (piece,) = faceted.pieces
    assert faceted.excess_mm == 0.0
    assert piece.shape == (8, 3)
    assert ConvexHull(piece).volume == pytest.approx(math.prod(size), rel=1e-9)
    inside = np.random.default_rng(seed).uniform(-0.5, 0.5, (200, 3)) * size + centre
    assert in_pieces(inside, faceted).all()
    assert Box(size, centre).contains(inside).all()
    assert not Box(size, centre).contains(centre + np.diag(size) * 0.51).any()


@given(seeds, radii, st.one_of(st.just(0.0), radii), points, points, st.booleans(), excesses)
@few
def test_pieces_contain_frustums_and_keep_the_excess(
    seed: int, greater: float, lesser: float, start: Vector, end: Vector, widening: bool, most: float
) -> None:
    assume(math.dist(start, end) > 0.5)
    random = np.random.default_rng(seed)
    frustum = Frustum(lesser, greater, start, end) if widening else Frustum(greater, lesser, start, end)
    faceted = frustum.faceted(most)
    assert in_pieces(frustum_points(frustum, random), faceted).all()
    observed = frustum_distances(points_of_pieces(faceted, random), frustum).max()
    # The excess is not merely a bound: a vertex has it.
    assert observed == pytest.approx(faceted.excess_mm, abs=1e-9)
    assert faceted.excess_mm <= most


@given(seeds, radii, points, points)
@few
def test_cylinder_is_a_frustum_of_equal_radii(seed: int, radius: float, start: Vector, end: Vector) -> None:
    assume(math.dist(start, end) > 0.5)
    random = np.random.default_rng(seed)
    cylinder, frustum = Cylinder(radius, start, end), Frustum(radius, radius, start, end)
    faceted = cylinder.faceted(0.5)
    assert in_pieces(frustum_points(frustum, random), faceted).all()
    observed = frustum_distances(points_of_pieces(faceted, random), frustum).max()
    assert observed == pytest.approx(faceted.excess_mm, abs=1e-9)
    assert faceted.excess_mm <= 0.5


@pytest.mark.parametrize("end", [(0.0, 0.0, 300.0), (100.0, -250.0, 40.0)])
@pytest.mark.parametrize(("first", "last"), [(380.0, 380.0), (380.0, 120.0), (0.0, 250.0)])
def test_volume_about_a_frustum_against_its_closed_form(first: float, last: float, end: Vector) -> None:
    faceted = Frustum(first, last, (0.0, 0.0, 0.0), end).faceted(0.5)
    sides = len(faceted.pieces[0]) // 2 if min(first, last) > 0.0 else len(faceted.pieces[0]) - 1
    # Source: closed form, pi h (a^2 + a b + b^2) / 3, with n tan(pi/n) in the place of pi for a polygon about a circle.
    height = math.hypot(*end)
    squares = (first**2 + first * last + last**2) / 3.0
    assert volume(faceted) == pytest.approx(sides * math.tan(math.pi / sides) * height * squares, rel=1e-9)
    assert volume(faceted) > math.pi * height * squares


def test_cylinder_of_380_has_the_facets_that_its_excess_takes() -> None:
    # Source: closed form, 64 sides about a radius of 380 reach 380 / cos(pi/64) - 380 = 0.458 beyond it.
    faceted = Cylinder(380.0, (0.0, 0.0, 0.0), (0.0, 0.0, 100.0)).faceted(0.5)
    assert [len(piece) for piece in faceted.pieces] == [128]
    assert faceted.excess_mm == pytest.approx(0.4583, abs=5e-5)


@given(
    seeds,
    radii,
    radii,
    st.one_of(st.none(), st.tuples(st.floats(-360.0, 360.0), st.floats(1.0, 360.0))),
    points,
    points,
)
@few
def test_pieces_contain_rings_and_keep_the_excess(
    seed: int, inner: float, wall: float, arc: tuple[float, float] | None, start: Vector, end: Vector
) -> None:
    assume(math.dist(start, end) > 0.5)
    random = np.random.default_rng(seed)
    arc_deg = None if arc is None else (arc[0], arc[0] + arc[1])
    ring = Ring(inner, inner + wall, start, end, arc_deg)
    faceted = ring.faceted(0.5)
    length = math.dist(start, end)
    low, high = arc_deg or (0.0, 360.0)
    # The definition of angle 0 in the class's own words, so that arcs can be told.
    axis = np.subtract(end, start) / length
    zero = np.array([0.0, 1.0, 0.0] if abs(axis[0]) > math.cos(math.pi / 6.0) else [1.0, 0.0, 0.0])
    zero = zero - (zero @ axis) * axis
    zero /= np.linalg.norm(zero)
    radius = np.clip(random.uniform(inner - 0.5 * wall, inner + 1.5 * wall, 500), inner, inner + wall)
    turn = np.radians(np.clip(random.uniform(low - 5.0, high + 5.0, 500), low, high))
    along = random.uniform(0.0, length, 500)
    across = np.cos(turn)[:, None] * zero + np.sin(turn)[:, None] * np.cross(axis, zero)
    inside = start + radius[:, None] * across + along[:, None] * axis
    assert in_pieces(inside, faceted).all()

    where = points_of_pieces(faceted, random)
    piece_radius, piece_along = across_and_along(where, start, end)
    profile = shapely.box(inner, 0.0, inner + wall, length)
    observed = shapely.distance(shapely.points(piece_radius, piece_along), profile).max()
    assert observed <= faceted.excess_mm + 1e-9
    assert faceted.excess_mm <= 0.5
    piece_turn = np.degrees(np.arctan2((where - start) @ np.cross(axis, zero), (where - start) @ zero))
    beyond_arc = np.mod(piece_turn - low + 1e-6, 360.0) - 1e-6 - (high - low)
    # Arcs end flat, on the radius, for whatever does not lie on the axis.
    assert np.radians(beyond_arc[beyond_arc > 0.0]) * piece_radius[beyond_arc > 0.0] == pytest.approx(0.0, abs=1e-6)


@pytest.mark.parametrize("arc_deg", [None, (0.0, 360.0), (30.0, 300.0), (-10.0, 10.0)])
def test_volume_about_a_ring_against_its_closed_form(arc_deg: tuple[float, float] | None) -> None:
    ring = Ring(400.0, 600.0, (0.0, -500.0, 0.0), (0.0, 500.0, 0.0), arc_deg)
    faceted = ring.faceted(0.5)
    low, high = arc_deg or (0.0, 360.0)
    extent = math.radians(high - low)
    # Source: closed form, extent/2 (R^2 - r^2) L; the excess e adds at most e times either curved face, a little wider.
    true_volume = extent / 2.0 * (600.0**2 - 400.0**2) * 1000.0
    assert true_volume < volume(faceted) < true_volume + faceted.excess_mm * extent * (400.0 + 600.5) * 1000.0


def test_chords_of_a_ring_stay_within_the_excess_of_its_bore() -> None:
    faceted = Ring(400.0, 600.0, (0.0, 0.0, 0.0), (0.0, 0.0, 100.0)).faceted(0.5)
    # Source: closed form, the middle of a chord over 360/n deg lies r (1 - cos(180 deg / n)) inside of the circle.
    count = math.ceil(math.pi / math.acos(1.0 - 0.5 / 400.0))
    assert len(faceted.pieces) == count
    beam = np.array([[x, 0.0, 50.0] for x in (0.0, 399.0, 399.49)])
    assert not in_pieces(beam, faceted).any()
    assert max(len(piece) for piece in faceted.pieces) <= 10


def test_arc_runs_by_the_right_hand_from_x_and_from_y_along_x() -> None:
    def held(start: Vector, end: Vector, where: Vector) -> bool:
        ring = Ring(90.0, 110.0, start, end, (0.0, 90.0))
        inside = bool(ring.contains(np.array([where]))[0])
        assert inside == bool(in_pieces(np.array([where]), ring.faceted(0.5))[0])
        return inside

    side = 100.0 * math.sqrt(0.5)
    # Source: definition, the right hand about +z carries +x to +y, about +y +z to +x, about +x +y to +z.
    assert held((0.0, 0.0, -10.0), (0.0, 0.0, 10.0), (side, side, 0.0))
    assert not held((0.0, 0.0, -10.0), (0.0, 0.0, 10.0), (side, -side, 0.0))
    assert held((0.0, -10.0, 0.0), (0.0, 10.0, 0.0), (side, 0.0, -side))
    assert not held((0.0, -10.0, 0.0), (0.0, 10.0, 0.0), (side, 0.0, side))
    assert held((0.0, 10.0, 0.0), (0.0, -10.0, 0.0), (side, 0.0, side))
    assert held((-10.0, 0.0, 0.0), (10.0, 0.0, 0.0), (0.0, side, side))
    assert not held((-10.0, 0.0, 0.0), (10.0, 0.0, 0.0), (0.0, -side, side))


@pytest.mark.parametrize(
    ("axis", "inside"),
    [("x", (50.0, 1.0, 9.0)), ("y", (1.0, 50.0, 9.0)), ("z", (1.0, 9.0, 50.0))],
)
def test_outline_coordinates_are_the_other_axes_in_alphabetical_order(axis: str, inside: Vector) -> None:
    upright = PolygonOutline(((0.0, 0.0), (2.0, 0.0), (2.0, 10.0), (0.0, 10.0)))
    for solid in (Extrusion(upright, axis, 40.0, 60.0), Loft(((40.0, upright), (60.0, upright)), axis)):
        swapped = np.array([inside]) @ np.roll(np.eye(3), 1, axis=0)
        for where, expected in ((np.array([inside]), True), (swapped, False)):
            assert in_pieces(where, solid.faceted(0.5)).tolist() == [expected]
            assert solid.contains(where).tolist() == [expected]


def test_concave_extrusion_is_exact() -> None:
    solid = Extrusion(PolygonOutline(CHANNEL, (HOLE,)), "y", -500.0, 900.0)
    faceted = solid.faceted(0.5)
    assert faceted.excess_mm == 0.0
    # Source: closed form, the shoelace areas of the outline and its hole, times the length.
    area = shapely.Polygon(CHANNEL, [HOLE]).area
    assert volume(faceted) == pytest.approx(area * 1400.0, rel=1e-9)
    where = np.random.default_rng(3).uniform((-300.0, -550.0, -80.0), (300.0, 950.0, 10.0), (4000, 3))
    true = shapely.intersects_xy(shapely.Polygon(CHANNEL, [HOLE]), where[:, 0], where[:, 2])
    true &= (where[:, 1] >= -500.0) & (where[:, 1] <= 900.0)
    assert 0 < true.sum() < len(true)
    assert np.array_equal(in_pieces(where, faceted), true)
    assert np.array_equal(solid.contains(where), true)


@given(seeds, radii, st.floats(2.0, 12.0), excesses)
@few
def test_pieces_contain_extruded_superellipses(seed: int, width: float, exponent: float, most: float) -> None:
    random = np.random.default_rng(seed)
    faceted = Extrusion(EllipseOutline(width, 100.0, (50.0, -20.0), exponent), "x", 10.0, 30.0).faceted(most)
    ray = random.uniform(0.0, 2.0 * math.pi, 500)
    radius = (np.abs(np.cos(ray)) ** exponent + np.abs(np.sin(ray)) ** exponent) ** (-1.0 / exponent)
    radius *= np.minimum(random.uniform(0.0, 2.0, 500), 1.0)
    across = np.column_stack([radius * np.cos(ray) * width + 50.0, radius * np.sin(ray) * 100.0 - 20.0])
    inside = np.column_stack([random.uniform(10.0, 30.0, 500), across])
    assert in_pieces(inside, faceted).all()
    assert faceted.excess_mm <= most


def support(outline: CircleOutline | EllipseOutline | RoundedRectangle, normals: Array) -> Array:
    """Support functions in closed form: greatest product of each unit normal, shape (n, 2), with an outline's point."""
    if isinstance(outline, CircleOutline):
        reach = np.full(len(normals), outline.radius_mm)
    elif isinstance(outline, EllipseOutline):
        dual = outline.exponent / (outline.exponent - 1.0)
        half_sizes = np.array([outline.half_width_mm, outline.half_height_mm])
        reach = np.sum(np.abs(normals * half_sizes) ** dual, axis=1) ** (1.0 / dual)
    else:
        core = np.array([outline.width_mm, outline.height_mm]) / 2.0 - outline.radius_mm
        reach = np.abs(normals) @ core + outline.radius_mm
    return reach + normals @ np.array(outline.centre_mm)


TORSO = (
    (0.0, RoundedRectangle(300.0, 200.0, 60.0, (0.0, 100.0))),
    (90.0, EllipseOutline(170.0, 120.0, (5.0, 110.0), 2.6)),
    (240.0, EllipseOutline(150.0, 100.0, (0.0, 100.0))),
    (260.0, CircleOutline(40.0, (0.0, 90.0))),
)


@pytest.mark.parametrize("most", [0.2, 0.5, 2.0])
def test_pieces_contain_a_loft_and_keep_the_excess(most: float) -> None:
    random = np.random.default_rng(7)
    loft = Loft(TORSO, "z")
    faceted = loft.faceted(most)
    assert len(faceted.pieces) == 3
    assert faceted.excess_mm <= most
    turn = np.linspace(0.0, 2.0 * math.pi, 1441)
    normals = np.column_stack([np.cos(turn), np.sin(turn)])
    for (low, lower), (high, upper), piece in zip(TORSO[:-1], TORSO[1:], faceted.pieces, strict=True):
        # Mixtures of points of two neighbouring outlines are points of the solid.
        ends = []
        for outline in (lower, upper):
            candidates = random.uniform(-400.0, 400.0, (20_000, 2))
            # Those within a thousandth of the edge are left out, so that membership need not be asked to rounding.
            outwards = 1.001 * (candidates - outline.centre_mm) + outline.centre_mm
            ends.append(candidates[outline.contains(outwards)][:300])
        count = min(len(end) for end in ends)
        share = random.uniform(0.0, 1.0, (count, 1))
        across = (1.0 - share) * ends[0][:count] + share * ends[1][:count]
        inside = np.column_stack([across, low + share * (high - low)])
        assert in_pieces(inside, Faceted((piece,), 0.0)).all()
        assert Loft(((low, lower), (high, upper)), "z").contains(inside).all()
        # Source: support functions, that of a Minkowski sum is the sum. A section's point beyond it by more than the
        # excess would show in some direction.
        where = points_of_pieces(Faceted((piece,), 0.0), random)
        height = (where[:, 2:] - low) / (high - low)
        reach = (1.0 - height) * support(lower, normals) + height * support(upper, normals)
        assert (where[:, :2] @ normals.T - reach).max() <= faceted.excess_mm + 1e-9


def test_membership_in_a_loft_of_circles_is_that_of_a_frustum() -> None:
    loft = Loft(((-20.0, CircleOutline(100.0)), (80.0, CircleOutline(40.0))), "x")
    frustum = Frustum(100.0, 40.0, (-20.0, 0.0, 0.0), (80.0, 0.0, 0.0))
    where = np.random.default_rng(5).uniform((-30.0, -110.0, -110.0), (90.0, 110.0, 110.0), (4000, 3))
    radius = 100.0 - 60.0 * (where[:, 0] + 20.0) / 100.0
    clear = np.abs(np.hypot(where[:, 1], where[:, 2]) - radius) > 1e-2
    assert 500 < frustum.contains(where).sum() < 3500
    assert np.array_equal(loft.contains(where)[clear], frustum.contains(where)[clear])
    assert in_pieces(where[loft.contains(where)], loft.faceted(0.5)).all()


def test_volume_of_a_loft_of_rectangles_against_its_closed_form() -> None:
    sections = ((0.0, RoundedRectangle(300.0, 200.0, 0.0)), (120.0, RoundedRectangle(100.0, 240.0, 0.0, (30.0, -10.0))))
    # Source: closed form, the prismatoid formula h/6 (A0 + 4 Am + A1); the middle section has the mean sizes.
    expected = 120.0 / 6.0 * (300.0 * 200.0 + 4.0 * 200.0 * 220.0 + 100.0 * 240.0)
    faceted = Loft(sections, "y").faceted(0.5)
    assert faceted.excess_mm == 0.0
    assert volume(faceted) == pytest.approx(expected, rel=1e-9)


def test_neighbouring_pieces_of_a_loft_meet_without_a_gap() -> None:
    faceted = Loft(TORSO, "z").faceted(0.5)
    for position, below, above in zip((90.0, 240.0), faceted.pieces[:-1], faceted.pieces[1:], strict=True):
        top = below[below[:, 2] == position]
        assert len(top) >= 4
        assert np.array_equal(top, above[above[:, 2] == position])


@given(seeds, points)
@few
def test_placed_solids_move_with_their_matrix(seed: int, shift: Vector) -> None:
    turn = Rotation.random(rng=np.random.default_rng(seed))
    matrix = np.eye(4)
    matrix[:3, :3], matrix[:3, 3] = turn.as_matrix(), shift
    frustum = Frustum(100.0, 40.0, (0.0, 0.0, 0.0), (0.0, 80.0, 30.0))
    placed = Placed(frustum, matrix)
    inside = frustum_points(frustum, np.random.default_rng(seed), 200)
    faceted = placed.faceted(0.5)
    assert in_pieces(turn.apply(inside) + shift, faceted).all()
    assert faceted.excess_mm == frustum.faceted(0.5).excess_mm
    where = np.random.default_rng(seed).uniform(-150.0, 150.0, (400, 3))
    off_surface = frustum_distances(where, frustum, of_surface=True) > 1e-6
    true = frustum_distances(where, frustum) == 0.0
    assert np.array_equal(placed.contains(turn.apply(where) + shift)[off_surface], true[off_surface])


def test_group_is_the_union_and_states_the_worst_excess() -> None:
    cylinder, box = Cylinder(100.0, (0.0, 0.0, 0.0), (0.0, 50.0, 0.0)), Box((10.0, 10.0, 10.0), (0.0, 200.0, 0.0))
    group = Group((cylinder, box))
    faceted = group.faceted(0.5)
    assert len(faceted.pieces) == 2
    assert faceted.excess_mm == cylinder.faceted(0.5).excess_mm > 0.0
    where = np.array([[0.0, 25.0, 99.0], [0.0, 200.0, 4.0], [0.0, 100.0, 0.0]])
    assert group.contains(where).tolist() == [True, True, False]


EVERY_SOLID = [
    Box((10.0, 20.0, 30.0), (100.0, 0.0, 0.0)),
    Cylinder(70.0, (10.0, -300.0, 20.0), (20.0, 300.0, 30.0)),
    Frustum(70.0, 10.0, (10.0, 20.0, 30.0), (10.0, 20.0, 330.0)),
    Frustum(0.0, 10.0, (10.0, 20.0, 30.0), (40.0, 20.0, 30.0)),
    Extrusion(PolygonOutline(CHANNEL, (HOLE,)), "y", -1000.0, 900.0),
    Extrusion(RoundedRectangle(530.0, 80.0, 30.0), "y", -1000.0, 900.0),
    Loft(TORSO, "z"),
    Ring(350.0, 500.0, (0.0, -400.0, 0.0), (0.0, 400.0, 0.0)),
    Ring(700.0, 900.0, (0.0, 600.0, 0.0), (0.0, 1200.0, 0.0), (-200.0, 20.0)),
    Group((Box((10.0, 20.0, 30.0)), Loft(TORSO, "x"))),
]


@pytest.mark.parametrize("solid", EVERY_SOLID, ids=lambda solid: type(solid).__name__)
def test_pieces_are_plain_convex_vertices_and_hold_what_the_solid_contains(solid: Solid) -> None:
    faceted = solid.faceted(0.5)
    assert 0.0 <= faceted.excess_mm <= 0.5
    for piece in faceted.pieces:
        assert piece.dtype == np.float64
        assert piece.shape[1] == 3
        assert len(ConvexHull(piece).vertices) == len(piece) >= 4
    everything = np.vstack(faceted.pieces)
    where = np.random.default_rng(11).uniform(everything.min(axis=0) - 5.0, everything.max(axis=0) + 5.0, (3000, 3))
    inside, held = solid.contains(where), in_pieces(where, faceted)
    assert inside.any()
    assert not inside.all()
    assert held[inside].all()
    # What the pieces hold beyond the solid is a skin no thicker than the excess.
    assert np.mean(held & ~inside) < 0.01


@pytest.mark.parametrize("solid", EVERY_SOLID[:7], ids=lambda solid: type(solid).__name__)
def test_equal_solids_compare_and_hash_and_facet_alike(solid: Solid) -> None:
    twin = type(solid)(**{name: getattr(solid, name) for name in type(solid).__dataclass_fields__})
    assert twin == solid
    assert hash(twin) == hash(solid)
    for one, other in zip(twin.faceted(0.5).pieces, solid.faceted(0.5).pieces, strict=True):
        assert np.array_equal(one, other)


SQUARE = RoundedRectangle(10.0, 10.0, 0.0)
ORIGIN, UP = (0.0, 0.0, 0.0), (0.0, 0.0, 10.0)


@pytest.mark.parametrize(
    ("make", "name"),
    [
        (lambda: Box((10.0, 0.0, 10.0)), "size_mm[1]"),
        (lambda: Box((10.0, 10.0)), "size_mm"),
        (lambda: Box((10.0, 10.0, 10.0), (0.0, math.inf, 0.0)), "centre_mm[1]"),
        (lambda: Box(10.0), "size_mm"),
        (lambda: Cylinder(-1.0, ORIGIN, UP), "radius_mm"),
        (lambda: Cylinder(5.0, ORIGIN, ORIGIN), "start_mm and end_mm"),
        (lambda: Cylinder(5.0, ORIGIN, (0.0, "10", 0.0)), "end_mm[1]"),
        (lambda: Frustum(0.0, 0.0, ORIGIN, UP), "start_radius_mm = end_radius_mm"),
        (lambda: Frustum(5.0, 1e-9, ORIGIN, UP), "end_radius_mm"),
        (lambda: Frustum(math.nan, 5.0, ORIGIN, UP), "start_radius_mm"),
        (lambda: Extrusion(SQUARE, "w", 0.0, 10.0), "axis"),
        (lambda: Extrusion(SQUARE, "x", 10.0, 0.0), "high_mm"),
        (lambda: Extrusion(SQUARE, "x", 10.0, 10.0), "high_mm"),
        (lambda: Extrusion(SQUARE, "x", math.nan, 10.0), "low_mm"),
        (lambda: Loft(((0.0, SQUARE),), "z"), "sections"),
        (lambda: Loft(((0.0, SQUARE), (0.0, SQUARE)), "z"), "position of sections[1]"),
        (lambda: Loft(((5.0, SQUARE), (0.0, SQUARE)), "z"), "position of sections[1]"),
        (lambda: Loft(((0.0, SQUARE), (5.0, PolygonOutline(CHANNEL))), "z"), "outline of sections[1]"),
        (lambda: Loft(((0.0, SQUARE), (5.0,)), "z"), "sections[1]"),
        (lambda: Loft(((0.0, SQUARE), (5.0, SQUARE)), ["z"]), "axis"),
        (lambda: Ring(20.0, 10.0, ORIGIN, UP), "outer_radius_mm"),
        (lambda: Ring(5.0, 10.0, ORIGIN, UP, (0.0, 400.0)), "arc_deg[1]"),
        (lambda: Ring(5.0, 10.0, ORIGIN, UP, (90.0, 90.0)), "arc_deg[1]"),
        (lambda: Ring(5.0, 10.0, ORIGIN, UP, (90.0,)), "arc_deg"),
        (lambda: Placed(Box((1.0, 1.0, 1.0)), np.eye(3)), "matrix"),
        (lambda: Placed(Box((1.0, 1.0, 1.0)), np.diag([1.0, 1.0, -1.0, 1.0])), "matrix"),
        (lambda: Placed(Box((1.0, 1.0, 1.0)), np.diag([2.0, 1.0, 1.0, 1.0])), "matrix"),
        (lambda: Placed(Box((1.0, 1.0, 1.0)), np.full((4, 4), math.nan)), "matrix"),
        (lambda: Group(()), "solids"),
    ],
)
def test_refused_solids_are_named_with_what_is_allowed(make: Callable[[], object], name: str) -> None:
    with pytest.raises(GeometryError) as caught:
        make()
    message = str(caught.value)
    assert message.startswith(name)
    assert "allowed is" in message


def test_ring_without_a_hole_is_told_to_be_a_cylinder() -> None:
    with pytest.raises(GeometryError, match=r"inner_radius_mm = 0 .* cylinder"):
        Ring(0.0, 10.0, ORIGIN, UP)


@pytest.mark.parametrize("solid", EVERY_SOLID, ids=lambda solid: type(solid).__name__)
def test_senseless_excess_is_refused(solid: Solid) -> None:
    for max_excess in (0.0, -0.5, math.nan, math.inf):
        with pytest.raises(GeometryError, match="max_excess_mm"):
            solid.faceted(max_excess)


@pytest.mark.parametrize(("radius", "max_excess"), [(2000.0, 0.001), (1000.0, 0.005)])
def test_excess_that_takes_too_many_wedges_or_sides_is_refused(radius: float, max_excess: float) -> None:
    with pytest.raises(GeometryError, match="too small for this size"):
        Ring(radius, radius + 100.0, ORIGIN, UP).faceted(max_excess)
