"""Outlines as room and set-up files write them."""

from typing import Final

from app.files import values
from app.files.reading import Table
from app.files.values import LARGEST_MM, Limits, Problem, Refused
from geometry.outlines import CircleOutline, EllipseOutline, Outline, PolygonOutline, RoundedRectangle

Point = tuple[float, float]

MOST_POINTS: Final = 2000
_FORMS: Final = ("points", "circle_radius_mm", "ellipse_mm", "rectangle_mm")
_MM: Final = Limits()
_SIZE: Final = Limits(0.0, LARGEST_MM, above=True)


def outline_of(table: Table) -> Outline | None:
    """Return the outline that `table` describes, None after a fault."""
    forms = [form for form in _FORMS if table.has(form)]
    if len(forms) != 1:
        found = " and ".join(forms) or "none of them"
        table.ignore_rest()
        table.fault("", found, f"exactly one of {', '.join(_FORMS)}")
        return None
    if forms == ["points"]:
        return _polygon(table)
    centre_mm = table.pair("centre_mm", default=(0.0, 0.0))
    if forms == ["circle_radius_mm"]:
        radius_mm = table.number("circle_radius_mm", _SIZE)
        return table.built(lambda: CircleOutline(radius_mm, centre_mm))
    if forms == ["ellipse_mm"]:
        half_width_mm, half_height_mm = table.pair("ellipse_mm", _SIZE)
        exponent = table.number("exponent", Limits(2.0, 20.0), default=2.0)
        return table.built(lambda: EllipseOutline(half_width_mm, half_height_mm, centre_mm, exponent))
    width_mm, height_mm = table.pair("rectangle_mm", _SIZE)
    corner_mm = table.number("corner_radius_mm", Limits(0.0, LARGEST_MM), default=0.0)
    return table.built(lambda: RoundedRectangle(width_mm, height_mm, corner_mm, centre_mm))


def _polygon(table: Table) -> Outline | None:
    points = table.checked("points", _ring, ())
    holes = table.checked("holes", _holes, (), ())
    count = len(points) + sum(len(hole) for hole in holes)
    if count > MOST_POINTS:
        table.fault("", f"{count} points with the holes'", f"at most {MOST_POINTS}")
    return table.built(lambda: PolygonOutline(points, holes))


def _ring(value: object) -> tuple[Point, ...]:
    """Return the points of one closed line. The first need not be repeated at the end; where it is, it is left out."""
    points = values.each(values.items(value, MOST_POINTS, fewest=3), lambda point: values.pair(point, _MM))
    if points[0] == points[-1]:
        points = points[:-1]
    if len(points) < 3:
        raise Refused([Problem("", f"{len(points)} points that differ", "3 or more")])
    return points


def _holes(value: object) -> tuple[tuple[Point, ...], ...]:
    return values.each(values.items(value, MOST_POINTS // 3), _ring)
