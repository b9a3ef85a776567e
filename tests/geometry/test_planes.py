"""Which pairs are asked, and on which angles they depend."""

import itertools
from dataclasses import replace

import numpy as np
import pytest
from numpy.typing import NDArray

from geometry.errors import GeometryError
from geometry.machine import EVERY_STAGE, JoinedPair, Mount, Part, PartKind, Room, Stage
from geometry.planes import Plane, checked_part_pairs, is_checked, planes_of
from geometry.scene import Motion, Scene, ScenePart, Side, build_scene
from geometry.setup import Required
from geometry.solids import Box
from geometry.sweep import sweep
from tests.reference.poses import asked, required_mm, standing_parts
from tests.reference.rooms import random_setup

Array = NDArray[np.float64]


def scene_part(name: str, side: Side, kind: PartKind = "machine") -> ScenePart:
    return ScenePart(name, side, Motion.STILL, kind, (), 0.0, None)


GANTRY, COUCH, WALL = (scene_part(side.value, side) for side in (Side.GANTRY, Side.COUCH, Side.ROOM))
PATIENT, BOARD = scene_part("patient", Side.COUCH, "patient"), scene_part("board", Side.COUCH, "device")
EVERYONE = (GANTRY, COUCH, WALL, PATIENT, BOARD)
ALL_JOINED = tuple(
    JoinedPair(one.name, other.name, "all of them") for one, other in itertools.product(EVERYONE, repeat=2)
)


@pytest.mark.parametrize(
    ("one", "other", "whatever_is_joined", "joinable"),
    [
        (GANTRY, COUCH, True, False),
        (GANTRY, PATIENT, True, False),
        (GANTRY, BOARD, True, False),
        (WALL, PATIENT, True, False),
        (WALL, BOARD, True, False),
        (GANTRY, WALL, False, True),
        (COUCH, WALL, False, True),
        # The same side is never asked.
        (COUCH, PATIENT, False, False),
        (PATIENT, BOARD, False, False),
        (GANTRY, GANTRY, False, False),
        (WALL, WALL, False, False),
    ],
)
def test_what_can_be_joined(one: ScenePart, other: ScenePart, whatever_is_joined: bool, joinable: bool) -> None:
    for first, second in ((one, other), (other, one)):
        assert is_checked(first, second, ALL_JOINED) is whatever_is_joined
        assert is_checked(first, second, ()) is (whatever_is_joined or joinable)


def test_joining_goes_by_both_names_either_way_round() -> None:
    for pair in (("gantry", "room"), ("room", "gantry")):
        assert not is_checked(GANTRY, WALL, (JoinedPair(*pair, "stands on it"),))
    for pair in (("gantry", "gantry"), ("room", "room"), ("gantry", "couch")):
        assert is_checked(GANTRY, WALL, (JoinedPair(*pair, "another pair"),))


@pytest.mark.parametrize("seed", range(10))
def test_pairs_of_random_rooms_are_those_of_the_reference(seed: int) -> None:
    setup = random_setup(np.random.default_rng(400 + seed))
    standing = standing_parts(setup)
    expected = {
        frozenset({one.label, other.label})
        for one, other in itertools.combinations(standing, 2)
        if asked(one, other, setup)
    }
    found = checked_part_pairs(build_scene(setup))
    assert len(found) == len(expected)
    assert {frozenset({one.label, other.label}) for one, other in found} == expected
    # Pairs that a room joins without effect, and with.
    assert frozenset({"gantry/gantry 0", "couch/couch 0"}) in expected
    assert frozenset({"room/fixed 0", "couch/patient"}) in expected
    assert frozenset({"gantry/gantry 0", "room/fixed 0"}) not in expected
    for machine, other in found:
        assert machine.side in (Side.GANTRY, Side.ROOM)
        assert machine.side is Side.GANTRY or other.side is Side.COUCH


@pytest.mark.parametrize("seed", range(5))
def test_planes_hold_every_pair_of_pieces_once_with_what_it_requires(seed: int) -> None:
    setup = random_setup(np.random.default_rng(500 + seed))
    scene = build_scene(setup)
    standing = {part.label: part for part in standing_parts(setup)}
    found: list[tuple[str, str, float]] = []
    for plane in planes_of(scene):
        for i, j, required in zip(plane.pairs.i, plane.pairs.j, plane.pairs.required, strict=True):
            one, other = scene.parts[plane.a.part[i]], scene.parts[plane.b.part[j]]
            found.append((one.label, other.label, float(required)))
            reference = required_mm(standing[one.label], standing[other.label], setup)
            assert required == pytest.approx(reference, abs=1e-12)
    count = sum(
        len(one.pieces) * len(other.pieces)
        for one, other in itertools.combinations(standing.values(), 2)
        if asked(one, other, setup)
    )
    assert len(found) == count
    assert len({required for _, _, required in found}) == 2


@pytest.mark.parametrize("seed", range(3))
def test_groups_of_pairs_are_held_by_their_spheres(seed: int) -> None:
    for plane in planes_of(build_scene(random_setup(np.random.default_rng(550 + seed)))):
        groups, pairs, b = plane.pairs.groups, plane.pairs, plane.b
        assert groups.first[0] == 0
        assert groups.first[-1] == len(pairs.i)
        assert np.all(np.diff(groups.first) > 0)
        for g, (start, stop) in enumerate(itertools.pairwise(groups.first)):
            assert len(set(pairs.i[start:stop])) == 1
            assert groups.required[g] == pairs.required[start:stop].max()
            for piece in pairs.j[start:stop]:
                vertices = b.vertices[b.first[piece] : b.first[piece + 1]]
                assert np.linalg.norm(vertices - groups.centres[g], axis=1).max() <= groups.radii[g] + 1e-9
                assert b.reach[piece] <= groups.reach[g]


def bodies_of(plane: Plane) -> set[str]:
    return {"gantry" * plane.with_gantry, "couch" * plane.with_couch} - {""}


def test_planes_depend_on_the_angles_that_turn_their_bodies() -> None:
    scene = scene_with(Part("pillar", Mount.COUCH, Box((9.0, 9.0, 9.0), (0.0, 500.0, 0.0)), frozenset()))
    planes = planes_of(scene)
    by_sides = {
        frozenset({str(scene.parts[k].motion) for k in (*plane.a.part, *plane.b.part)}): bodies_of(plane)
        for plane in planes
    }
    assert by_sides == {
        frozenset({"gantry", "turntable"}): {"gantry", "couch"},
        frozenset({"gantry", "still"}): {"gantry"},
        frozenset({"still", "turntable"}): {"couch"},
        frozenset({"still"}): set(),
    }


def scene_with(*more: Part, only: tuple[str, ...] = ()) -> Scene:
    setup = random_setup(np.random.default_rng(600), most_parts=1)
    parts = tuple(part for part in setup.room.parts if not only or part.name in only)
    return build_scene(replace(setup, room=replace(setup.room, parts=(*parts, *more)), devices=()))


def room_with(scene: Scene, **changes: object) -> Room:
    return replace(scene.setup.room, **changes)


def test_a_room_with_nothing_to_run_into_is_refused() -> None:
    # A map of endless clearance would say more than anyone knows.
    with pytest.raises(GeometryError, match="no part to keep clear of"):
        sweep(scene_with(only=("nothing",)), np.array([0.0, 10.0]), np.array([0.0]))


def test_a_couch_part_that_does_not_turn_is_still_on_the_couch_side() -> None:
    pillar = Part("pillar", Mount.COUCH, Box((50.0, 50.0, 50.0), (0.0, 0.0, 700.0)), frozenset[Stage]())
    head = Part("lid", Mount.GANTRY, Box((50.0, 50.0, 50.0), (0.0, 0.0, 850.0)))
    scene = scene_with(pillar, head, only=("nothing",))
    found = sweep(scene, np.array([0.0]), np.array([-60.0, 0.0, 45.0]))
    assert [part.label for part in scene.parts] == ["couch/pillar", "gantry/lid", "couch/patient"]
    assert found.clearance_mm[:, 0] == pytest.approx([100.0] * 3, abs=1e-9)


def test_joining_takes_a_pair_out_of_the_map() -> None:
    stand = Part("stand", Mount.FIXED, Box((100.0, 100.0, 100.0), (0.0, 1500.0, 0.0)))
    drum = Part("drum", Mount.GANTRY, Box((100.0, 100.0, 100.0), (0.0, 1390.0, 0.0)))
    scene = scene_with(stand, drum, only=("nothing",))
    angles = np.array([0.0]), np.array([0.0])
    assert sweep(scene, *angles).clearance_mm[0, 0] == pytest.approx(10.0, abs=1e-9)
    joined = room_with(scene, joined=(JoinedPair("stand", "drum", "bearing"),))
    parted = build_scene(replace(scene.setup, room=joined, required=Required(5.0, "plain")))
    assert sweep(parted, *angles).clearance_mm[0, 0] > 100.0


def test_following_the_turntable_decides_what_turns() -> None:
    post = Part("post", Mount.COUCH, Box((20.0, 20.0, 20.0), (400.0, 0.0, 0.0)), EVERY_STAGE - {Stage.TURNTABLE})
    scene = scene_with(post, only=("nothing",))
    assert next(part for part in scene.parts if part.name == "post").motion is Motion.STILL
    assert next(part for part in scene.parts if part.name == "patient").motion is Motion.TURNTABLE
