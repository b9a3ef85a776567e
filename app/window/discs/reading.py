"""What the direction discs say of a direction, as values and as words. No Qt."""

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from app.files.readings import OwnScales, clearance_text, own_scales
from app.window.chart.reading import IEC, NOT_PROVED_YET, angle_words
from geometry.directions.axes import direction_words, directions_patient
from geometry.directions.field import DirectionField, Reached
from geometry.directions.regions import SPHERE_SR, Share
from geometry.states import State

Array = NDArray[np.float64]

_MOST_OTHERS = 3
# Angles that differ by less, deg, are one.
_SAME_DEG = 1e-6
_NO_SCALES = OwnScales(None, None)


@dataclass(frozen=True, eq=False)
class DirectionReading:
    """What is known of a direction, (3,), DICOM patient axes.

    `chosen` is the pair of angles to go to, None where none reaches the direction: of those permitted the nearest to
    the current pose, else the one with the most clearance. `others` are the further pairs that give the direction.
    """

    direction: Array
    words: str
    chosen: Reached | None
    others: tuple[Reached, ...]
    scales: OwnScales
    proved: bool

    @property
    def angles_words(self) -> str:
        """The chosen pair and what is known of it, in words."""
        if self.chosen is None:
            return "No pair of angles within the travel gives this direction"
        return f"{pair_words(self.chosen.gantry_deg, self.chosen.couch_deg, self.scales)}: {self._known(self.chosen)}"

    @property
    def others_words(self) -> tuple[str, ...]:
        """The other pairs that give the direction, in words, the longest first; empty where there is none."""
        if not self.others:
            return ()
        if len(self.others) > _MOST_OTHERS:
            return ("any couch angle gives this direction", "or any couch angle")
        pairs = [pair_words(pair.gantry_deg, pair.couch_deg, _NO_SCALES) for pair in self.others]
        full = [f"{words} ({self._known(pair)})" for words, pair in zip(pairs, self.others, strict=True)]
        brief = [f"{words} ({self._state_words(pair)})" for words, pair in zip(pairs, self.others, strict=True)]
        count = "1 other pair" if len(pairs) == 1 else f"{len(pairs)} other pairs"
        return (f"also {', '.join(full)}", f"also {', '.join(brief)}", f"and {count}")

    def lines(self, first: str, angles: str) -> tuple[str, tuple[str, ...]]:
        """Return two lines of a readout, the second in several forms, the longest first."""
        forms = tuple(f"{angles}; {others}" for others in self.others_words)
        return _capital(first), tuple(_capital(form) for form in (*forms, angles))

    def _state_words(self, pair: Reached) -> str:
        return NOT_PROVED_YET if pair.state is State.UNPROVED and not self.proved else str(pair.state)

    def _known(self, pair: Reached) -> str:
        state = self._state_words(pair)
        if pair.state is State.CONTACT:
            return state
        if math.isnan(pair.clearance_mm):
            return f"no distance, {state}"
        if not math.isfinite(pair.clearance_mm):
            return f"nothing near, {state}"
        return f"{clearance_text(pair.clearance_mm)}, {state}"


def reading_of(field: DirectionField, direction: Array, pose_deg: tuple[float, float]) -> DirectionReading:
    """Return what a field says of a direction; `pose_deg` is the current gantry and couch angle, unwrapped."""
    pairs = field.pairs_at(direction)
    permitted = [pair for pair in pairs if pair.state is State.PERMITTED]
    chosen = min(permitted, key=lambda pair: _apart(pair, pose_deg)) if permitted else (pairs[0] if pairs else None)
    others = tuple(pair for pair in pairs if pair is not chosen and not _shown_alike(pair, chosen))
    return DirectionReading(
        direction, direction_words(direction), chosen, others, own_scales(field.exact.scene.setup.room), field.proved
    )


def pair_words(gantry_deg: float, couch_deg: float, scales: OwnScales) -> str:
    """Return a pair of angles in words, with the machine's own scales where it has some."""
    words = [f"gantry {angle_words(gantry_deg)}", f"couch {angle_words(couch_deg)}"]
    for place, (readout, angle) in enumerate(((scales.gantry, gantry_deg), (scales.couch, couch_deg))):
        if readout is not None and readout is not IEC:
            words[place] += f" (shown {angle_words(angle, readout)})"
    return ", ".join(words)


def pose_words(field: DirectionField, pose_deg: tuple[float, float]) -> tuple[str, tuple[str, ...]]:
    """Say from where the beam comes at a pose, and what else gives that direction, in several forms.

    The clearance is said where the pose is one of the map's own pairs.
    """
    scales = own_scales(field.exact.scene.setup.room)
    direction = directions_patient(*pose_deg, field.axes)
    pairs = field.pairs_at(direction)
    here = next((pair for pair in pairs if _apart(pair, pose_deg) < _SAME_DEG), None)
    near = here or min(pairs, key=lambda pair: _apart(pair, pose_deg), default=None)
    others = tuple(pair for pair in pairs if pair is not near and not _shown_alike(pair, near))
    reading = DirectionReading(direction, direction_words(direction), here, others, scales, field.proved)
    return reading.lines(f"Now {reading.words}", reading.angles_words if here else pair_words(*pose_deg, scales))


def pointed_words(reading: DirectionReading) -> tuple[str, tuple[str, ...]]:
    """Say what is known of a direction, and which angles give it, in several forms."""
    return reading.lines(reading.words, reading.angles_words)


def share_words(share: Share | None) -> tuple[tuple[str, ...], tuple[str, ...]]:
    """Return the permitted share of all directions in words, and what stands beside it, longest first. Rounded down."""
    if share is None:
        return ("Permitted directions: not proved yet",), ("",)
    coplanar = f"{_down(share.coplanar_permitted_deg, 0)}° of 360°"
    if share.reachable_sr <= 0.0 < share.coplanar_reachable_deg:
        forms = (f"Permitted of the coplanar circle: {coplanar}", f"Permitted, coplanar: {coplanar}")
        return forms, ("The beams reach a circle only, of no solid angle",)
    amount = f"{_down(share.permitted_sr, 1)} sr, {_down(100.0 * share.of_sphere, 0)} % of 4π"
    first = (f"Permitted directions: {amount}", f"Permitted: {amount}")
    if share.reachable_sr <= 0.0:
        return first, ("No direction with a solid angle is within the travel", "none within the travel")
    within = f"{_down(100.0 * share.of_reachable, 0)} % of those within the travel"
    short = within
    if share.reachable_sr > SPHERE_SR - 1e-9:
        within, short = "All directions are within the travel", "All within the travel"
    return first, (f"{within}; coplanar circle {coplanar}", f"{short}; coplanar {coplanar}", within)


def _apart(pair: Reached, pose_deg: tuple[float, float]) -> float:
    return abs(pair.gantry_deg - pose_deg[0]) + abs(pair.couch_deg - pose_deg[1])


def _shown_alike(pair: Reached, chosen: Reached | None) -> bool:
    """Tell whether both read the same, as gantry -180 and 180 do, and the one has nothing to add."""
    if chosen is None or pair.state is not chosen.state:
        return False
    turns = ((pair.gantry_deg - chosen.gantry_deg) / 360.0, (pair.couch_deg - chosen.couch_deg) / 360.0)
    return all(abs(turn - round(turn)) < 1e-9 for turn in turns)


def _down(value: float, digits: int) -> str:
    scale = 10.0**digits
    return f"{math.floor(value * scale + 1e-6) / scale:.{digits}f}"


def _capital(text: str) -> str:
    return text[:1].upper() + text[1:]
