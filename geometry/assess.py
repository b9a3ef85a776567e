"""From a set-up to everything that is said of it: exact clearances, the proof, states and spans."""

from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
import shapely
from numpy.typing import NDArray

from geometry.frames import normalised_deg, unwrapped_deg
from geometry.machine import Room
from geometry.progress import Progress, Silent
from geometry.proof import Interval, Proof, Steps, prove, steps_over
from geometry.scene import Scene, ScenePart, build_scene
from geometry.setup import Setup
from geometry.spans import ANGLE_DEG, Span, Tolerances, is_permitted, permitted_region, permitted_runs, spans_at
from geometry.states import CODE_OF, State
from geometry.sweep import ClearanceMap, grid_deg, sweep

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Options:
    """How finely the plane is looked at, deg, and by how much the readouts may err."""

    gantry_step_deg: float = 1.0
    couch_step_deg: float = 1.0
    edge_deg: float = 0.25
    gantry_tolerance_deg: float = 1.0
    couch_tolerance_deg: float = 1.0


@dataclass(frozen=True, eq=False)
class Assessment:
    """All that is known of a set-up. `state` (m couch, n gantry) holds codes into `states.STATES`."""

    scene: Scene
    options: Options
    map: ClearanceMap
    proof: Proof
    state: NDArray[np.int8]
    spans: tuple[Span, ...]

    @cached_property
    def permitted_region(self) -> shapely.Geometry:
        """Permitted readings on the plane (x gantry, unwrapped, y couch, deg); empty where nothing can be reached."""
        if self.scene.no_travel:
            return shapely.MultiPolygon()
        return permitted_region(self.proof, tolerances_of(self.scene.setup.room, self.options))


@dataclass(frozen=True, eq=False)
class Pose:
    """What is known of one pair of angles. Points (3,), mm, fixed system; None where no distance was found."""

    scene: Scene
    gantry_deg: float
    couch_deg: float
    clearance_mm: float
    slack_mm: float
    state: State
    machine_part: ScenePart | None
    couch_part: ScenePart | None
    machine_point_mm: Array | None
    couch_point_mm: Array | None


def assess(setup: Setup, options: Options, progress: Progress | None = None) -> Assessment:
    """Compute the exact map, the proof and the spans of a set-up. GeometryError, Cancelled."""
    progress = progress or Silent()
    return assess_map(exact_map(build_scene(setup), options, progress), options, progress)


def exact_map(scene: Scene, options: Options, progress: Progress | None = None) -> ClearanceMap:
    """Compute the exact clearance on the grid of `options` over the room's travel. Raises Cancelled."""
    gantry, couch = scene.setup.room.gantry, scene.setup.room.couch.turntable
    return sweep(
        scene,
        grid_deg(gantry.low, gantry.high, options.gantry_step_deg),
        grid_deg(couch.low, couch.high, options.couch_step_deg),
        progress,
    )


def assess_map(exact: ClearanceMap, options: Options, progress: Progress | None = None) -> Assessment:
    """Prove what an exact map leaves open, with states and spans at its grid angles. Raises Cancelled."""
    scene = exact.scene
    room = scene.setup.room
    proof = prove(scene, *proof_steps(room, options), progress or Silent())
    tolerances = tolerances_of(room, options)
    state = _states(exact, proof, tolerances)
    spans: tuple[Span, ...] = ()
    if not scene.no_travel:
        spans = tuple(
            span
            for couch_deg in exact.couch_deg
            for span in spans_at(proof, tolerances, scene, float(couch_deg), room.gantry.readout)
        )
    return Assessment(scene, options, exact, proof, state, spans)


def assess_pose(setup: Setup, gantry_deg: float, couch_deg: float, options: Options | None = None) -> Pose:
    """Compute what `assess` would say of one pair of angles, any finite ones, without the rest of the plane."""
    options = options or Options()
    scene = build_scene(setup)
    pose = exact_pose(scene, gantry_deg, couch_deg)
    tolerances = tolerances_of(setup.room, options)
    gantry_branches = unwrapped_deg(gantry_deg, tolerances.gantry_travel_deg)
    couch_branches = unwrapped_deg(couch_deg, tolerances.couch_travel_deg)
    if pose.state is State.PERMITTED and not any(
        _permitted_alone(scene, options, tolerances, gantry, couch)
        for gantry in gantry_branches
        for couch in couch_branches
    ):
        return replace(pose, state=State.UNPROVED)
    return pose


def exact_pose(scene: Scene, gantry_deg: float, couch_deg: float) -> Pose:
    """Compute one pair of true angles, any finite ones; PERMITTED says here that only the proof is still to come."""
    room = scene.setup.room
    gantry_branches = unwrapped_deg(gantry_deg, (room.gantry.low, room.gantry.high))
    couch_branches = unwrapped_deg(couch_deg, (room.couch.turntable.low, room.couch.turntable.high))
    exact = sweep(
        scene,
        np.array([gantry_branches[0] if gantry_branches else gantry_deg]),
        np.array([couch_branches[0] if couch_branches else couch_deg]),
        threads=1,
    )
    pose = _pose_of(exact, 0, 0)
    if not gantry_branches or not couch_branches:
        pose = replace(pose, state=State.NO_TRAVEL)
    return replace(pose, gantry_deg=normalised_deg(gantry_deg), couch_deg=normalised_deg(couch_deg))


def pose_on_grid(exact: ClearanceMap, gantry_deg: float, couch_deg: float) -> Pose | None:
    """Return what `exact_pose` says of a pair of unwrapped angles that an exact map knows; None of any other pair."""
    column = int(np.abs(exact.gantry_deg - gantry_deg).argmin())
    row = int(np.abs(exact.couch_deg - couch_deg).argmin())
    off = max(abs(exact.gantry_deg[column] - gantry_deg), abs(exact.couch_deg[row] - couch_deg))
    return _pose_of(exact, row, column) if off <= ANGLE_DEG else None


def _pose_of(exact: ClearanceMap, row: int, column: int) -> Pose:
    scene = exact.scene
    clearance_mm, slack_mm = float(exact.clearance_mm[row, column]), float(exact.slack_mm[row, column])
    machine, other = int(exact.machine_part[row, column]), int(exact.couch_part[row, column])
    known = machine >= 0
    return Pose(
        scene,
        normalised_deg(float(exact.gantry_deg[column])),
        normalised_deg(float(exact.couch_deg[row])),
        clearance_mm,
        slack_mm,
        State.NO_TRAVEL if scene.no_travel else exact_state(clearance_mm, slack_mm),
        scene.parts[machine] if known else None,
        scene.parts[other] if known else None,
        exact.machine_point_mm[row, column] if known else None,
        exact.couch_point_mm[row, column] if known else None,
    )


def proved_pose(assessment: Assessment, pose: Pose) -> Pose:
    """Return an exact pose of the assessment's scene with the state that holds for its reading, tolerances included."""
    if pose.state is not State.PERMITTED:
        return pose
    tolerances = tolerances_of(assessment.scene.setup.room, assessment.options)
    if any(
        is_permitted(assessment.proof, tolerances, gantry, couch)
        for gantry in unwrapped_deg(pose.gantry_deg, tolerances.gantry_travel_deg)
        for couch in unwrapped_deg(pose.couch_deg, tolerances.couch_travel_deg)
    ):
        return pose
    return replace(pose, state=State.UNPROVED)


def proof_steps(room: Room, options: Options) -> tuple[Steps, Steps]:
    """Return how the proof cuts the gantry's and the couch's travel, tolerances included."""
    tolerances = tolerances_of(room, options)
    return (
        steps_over(tolerances.gantry_travel_deg, options.gantry_tolerance_deg, options.edge_deg),
        steps_over(tolerances.couch_travel_deg, options.couch_tolerance_deg, options.edge_deg),
    )


def tolerances_of(room: Room, options: Options) -> Tolerances:
    """Return the tolerances with the room's travel."""
    gantry, couch = room.gantry, room.couch.turntable
    return Tolerances(
        options.gantry_tolerance_deg, options.couch_tolerance_deg, (gantry.low, gantry.high), (couch.low, couch.high)
    )


def exact_state(clearance_mm: float, slack_mm: float) -> State:
    """Return what an exact distance says by itself; PERMITTED still needs the proof over the tolerances."""
    if clearance_mm == 0.0:
        return State.CONTACT
    # A slack that is not a number is not below 0; it must not pass for enough.
    if not (np.isfinite(clearance_mm) or clearance_mm == np.inf) or np.isnan(slack_mm):
        return State.UNPROVED
    return State.SHORT if slack_mm < 0.0 else State.PERMITTED


def _states(exact: ClearanceMap, proof: Proof, tolerances: Tolerances) -> NDArray[np.int8]:
    if exact.scene.no_travel:
        return np.full(exact.clearance_mm.shape, CODE_OF[State.NO_TRAVEL], np.int8)
    state = np.full(exact.clearance_mm.shape, CODE_OF[State.UNPROVED], np.int8)
    for row, couch_deg in enumerate(exact.couch_deg):
        _, runs = permitted_runs(proof, tolerances, float(couch_deg))
        for run in runs:
            inside = (exact.gantry_deg >= run.low_deg - ANGLE_DEG) & (exact.gantry_deg <= run.high_deg + ANGLE_DEG)
            state[row, inside] = CODE_OF[State.PERMITTED]
    state[np.isnan(exact.slack_mm)] = CODE_OF[State.UNPROVED]
    state[exact.slack_mm < 0.0] = CODE_OF[State.SHORT]
    state[np.isnan(exact.clearance_mm)] = CODE_OF[State.UNPROVED]
    state[exact.clearance_mm == 0.0] = CODE_OF[State.CONTACT]
    return state


def _permitted_alone(
    scene: Scene, options: Options, tolerances: Tolerances, gantry_deg: float, couch_deg: float
) -> bool:
    """Tell whether one reading is permitted, proving only the cells that its tolerance rectangle touches."""

    def around(angle_deg: float, tolerance_deg: float) -> Interval:
        return angle_deg - tolerance_deg, angle_deg + tolerance_deg

    window = (
        around(gantry_deg, tolerances.of_gantry_deg),
        around(couch_deg, tolerances.of_couch_deg),
    )
    proof = prove(scene, *proof_steps(scene.setup.room, options), window=window, threads=1)
    return is_permitted(proof, tolerances, gantry_deg, couch_deg)
