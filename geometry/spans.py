"""Permitted readings: the proved plane, eroded by the readout tolerances."""

import math
from dataclasses import dataclass

import numpy as np
import shapely
from numpy.typing import NDArray

from geometry.machine import Readout
from geometry.proof import Band, Interval, Proof, Steps, tolerance_on
from geometry.scene import Scene

# Angles are compared to within this, deg: far below any readout, far above rounding.
ANGLE_DEG = 1e-9


@dataclass(frozen=True)
class Tolerances:
    """How far the true angle may be from the reading, deg, and the travel of both axes (unwrapped)."""

    gantry_deg: float
    couch_deg: float
    gantry_travel_deg: Interval
    couch_travel_deg: Interval

    @property
    def of_gantry_deg(self) -> float:
        """The gantry's tolerance, 0 if it cannot turn."""
        return tolerance_on(self.gantry_travel_deg, self.gantry_deg)

    @property
    def of_couch_deg(self) -> float:
        """The couch's tolerance, 0 if it cannot turn."""
        return tolerance_on(self.couch_travel_deg, self.couch_deg)


@dataclass(frozen=True)
class Span:
    """All readings from `gantry_from_deg` to `gantry_to_deg` (unwrapped, rising) at `couch_deg` are permitted.

    `least_clearance_mm` is the proved bound over the span with the readout tolerances; `machine_part` and `couch_part`
    index `Scene.parts`: the pair that the bound belongs to, whose required clearance is `required_mm`.
    """

    couch_deg: float
    gantry_from_deg: float
    gantry_to_deg: float
    least_clearance_mm: float
    machine_part: int
    couch_part: int
    required_mm: float

    @property
    def extent_deg(self) -> float:
        """How far the gantry turns, clockwise, from the span's start to its end."""
        return self.gantry_to_deg - self.gantry_from_deg


@dataclass(frozen=True)
class Run:
    """Permitted gantry readings [low_deg, high_deg], and the proved steps [first, last) that they rest on."""

    low_deg: float
    high_deg: float
    first: int
    last: int


def permitted_runs(proof: Proof, tolerances: Tolerances, couch_deg: float) -> tuple[Band, list[Run]]:
    """Return, for a couch reading, the proved band of couch angles and the permitted runs of gantry readings."""
    around = tolerances.of_couch_deg
    band = proof.over_couch(couch_deg - around, couch_deg + around)
    low_end, high_end = tolerances.gantry_travel_deg
    runs = []
    for first, last in band.runs():
        low, high = proof.gantry.span_deg(first, last)
        low = max(low + tolerances.of_gantry_deg, low_end)
        high = min(high - tolerances.of_gantry_deg, high_end)
        if low <= high + ANGLE_DEG:
            runs.append(Run(low, max(low, high), first, last))
    return band, runs


def is_permitted(proof: Proof, tolerances: Tolerances, gantry_deg: float, couch_deg: float) -> bool:
    """Tell whether a reading within the travel is permitted."""
    _, runs = permitted_runs(proof, tolerances, couch_deg)
    return any(run.low_deg - ANGLE_DEG <= gantry_deg <= run.high_deg + ANGLE_DEG for run in runs)


def spans_at(
    proof: Proof, tolerances: Tolerances, scene: Scene, couch_deg: float, readout: Readout
) -> tuple[Span, ...]:
    """Return the spans of one couch reading, rising, their ends rounded inwards to the gantry's readout."""
    band, runs = permitted_runs(proof, tolerances, couch_deg)
    spans = []
    for run in runs:
        start, stop = rounded_inwards((run.low_deg, run.high_deg), tolerances.gantry_travel_deg, readout)
        if start > stop:
            continue
        around = tolerances.of_gantry_deg
        columns = _covered(proof.gantry, start - around, stop + around, run)
        least = int(np.argmin(band.clearance_mm[columns]))
        machine = int(band.machine_part[columns][least])
        other = int(band.couch_part[columns][least])
        required = scene.required_mm(scene.parts[machine], scene.parts[other])
        clearance = float(band.clearance_mm[columns][least])
        spans.append(Span(couch_deg, start, stop, clearance, machine, other, required))
    return tuple(spans)


def rounded_inwards(interval: Interval, travel: Interval, readout: Readout) -> Interval:
    """Return the outermost angles within `interval` that the readout can show; a travel end stays as it is."""
    resolution = readout.resolution
    offset = readout.sense * readout.zero
    low, high = interval
    if low > travel[0] + ANGLE_DEG:
        low = math.ceil((low + offset) / resolution - ANGLE_DEG) * resolution - offset
    if high < travel[1] - ANGLE_DEG:
        high = math.floor((high + offset) / resolution + ANGLE_DEG) * resolution - offset
    return round(low, 9), round(high, 9)


def permitted_region(proof: Proof, tolerances: Tolerances) -> shapely.Geometry:
    """Return the permitted readings as polygons on the plane (x gantry, unwrapped, y couch, deg).

    A cell belongs to it when the tolerance rectangles of all its points are proved. A room whose couch cannot turn
    has no area there; its region is empty.
    """
    travel = (*tolerances.gantry_travel_deg, *tolerances.couch_travel_deg)
    if travel[3] <= travel[2] or travel[1] <= travel[0]:
        return shapely.MultiPolygon()
    proved = ~np.isnan(proof.slack_mm)
    eroded = _eroded(proved, _reach(tolerances.of_couch_deg, proof.couch), axis=0)
    eroded = _eroded(eroded, _reach(tolerances.of_gantry_deg, proof.gantry), axis=1)
    padded = np.pad(eroded, ((0, 0), (1, 1))).astype(np.int8)
    rows, starts = np.nonzero(np.diff(padded, axis=1) == 1)
    _, stops = np.nonzero(np.diff(padded, axis=1) == -1)
    x0 = np.maximum(proof.gantry.start_deg + starts * proof.gantry.step_deg, travel[0])
    x1 = np.minimum(proof.gantry.start_deg + stops * proof.gantry.step_deg, travel[1])
    y0 = np.maximum(proof.couch.start_deg + rows * proof.couch.step_deg, travel[2])
    y1 = np.minimum(proof.couch.start_deg + (rows + 1) * proof.couch.step_deg, travel[3])
    # Of a cell in the tolerance band beyond the travel nothing is left.
    real = (x1 > x0) & (y1 > y0)
    return shapely.union_all(shapely.box(x0[real], y0[real], x1[real], y1[real])).simplify(0.0)


def _covered(steps: Steps, low_deg: float, high_deg: float, run: Run) -> slice:
    """Return the steps of a run that an interval overlaps; one at least, for an interval that is a border of it."""
    first, last = steps.overlapped(low_deg, high_deg)
    first = min(max(first, run.first), run.last - 1)
    return slice(first, max(min(last, run.last), first + 1))


def _reach(tolerance_deg: float, steps: Steps) -> int:
    return math.ceil(tolerance_deg / steps.step_deg - ANGLE_DEG)


def _eroded(proved: NDArray[np.bool_], reach: int, axis: int) -> NDArray[np.bool_]:
    """Return where all cells within `reach` along an axis are proved; none beyond the plane counts against it."""
    if reach == 0:
        return proved
    width = [(0, 0), (0, 0)]
    width[axis] = (reach, reach)
    windows = np.lib.stride_tricks.sliding_window_view(
        np.pad(proved, width, constant_values=True), 2 * reach + 1, axis=axis
    )
    return np.asarray(windows.all(axis=-1))
