import numpy as np
import pytest

from app.window.room.floor import Floor, floor_of
from geometry.frames import R_fixed_turntable
from tests.app.window.scenes import scene_of

GREY = (0.8, 0.8, 0.8)


@pytest.mark.parametrize(
    "name", ["c_arm_wide/head", "c_arm_close/breast", "closed_bore/prostate", "cobalt/neck", "particle_snout/head"]
)
def test_every_sample_room_has_a_floor_and_its_surface_lies_on_it(name: str) -> None:
    scene = scene_of(name)
    part = floor_of(scene)
    assert part is not None
    assert part.label == "room/floor"
    mesh = Floor(scene, part).mesh(0.0, 0.0, GREY)
    corners = np.concatenate([piece.vertices for piece in part.pieces])
    assert np.ptp(mesh.points[:, 2]) == 0.0
    assert mesh.points[0, 2] == pytest.approx(corners[:, 2].max(), abs=2.0)
    # It reaches the rim nearly everywhere, and nowhere beyond.
    assert (mesh.points[:, :2].min(axis=0) >= corners[:, :2].min(axis=0) - 1e-3).all()
    assert (mesh.points[:, :2].max(axis=0) <= corners[:, :2].max(axis=0) + 1e-3).all()
    assert np.ptp(mesh.points[:, 0]) > 0.95 * np.ptp(corners[:, 0])
    assert mesh.colours is not None
    assert mesh.colours.min() < 0.7
    assert mesh.colours.max() == pytest.approx(0.8, abs=1e-3)


def light_at(floor: Floor, gantry_deg: float, couch_deg: float, x: float, y: float) -> float:
    mesh = floor.mesh(gantry_deg, couch_deg, GREY)
    nearest = np.argmin(np.hypot(mesh.points[:, 0] - x, mesh.points[:, 1] - y))
    assert mesh.colours is not None
    return float(mesh.colours[nearest, 0])


def test_the_shade_of_the_couch_turns_with_it() -> None:
    scene = scene_of("c_arm_wide/head")
    part = floor_of(scene)
    assert part is not None
    floor = Floor(scene, part)
    pedestal = np.array([0.0, -1150.0, 0.0])
    aside = R_fixed_turntable(60.0) @ pedestal
    assert light_at(floor, 0.0, 0.0, *pedestal[:2]) < 0.6
    assert light_at(floor, 0.0, 0.0, *aside[:2]) > 0.7
    assert light_at(floor, 0.0, 60.0, *aside[:2]) < 0.6
    assert light_at(floor, 0.0, 60.0, *pedestal[:2]) > 0.7


def test_the_head_darkens_the_floor_when_it_comes_near() -> None:
    scene = scene_of("c_arm_wide/head")
    part = floor_of(scene)
    assert part is not None
    floor = Floor(scene, part)
    assert light_at(floor, 180.0, 90.0, 0.0, 0.0) < light_at(floor, 0.0, 90.0, 0.0, 0.0) - 0.05


def test_what_has_not_changed_is_taken_over() -> None:
    first, second = scene_of("c_arm_wide/head"), scene_of("c_arm_wide/prostate")
    parts = floor_of(first), floor_of(second)
    assert parts[0] is not None
    assert parts[1] is not None
    before = Floor(first, parts[0])
    assert Floor(second, parts[1], before).ground is before.ground
    other = scene_of("cobalt/neck")
    elsewhere = floor_of(other)
    assert elsewhere is not None
    assert Floor(other, elsewhere, before).ground is not before.ground
