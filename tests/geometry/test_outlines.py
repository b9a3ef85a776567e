"""Outlines: the polygons contain them, and the stated excess holds. Distances come from closed forms written here."""

import math
from collections.abc import Callable

import numpy as np
import pytest
import shapely
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray

from geometry.errors import GeometryError
from geometry.outlines import (
    LARGEST_MM,
    MOST_VERTICES,
    CircleOutline,
    EllipseOutline,
    Outline,
    PolygonOutline,
    RoundedRectangle,
    circumscribed,
)

Array = NDArray[np.float64]
Pair = tuple[float, float]

sizes = st.floats(0.5, 2000.0)
centres = st.tuples(st.floats(-500.0, 500.0), st.floats(-500.0, 500.0))
excesses = st.floats(0.02, 5.0)
exponents = st.one_of(st.just(2.0), st.floats(2.0, 50.0))
few = settings(max_examples=20, deadline=None)

BOW_TIE = ((0.0, 0.0), (10.0, 10.0), (10.0, 0.0), (0.0, 10.0))
TABLE = ((-265.0, 0.0), (265.0, 0.0), (200.0, -70.0), (-200.0, -70.0))


def superellipse_points(half_width: float, half_height: float, exponent: float) -> Array:
    """Points of the curve by its polar form r(t) = (|cos t|^n + |sin t|^n)^(-1/n), shape (20000, 2)."""
    turn = np.linspace(0.0, 2.0 * math.pi, 20_000, endpoint=False)
    rays = np.column_stack([np.cos(turn), np.sin(turn)])
    return (
        rays / np.sum(np.abs(rays) ** exponent, axis=1, keepdims=True) ** (1.0 / exponent) * (half_width, half_height)
    )


def vertices_of(polygon: shapely.Polygon) -> Array:
    return np.array(polygon.exterior.coords[:-1])


def points_over(polygon: shapely.Polygon) -> Array:
    low_u, low_v, high_u, high_v = polygon.buffer(5.0).bounds
    return np.random.default_rng(1).uniform((low_u, low_v), (high_u, high_v), (400, 2))


def beyond(polygon: shapely.Polygon, points: Array) -> float:
    """The greatest distance of any of the points from the polygon."""
    return float(shapely.distance(shapely.points(points), polygon).max())


@given(sizes, centres, excesses)
@few
def test_polygon_about_a_circle_contains_it_and_keeps_the_excess(
    radius: float, centre: Pair, max_excess: float
) -> None:
    polygon, excess = CircleOutline(radius, centre).enclosing(max_excess)
    turn = np.linspace(0.0, 2.0 * math.pi, 1000)
    circle = np.column_stack([np.cos(turn), np.sin(turn)]) * radius + centre
    assert beyond(polygon, circle) <= 1e-9 * (radius + 500.0)
    observed = np.hypot(*(vertices_of(polygon) - centre).T).max() - radius
    assert excess <= max_excess
    assert observed == pytest.approx(excess, abs=1e-9 * (radius + 500.0))
    assert polygon.bounds == pytest.approx(
        (centre[0] - radius, centre[1] - radius, centre[0] + radius, centre[1] + radius), abs=1e-9 * (radius + 500.0)
    )


@pytest.mark.parametrize(
    # Source: closed form, a regular n-gon about a circle of radius r reaches r / cos(pi / n).
    ("radius", "sides", "excess"),
    [(380.0, 64, 380.0 / math.cos(math.pi / 64) - 380.0), (1.0, 4, math.sqrt(2.0) - 1.0)],
)
def test_circumscribed_regular_polygon(radius: float, sides: int, excess: float) -> None:
    found_sides, reach, found_excess = circumscribed(radius, 0.5)
    assert (found_sides, found_excess) == (sides, pytest.approx(excess, abs=1e-12))
    assert reach == pytest.approx(radius + excess, abs=1e-12)


@given(sizes, excesses)
@few
def test_no_smaller_multiple_of_four_sides_would_do(radius: float, max_excess: float) -> None:
    sides, _, _ = circumscribed(radius, max_excess)
    assert sides == 4 or radius / math.cos(math.pi / (sides - 4)) - radius > max_excess * (1.0 - 1e-9)


@given(sizes, sizes, centres, exponents, excesses)
@few
def test_polygon_about_a_superellipse_contains_it_and_keeps_the_excess(
    half_width: float, half_height: float, centre: Pair, exponent: float, most: float
) -> None:
    outline = EllipseOutline(half_width, half_height, centre, exponent)
    polygon, excess = outline.enclosing(most)
    curve = superellipse_points(half_width, half_height, exponent)
    size = half_width + half_height + 500.0
    assert beyond(polygon, curve[::10] + centre) <= 1e-9 * size
    # The fine inscribed polygon stands for the curve; it lies inside, so it can only overstate the distance.
    sagitta = 2e-6 * (half_width + half_height)
    observed = beyond(shapely.Polygon(curve), vertices_of(polygon) - centre)
    assert observed - sagitta <= excess <= most
    assert polygon.bounds == pytest.approx(
        (centre[0] - half_width, centre[1] - half_height, centre[0] + half_width, centre[1] + half_height),
        abs=1e-9 * size,
    )


@pytest.mark.parametrize("exponent", [2.0, 2.5, 4.0, 20.0])
def test_area_about_a_superellipse_against_its_closed_form(exponent: float) -> None:
    # Source: closed form, 4 a b gamma(1 + 1/n)^2 / gamma(1 + 2/n) (Dirichlet's integral).
    polygon, excess = EllipseOutline(170.0, 120.0, exponent=exponent).enclosing(0.1)
    true_area = 4.0 * 170.0 * 120.0 * math.gamma(1.0 + 1.0 / exponent) ** 2 / math.gamma(1.0 + 2.0 / exponent)
    # Steiner's formula: a parallel body at distance e is larger by perimeter e + pi e^2.
    assert true_area < polygon.area < true_area + excess * polygon.length + math.pi * excess**2


def test_few_tangents_suffice_where_a_curve_is_flat() -> None:
    flat, _ = EllipseOutline(265.0, 20.0).enclosing(0.5)
    around, _ = CircleOutline(265.0).enclosing(0.5)
    assert len(vertices_of(flat)) <= 24 < len(vertices_of(around))


@pytest.mark.parametrize("radii", [(50.0, 50.0), (170.0, 120.0), (400.0, 90.0)])
def test_number_of_tangents_about_an_ellipse_is_near_the_least(radii: Pair) -> None:
    # Source: closed form for fine steps. Two tangents that turn by t about a radius of curvature r meet r t^2 / 8 away
    # from the curve, so that the least number is the integral of sqrt(r) dt over the turn, divided by sqrt(8 e).
    turn = np.linspace(0.0, 2.0 * math.pi, 20_001)
    curvature_radius = (radii[0] * radii[1]) ** 2 / np.hypot(radii[0] * np.cos(turn), radii[1] * np.sin(turn)) ** 3
    least = np.trapezoid(np.sqrt(curvature_radius), turn) / math.sqrt(8.0 * 0.25)
    polygon, _ = EllipseOutline(*radii).enclosing(0.25)
    assert least - 1.0 <= len(vertices_of(polygon)) <= least + 6.0


@given(sizes, sizes, st.floats(0.0, 1.0), centres, excesses)
@few
def test_polygon_about_a_rounded_rectangle_contains_it_and_keeps_the_excess(
    width: float, height: float, share: float, centre: Pair, max_excess: float
) -> None:
    radius = share * min(width, height) / 2.0
    outline = RoundedRectangle(width, height, radius, centre)
    polygon, excess = outline.enclosing(max_excess)
    size = width + height + 500.0
    assert beyond(polygon, outline.boundary(400)) <= 1e-9 * size
    # Source: closed form, the distance to a rounded box is that to the box of its corners' centres less the radius.
    core = np.array([width, height]) / 2.0 - radius
    observed = np.hypot(*np.maximum(np.abs(vertices_of(polygon) - centre) - core, 0.0).T).max() - radius
    assert excess <= max_excess
    assert observed == pytest.approx(excess, abs=1e-9 * size)


def test_area_about_a_rounded_rectangle_against_its_closed_form() -> None:
    # Source: closed form, w h - (4 - pi) r^2.
    polygon, _ = RoundedRectangle(500.0, 60.0, 25.0).enclosing(0.01)
    true_area = 500.0 * 60.0 - (4.0 - math.pi) * 25.0**2
    assert true_area < polygon.area < true_area + 2.0 * math.pi * 25.01 * 0.01


def test_polygon_is_returned_as_it_is() -> None:
    hole = ((-100.0, -10.0), (100.0, -10.0), (100.0, -50.0), (-100.0, -50.0))
    polygon, excess = PolygonOutline(TABLE, (hole,)).enclosing(0.5)
    assert excess == 0.0
    assert polygon.equals(shapely.Polygon(TABLE, [hole]))
    # Source: closed form, a trapezium less a rectangle.
    assert polygon.area == pytest.approx((530.0 + 400.0) / 2.0 * 70.0 - 200.0 * 40.0)


def test_membership_in_a_polygon_leaves_holes_out_and_counts_the_edge() -> None:
    outline = PolygonOutline(
        ((0.0, 0.0), (10.0, 0.0), (10.0, 10.0), (0.0, 10.0)),
        (((4.0, 4.0), (6.0, 4.0), (6.0, 6.0), (4.0, 6.0)),),
    )
    points = np.array([[1.0, 1.0], [5.0, 5.0], [0.0, 5.0], [4.0, 5.0], [-1.0, 5.0], [11.0, 5.0]])
    assert outline.contains(points).tolist() == [True, False, True, True, False, False]


@pytest.mark.parametrize(
    "outline",
    [
        CircleOutline(80.0, (10.0, -20.0)),
        EllipseOutline(80.0, 30.0, (10.0, -20.0)),
        EllipseOutline(80.0, 30.0, (10.0, -20.0), 3.5),
        EllipseOutline(3.0, 80.0, exponent=50.0),
        RoundedRectangle(80.0, 30.0, 10.0, (10.0, -20.0)),
        RoundedRectangle(80.0, 30.0, 15.0),
        RoundedRectangle(80.0, 30.0, 0.0),
        PolygonOutline(TABLE),
    ],
)
def test_membership_boundary_and_polygon_tell_the_same(outline: Outline) -> None:
    polygon, _ = outline.enclosing(0.05)
    boundary = outline.boundary(2880)
    inscribed = shapely.Polygon(boundary)
    assert inscribed.is_valid
    assert inscribed.exterior.is_ccw
    points = points_over(polygon)
    inside = outline.contains(points)
    assert 0 < inside.sum() < len(points)
    assert shapely.intersects_xy(polygon, *points[inside].T).all()
    distances = shapely.distance(shapely.points(points), inscribed)
    assert distances[inside].max() <= 1e-3
    assert not shapely.intersects_xy(inscribed.buffer(-1e-9), *points[~inside].T).any()


@pytest.mark.parametrize(
    ("make", "name"),
    [
        (lambda: CircleOutline(0.0), "radius_mm"),
        (lambda: CircleOutline(math.nan), "radius_mm"),
        (lambda: CircleOutline(math.inf), "radius_mm"),
        (lambda: CircleOutline(-5.0), "radius_mm"),
        (lambda: CircleOutline("5"), "radius_mm"),
        (lambda: CircleOutline(True), "radius_mm"),
        (lambda: CircleOutline(5.0, (0.0, math.nan)), "centre_mm[1]"),
        (lambda: CircleOutline(5.0, (0.0, 0.0, 0.0)), "centre_mm"),
        (lambda: CircleOutline(5.0, 3.0), "centre_mm"),
        (lambda: EllipseOutline(5.0, 2.0 * LARGEST_MM), "half_height_mm"),
        (lambda: EllipseOutline(5.0, 5.0, exponent=1.5), "exponent"),
        (lambda: EllipseOutline(5.0, 5.0, exponent=51.0), "exponent"),
        (lambda: RoundedRectangle(50.0, 20.0, 10.1), "radius_mm"),
        (lambda: RoundedRectangle(50.0, 20.0, -1.0), "radius_mm"),
        (lambda: PolygonOutline(BOW_TIE), "points"),
        (lambda: PolygonOutline(((0.0, 0.0), (1.0, 1.0))), "points"),
        (lambda: PolygonOutline(((0.0, 0.0), (1.0, 1.0), (2.0, 2.0))), "points"),
        (lambda: PolygonOutline(((0.0, 0.0), (1.0, math.nan), (2.0, 2.0))), "points[1][1]"),
        (lambda: PolygonOutline(TABLE, (BOW_TIE,)), "points"),
        (lambda: PolygonOutline(TABLE, (((0.0, 500.0), (1.0, 500.0), (1.0, 501.0)),)), "points"),
        (lambda: PolygonOutline("outline"), "points"),
    ],
)
def test_refused_outlines_are_named_with_what_is_allowed(make: Callable[[], object], name: str) -> None:
    with pytest.raises(GeometryError) as caught:
        make()
    message = str(caught.value)
    assert message.startswith((f"{name} ", f"{name}["))
    assert "allowed " in message


def test_polygon_with_too_many_vertices_is_refused() -> None:
    turn = np.linspace(0.0, 2.0 * math.pi, MOST_VERTICES + 1, endpoint=False)
    ring = tuple(zip(np.cos(turn).tolist(), np.sin(turn).tolist(), strict=True))
    with pytest.raises(GeometryError, match=rf"allowed is .*{MOST_VERTICES}"):
        PolygonOutline(ring)
    half = MOST_VERTICES // 2
    small = tuple((0.5 * u, 0.5 * v) for u, v in ring[::-1])[: MOST_VERTICES - half]
    with pytest.raises(GeometryError, match=rf"vertices; allowed are at most {MOST_VERTICES}"):
        PolygonOutline(ring[:-1], (small,))


@pytest.mark.parametrize("outline", [CircleOutline(5.0), EllipseOutline(5.0, 6.0), RoundedRectangle(5.0, 6.0, 1.0)])
@pytest.mark.parametrize("max_excess", [0.0, -1.0, math.nan, math.inf, 1000.0])
def test_senseless_excess_is_refused(outline: Outline, max_excess: float) -> None:
    with pytest.raises(GeometryError, match="max_excess_mm"):
        outline.enclosing(max_excess)


@pytest.mark.parametrize("outline", [CircleOutline(LARGEST_MM), EllipseOutline(LARGEST_MM, 0.9 * LARGEST_MM)])
def test_excess_that_takes_too_many_sides_is_refused(outline: Outline) -> None:
    with pytest.raises(GeometryError, match="too small for this size"):
        outline.enclosing(0.001)


def test_lists_and_arrays_become_tuples_that_compare_and_hash() -> None:
    from_lists = PolygonOutline([list(point) for point in TABLE])
    from_array = PolygonOutline(np.array(TABLE))
    assert from_lists == from_array == PolygonOutline(TABLE)
    assert hash(from_lists) == hash(from_array)
    assert CircleOutline(5, np.zeros(2)) == CircleOutline(5.0)
