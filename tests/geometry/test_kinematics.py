"""The couch's stages against IEC 61217's chain of systems, written out again with SciPy's rotations."""

import itertools

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.spatial.transform import Rotation

from geometry.frames import moved, rotation_z
from geometry.kinematics import CouchPose, couch_pose
from geometry.machine import EVERY_STAGE, Axis, Couch, Stage

Array = NDArray[np.float64]

FREE = Axis(-5000.0, 5000.0)


def couch_with(offset_mm: tuple[float, float, float] = (0.0, 0.0, 0.0)) -> Couch:
    return Couch(FREE, FREE, FREE, FREE, FREE, FREE, FREE, eccentric_offset_mm=offset_mm)


def in_support(pose: CouchPose, point: Array, follows: frozenset[Stage] = EVERY_STAGE) -> Array:
    return moved(pose.T_support_part(follows), point)


def random_pose(rng: np.random.Generator) -> tuple[CouchPose, Array, tuple[float, float, float]]:
    isocentre = rng.uniform(-800, 800, 3)
    pitch_deg, roll_deg, eccentric_deg = rng.uniform(-40, 40, 3)
    x, y, z = rng.uniform(-300, 300, 3)
    angles = float(pitch_deg), float(roll_deg), float(eccentric_deg)
    return couch_pose(couch_with((x, y, z)), isocentre, *angles), isocentre, angles


def test_a_level_table_shifts_the_isocentre_to_the_origin() -> None:
    # By hand: the isocentre 100 right, 200 towards the gantry, 300 above the table top's origin.
    pose = couch_pose(couch_with(), np.array([100.0, 200.0, 300.0]), 0.0, 0.0, 0.0)
    assert np.array_equal(pose.T_mm, [-100.0, -200.0, -300.0])
    assert np.array_equal(in_support(pose, np.zeros(3)), [-100.0, -200.0, -300.0])


def test_eccentric_turn_of_90_by_hand() -> None:
    # The eccentric axis stands 500 towards the foot end; its system is turned by 90: its X points along Y. A table-top
    # origin at the isocentre lies 500 along the eccentric system's X.
    pose = couch_pose(couch_with((0.0, -500.0, 0.0)), np.zeros(3), 0.0, 0.0, 90.0)
    assert pose.T_mm == pytest.approx([500.0, 0.0, 0.0], abs=1e-12)
    assert in_support(pose, np.array([1.0, 0.0, 0.0])) == pytest.approx([0.0, 1.0, 0.0], abs=1e-12)
    # What rides on the eccentric stage alone, at its axis, stays on the axis.
    alone = frozenset({Stage.TURNTABLE, Stage.ECCENTRIC})
    assert in_support(pose, np.zeros(3), alone) == pytest.approx([0.0, -500.0, 0.0], abs=1e-12)


def test_pitch_by_hand() -> None:
    # DICOM PS3.3 C.8.8.25: pitch about the table top's X through its origin. At 10 deg pitch the point at Y = 100 is
    # carried to (0, 98.481, 17.365), so that T must be the opposite.
    pose = couch_pose(couch_with(), np.array([0.0, 100.0, 0.0]), 10.0, 0.0, 0.0)
    assert pose.T_mm == pytest.approx([0.0, -98.481, -17.365], abs=5e-4)


def test_the_isocentre_stays_put() -> None:
    rng = np.random.default_rng(1)
    for _ in range(200):
        pose, isocentre, _ = random_pose(rng)
        assert in_support(pose, isocentre) == pytest.approx([0.0, 0.0, 0.0], abs=1e-9)


@pytest.mark.parametrize("couch_deg", [-95.0, -30.0, 0.0, 12.5, 90.0])
def test_the_isocentre_stays_put_at_every_couch_angle(couch_deg: float) -> None:
    pose, isocentre, _ = random_pose(np.random.default_rng(2))
    assert rotation_z(couch_deg) @ in_support(pose, isocentre) == pytest.approx([0.0, 0.0, 0.0], abs=1e-9)


def test_the_chain_of_stages_is_that_of_scipy() -> None:
    # r = E + Rz(eccentric) (T + Rx(pitch) Ry(roll) r_t), for every set of stages; outside: SciPy's rotations.
    rng = np.random.default_rng(3)
    sets = [frozenset(some) for n in range(7) for some in itertools.combinations(Stage, n)]
    assert len(sets) == 64
    for follows in sets:
        pose, isocentre, (pitch_deg, roll_deg, eccentric_deg) = random_pose(rng)
        eccentric = Rotation.from_euler("Z", eccentric_deg, degrees=True)
        tilt = Rotation.from_euler("XY", [pitch_deg, roll_deg], degrees=True)
        T = -eccentric.inv().apply(pose.E_mm) - tilt.apply(isocentre)
        assert pose.T_mm == pytest.approx(T, abs=1e-9)
        points = rng.uniform(-1000, 1000, (5, 3))
        expected = tilt.apply(points) if Stage.PITCH_ROLL in follows else points
        for axis, stage in enumerate((Stage.LATERAL, Stage.LONGITUDINAL, Stage.VERTICAL)):
            if stage in follows:
                expected = expected + T[axis] * np.eye(3)[axis]
        if Stage.ECCENTRIC in follows:
            expected = pose.E_mm + eccentric.apply(expected)
        assert in_support(pose, points, follows) == pytest.approx(expected, abs=1e-9)


def test_a_pedestal_that_follows_the_turntable_alone_does_not_slide_lift_or_tilt() -> None:
    for seed in range(5):
        pose, _, _ = random_pose(np.random.default_rng(seed))
        for follows in (frozenset({Stage.TURNTABLE}), frozenset[Stage]()):
            assert np.array_equal(pose.T_support_part(follows), np.eye(4))


def test_a_lifting_pedestal_moves_up_and_down_only() -> None:
    pose = couch_pose(couch_with(), np.array([40.0, -300.0, 120.0]), 2.0, -1.0, 0.0)
    moved_point = in_support(pose, np.array([1.0, 2.0, 3.0]), frozenset({Stage.TURNTABLE, Stage.VERTICAL}))
    assert np.array_equal(moved_point, [1.0, 2.0, 3.0 + pose.T_mm[2]])
