"""What a chart says of the pair of angles that is pointed at, as values and as words. No Qt."""

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

from app.files.readings import number_text, reading_deg, shown_deg
from app.window.chart.view import cells_at
from geometry.assess import exact_state
from geometry.machine import Readout
from geometry.states import STATES, State
from geometry.sweep import ClearanceMap

IEC: Final = Readout()
NOT_PROVED_YET: Final = "not proved yet"


@dataclass(frozen=True)
class Reading:
    """What is known of a pair of grid angles (deg, unwrapped), the nearest to a place on the chart.

    Beyond the grid `clearance_mm` and `slack_mm` are NaN, and the angles are those of the place itself. `state` is None
    where the distance is enough and the proof is still to come. Parts are labels, empty where no distance was found.
    `step_deg` is how far the grid angles around are apart, gantry and couch; 0 for an axis with one.
    """

    gantry_deg: float
    couch_deg: float
    clearance_mm: float
    slack_mm: float
    state: State | None
    machine_part: str
    couch_part: str
    step_deg: tuple[float, float]

    @property
    def state_words(self) -> str:
        """The state in words."""
        return NOT_PROVED_YET if self.state is None else str(self.state)

    @property
    def clearance_words(self) -> str:
        """The clearance in mm, or what stands in its place; rounded down, so that it never claims too much."""
        if self.state is State.NO_TRAVEL:
            return "beyond the travel"
        if math.isnan(self.clearance_mm):
            return "no distance"
        if self.state is State.CONTACT:
            return "0 mm"
        return f"{_floored(self.clearance_mm)} mm" if math.isfinite(self.clearance_mm) else "nothing near"

    @property
    def slack_words(self) -> str:
        """How much more or less than required is left, or nothing where that says nothing."""
        if self.state in {State.NO_TRAVEL, State.CONTACT} or not math.isfinite(self.slack_mm):
            return ""
        if self.slack_mm < 0.0:
            missing = max(math.ceil(-self.slack_mm * 10.0 - 1e-6) / 10.0, 0.1)
            return f"{missing:.1f} mm less than required"
        return f"{_floored(self.slack_mm)} mm more than required"

    @property
    def line(self) -> str:
        """All of it in one line, for a status line."""
        angles = f"Gantry {angle_words(self.gantry_deg)}, couch {angle_words(self.couch_deg)}"
        if self.state is State.NO_TRAVEL:
            return f"{angles}: no travel"
        parts = f"{self.machine_part} – {self.couch_part}" if self.machine_part else ""
        said = (self.clearance_words, self.state_words, self.slack_words, parts)
        return f"{angles}: {', '.join(word for word in said if word)}"

    @property
    def grid_words(self) -> str:
        """Which angles these are: those of the grid, not those between them."""
        steps = [f"{number_text(step)}°" for step in dict.fromkeys(self.step_deg) if step > 0.0]
        if self.state is State.NO_TRAVEL or not steps:
            return ""
        return f"at the nearest computed angles, {' and '.join(steps)} apart"


def reading_at(
    found: ClearanceMap, state: NDArray[np.int8] | None, labels: Sequence[str], gantry_deg: float, couch_deg: float
) -> Reading:
    """Return what is known of the grid angles nearest to a place; `state` None while nothing is proved."""
    row = int(cells_at(found.couch_deg, np.array([couch_deg]))[0])
    column = int(cells_at(found.gantry_deg, np.array([gantry_deg]))[0])
    if row < 0 or column < 0:
        return Reading(gantry_deg, couch_deg, math.nan, math.nan, State.NO_TRAVEL, "", "", (0.0, 0.0))
    clearance, slack = float(found.clearance_mm[row, column]), float(found.slack_mm[row, column])
    known: State | None
    if state is not None:
        known = STATES[int(state[row, column])]
    else:
        known = exact_state(clearance, slack)
        known = None if known is State.PERMITTED else known
    return Reading(
        float(found.gantry_deg[column]),
        float(found.couch_deg[row]),
        clearance,
        slack,
        known,
        label_of(labels, int(found.machine_part[row, column])),
        label_of(labels, int(found.couch_part[row, column])),
        (_step(found.gantry_deg, column), _step(found.couch_deg, row)),
    )


def label_of(labels: Sequence[str], index: int) -> str:
    """Return the label of a part, or nothing where there is none."""
    return labels[index] if 0 <= index < len(labels) else ""


def angle_words(angle_deg: float, readout: Readout = IEC, digits: int | None = None) -> str:
    """Return an angle on a scale, in [0, 360), with its unit; `digits` None: as many as it needs, two at most."""
    shown = reading_deg(angle_deg) if readout.is_iec() else shown_deg(readout, angle_deg)
    if digits is None:
        return f"{number_text(reading_deg(round(shown, 2)))}°"
    return f"{reading_deg(round(shown, digits)):.{digits}f}°"


def _floored(value_mm: float) -> str:
    return f"{math.floor(value_mm * 10.0 + 1e-6) / 10.0:.1f}"


def _step(angles_deg: NDArray[np.float64], place: int) -> float:
    """Return how far the grid angles around one are apart, the wider of both sides."""
    if len(angles_deg) == 1:
        return 0.0
    around = np.diff(angles_deg[max(place - 1, 0) : place + 2])
    return round(float(around.max()), 6)
