"""The angle chart of a room whose couch turns: gantry across, couch upwards, clearance as colour."""

from typing import Final

import numpy as np
import shapely
from matplotlib.artist import Artist
from matplotlib.axes import Axes
from matplotlib.cm import ScalarMappable
from matplotlib.colors import LinearSegmentedColormap, Normalize
from matplotlib.contour import ContourSet
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.patches import Patch, PathPatch
from matplotlib.path import Path as Outline
from matplotlib.patheffects import withStroke
from numpy.typing import NDArray

from app.clearance_scale import EDGE_COLOURS, EDGES_MM, places
from app.files.chart_frame import (
    CONTACT_HATCH,
    INK,
    NO_TRAVEL_HATCH,
    PERMITTED_EDGE,
    REQUIRED,
    Hatch,
    chart_axes,
    hatched_box,
    label_angles,
    legend,
    new_page,
    no_travel_note,
)
from app.files.provenance import Provenance
from app.files.readings import own_scales
from geometry.assess import Assessment
from geometry.machine import Room
from geometry.states import CODE_OF, State

Array = NDArray[np.float64]

_CONTOURS_MM: Final = (50.0, 100.0, 150.0, 200.0, 300.0)
# A gap that no angle changes is a round number of mm as a rule; a contour just there would trace rounding errors.
_BELOW_ROUND_MM: Final = 0.01
_EDGE: Final = 0.025
_CONTOUR_STEP_DEG: Final = 5.0
_SHORT_HATCH: Final = Hatch("short of what is required", "none", "#ffffff", "////")
_UNPROVED_HATCH: Final = Hatch("unproved, not permitted", "none", "#ffffff", "......")
_HATCHES: Final = (
    (State.CONTACT, CONTACT_HATCH),
    (State.NO_TRAVEL, NO_TRAVEL_HATCH),
    (State.SHORT, _SHORT_HATCH),
    (State.UNPROVED, _UNPROVED_HATCH),
)
_SAMPLE: Final = EDGE_COLOURS[3]


def map_page(assessment: Assessment, provenance: Provenance) -> Figure:
    """Return the page with the chart of a couch that turns."""
    figure = new_page(provenance)
    scales = own_scales(assessment.scene.setup.room)
    axes = chart_axes(figure, with_scale=True, with_own=scales.gantry is not None)
    with_contours = draw_map(axes, assessment)
    if assessment.scene.no_travel:
        no_travel_note(axes, provenance)
    label_angles(axes, "x", *axes.get_xlim(), "Gantry", scales.gantry)
    label_angles(axes, "y", *axes.get_ylim(), "Couch", scales.couch)
    colour_scale(axes, left=1.075 if scales.couch is not None else 1.03)
    legend(axes, map_samples(with_contours), columns=6)
    return figure


def draw_map(axes: Axes, assessment: Assessment, letters: float = 6.5) -> bool:
    """Set an axes' limits and fill it: clearances, states, the permitted region. Tell whether it has contours.

    `letters`: points of the contours' labels.
    """
    gantry, couch = map_limits(assessment.scene.setup.room)
    axes.set_xlim(*gantry)
    axes.set_ylim(*couch)
    fill_outside(axes, assessment.scene.setup.room)
    if assessment.scene.no_travel:
        hatched_box(axes, gantry, couch, NO_TRAVEL_HATCH)
        return False
    with_contours = _is_fine(assessment)
    _shade(axes, assessment)
    _hatch_states(axes, assessment)
    if with_contours:
        _contours(axes, assessment, letters)
    _outline(axes, assessment.permitted_region)
    return with_contours


def clearance_colours() -> LinearSegmentedColormap:
    """Return the ramp of clearances as matplotlib has it, for values from `app.clearance_scale.places`."""
    return LinearSegmentedColormap.from_list("clearance", EDGE_COLOURS)


def map_limits(room: Room) -> tuple[tuple[float, float], tuple[float, float]]:
    """Return what the axes show: the gantry's whole turn, from 180 over 0 to 180, or more, and the couch's travel."""
    couch = room.couch.turntable
    gantry = (min(-180.0, room.gantry.low), max(180.0, room.gantry.high))
    return gantry, (couch.low, couch.high)


def fill_outside(axes: Axes, room: Room) -> None:
    """Hatch what of the whole turn the gantry's travel leaves out."""
    gantry, couch = map_limits(room)
    for low, high in ((gantry[0], room.gantry.low), (room.gantry.high, gantry[1])):
        if high > low:
            hatched_box(axes, (low, high), couch, NO_TRAVEL_HATCH)


def _borders(angles_deg: Array) -> Array:
    """Return the borders of the cells around grid angles; the outer ones end with the travel."""
    if len(angles_deg) == 1:
        return np.array([angles_deg[0] - 0.5, angles_deg[0] + 0.5])
    middles = (angles_deg[1:] + angles_deg[:-1]) / 2.0
    return np.concatenate([angles_deg[:1], middles, angles_deg[-1:]])


def _shade(axes: Axes, assessment: Assessment) -> None:
    """Colour each pair by its own clearance: nothing between the computed ones is made up."""
    exact = assessment.map
    shown = np.where(exact.clearance_mm > 0.0, exact.clearance_mm, np.nan)
    axes.pcolormesh(
        _borders(exact.gantry_deg),
        _borders(exact.couch_deg),
        np.ma.masked_invalid(places(shown)),
        cmap=clearance_colours(),
        vmin=0.0,
        vmax=1.0,
        rasterized=True,
        zorder=1,
    )


def _hatch_states(axes: Axes, assessment: Assessment) -> None:
    """Lay a texture over the cells of every state but "permitted"."""
    for state, hatch in _HATCHES:
        region = _region_of(assessment, state)
        if not region.is_empty:
            axes.add_patch(
                PathPatch(
                    outline_of(region),
                    facecolor=hatch.face,
                    edgecolor=hatch.line,
                    hatch=hatch.pattern,
                    linewidth=0.0,
                    zorder=2,
                )
            )


def _region_of(assessment: Assessment, state: State) -> shapely.Geometry:
    """Return the union of the cells around the grid angles in a state."""
    x, y = _borders(assessment.map.gantry_deg), _borders(assessment.map.couch_deg)
    there = np.pad(assessment.state == CODE_OF[state], ((0, 0), (1, 1))).astype(np.int8)
    change = np.diff(there, axis=1)
    rows, starts = np.nonzero(change == 1)
    _, stops = np.nonzero(change == -1)
    return shapely.union_all(shapely.box(x[starts], y[rows], x[stops], y[rows + 1]))


def outline_of(region: shapely.Geometry) -> Outline:
    """Return the borders of a region of polygons, holes included, as one path."""
    polygons = [part for part in shapely.get_parts(region) if isinstance(part, shapely.Polygon) and not part.is_empty]
    rings = [ring for polygon in polygons for ring in (polygon.exterior, *polygon.interiors)]
    return Outline.make_compound_path(*(Outline(shapely.get_coordinates(ring), closed=True) for ring in rings))


def _is_fine(assessment: Assessment) -> bool:
    """Tell whether contours between the grid angles say something."""
    exact = assessment.map
    steps = [float(np.diff(angles).max(initial=0.0)) for angles in (exact.gantry_deg, exact.couch_deg)]
    return min(exact.clearance_mm.shape) > 1 and max(steps) <= _CONTOUR_STEP_DEG


def _contours(axes: Axes, assessment: Assessment, letters: float) -> None:
    exact = assessment.map
    grid = (exact.gantry_deg, exact.couch_deg)
    clearance = np.ma.masked_invalid(exact.clearance_mm)
    levels = [level - _BELOW_ROUND_MM for level in _CONTOURS_MM]
    lines = axes.contour(*grid, clearance, levels=levels, colors=[INK], linewidths=0.5, alpha=0.75, zorder=3)
    _label_contours(axes, lines, letters)
    required = axes.contour(
        *grid, np.ma.masked_invalid(exact.slack_mm), levels=[0.0], colors=[REQUIRED], linewidths=1.4, zorder=4
    )
    required.set_linestyle((0, (4, 1.6)))
    required.set_path_effects([withStroke(linewidth=2.8, foreground="white")])


def _label_contours(axes: Axes, lines: ContourSet, letters: float) -> None:
    # The method is typed as returning nothing in one of its forms.
    for label in axes.clabel(lines, fmt="%.0f mm", fontsize=letters, inline=True, inline_spacing=2, zorder=6):
        label.set_path_effects([withStroke(linewidth=1.6, foreground="#ffffffb0")])
        x, y = axes.transAxes.inverted().transform(axes.transData.transform(label.get_position()))
        # Half a number at the chart's edge says nothing.
        label.set_visible(bool(_EDGE < x < 1.0 - _EDGE and 1.5 * _EDGE < y < 1.0 - 1.5 * _EDGE))


def _outline(axes: Axes, region: shapely.Geometry) -> None:
    """Draw the border of the permitted region."""
    if not region.is_empty:
        path = outline_of(region)
        axes.add_patch(
            PathPatch(path, facecolor="none", edgecolor=PERMITTED_EDGE, linewidth=1.6, joinstyle="round", zorder=5)
        )


def colour_scale(axes: Axes, left: float, letters: float = 7.0) -> None:
    """Draw the scale beside the chart, from `left`, a share of the chart's width, in letters of so many points."""
    place = axes.inset_axes((left, 0.0, 0.017, 1.0))
    scale = axes.figure.colorbar(ScalarMappable(Normalize(0.0, 1.0), clearance_colours()), cax=place)
    labels = [f"{edge:g}" for edge in EDGES_MM]
    scale.set_ticks(list(np.linspace(0.0, 1.0, len(EDGES_MM))), labels=[*labels[:-1], f"≥ {labels[-1]}"])
    scale.ax.tick_params(labelsize=letters, colors=INK, length=2)
    scale.set_label("Clearance, mm", fontsize=8, color=INK)


def map_samples(with_contours: bool) -> list[Artist]:
    """Return what the legend explains."""
    contour = Line2D(
        [], [], color=REQUIRED, linewidth=1.4, linestyle=(0, (4, 1.6)), label="clearance equals what is required"
    )
    return [
        Patch(facecolor=EDGE_COLOURS[7], edgecolor=PERMITTED_EDGE, linewidth=1.6, label="permitted"),
        *([contour] if with_contours else []),
        _over_colour(_SHORT_HATCH),
        _over_colour(_UNPROVED_HATCH),
        CONTACT_HATCH.patch(),
        NO_TRAVEL_HATCH.patch(),
    ]


def _over_colour(hatch: Hatch) -> Patch:
    return Patch(facecolor=_SAMPLE, edgecolor=hatch.line, hatch=hatch.pattern, linewidth=0.0, label=hatch.label)
