"""How near the other sides come to points of the surface, against trimesh's distances of points to triangles.

The reference turns parts by SciPy's rotations and shares only the facets with the program.
"""

import math
import os
import subprocess
import sys
import threading
from dataclasses import replace
from functools import cache
from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest
import trimesh
from hypothesis import given
from hypothesis import strategies as st
from numpy.typing import NDArray
from scipy.spatial import ConvexHull

from app.files.setup_file import read_setup
from geometry.errors import Cancelled, GeometryError
from geometry.machine import JoinedPair
from geometry.near.approach import (
    TOLERANCE_MM,
    Along,
    Approaches,
    GantryTurn,
    Over,
    PartApproach,
    WholePlane,
    nearest_approaches,
    tightest_marks,
)
from geometry.near.display_mesh import display_mesh
from geometry.scene import Scene, ScenePart, Side, build_scene
from tests.geometry.small_rooms import moved_isocentre, post, setup_with
from tests.reference.poses import Carrier, asked, standing_parts, turns

Array = NDArray[np.float64]

SAMPLES = Path(__file__).resolve().parents[3] / "sample_rooms"
CARRIERS = {"gantry": "gantry", "turntable": "couch", "still": "nothing"}
# The points of a part are compared one by one; these many of a scene take some seconds.
POINTS = 12


class Reference:
    """Distances of points to the parts of other sides that are not joined, by trimesh over convex hulls."""

    def __init__(self, name: str) -> None:
        self.setup = read_setup(SAMPLES / name)
        self.parts = {part.label: part for part in standing_parts(self.setup)}
        self.hulls_of = cache(self._hulls_of)

    def distance_mm(self, part: ScenePart, point: Array, gantry_deg: float, couch_deg: float, most_mm: float) -> float:
        """Return how near the other sides are to a point of a part, given in the system of its motion."""
        turn = turns(gantry_deg, couch_deg)
        fixed = turn[CARRIERS[part.motion]].apply(point)
        least = most_mm
        for carrier in ("gantry", "couch", "nothing"):
            hulls, centres, radii = self.hulls_of(part.label, carrier)
            seen = turn[carrier].inv().apply(fixed)
            bounds = np.linalg.norm(seen - centres, axis=1) - radii
            for k in np.argsort(bounds):
                if bounds[k] >= least:
                    break
                least = min(least, hulls[k].distance_mm(seen))
        return least

    def _hulls_of(self, label: str, carrier: Carrier) -> tuple[list["_Hull"], Array, Array]:
        """Return the hulls on a carrier that a part is asked against, with spheres about them."""
        own = self.parts[label]
        others = [
            other
            for other in self.parts.values()
            if other.carrier == carrier and (asked(own, other, self.setup) or asked(other, own, self.setup))
        ]
        hulls = [_Hull(piece) for other in others for piece in other.pieces]
        return hulls, np.array([h.centre for h in hulls]).reshape(-1, 3), np.array([h.radius for h in hulls])


class _Hull:
    def __init__(self, points: Array) -> None:
        hull = ConvexHull(points)
        self.triangles = points[hull.simplices]
        self.equations = hull.equations
        self.centre = points.mean(axis=0)
        self.radius = np.linalg.norm(points - self.centre, axis=1).max()

    def distance_mm(self, point: Array) -> float:
        """Return the distance, 0 inside."""
        if (self.equations @ np.append(point, 1.0)).max() <= 0.0:
            return 0.0
        nearest = trimesh.triangles.closest_point(self.triangles, np.tile(point, (len(self.triangles), 1)))
        return float(np.linalg.norm(nearest - point, axis=1).min())


@cache
def reference(name: str) -> Reference:
    return Reference(name)


@cache
def approaches(name: str, over: Over) -> Approaches:
    return nearest_approaches(build_scene(reference(name).setup), over)


def some_points(found: Approaches, count: int, seed: int) -> list[tuple[PartApproach, int]]:
    """Draw points that are neither in contact nor beyond the limit, if there are any; parts alike."""
    rng = np.random.default_rng(seed)
    drawn = []
    parts = [part for part in found.parts.values() if np.isfinite(part.distance_mm).any()]
    for k in range(count):
        part = parts[k % len(parts)]
        apart = np.flatnonzero(np.isfinite(part.distance_mm) & (part.distance_mm > 0.0))
        choice = apart if len(apart) else np.flatnonzero(np.isfinite(part.distance_mm))
        drawn.append((part, int(rng.choice(choice))))
    return drawn


CASES = [
    ("c_arm_wide/head.setup.toml", GantryTurn(35.0)),
    ("c_arm_close/electron_boost.setup.toml", Along(((-120.0, -20.0), (40.0, 50.0), (40.0, 10.0)))),
    ("closed_bore/prostate.setup.toml", GantryTurn(0.0)),
    ("particle_snout/head.setup.toml", WholePlane()),
]


@pytest.mark.parametrize(("name", "over"), CASES)
def test_each_distance_is_attained_where_it_is_said_to_be(name: str, over: Over) -> None:
    found = approaches(name, over)
    differences: list[float] = []
    for part, at in some_points(found, 6 * POINTS, 1):
        angles = float(part.gantry_deg[at]), float(part.couch_deg[at])
        true = reference(name).distance_mm(part.part, part.points_mm[at], *angles, found.max_mm)
        differences.append(abs(true - part.distance_mm[at]))
    print(f"{name}, {type(over).__name__}: off by {np.median(differences):.1e} mm, {max(differences):.1e} at most")
    # Exact for the two bodies that are nearest; of two others the tolerance may leave a nearer one out.
    assert np.median(differences) < 1e-5
    assert max(differences) <= TOLERANCE_MM


@pytest.mark.parametrize(("name", "over"), CASES)
def test_nowhere_is_it_nearer_by_more_than_the_tolerance(name: str, over: Over) -> None:
    found = approaches(name, over)
    rng = np.random.default_rng(2)
    room = found.scene.setup.room
    worst = -math.inf
    # A bore of hundreds of pieces asks many of them at each pose.
    for part, at in some_points(found, POINTS // 4 if "bore" in name else POINTS, 3):
        said = float(part.distance_mm[at])
        poses = _poses(
            over, room.gantry.low, room.gantry.high, room.couch.turntable.low, room.couch.turntable.high, rng
        )
        near = np.array([part.gantry_deg[at], part.couch_deg[at]]) + rng.normal(0.0, 2.0, (20, 2))
        if isinstance(over, WholePlane):
            poses = np.concatenate([poses, np.clip(near, poses.min(axis=0), poses.max(axis=0))])
        for gantry_deg, couch_deg in poses:
            true = reference(name).distance_mm(part.part, part.points_mm[at], gantry_deg, couch_deg, said + 1.0)
            worst = max(worst, said - true)
    print(f"{name}, {type(over).__name__}: at most {worst:.3f} mm nearer elsewhere")
    assert worst <= TOLERANCE_MM


def _poses(over: Over, low: float, high: float, couch_low: float, couch_high: float, rng: np.random.Generator) -> Array:
    """Return poses (n, 2) to look at: about every 2 deg of a turn or path, some hundred of the plane."""
    if isinstance(over, GantryTurn):
        gantry = np.append(np.arange(low, high, 2.0) + rng.uniform(0.0, 1.0), high).clip(low, high)
        return np.column_stack([gantry, np.full(len(gantry), over.couch_deg)])
    if isinstance(over, Along):
        shares = np.linspace(0.0, 1.0, 60)[:, None]
        points = np.array(over.points)
        return np.concatenate([a + shares * (b - a) for a, b in pairwise(points)])
    return rng.uniform((low, couch_low), (high, couch_high), (150, 2))


@given(
    at_deg=st.floats(-170.0, 170.0),
    radius_mm=st.floats(560.0, 780.0),
    couch_deg=st.floats(-95.0, 95.0),
)
def test_a_post_is_as_far_from_the_heads_corners_as_a_formula_says(
    at_deg: float, radius_mm: float, couch_deg: float
) -> None:
    scene = build_scene(setup_with([post("post", at_deg, radius_mm)]))
    head = nearest_approaches(scene, GantryTurn(couch_deg), threads=1).parts["gantry/head"]
    across = np.hypot(head.points_mm[:, 0], head.points_mm[:, 2])
    # The post is a point for what is asked here; where it is not hidden from a corner, radii alone tell.
    expected = np.hypot(across - radius_mm, head.points_mm[:, 1])
    near = np.isfinite(head.distance_mm) & (expected < 300.0) & (np.abs(head.points_mm[:, 2]) > 500.0)
    assert near.any()
    # The box of a patient about the isocentre is never nearer than 350 mm to the head.
    assert np.abs(head.distance_mm[near] - expected[near]).max() <= TOLERANCE_MM + 0.01


def test_contact_is_0_and_what_is_far_is_infinite() -> None:
    found = nearest_approaches(
        build_scene(setup_with([post("post", 90.0, 500.0, 60.0)])), GantryTurn(0.0), max_mm=100.0
    )
    head = found.parts["gantry/head"]
    assert (head.distance_mm == 0.0).any()
    assert np.isinf(found.parts["couch/patient"].distance_mm).all()
    assert np.isnan(found.parts["couch/patient"].gantry_deg).all()
    said = np.isfinite(head.distance_mm)
    assert (np.isfinite(head.gantry_deg) == said).all()


def test_joined_parts_and_the_same_side_do_not_count() -> None:
    setup = setup_with([post("post", 0.0, 500.0, 60.0)])
    joined = JoinedPair("post", "head", "for the test")
    apart = nearest_approaches(build_scene(setup), GantryTurn(0.0)).parts["gantry/head"]
    together = replace(setup, room=replace(setup.room, joined=(joined,)))
    free = nearest_approaches(build_scene(together), GantryTurn(0.0)).parts["gantry/head"]
    assert apart.distance_mm.min() == 0.0
    assert free.distance_mm.min() > 300.0


def test_only_the_couch_and_gantry_sides_are_shown_and_all_their_parts() -> None:
    found = approaches(*CASES[0])
    assert set(found.parts) == {part.label for part in found.scene.parts if part.side is not Side.ROOM}


def test_a_single_point_of_a_path_is_a_pose() -> None:
    name = CASES[1][0]
    found = nearest_approaches(build_scene(reference(name).setup), Along(((10.0, 20.0),)))
    for part, at in some_points(found, 20, 5):
        assert (part.gantry_deg[at], part.couch_deg[at]) == pytest.approx((10.0, 20.0))
        true = reference(name).distance_mm(part.part, part.points_mm[at], 10.0, 20.0, found.max_mm)
        assert part.distance_mm[at] == pytest.approx(true, abs=1e-5)


def test_angles_stay_within_the_travel() -> None:
    found = approaches(*CASES[3])
    room = found.scene.setup.room
    for part in found.parts.values():
        known = np.isfinite(part.distance_mm)
        for angles, axis in ((part.gantry_deg, room.gantry), (part.couch_deg, room.couch.turntable)):
            assert ((angles[known] >= axis.low - 1e-9) & (angles[known] <= axis.high + 1e-9)).all()


@pytest.mark.parametrize("over", [GantryTurn(120.0), Along(((0.0, 0.0), (200.0, 0.0))), Along(())])
def test_angles_beyond_the_travel_are_refused(over: Over) -> None:
    with pytest.raises(GeometryError, match=r"travel|no points"):
        nearest_approaches(build_scene(setup_with()), over)


def test_beyond_the_stages_travel_nothing_is_said() -> None:
    scene = build_scene(moved_isocentre(setup_with(), (0.0, 0.0, 6000.0)))
    assert scene.no_travel
    found = nearest_approaches(scene, GantryTurn(0.0))
    assert all(np.isnan(part.distance_mm).all() for part in found.parts.values())
    assert tightest_marks(found, 5) == ()


def test_where_the_sides_are_near_points_are_close_together_and_each_triangle_has_its_points() -> None:
    found = approaches(*CASES[0])
    total = 0
    for part in found.parts.values():
        total += len(part.points_mm)
        assert sorted(set(part.triangles.ravel())) == list(range(len(part.points_mm)))
        ends = part.points_mm[part.triangles]
        edges = np.linalg.norm(ends - np.roll(ends, -1, axis=1), axis=2)
        assert edges.max() <= 200.0 + 1e-6
        nearest = part.distance_mm[part.triangles].min(axis=1)
        assert edges[(nearest < 60.0) & (nearest > 0.0)].max(initial=0.0) <= 120.0 + 1e-6
    print(f"{total} points")
    assert total < 25_000


def test_marks_are_the_tightest_places_in_order() -> None:
    found = approaches(*CASES[0])
    marks = tightest_marks(found, 6)
    assert len(marks) == 6
    assert [mark.distance_mm for mark in marks] == sorted(mark.distance_mm for mark in marks)
    assert marks[0].distance_mm == min(part.distance_mm.min() for part in found.parts.values())
    assert len({mark.part.label for mark in marks}) == 6


UNCOMPILED = """
import numpy as np
from geometry.near.approach import WholePlane, nearest_approaches
from geometry.scene import build_scene
from tests.geometry.small_rooms import post, setup_with
scene = build_scene(setup_with([post("post", 40.0, 600.0, 20.0)]))
found = nearest_approaches(scene, WholePlane(), edge_mm=500.0, threads=1)
for label, part in found.parts.items():
    print(label, *part.distance_mm)
"""


def test_the_kernel_says_the_same_uncompiled() -> None:
    def lines(**environment: str) -> list[list[str]]:
        done = subprocess.run(
            [sys.executable, "-c", UNCOMPILED],
            capture_output=True,
            text=True,
            check=True,
            cwd=SAMPLES.parent,
            env=os.environ | environment,
        )
        return [line.split() for line in done.stdout.splitlines()]

    compiled, plain = lines(), lines(NUMBA_DISABLE_JIT="1")
    assert [line[0] for line in compiled] == [line[0] for line in plain] == ["gantry/head", "couch/patient"]
    for one, other in zip(compiled, plain, strict=True):
        assert np.array(one[1:], float) == pytest.approx(np.array(other[1:], float), abs=1e-6)


class Stopping:
    """A progress that wants to stop once something was reported."""

    def __init__(self) -> None:
        self.reported: list[float] = []

    def report(self, fraction: float, message: str) -> None:
        assert message
        self.reported.append(fraction)

    def cancelled(self) -> bool:
        return len(self.reported) > 3


def test_it_can_be_stopped_and_leaves_no_thread() -> None:
    before = threading.active_count()
    with pytest.raises(Cancelled):
        nearest_approaches(build_scene(reference(CASES[0][0]).setup), WholePlane(), progress=Stopping())
    assert threading.active_count() == before


def test_progress_rises_to_near_the_end() -> None:
    reported: list[float] = []

    class Listening(Stopping):
        def cancelled(self) -> bool:
            reported[:] = self.reported
            return False

    nearest_approaches(build_scene(setup_with([post("post", 90.0, 560.0)])), WholePlane(), progress=Listening())
    assert reported == sorted(reported)
    assert 0.4 < reported[-1] <= 1.0


def test_the_mesh_lies_on_the_pieces_and_has_their_area() -> None:
    # A box alone: nothing is hidden, and its surface is known.
    scene = build_scene(setup_with())
    head = next(part for part in scene.parts if part.name == "head")
    points, triangles = display_mesh(head, 30.0)
    mesh = trimesh.Trimesh(points, triangles, process=False)
    assert mesh.is_watertight
    assert mesh.area == pytest.approx(6 * 100.0**2)
    assert mesh.volume == pytest.approx(100.0**3)
    assert np.linalg.norm(points[triangles] - np.roll(points[triangles], -1, axis=1), axis=2).max() <= 30.0


@pytest.mark.parametrize("max_edge_mm", [40.0, 150.0])
def test_every_piece_that_hides_nothing_keeps_its_surface(max_edge_mm: float) -> None:
    scene: Scene = approaches(*CASES[0]).scene
    for part in scene.parts:
        if len(part.pieces) == 1 and part.side is not Side.ROOM:
            mesh = trimesh.Trimesh(*display_mesh(part, max_edge_mm), process=False)
            true = ConvexHull(part.pieces[0].vertices)
            assert mesh.is_watertight, part.label
            assert mesh.area == pytest.approx(true.area, rel=1e-6)
            assert mesh.volume == pytest.approx(true.volume, rel=1e-6)


@pytest.mark.parametrize("edge_mm", [0.0, -1.0, math.nan, math.inf])
def test_a_mesh_without_a_length_is_refused(edge_mm: float) -> None:
    scene = build_scene(setup_with())
    with pytest.raises(GeometryError, match="max_edge_mm"):
        display_mesh(scene.parts[0], edge_mm)
