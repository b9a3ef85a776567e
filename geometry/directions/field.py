"""How near things come for each beam direction: the best of the pairs of angles that reach it.

A direction is told by the pair of the map's grid nearest to each pair of angles that reaches it: what is said is what
the map says of that pair, never anything between pairs.
"""

import math
from dataclasses import dataclass
from functools import cached_property, lru_cache
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from geometry.assess import Assessment
from geometry.directions.axes import POLE_DEG, PatientAxes, axes_of, directions_patient, folded_deg, turned
from geometry.directions.discs import Hemisphere, pixel_places
from geometry.directions.regions import outlines
from geometry.spans import ANGLE_DEG
from geometry.states import CODE_OF, STATES, State
from geometry.sweep import ClearanceMap

Array = NDArray[np.float64]
Indices = NDArray[np.int64]

# A permitted pair comes before any other; clearances are far below this, mm.
_PERMITTED_FIRST = 1e9
_UNKNOWN = -1.0
_NOWHERE = -2.0


class Places(NamedTuple):
    """Which pairs of a grid reach each of n directions.

    `first` (n,) is one of them, -1 for none; `others` are (which directions, one more pair for each) a time.
    """

    first: NDArray[np.int32]
    others: tuple[tuple[Indices, NDArray[np.int32]], ...]


@dataclass(frozen=True, eq=False)
class Best:
    """What is known of directions, each array of their shape: of the best pair of angles that reaches each.

    `clearance_mm` is NaN and `state` "no travel" where none does, and `gantry_deg` and `couch_deg` are NaN there.
    `state` holds codes into `states.STATES`.
    """

    clearance_mm: Array
    state: NDArray[np.int8]
    gantry_deg: Array
    couch_deg: Array


@dataclass(frozen=True)
class Reached:
    """A pair of the grid that reaches a direction, deg, unwrapped, and what the map says of it."""

    gantry_deg: float
    couch_deg: float
    clearance_mm: float
    state: State


@dataclass(frozen=True, eq=False)
class DirectionField:
    """Clearances and states over the sphere of directions, in DICOM patient axes.

    `state` (m couch, n gantry) holds codes as `exact` has clearances. While `proved` is false nothing is permitted:
    what is neither short nor in contact is "unproved". `outlines` are lines around the permitted directions, each
    (k, 3) unit vectors.
    """

    exact: ClearanceMap
    axes: PatientAxes
    state: NDArray[np.int8]
    proved: bool
    outlines: tuple[Array, ...] = ()

    def over(self, directions: Array) -> Best:
        """Return what is known of directions, (..., 3), DICOM patient axes; NaN counts as out of reach."""
        flat = directions.reshape(-1, 3)
        places = _places(turned(flat, self.axes.R_support_patient()), self.exact.gantry_deg, self.exact.couch_deg)
        return self._best(places, directions.shape[:-1])

    def on_disc(self, hemisphere: Hemisphere, size: int) -> Best:
        """Return what is known at size x size pixels over a disc; where they lie is remembered for the next map."""
        grids = self.exact.gantry_deg.tobytes(), self.exact.couch_deg.tobytes()
        return self._best(_disc_places(hemisphere, size, self.axes, *grids), (size, size))

    def along_line(self) -> tuple[Array, Best] | None:
        """Return the directions (n, 3) of a room in which one axis cannot turn, and what is known of them.

        They have no area, so no pixel shows them. None where both axes turn.
        """
        if min(self.exact.clearance_mm.shape) > 1:
            return None
        directions = directions_patient(self.exact.gantry_deg, self.exact.couch_deg, self.axes)
        return directions, self.over(directions)

    def stepped(self, hemisphere: Hemisphere, direction: Array, right_deg: float, up_deg: float) -> Array:
        """Return the direction, (3,), further to the right and up as a disc is seen; on the line where there is one."""
        found = hemisphere.stepped(direction, right_deg, up_deg)
        line = self.along_line()
        return found if line is None else np.asarray(line[0][np.argmax(line[0] @ found)])

    def pairs_at(self, direction: Array) -> tuple[Reached, ...]:
        """Return the pairs of the grid that stand for a direction, (3,), the best first; empty if out of reach."""
        if self.exact.scene.no_travel:
            return ()
        support = turned(direction.reshape(1, 3), self.axes.R_support_patient())
        places = _places(support, self.exact.gantry_deg, self.exact.couch_deg)
        found = {int(place) for some in (places.first, *(more for _, more in places.others)) for place in some} - {-1}
        columns = len(self.exact.gantry_deg)
        at_pole = {place % columns for place in found if self._is_pole[place % columns]}
        found |= {row * columns + column for column in at_pole for row in range(len(self.exact.couch_deg))}
        score = self._score
        return tuple(self._reached(place) for place in sorted(found, key=lambda place: (-score[place], place)))

    @cached_property
    def _score(self) -> Array:
        """How good each pair of the grid is, flat."""
        score = np.where(np.isnan(self.exact.clearance_mm), _UNKNOWN, np.minimum(self.exact.clearance_mm, 1e6))
        return np.asarray(score + _PERMITTED_FIRST * (self.state == CODE_OF[State.PERMITTED])).ravel()

    @cached_property
    def _is_pole(self) -> NDArray[np.bool_]:
        return np.abs(np.sin(np.radians(self.exact.gantry_deg))) < ANGLE_DEG

    @cached_property
    def _stand_in(self) -> NDArray[np.int32]:
        """The place that speaks for each pair: itself, but at a pole the best couch angle, for any of them will do."""
        rows, columns = self.exact.clearance_mm.shape
        places = np.arange(rows * columns, dtype=np.int32).reshape(rows, columns)
        poles = np.flatnonzero(self._is_pole)
        best = np.argmax(self._score.reshape(rows, columns)[:, poles], axis=0)
        places[:, poles] = best * columns + poles
        return places.ravel()

    def _best(self, places: Places, shape: tuple[int, ...]) -> Best:
        if self.exact.scene.no_travel:
            nowhere = np.full(shape, np.nan)
            return Best(nowhere, np.full(shape, CODE_OF[State.NO_TRAVEL], np.int8), nowhere, nowhere)
        # One more place at the end, which -1 finds, stands for "out of reach".
        score = np.append(self._score[self._stand_in], _NOWHERE)
        chosen = places.first.copy()
        for where, place in places.others:
            better = score[place] > score[chosen[where]]
            chosen[where[better]] = place[better]
        stand_in = np.append(self._stand_in, -1)[chosen]
        gantry, couch = np.broadcast_arrays(self.exact.gantry_deg[None, :], self.exact.couch_deg[:, None])

        def taken(values: Array) -> Array:
            found: Array = np.append(values.ravel(), np.nan)[stand_in].reshape(shape)
            return found

        state = np.append(self.state.ravel(), np.int8(CODE_OF[State.NO_TRAVEL]))[stand_in].reshape(shape)
        return Best(taken(self.exact.clearance_mm), state, taken(gantry), taken(couch))

    def _reached(self, place: int) -> Reached:
        row, column = divmod(place, len(self.exact.gantry_deg))
        return Reached(
            float(self.exact.gantry_deg[column]),
            float(self.exact.couch_deg[row]),
            float(self.exact.clearance_mm[row, column]),
            STATES[self.state[row, column]],
        )


def field_of(assessment: Assessment) -> DirectionField:
    """Return the directions of a set-up that was assessed."""
    axes = axes_of(assessment.scene.setup)
    return DirectionField(
        assessment.map, axes, assessment.state, proved=True, outlines=outlines(assessment.permitted_region, axes)
    )


def unproved_field(exact: ClearanceMap) -> DirectionField:
    """Return the directions of a map that nothing has been proved of yet; nothing is permitted."""
    state = np.full(exact.clearance_mm.shape, CODE_OF[State.UNPROVED], np.int8)
    state[exact.slack_mm < 0.0] = CODE_OF[State.SHORT]
    state[np.isnan(exact.clearance_mm)] = CODE_OF[State.UNPROVED]
    state[exact.clearance_mm == 0.0] = CODE_OF[State.CONTACT]
    if exact.scene.no_travel:
        state[:] = CODE_OF[State.NO_TRAVEL]
    return DirectionField(exact, axes_of(exact.scene.setup), state, proved=False)


@lru_cache(maxsize=12)
def _disc_places(hemisphere: Hemisphere, size: int, axes: PatientAxes, gantry: bytes, couch: bytes) -> Places:
    directions = hemisphere.directions(pixel_places(size)).reshape(-1, 3)
    support = turned(directions, axes.R_support_patient())
    return _places(support, np.frombuffer(gantry, np.float64), np.frombuffer(couch, np.float64))


def _places(directions: Array, gantry_deg: Array, couch_deg: Array) -> Places:
    """Return, for directions (n, 3) of the patient support system, the pairs of a grid that reach them.

    Each is the place, row by row of couch angles, of the grid's pair nearest to angles within the travel.
    """
    gantry, couch = folded_deg(directions)
    pole = np.minimum(gantry, 180.0 - gantry) < POLE_DEG
    any_couch = couch_deg[np.argmin(np.abs(couch_deg))]
    first = np.full(len(directions), -1, np.int32)
    others = []
    for one, other in ((gantry, couch), (-gantry, couch + 180.0)):
        other[pole] = any_couch
        for here, column in _nearest(one, gantry_deg):
            for there, row in _nearest(other[here], couch_deg):
                where, place = here[there], (row * len(gantry_deg) + column[there]).astype(np.int32)
                free = first[where] < 0
                first[where[free]] = place[free]
                others.append((where[~free], place[~free]))
    return Places(first, tuple((where, place) for where, place in others if len(where)))


def _nearest(angles_deg: Array, grid_deg: Array) -> list[tuple[Indices, Indices]]:
    """Return, for each whole turn, which of some angles it brings into a grid, and the grid's nearest places there.

    The angles are between -180 and 360, or NaN.
    """
    low, high = grid_deg[0] - ANGLE_DEG, grid_deg[-1] + ANGLE_DEG
    borders = (grid_deg[1:] + grid_deg[:-1]) / 2.0
    found = []
    for turn in range(math.ceil((low - 360.0) / 360.0), math.floor((high + 180.0) / 360.0) + 1):
        within = np.flatnonzero((angles_deg >= low - 360.0 * turn) & (angles_deg <= high - 360.0 * turn))
        if len(within):
            found.append((within, np.searchsorted(borders, angles_deg[within] + 360.0 * turn)))
    return found
