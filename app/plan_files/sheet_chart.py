"""The angle chart on the dry-run sheet, with the fields drawn on it and numbered."""

from typing import Final

from matplotlib.axes import Axes
from matplotlib.patheffects import withStroke

from app.files.chart_frame import label_angles
from app.files.chart_map import colour_scale, draw_map, fill_outside, map_limits, map_samples
from app.files.readings import own_scales
from app.plan_files.sheet_page import INK, SMALL, Pages, line_mm
from geometry.assess import Assessment
from geometry.states import State
from geometry.treatment.data import CheckReport, FieldCheck

_DOWN_MM: Final = 66.0
_LEAST_DOWN_MM: Final = 50.0
_HEADING_MM: Final = 12.0
_ABOVE_MM: Final = 9.0
_BELOW_MM: Final = 11.0
_LEFT_MM: Final = 17.0
_STRIP_MM: Final = 4.6


def add_chart(pages: Pages, report: CheckReport, assessment: Assessment | None) -> None:
    """Draw the chart: shaded by clearance where an assessment is given, travel and fields alone otherwise."""
    room = report.setup.room
    flat = room.couch.turntable.low == room.couch.turntable.high
    scales = own_scales(room)
    above = _ABOVE_MM if scales.gantry is not None else 1.0
    shaded = assessment is not None and not flat and not assessment.scene.no_travel
    legend_mm = 9.0 if shaded else 0.0
    around = above + _BELOW_MM + legend_mm + 2.0 * line_mm(SMALL)
    # A little lower where it then fits the page.
    left_mm = pages.free - around - _HEADING_MM
    down = left_mm if _LEAST_DOWN_MM <= left_mm < _DOWN_MM else _DOWN_MM
    if flat:
        down = min(120.0, max(20.0, _STRIP_MM * (len(report.fields) + 1)))
    pages.heading("Fields on the angle chart", keep_with=around + down)
    own_mm = 19.0 if scales.couch is not None and not flat else 4.0
    across = pages.across - _LEFT_MM - own_mm - (19.0 if shaded else 0.0)
    axes = pages.page.axes(pages.left + _LEFT_MM, pages.y + above, across, down)
    axes.tick_params(labelsize=SMALL, colors=INK, length=3)
    gantry, couch = map_limits(room)
    if shaded and assessment is not None:
        contours = draw_map(axes, assessment, SMALL)
        colour_scale(axes, 1.0 + own_mm / across, SMALL)
        axes.legend(
            handles=map_samples(contours),
            loc="upper center",
            bbox_to_anchor=(0.5, -(_BELOW_MM + 0.5) / down),
            ncols=3,
            frameon=False,
            fontsize=SMALL,
            handlelength=2.4,
            columnspacing=1.6,
            borderaxespad=0.0,
            labelspacing=0.3,
        )
    else:
        axes.set_xlim(*gantry)
        axes.set_ylim(*((len(report.fields) + 0.6, 0.4) if flat else couch))
        if not flat:
            fill_outside(axes, room)
        axes.grid(color="#cfcfcf", linewidth=0.5)
    _fields(axes, report, flat=flat)
    label_angles(axes, "x", *gantry, "Gantry", scales.gantry, SMALL)
    if flat:
        axes.set_yticks([])
    else:
        label_angles(axes, "y", *couch, "Couch", scales.couch, SMALL)
    pages.y += above + down + _BELOW_MM + legend_mm
    words = "Numbers: fields; arrows: the way they turn; dashed, white on black: not permitted; dotted: moves. "
    if shaded and any(check.scene is not report.scene for check in report.fields):
        words += "Shading: the set-up as on page 1."
    elif not shaded:
        words += "Clearances are not shown."
    pages.paragraph(words, SMALL)


def _fields(axes: Axes, report: CheckReport, *, flat: bool) -> None:
    for move in report.moves:
        for corners in move.turns if move.state is State.PERMITTED and not flat else ():
            x, y = zip(*corners, strict=True)
            axes.plot(x, y, color=INK, linewidth=1.0, linestyle=(0, (1, 1.6)), zorder=20, path_effects=_cased(2.2))
    taken: list[tuple[float, float]] = []
    for number, check in enumerate(report.fields, start=1):
        _field(axes, number, check, taken, flat=flat)


def _field(axes: Axes, number: int, check: FieldCheck, taken: list[tuple[float, float]], *, flat: bool) -> None:
    points = [(gantry, float(number) if flat else couch) for gantry, couch in check.points_deg]
    permitted = check.state is State.PERMITTED
    style = "-" if permitted else (0, (3, 1.5))
    if len(points) > 1:
        x, y = zip(*points, strict=True)
        axes.plot(x, y, color=INK, linewidth=2.2, linestyle=style, zorder=21, path_effects=_cased(4.2))
        before = next((p for p in reversed(points[:-1]) if p != points[-1]), points[0])
        axes.annotate(
            "",
            points[-1],
            _short_of(points[-1], before),
            arrowprops={"arrowstyle": "-|>", "color": INK, "linewidth": 2.2, "mutation_scale": 12, "shrinkB": 0.0},
            zorder=22,
        )
    # Beyond the travel nothing is drawn: the number stands at the chart's edge.
    start = _clamped(axes, points[0])
    axes.plot(*points[0], marker="o", markersize=5.0, color=INK, markeredgecolor="white", zorder=22)
    axes.annotate(
        str(number),
        start,
        xytext=(_beside(axes, start, taken), 0.0),
        textcoords="offset points",
        ha="center",
        va="center",
        fontsize=9.0,
        fontweight="bold",
        color=INK if permitted else "white",
        bbox={"boxstyle": "circle,pad=0.25", "facecolor": "white" if permitted else INK, "edgecolor": INK},
        annotation_clip=False,
        zorder=23,
    )


def _clamped(axes: Axes, point: tuple[float, float]) -> tuple[float, float]:
    """Return the place of the chart nearest to a point."""
    x, y = (
        min(max(value, min(limits)), max(limits))
        for value, limits in zip(point, (axes.get_xlim(), axes.get_ylim()), strict=True)
    )
    return x, y


def _beside(axes: Axes, point: tuple[float, float], taken: list[tuple[float, float]]) -> float:
    """Return how far beside its start, in points, a number stands, so that it hides no earlier one."""
    low, high = axes.get_xlim()
    inwards = 1.0 if point[0] < (low + high) / 2.0 else -1.0
    near = sum(abs(point[0] - x) < 12.0 and abs(point[1] - y) < 10.0 for x, y in taken)
    taken.append(point)
    return inwards * (13.0 + 18.0 * near)


def _short_of(end: tuple[float, float], before: tuple[float, float]) -> tuple[float, float]:
    """Return a point a little before the end, for the arrow's shaft."""
    length = max(abs(a - b) for a, b in zip(end, before, strict=True))
    share = min(1.0, 4.0 / length) if length else 0.0
    return end[0] + share * (before[0] - end[0]), end[1] + share * (before[1] - end[1])


def _cased(width: float) -> list[withStroke]:
    return [withStroke(linewidth=width, foreground="white")]
