"""Scenes that differ by shifts, and by more."""

from dataclasses import replace

import numpy as np
import pytest

from geometry.machine import Part
from geometry.scene import Motion, Scene, build_scene
from geometry.scene_shifts import rigid_bodies, shifts_between
from geometry.setup import Setup
from tests.geometry.carried_cases import with_isocentre_off, with_patient_off
from tests.geometry.made_rooms import block, made_setup, on_gantry, on_still_couch, on_table, on_turntable

SHIFT = np.array([3.0, -4.0, 12.0])


def plain_setup() -> Setup:
    """Return a set-up in which table-top, patient and fixed axes are parallel; HFS, so DICOM x, y, z are X, -Z, Y."""
    cube = (40.0, 40.0, 40.0)
    return made_setup(
        on_gantry(block(cube, (0.0, 0.0, 500.0))),
        on_turntable(block(cube, (0.0, 0.0, -300.0))),
        on_still_couch(block(cube, (0.0, 0.0, -700.0))),
        on_table(block(cube, (0.0, 0.0, -100.0))),
    )


def named(scene: Scene, name: str) -> int:
    return [part.name for part in scene.parts].index(name)


def test_an_isocentre_elsewhere_shifts_the_table_with_its_patient_the_other_way() -> None:
    setup = plain_setup()
    scene = build_scene(setup)
    shifts = shifts_between(scene, build_scene(with_isocentre_off(setup, SHIFT)))
    assert shifts is not None
    for name in ("table", "patient"):
        assert shifts[named(scene, name)] == pytest.approx([-3.0, -12.0, -4.0], abs=1e-9)
    for name in ("mover", "column", "pedestal"):
        assert not shifts[named(scene, name)].any()


def test_a_patient_elsewhere_on_the_table_shifts_the_table_alone() -> None:
    setup = plain_setup()
    scene = build_scene(setup)
    shifts = shifts_between(scene, build_scene(with_patient_off(setup, SHIFT)))
    assert shifts is not None
    assert np.abs(shifts[named(scene, "patient")]).max() < 1e-9
    # Nearer to the head end, +Y, by -3 mm; to the side, X, by -4 mm; 12 mm up from the table.
    assert shifts[named(scene, "table")] == pytest.approx([4.0, 3.0, -12.0], abs=1e-9)


def test_what_turns_with_the_couch_falls_into_bodies() -> None:
    scene = build_scene(plain_setup())
    bodies = rigid_bodies(scene)
    turning = [named(scene, name) for name in ("column", "table", "patient")]
    assert len(set(bodies[turning])) == 3
    assert all((bodies[k] == -1) == (part.motion is not Motion.TURNTABLE) for k, part in enumerate(scene.parts))


def test_a_device_is_of_one_body_with_the_table() -> None:
    setup = plain_setup()
    table = next(part for part in setup.room.parts if part.name == "table")
    scene = build_scene(replace(setup, devices=(Part("wedge", table.mount, table.solid, kind="device"),)))
    bodies = rigid_bodies(scene)
    assert bodies[named(scene, "wedge")] == bodies[named(scene, "table")]


def test_scenes_that_differ_by_more() -> None:
    setup = plain_setup()
    scene = build_scene(setup)
    cube = (40.0, 40.0, 40.0)
    wider = on_table(block((40.0, 40.0, 41.0), (0.0, 0.0, -100.0)))
    other_gantry = on_gantry(block(cube, (0.0, 0.0, 501.0)))
    for other in (
        replace(setup, pitch_deg=1.0),
        replace(setup, roll_deg=-0.1),
        replace(setup, required=replace(setup.required, fixed_mm=6.0)),
        replace(setup, patient_position="HFP"),
        replace(setup, room=replace(setup.room, parts=(*setup.room.parts[:-1], wider))),
        replace(setup, room=replace(setup.room, parts=(other_gantry, *setup.room.parts[1:]))),
        replace(setup, room=replace(setup.room, parts=setup.room.parts[:-1])),
    ):
        assert shifts_between(scene, build_scene(other)) is None


def test_equal_rooms_need_not_be_the_same_object() -> None:
    setup = plain_setup()
    again = replace(setup, room=replace(setup.room))
    shifts = shifts_between(build_scene(setup), build_scene(again))
    assert shifts is not None
    assert not shifts.any()
