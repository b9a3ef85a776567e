"""The clearance over time laid out on pixel columns: the least and the worst of what each column holds. No Qt."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from app.plan.timeline_clearance import ClearanceOverTime
from geometry.states import CODE_OF, State

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Columns:
    """What each of n pixel columns shows; lengths in mm, NaN where nothing is known, infinite where nothing is near.

    `seconds`: the middle of each column. `state`: codes into `states.STATES`, that of the worse of the samples around
    a column, and the worst of those within it.
    """

    seconds: Array
    clearance_mm: Array
    required_mm: Array
    state: NDArray[np.int8]


def columns_of(curve: ClearanceOverTime, low_s: float, high_s: float, count: int) -> Columns:
    """Return `count` columns from one time to another."""
    seconds = low_s + (np.arange(count) + 0.5) * (high_s - low_s) / count
    clearance = np.full(count, np.nan)
    required = np.full(count, np.nan)
    state = np.full(count, CODE_OF[State.NO_TRAVEL], np.int8)
    starts = np.array([segment.start_s for segment in curve.timeline.segments])
    owner = np.clip(np.searchsorted(starts, seconds, side="right") - 1, 0, None)
    for segment in np.unique(owner):
        inside = owner == segment
        first, last = np.searchsorted(curve.segment, [segment, segment + 1])
        clearance[inside], required[inside], state[inside] = _between(curve, int(first), int(last), seconds[inside])
    _take_all(curve, low_s, high_s, clearance, state)
    return Columns(seconds, clearance, required, state)


def _between(curve: ClearanceOverTime, first: int, last: int, seconds: Array) -> tuple[Array, Array, NDArray[np.int8]]:
    """Return clearance, required clearance and state between the samples of one segment."""
    times = curve.seconds[first:last]
    after = np.clip(np.searchsorted(times, seconds), 1, last - first - 1)
    before = after - 1
    length = times[after] - times[before]
    share = np.clip(np.divide(seconds - times[before], length, out=np.zeros_like(length), where=length > 0.0), 0.0, 1.0)
    value, needed, codes = curve.clearance_mm[first:last], curve.required_mm[first:last], curve.state[first:last]
    low, high = value[before], value[after]
    both = np.isfinite(low) & np.isfinite(high)
    inner = np.where(both, low, 0.0) + share * np.where(both, high - np.where(both, low, 0.0), 0.0)
    # Where one side is unknown or nothing is near there, the other side holds.
    clearance = np.where(both, inner, np.fmin(low, high))
    return clearance, np.fmax(needed[before], needed[after]), np.minimum(codes[before], codes[after])


def _take_all(curve: ClearanceOverTime, low_s: float, high_s: float, clearance: Array, state: NDArray[np.int8]) -> None:
    """Let no sample of a column go unseen."""
    count = len(clearance)
    column = np.floor((curve.seconds - low_s) / (high_s - low_s) * count)
    # The last sample lies on the right edge of the last column.
    column = np.where(curve.seconds == high_s, count - 1, column)
    seen = (column >= 0) & (column < count)
    place = column[seen].astype(np.int64)
    value = curve.clearance_mm[seen]
    known = ~np.isnan(value)
    least = np.full(count, np.inf)
    np.minimum.at(least, place[known], value[known])
    lower = np.isfinite(least) & ~(clearance <= least)
    clearance[lower] = least[lower]
    worst = np.full(count, np.iinfo(np.int8).max, np.int8)
    np.minimum.at(worst, place, curve.state[seen])
    np.minimum(state, worst, out=state)
