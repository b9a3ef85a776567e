"""The page that an angle chart stands on: title, marks, foot lines, and what both kinds of chart share."""

import textwrap
import unicodedata
from dataclasses import dataclass
from typing import Final

import numpy as np
from matplotlib.artist import Artist
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.patches import Patch, Rectangle
from numpy.typing import NDArray

from app.files.provenance import Provenance, joined_lines, required_lines
from app.files.readings import number_text, reading_deg, shown_deg
from geometry.machine import Readout

# A4 across, in inches.
PAGE: Final = (11.69, 8.27)
INK: Final = "#1b1f23"
PALE_INK: Final = "#59636e"
CONTACT: Final = "#b9bcc0"
NO_TRAVEL: Final = "#ffffff"
PERMITTED_EDGE: Final = "#000000"
# The one strong colour of the page; dashed and cased in white as well, so that it needs no colour to be found.
REQUIRED: Final = "#c2185b"

_LEFT: Final = 0.075
_RIGHT: Final = 0.965
_BOTTOM: Final = 0.275
# How many letters fill a line at the foot, and in bold.
_CHARACTERS: Final = 215
_BOLD_CHARACTERS: Final = 175
_MOST_FOOT_LINES: Final = 9


@dataclass(frozen=True)
class Hatch:
    """How a region without a clearance to show is filled; `pattern` is matplotlib's."""

    label: str
    face: str
    line: str
    pattern: str

    def patch(self) -> Patch:
        """Return a sample for the legend."""
        return Patch(facecolor=self.face, edgecolor=self.line, hatch=self.pattern, linewidth=0.6, label=self.label)


CONTACT_HATCH: Final = Hatch("contact", CONTACT, "#3d4248", "xxxx")
NO_TRAVEL_HATCH: Final = Hatch("no travel", NO_TRAVEL, "#9aa1a8", "----")


def new_page(provenance: Provenance) -> Figure:
    """Return a page with title, marks and foot; the chart's own place is left free."""
    figure = Figure(figsize=PAGE, facecolor="white")
    # It can tell how wide a text is before anything is saved.
    FigureCanvasAgg(figure)
    _title(figure, provenance)
    _foot(figure, provenance)
    return figure


def chart_axes(figure: Figure, *, with_scale: bool, with_own: bool) -> Axes:
    """Return the axes of the chart, narrower for a colour scale beside it, lower for the machine's scale above it."""
    width = 0.79 if with_scale else _RIGHT - _LEFT - 0.01
    axes = figure.add_axes((_LEFT, _BOTTOM, width, (0.79 if with_own else 0.83) - _BOTTOM))
    axes.tick_params(labelsize=8, colors=INK, length=3)
    for spine in axes.spines.values():
        spine.set_color(INK)
        spine.set_linewidth(0.8)
    return axes


def angle_ticks(low_deg: float, high_deg: float, most: int = 13) -> NDArray[np.float64]:
    """Return round angles within a range, at most so many (but never closer than every degree)."""
    extent = high_deg - low_deg
    step = next((step for step in (1, 2, 5, 10, 15, 30, 45, 90) if extent / step < most), 90)
    return np.arange(np.ceil(low_deg / step), np.floor(high_deg / step) + 1) * float(step)


def label_angles(
    axes: Axes, which: str, low_deg: float, high_deg: float, name: str, own: Readout | None, letters: float = 7.0
) -> None:
    """Label an axis ("x" or "y") in [0, 360) and, on the other side, on the machine's own scale if it has one.

    `letters`: points of the figures on the machine's scale.
    """
    ticks = angle_ticks(low_deg, high_deg)
    axis = axes.xaxis if which == "x" else axes.yaxis
    axis.set_ticks(ticks, [f"{number_text(reading_deg(tick))}°" for tick in ticks])
    axis.set_label_text(f"{name}, IEC 61217", fontsize=9, color=INK)
    if own is None:
        return
    second = axes.secondary_xaxis("top") if which == "x" else axes.secondary_yaxis("right")
    other = second.xaxis if which == "x" else second.yaxis
    other.set_ticks(ticks, [f"{number_text(shown_deg(own, tick))}°" for tick in ticks])
    other.set_label_text(f"{name}, as the machine shows it", fontsize=8, color=PALE_INK)
    second.tick_params(labelsize=letters, colors=PALE_INK, length=2)


def hatched_box(axes: Axes, x: tuple[float, float], y: tuple[float, float], hatch: Hatch) -> None:
    """Fill a rectangle given in data coordinates."""
    axes.add_patch(
        Rectangle(
            (x[0], y[0]),
            x[1] - x[0],
            y[1] - y[0],
            facecolor=hatch.face,
            edgecolor=hatch.line,
            hatch=hatch.pattern,
            linewidth=0.0,
            zorder=2.5,
        )
    )


def no_travel_note(axes: Axes, provenance: Provenance) -> None:
    """Write over a chart why nothing can be reached."""
    reasons = "\n".join("\n".join(_wrapped(reason, 90)) for reason in provenance.no_travel)
    axes.text(
        0.5,
        0.5,
        f"No travel\n{reasons}",
        transform=axes.transAxes,
        ha="center",
        va="center",
        fontsize=11,
        color=INK,
        zorder=9,
        parse_math=False,
        bbox={"facecolor": "white", "edgecolor": INK, "pad": 8.0},
    )


def legend(axes: Axes, handles: list[Artist], columns: int) -> None:
    """Place the legend under the chart."""
    axes.legend(
        handles=handles,
        loc="upper center",
        bbox_to_anchor=(0.5 * (_LEFT + _RIGHT), 0.207),
        bbox_transform=axes.figure.transFigure,
        ncols=columns,
        frameon=False,
        fontsize=8,
        handlelength=2.6,
        handleheight=1.2,
        columnspacing=1.8,
        borderaxespad=0.0,
    )


def _title(figure: Figure, provenance: Provenance) -> None:
    options = provenance.options
    _text(figure, _LEFT, 0.955, "Permitted gantry and couch angles", 15, weight="bold")
    # Two marks stand beside the title; a third one needs room beside the names.
    right = _RIGHT if len(provenance.marks) < 3 else _LEFT + 0.5
    _text(figure, _LEFT, 0.924, provenance.setup, 10.5, right=right)
    _text(figure, _LEFT, 0.902, provenance.room, 10.5, right=right)
    facts = (
        f"{provenance.date.isoformat()}   Wideberth {provenance.version}   "
        f"fingerprint {provenance.short_fingerprint}   "
        f"grid {options.gantry_step_deg:g}° × {options.couch_step_deg:g}°, edges {options.edge_deg:g}°, "
        f"readouts ±{options.gantry_tolerance_deg:g}° and ±{options.couch_tolerance_deg:g}°   {provenance.survey}"
    )
    _text(figure, _LEFT, 0.881, facts, 7.5, colour=PALE_INK, right=right)
    top = 0.955 if len(provenance.marks) < 2 else 0.975
    for i, mark in enumerate(provenance.marks):
        figure.text(
            _RIGHT,
            top - 0.029 * i,
            mark,
            ha="right",
            va="center",
            fontsize=9,
            fontweight="bold",
            color="white",
            parse_math=False,
            bbox={"facecolor": INK, "edgecolor": INK, "boxstyle": "square,pad=0.35"},
        )


def _foot(figure: Figure, provenance: Provenance) -> None:
    """Write what must remain and why, joined pairs, and the cautions, at the foot."""
    required = "   ".join(f"{label}: {text}" for label, text in required_lines(provenance.required))
    joined = "; ".join(joined_lines(provenance.joined)) or "none"
    caution_lines = _wrapped(" ".join(provenance.cautions), _BOLD_CHARACTERS)
    facts = [*_wrapped(required, _CHARACTERS), *_wrapped(f"Joined, not checked: {joined}", _CHARACTERS)]
    space = _MOST_FOOT_LINES - len(caution_lines)
    if len(facts) > space:
        facts = [
            *facts[: space - 1],
            "… the rest stands in the workbook, the JSON file and this file's own properties.",
        ]
    y = 0.16
    for line in facts:
        _text(figure, _LEFT, y, line, 6.4, colour=PALE_INK)
        y -= 0.0155
    y -= 0.006
    for line in caution_lines:
        _text(figure, _LEFT, y, line, 7.0, weight="bold")
        y -= 0.0165


def _wrapped(text: str, characters: int) -> list[str]:
    """Return the lines of a text; letters of full width take two places."""
    wide = any(unicodedata.east_asian_width(letter) in "WF" for letter in text)
    return textwrap.wrap(text, characters // 2 if wide else characters)


def _text(
    figure: Figure,
    x: float,
    y: float,
    text: str,
    size: float,
    colour: str = INK,
    weight: str = "normal",
    right: float = _RIGHT,
) -> None:
    """Write a line, in smaller letters where it would reach beyond `right`."""
    drawn = figure.text(x, y, text, fontsize=size, color=colour, fontweight=weight, va="center", parse_math=False)
    too_wide = drawn.get_window_extent().width / ((right - x) * figure.bbox.width)
    if too_wide > 1.0:
        drawn.set_fontsize(size / too_wide)
