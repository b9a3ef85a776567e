"""The set-up as three line drawings on paper: from the foot end, from the side and from above, parts as silhouettes."""

from dataclasses import dataclass
from typing import Final

import numpy as np
import shapely
from matplotlib.axes import Axes
from matplotlib.patches import PathPatch

from app.files.chart_map import outline_of
from app.plan_files.sheet_page import BODY, GREY, INK, SMALL, Pages, line_mm
from geometry.frames import Array, R_fixed_gantry, R_fixed_turntable
from geometry.scene import Motion, Scene, ScenePart, Side

# What is drawn about the isocentre, mm, fixed system: X, Y, Z.
_LOW: Final = (-1250.0, -2300.0, -1380.0)
_HIGH: Final = (1250.0, 1500.0, 1180.0)
_GAP_MM: Final = 3.0
_ARROW_MM: Final = 330.0
_FILLS: Final = {Side.GANTRY: "#c4c4c4", Side.COUCH: "#e6e6e6", Side.ROOM: "#f6f6f6"}


@dataclass(frozen=True)
class View:
    """A direction to look in: where the page's right and up, and the way towards the viewer, point in the room."""

    title: str
    right: tuple[int, int, int]
    up: tuple[int, int, int]
    names: tuple[str, str]

    @property
    def towards(self) -> Array:
        """The way towards the viewer."""
        return np.cross(self.right, self.up).astype(np.float64)

    def limits(self, axis: tuple[int, int, int]) -> tuple[float, float]:
        """Return what is drawn along one of the page's axes, mm."""
        ends = sorted(float(np.dot(axis, corner)) for corner in (_LOW, _HIGH))
        return ends[0], ends[1]


VIEWS: Final = (
    View("From the foot end", (1, 0, 0), (0, 0, 1), ("X", "Z")),
    View("From the side, gantry to the right", (0, 1, 0), (0, 0, 1), ("Y", "Z")),
    View("From above, gantry to the right", (0, 1, 0), (-1, 0, 0), ("Y", "−X")),
)


def add_picture(pages: Pages, scene: Scene, gantry_deg: float, couch_deg: float) -> None:
    """Draw the three views side by side, to one scale."""
    widths = [_extent(view.limits(view.right)) for view in VIEWS]
    heights = [_extent(view.limits(view.up)) for view in VIEWS]
    scale = (pages.across - _GAP_MM * (len(VIEWS) - 1)) / sum(widths)
    down = scale * max(heights)
    title, legend = line_mm(SMALL) + 0.6, line_mm(SMALL) + 1.0
    pages.need(title + down + legend)
    left = pages.left
    for view, width, height in zip(VIEWS, widths, heights, strict=True):
        pages.page.text(left, pages.y + line_mm(SMALL) / 2.0, view.title, SMALL, bold=True)
        axes = pages.page.axes(left, pages.y + title + down - scale * height, scale * width, scale * height)
        _draw(axes, view, scene, gantry_deg, couch_deg)
        left += scale * width + _GAP_MM
    words = (
        f"Gantry {gantry_deg:g}°, couch {couch_deg:g}°. Hatched: patient envelope; dotted: devices; dashed: hidden. "
        "Cross: isocentre. Axes of IEC 61217."
    )
    pages.y += title + down
    pages.page.text(pages.left, pages.y + 0.6 + line_mm(SMALL) / 2.0, words, SMALL, colour=GREY)
    pages.y += legend


def silhouette(part: ScenePart, view: View, gantry_deg: float, couch_deg: float) -> tuple[shapely.Geometry, float]:
    """Return the outline of a part as it is seen, mm on the page's axes, and how near its middle is to the viewer."""
    turn = {
        Motion.GANTRY: R_fixed_gantry(gantry_deg),
        Motion.TURNTABLE: R_fixed_turntable(couch_deg),
        Motion.STILL: np.eye(3),
    }[part.motion]
    onto = np.array([view.right, view.up], dtype=np.float64) @ turn
    outlines = [shapely.MultiPoint(piece.vertices @ onto.T).convex_hull for piece in part.pieces]
    depths = np.concatenate([piece.vertices for piece in part.pieces]) @ (view.towards @ turn)
    # A hair wider, so that pieces that share a facet leave no seam.
    shape = shapely.union_all(shapely.buffer(outlines, 0.5, join_style="mitre"))
    return shape, float(depths.max() + depths.min()) / 2.0


def _draw(axes: Axes, view: View, scene: Scene, gantry_deg: float, couch_deg: float) -> None:
    axes.set_xlim(*view.limits(view.right))
    axes.set_ylim(*view.limits(view.up))
    axes.set_xticks([])
    axes.set_yticks([])
    for spine in axes.spines.values():
        spine.set_linewidth(0.6)
        spine.set_zorder(105.0)
        spine.set_color(GREY)
    window = shapely.box(*(end for k in (0, 1) for end in (axes.get_xlim()[k], axes.get_ylim()[k])))
    seen = [(part, *silhouette(part, view, gantry_deg, couch_deg)) for part in scene.parts]
    covered: shapely.Geometry = shapely.Polygon()
    hidden = []
    # From the nearest backwards, to know what is hidden; the paint goes on by its height.
    for height, (part, whole, _) in enumerate(sorted(seen, key=lambda entry: -entry[2])):
        shape = whole.intersection(window)
        if part.kind != "machine":
            hidden.append(shape.boundary.intersection(covered))
        if not shape.is_empty:
            _paint(axes, part, shape, 100.0 - 0.1 * height)
        covered = covered.union(shape)
    for lines in hidden:
        for line in shapely.get_parts(lines):
            points = shapely.get_coordinates(line)
            axes.plot(points[:, 0], points[:, 1], color=INK, linewidth=0.5, linestyle=(0, (3, 2)), zorder=101.0)
    _mark_isocentre(axes, view)


def _paint(axes: Axes, part: ScenePart, shape: shapely.Geometry, height: float) -> None:
    pattern = {"patient": "/////", "device": "....", "machine": None}[part.kind]
    fill = "#ffffff" if pattern else _FILLS[part.side]
    outline = outline_of(shape)
    if pattern:
        axes.add_patch(
            PathPatch(outline, facecolor=fill, edgecolor="#6a6a6a", hatch=pattern, linewidth=0.0, zorder=height)
        )
        fill = "none"
    width = 0.5 if part.side is Side.ROOM else 0.8
    colour = GREY if part.side is Side.ROOM else INK
    axes.add_patch(PathPatch(outline, facecolor=fill, edgecolor=colour, linewidth=width, zorder=height + 0.05))


def _mark_isocentre(axes: Axes, view: View) -> None:
    for ends in (([-90, 90], [0, 0]), ([0, 0], [-90, 90])):
        axes.plot(*ends, color="white", linewidth=2.6, zorder=102.0, solid_capstyle="butt")
        axes.plot(*ends, color=INK, linewidth=1.1, zorder=103.0, solid_capstyle="butt")
    # The axes stand in a corner, where they hide nothing.
    low, bottom = axes.get_xlim()[0] + 190.0, axes.get_ylim()[0] + 130.0
    for k, name in enumerate(view.names):
        step = (_ARROW_MM, 0.0) if k == 0 else (0.0, _ARROW_MM)
        axes.annotate(
            "",
            (low + step[0], bottom + step[1]),
            (low, bottom),
            arrowprops={"arrowstyle": "-|>", "color": INK, "linewidth": 0.9, "shrinkA": 0.0, "shrinkB": 0.0},
            zorder=104.0,
        )
        axes.text(
            low + step[0] + (60.0 if k == 0 else 0.0),
            bottom + step[1] + (0.0 if k == 0 else 60.0),
            name,
            fontsize=BODY,
            ha="left" if k == 0 else "center",
            va="center" if k == 0 else "bottom",
            zorder=104.0,
            bbox={"facecolor": "white", "edgecolor": "none", "pad": 0.5, "alpha": 0.8},
        )


def _extent(limits: tuple[float, float]) -> float:
    return limits[1] - limits[0]
