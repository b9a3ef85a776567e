"""A plan's fields, and what a check of them against a set-up says: fields, moves between them, a better order.

Data alone. Whatever reads a plan makes `PlanField`; whatever checks it makes a `CheckReport`; tables, sheets and
pictures are made from that and compute nothing of their own.
"""

import math
from dataclasses import dataclass
from typing import Literal

from geometry.angle_graph import Speeds
from geometry.assess import Options
from geometry.legs import Point
from geometry.paths import Approach, Verdict
from geometry.scene import Scene
from geometry.setup import Setup
from geometry.states import State
from geometry.table_moves import TableMove


@dataclass(frozen=True)
class PlanField:
    """A static beam or an arc as a plan or a typed list has it, before it meets a room.

    `points_deg`: (gantry, couch) at each control point, IEC 61217, deg; the first in [0, 360), the others following it
    without a jump of 360, in the sense that the plan states. `collimator_deg`: at each control point; empty where
    nothing is stated. None stands for "nothing stated" throughout: the set-up's value then holds.

    `isocentre_mm`: DICOM patient axes. `table_mm`: table-top lateral, longitudinal and vertical position, IEC 61217.
    `applicator`: what the plan says is fitted, in its own words, to be found among the room's accessories; empty for
    nothing. `fitted`: what a person says is fitted, accessories and `arm=position`, in place of that.
    `is_setup`: a set-up field (imaging), not a treatment. In words: `doubts`, why it cannot be proved as it stands;
    `fit_doubts`, why not until somebody says what is fitted; `arm_doubts`, why not until somebody says where an arm
    stands (both as statements); `notes`, what else is worth knowing; `place`, where it stands in its file.
    """

    name: str
    points_deg: tuple[Point, ...]
    collimator_deg: tuple[float, ...] = ()
    pitch_deg: float | None = None
    roll_deg: float | None = None
    eccentric_deg: float | None = None
    isocentre_mm: tuple[float, float, float] | None = None
    table_mm: tuple[float | None, float | None, float | None] = (None, None, None)
    patient_position: str | None = None
    applicator: str = ""
    fitted: tuple[str, ...] | None = None
    is_setup: bool = False
    source_axis_distance_mm: float | None = None
    doubts: tuple[str, ...] = ()
    fit_doubts: tuple[str, ...] = ()
    arm_doubts: tuple[str, ...] = ()
    notes: tuple[str, ...] = ()
    place: str = ""

    @property
    def is_arc(self) -> bool:
        """Tell whether gantry or couch turns during the field."""
        return any(point != self.points_deg[0] for point in self.points_deg)


@dataclass(frozen=True, eq=False)
class FieldCheck:
    """What is known of one field.

    `scene`: the set-up as this field has it (`scene.setup`): isocentre, table, tilt, collimator, what is fitted. It is
    shared by fields that have the same. Parts in `verdict` index `scene.parts`.
    `points_deg`: the control points (gantry, couch) on the machine's unwrapped travel; the plan's own where they do
    not fit it. `verdict`: see `geometry.paths.Verdict`; a field that is in doubt is unproved, with `verdict.reason`.
    `within`: for a field that is unproved although its path has room enough: of the angles that were looked at, within
    the tolerances about `verdict.first_short` and `verdict.nearest`, those with the least slack, exact; else None.
    `notes`: what differs from the set-up, and what was assumed, in words.
    `table_as`: where it was checked with several places of table or devices, which of them these figures are for, in
    words; empty where there is one alone. `table_settled`: the table's place is the same in all of them.
    `seconds`: the least time at the room's speeds, both axes together, 0 for a static beam.
    """

    field: PlanField
    scene: Scene
    points_deg: tuple[Point, ...]
    verdict: Verdict
    within: Approach | None = None
    notes: tuple[str, ...] = ()
    seconds: float = 0.0
    table_as: str = ""
    table_settled: bool = True

    @property
    def state(self) -> State:
        """The verdict's state."""
        return self.verdict.state

    @property
    def place(self) -> Approach | None:
        """The place to look at, exact: the nearest approach, for contact and short where it is short there.

        For an unproved field, and where the nearest approach is not short, the first place that fails.
        """
        nearest, first = self.verdict.nearest, self.verdict.first_short
        if first is None or (nearest is not None and nearest.slack_mm < 0.0 and self.state is not State.UNPROVED):
            return nearest
        return first

    @property
    def shortfall_mm(self) -> float:
        """How much of the required clearance is missing, exact, at `place` or `within`; NaN where none is known to."""
        for place in (self.within, self.place):
            if place is not None and place.slack_mm < 0.0:
                return -place.slack_mm
        return math.nan

    def labels(self, place: Approach) -> tuple[str, str] | None:
        """Return the labels of the parts at a place, the machine's first; None where none are known."""
        return part_labels(self.scene, place)


@dataclass(frozen=True, eq=False)
class MoveStep:
    """One thing to do between two fields.

    `turn`: gantry and couch turn through the corners `points_deg`, one axis at a time (`verdict`). `collimator`: it
    turns at the one pose in `points_deg` (`verdict`, of all that it can sweep); where there is no such step between
    fields with different collimator angles, it may turn at any time. `table`: the table
    top goes straight from one place to another at that pose (`table`). `fit`: someone changes at
    that pose what is fitted, tilts or turns what only the set-up tells of (`verdict` of the pose with what is fitted
    then; None where the change itself cannot be proved). `text` says it in words. Angles unwrapped, deg.
    `scene`: what the parts in `verdict` and `table` index. `seconds`: the machine's time, NaN where it is not known.
    """

    kind: Literal["turn", "collimator", "table", "fit"]
    text: str
    scene: Scene
    points_deg: tuple[Point, ...]
    state: State
    seconds: float = math.nan
    verdict: Verdict | None = None
    table: TableMove | None = None


@dataclass(frozen=True, eq=False)
class MoveCheck:
    """What is known of the move from the end of field `before` to the start of field `after` (places in the report).

    `steps` in the order in which they are done; none where a field cannot be reached at all. `state` is the worst of
    theirs, permitted only where all are. `reason` says why not, empty where permitted. `in_the_way`: the labels of
    the parts to blame, the machine's first. `seconds`: the machine's time, NaN where not permitted or not known
    (work by hand and table moves without a speed take a time that nobody states). `table_as`: as of a `FieldCheck`.
    """

    before: int
    after: int
    steps: tuple[MoveStep, ...]
    state: State
    reason: str = ""
    in_the_way: tuple[str, str] | None = None
    seconds: float = math.nan
    table_as: str = ""

    @property
    def least_clearance_mm(self) -> float:
        """The least that is known of its steps' clearance, mm: proved bounds; infinite for none."""
        found = [known.least_clearance_mm for step in self.steps for known in (step.verdict, step.table) if known]
        return min((value for value in found if not math.isnan(value)), default=math.inf)

    @property
    def turns(self) -> tuple[tuple[Point, ...], ...]:
        """The corners of each turn of gantry and couch, in order; unwrapped, deg."""
        return tuple(step.points_deg for step in self.steps if step.kind == "turn")


@dataclass(frozen=True, eq=False)
class BetterOrder:
    """Another order of the fields, as places in the report, whose moves are all permitted.

    `seconds_saved`: the time for turns of gantry and couch that it saves; NaN where moves of the plan's own order are
    not permitted. `changes_saved`: how many changes of table or of what is fitted it saves.
    `exact`: no order is quicker; otherwise a good one was found. `points_deg`: each field's control points in this
    order, on the travel.
    """

    fields: tuple[int, ...]
    moves: tuple[MoveCheck, ...]
    points_deg: tuple[tuple[Point, ...], ...]
    seconds_saved: float
    changes_saved: int
    exact: bool


@dataclass(frozen=True, eq=False)
class CheckReport:
    """All that a check of a plan says.

    `fields` in plan order; `moves[k]` leads from `fields[k]` to `fields[k + 1]`. `better`: None where no better order
    was found. `notes`: differences between plan and set-up that concern every field, in words. `speeds`: those that
    all times rest on. `scene`: the set-up's own.
    """

    setup: Setup
    scene: Scene
    options: Options
    fields: tuple[FieldCheck, ...]
    moves: tuple[MoveCheck, ...]
    speeds: Speeds
    better: BetterOrder | None = None
    notes: tuple[str, ...] = ()

    @property
    def permitted(self) -> bool:
        """Tell whether every field and every move is permitted."""
        states = [*(field.state for field in self.fields), *(move.state for move in self.moves)]
        return all(state is State.PERMITTED for state in states)

    @property
    def seconds(self) -> float:
        """The machine's time for all fields and moves, s; NaN where one of the moves has none."""
        return math.fsum([*(field.seconds for field in self.fields), *(move.seconds for move in self.moves)])


def part_labels(scene: Scene, place: Approach) -> tuple[str, str] | None:
    """Return the labels of the parts at a place of a path, the machine's first; None where none are known."""
    if place.machine_part < 0 or place.couch_part < 0:
        return None
    return scene.parts[place.machine_part].label, scene.parts[place.couch_part].label
