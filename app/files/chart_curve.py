"""The angle chart of a room in which one axis cannot turn: the clearance as the curve that it is."""

from typing import Final

import numpy as np
from matplotlib.artist import Artist
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.patches import Patch, Rectangle
from numpy.typing import NDArray

from app.clearance_scale import EDGE_COLOURS
from app.files.chart_frame import (
    CONTACT_HATCH,
    INK,
    NO_TRAVEL_HATCH,
    PALE_INK,
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
from app.files.readings import number_text, own_scales, reading_deg
from geometry.assess import Assessment
from geometry.states import CODE_OF, State

Array = NDArray[np.float64]

_PERMITTED: Final = EDGE_COLOURS[3]
# The bar of permitted angles, as shares of the chart's height.
_BAR: Final = 0.055
_ROOM: Final = 0.045
_HATCHES: Final = (
    (State.SHORT, Hatch("short of what is required", "none", "#8b939b", "////")),
    (State.UNPROVED, Hatch("unproved, not permitted", "none", "#8b939b", "....")),
    (State.CONTACT, CONTACT_HATCH),
    (State.NO_TRAVEL, NO_TRAVEL_HATCH),
)


def curve_page(assessment: Assessment, provenance: Provenance) -> Figure:
    """Return the page with the curve over the axis that turns, the gantry where neither does."""
    figure = new_page(provenance)
    curve = _Curve(assessment)
    axes = chart_axes(figure, with_scale=False, with_own=curve.own is not None)
    axes.set_xlim(*curve.limits)
    axes.set_ylim(-(2.0 * _ROOM + _BAR) * curve.top_mm, curve.top_mm)
    for low, high in ((curve.limits[0], curve.angles_deg[0]), (curve.angles_deg[-1], curve.limits[1])):
        hatched_box(axes, (low, high), axes.get_ylim(), NO_TRAVEL_HATCH)
    if assessment.scene.no_travel:
        hatched_box(axes, curve.limits, axes.get_ylim(), NO_TRAVEL_HATCH)
        no_travel_note(axes, provenance)
    else:
        _draw(axes, curve)
    label_angles(axes, "x", *curve.limits, curve.name, curve.own)
    axes.set_ylabel("Clearance, mm", fontsize=9, color=INK)
    axes.set_yticks([tick for tick in axes.get_yticks() if 0.0 <= tick <= curve.top_mm])
    axes.set_title(curve.fixed_text, fontsize=9, color=PALE_INK, loc="left", pad=26.0 if curve.own else 6.0)
    legend(axes, _samples(), columns=7)
    return figure


class _Curve:
    """One line of the map: the angles of the axis that turns, and what is known along it."""

    def __init__(self, assessment: Assessment) -> None:
        exact, room = assessment.map, assessment.scene.setup.room
        scales = own_scales(room)
        self.over_gantry = len(exact.couch_deg) == 1
        line = (0, slice(None)) if self.over_gantry else (slice(None), 0)
        self.angles_deg: Array = exact.gantry_deg if self.over_gantry else exact.couch_deg
        self.clearance_mm: Array = exact.clearance_mm[line]
        self.state: NDArray[np.int8] = assessment.state[line]
        required = assessment.scene.setup.required
        self.required_mm = [required.of_pair_mm(with_patient=flag) for flag in (False, True)]
        self.name = "Gantry" if self.over_gantry else "Couch"
        self.own = scales.gantry if self.over_gantry else scales.couch
        low, high = float(self.angles_deg[0]), float(self.angles_deg[-1])
        self.limits = (min(-180.0, low), max(180.0, high)) if self.over_gantry else (low - 2.0, high + 2.0)
        self.permitted = self._permitted(assessment)
        fixed = exact.couch_deg if self.over_gantry else exact.gantry_deg
        self.fixed_text = (
            f"{'Couch' if self.over_gantry else 'Gantry'} fixed at {number_text(reading_deg(float(fixed[0])))}°"
        )

    @property
    def top_mm(self) -> float:
        """Where the chart ends: above everything, and no less than a readable range."""
        known = self.clearance_mm[np.isfinite(self.clearance_mm)]
        return max(60.0, 1.12 * max(self.required_mm), 1.12 * float(known.max(initial=0.0)))

    def _permitted(self, assessment: Assessment) -> list[tuple[float, float]]:
        if self.over_gantry:
            return [(span.gantry_from_deg, span.gantry_to_deg) for span in assessment.spans]
        return [(span.couch_deg - 0.1, span.couch_deg + 0.1) for span in assessment.spans]

    def runs(self, state: State) -> list[tuple[float, float]]:
        """Return the ranges of grid angles in a state, each half-way to its neighbours."""
        there = np.concatenate([[False], self.state == CODE_OF[state], [False]]).astype(int)
        edges = np.diff(there)
        middles = (self.angles_deg[1:] + self.angles_deg[:-1]) / 2.0
        borders = np.concatenate([self.angles_deg[:1], middles, self.angles_deg[-1:]])
        starts, stops = np.nonzero(edges == 1)[0], np.nonzero(edges == -1)[0]
        return [(float(borders[i]), float(borders[j])) for i, j in zip(starts, stops, strict=True)]


def _draw(axes: Axes, curve: _Curve) -> None:
    known = np.isfinite(curve.clearance_mm)
    clearance = np.where(known, curve.clearance_mm, np.nan)
    axes.fill_between(curve.angles_deg, 0.0, clearance, color=EDGE_COLOURS[8], alpha=0.35, linewidth=0.0, zorder=1)
    axes.plot(curve.angles_deg, clearance, color=INK, linewidth=1.8, zorder=4)
    _draw_required(axes, curve)
    for state, hatch in _HATCHES:
        for low, high in curve.runs(state):
            hatched_box(axes, (low, high), (0.0, curve.top_mm), hatch)
    if known.any():
        _mark_least(axes, curve)
    axes.axhline(0.0, color=INK, linewidth=0.8, zorder=3)
    axes.grid(axis="y", color="#d7dbdf", linewidth=0.5, zorder=0)
    axes.set_axisbelow(True)
    height = _BAR * curve.top_mm
    for low, high in curve.permitted:
        axes.add_patch(
            Rectangle(
                (low, -_ROOM * curve.top_mm - height),
                high - low,
                height,
                facecolor=_PERMITTED,
                edgecolor=INK,
                linewidth=1.2,
            )
        )


def _draw_required(axes: Axes, curve: _Curve) -> None:
    """Draw what pairs of parts must keep: one line or, where the patient's uncertainties count, two."""
    machine, patient = curve.required_mm
    lines = [(patient, "required", "bottom")]
    if patient > machine:
        lines = [
            (patient, "required, with patient or device", "bottom"),
            (machine, "required, machine and room", "top"),
        ]
    for level, words, place in lines:
        axes.axhline(level, color=REQUIRED, linewidth=1.5, linestyle="--", zorder=5)
        note = axes.text(0.99, level, f" {words} {level:.1f} mm", transform=axes.get_yaxis_transform())
        note.set(ha="right", va=place, fontsize=7.5, color=REQUIRED, zorder=6)


def _mark_least(axes: Axes, curve: _Curve) -> None:
    """Write the smallest clearance at its place; what it means is the legend's and the table's business."""
    place = int(np.nanargmin(curve.clearance_mm))
    angle, least = float(curve.angles_deg[place]), float(curve.clearance_mm[place])
    share = (angle - curve.limits[0]) / (curve.limits[1] - curve.limits[0])
    # Under the curve there is nothing but its shade; near the foot there are the required lines.
    below = least > 0.3 * curve.top_mm
    axes.annotate(
        f"least {least:.1f} mm at {number_text(reading_deg(angle))}°",
        (angle, least),
        xytext=(12 if share < 0.1 else -12 if share > 0.9 else 0, -22 if below else 40),
        textcoords="offset points",
        ha="left" if share < 0.1 else "right" if share > 0.9 else "center",
        fontsize=8.5,
        color=INK,
        arrowprops={"arrowstyle": "-", "color": INK, "linewidth": 0.8},
        zorder=6,
    )


def _samples() -> list[Artist]:
    return [
        Patch(facecolor=_PERMITTED, edgecolor=INK, linewidth=1.2, label="permitted"),
        Line2D([], [], color=INK, linewidth=1.8, label="clearance"),
        Line2D([], [], color=REQUIRED, linewidth=1.5, linestyle="--", label="required clearance"),
        *(hatch.patch() for _, hatch in _HATCHES),
    ]
