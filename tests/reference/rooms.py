"""Invented rooms and set-ups from a seeded generator: every shape, mount, stage and option there is, nothing sensible.

Sizes are chosen so that some pairs of angles are in contact and most are not. All are marked as demonstrations.
"""

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray
from scipy.spatial.transform import Rotation

from geometry.machine import (
    EVERY_STAGE,
    Accessory,
    Arm,
    ArmPosition,
    Axis,
    Couch,
    JoinedPair,
    Mount,
    Part,
    Room,
    Stage,
)
from geometry.outlines import CircleOutline, EllipseOutline, Outline, PolygonOutline, RoundedRectangle
from geometry.setup import Component, Isocentre, OnTable, Required, Setup, Surface
from geometry.solids import Box, Cylinder, Extrusion, Frustum, Group, Loft, Placed, Ring, Solid
from tests.reference.poses import PATIENT_AXES

Array = NDArray[np.float64]
Generator = np.random.Generator

# Coarse, so that a round part has tens of corners and not hundreds.
EXCESS_MM = 4.0


def random_setup(rng: Generator, *, couch_turns: bool = True, most_parts: int = 4) -> Setup:
    """Return a set-up in a room of its own, 1 to `most_parts` parts on each mount."""
    room = _room(rng, couch_turns, most_parts)
    patient = Surface(
        _placed(rng, _any_shape(rng, 120.0), _point(rng, 200.0)),
        "invented shape",
        (("vertex", _tuple(_point(rng, 150.0))), ("navel", _tuple(_point(rng, 150.0)))),
    )
    isocentre = (
        Isocentre("navel", _tuple(_point(rng, 40.0)))
        if rng.random() < 0.5
        else Isocentre(None, dicom_mm=_tuple(_point(rng, 200.0)))
    )
    return Setup(
        name="invented",
        room=room,
        patient=patient,
        patient_position=str(rng.choice(list(PATIENT_AXES))),
        on_table=OnTable(float(rng.uniform(-50, 400)), float(rng.uniform(-60, 60)), float(rng.uniform(0, 60))),
        isocentre=isocentre,
        required=_required(rng),
        devices=tuple(
            Part(f"device {k}", Mount.COUCH, _placed(rng, _any_shape(rng, 70.0), _point(rng, 300.0)), kind="device")
            for k in range(rng.integers(0, 3))
        ),
        pitch_deg=float(rng.uniform(-4, 4)),
        roll_deg=float(rng.uniform(-4, 4)),
        eccentric_deg=float(rng.uniform(-60, 60)) if rng.random() < 0.5 else 0.0,
        collimator_deg=float(rng.uniform(-180, 180)) if rng.random() < 0.5 else None,
        fitted=("cone",) if rng.random() < 0.5 else (),
        arm_positions=(
            ("panel", str(rng.choice(["parked", "out"]))),
            ("snout", float(rng.uniform(0, 120))),
        ),
        demonstration=True,
    )


def random_hull(rng: Generator, count: int, scale_mm: float) -> Array:
    """Return points, (count, 3), mm, about the origin whose hull may be stout, flat or a needle."""
    points = rng.normal(size=(count, 3)) * scale_mm
    squeeze = rng.choice([1.0, 1.0, 0.1, 1e-3], size=3)
    return Rotation.random(random_state=rng).apply(points * squeeze)


def _room(rng: Generator, couch_turns: bool, most_parts: int) -> Room:
    far = Axis(-4000.0, 4000.0)
    turn = 90.0 if couch_turns else 0.0
    couch = Couch(
        turntable=Axis(-turn, turn),
        eccentric=Axis(-90.0, 90.0),
        lateral=far,
        longitudinal=far,
        vertical=far,
        pitch=Axis(-5.0, 5.0),
        roll=Axis(-5.0, 5.0),
        eccentric_offset_mm=_tuple(_point(rng, 150.0)),
        head_end_mm=float(rng.uniform(-100, 900)),
    )
    parts = [part for mount in Mount for part in _parts_on(rng, mount, int(rng.integers(1, most_parts + 1)))]
    parts.append(_part(rng, "cone", Mount.COLLIMATOR, accessory="cone"))
    parts.append(_part(rng, "panel", Mount.GANTRY, arm="panel"))
    parts.append(_part(rng, "snout", Mount.COLLIMATOR, arm="snout"))
    return Room(
        name="invented",
        demonstration=True,
        survey=None,
        source_axis_distance_mm=1000.0,
        gantry=Axis(-185.0, 185.0),
        collimator=Axis(-185.0, 185.0),
        couch=couch,
        parts=tuple(parts),
        arms=(_panel_arm(rng), Arm("snout", (), direction=(0.0, 0.3, -1.0), travel_mm=(0.0, 120.0))),
        accessories=(Accessory("cone"),),
        # The last two cannot be joined and must be asked all the same.
        joined=(
            JoinedPair("gantry 0", "fixed 0", "invented"),
            JoinedPair("fixed 0", "couch 0", "invented"),
            JoinedPair("gantry 0", "couch 0", "invented, without effect"),
            JoinedPair("fixed 0", "patient", "invented, without effect"),
        ),
        max_excess_mm=EXCESS_MM,
    )


def _panel_arm(rng: Generator) -> Arm:
    out = ArmPosition(
        "out",
        _tuple(_point(rng, 100.0)),
        rng.choice(["x", "y", "z"]),
        float(rng.uniform(-90, 90)),
        _tuple(_point(rng, 200.0)),
    )
    return Arm("panel", (ArmPosition("parked", _tuple(_point(rng, 50.0))), out))


def _parts_on(rng: Generator, mount: Mount, count: int) -> list[Part]:
    return [_part(rng, f"{mount} {k}", mount) for k in range(count)]


def _part(rng: Generator, name: str, mount: Mount, accessory: str | None = None, arm: str | None = None) -> Part:
    follows = EVERY_STAGE
    if mount is Mount.FIXED:
        where = _direction(rng) * rng.uniform(700, 1300)
    elif mount is Mount.COUCH:
        where = _point(rng, 350.0)
        follows = frozenset(stage for stage in Stage if rng.random() < 0.75)
    elif mount is Mount.COLLIMATOR:
        where = np.array([0.0, 0.0, rng.uniform(300, 700)]) + _point(rng, 60.0)
    else:
        where = _direction(rng) * rng.uniform(400, 900)
    solid = _placed(rng, _any_shape(rng, float(rng.uniform(40, 160))), where)
    return Part(name, mount, solid, follows, accessory=accessory, arm=arm)


def _required(rng: Generator) -> Required:
    components = (
        Component("room model", float(rng.uniform(0, 4))),
        Component("patient motion", float(rng.uniform(0, 20)), patient_only=True),
    )
    return Required(float(rng.uniform(5, 40)), "invented", float(rng.uniform(1, 3)), components)


def _any_shape(rng: Generator, size: float) -> Solid:
    """Return a shape about the origin, about `size` mm across its half."""
    shapes: tuple[Callable[[Generator, float], Solid], ...] = (
        lambda r, s: Box(_tuple(s * r.uniform(0.3, 2.0, 3))),
        lambda r, s: Cylinder(s * r.uniform(0.2, 1.0), *_ends(r, s)),
        lambda r, s: Frustum(0.0 if r.random() < 0.3 else s * 0.4, s * r.uniform(0.2, 1.0), *_ends(r, s)),
        lambda r, s: Extrusion(_any_outline(r, s), r.choice(["x", "y", "z"]), -s * r.uniform(0.1, 1.0), s * 0.7),
        _loft,
        _ring,
        lambda r, s: Group((Box((s, s * 0.5, s)), Cylinder(s * 0.3, *_ends(r, s)))),
    )
    return shapes[int(rng.integers(len(shapes)))](rng, size)


def _any_outline(rng: Generator, size: float) -> Outline:
    if rng.random() < 0.4:
        # An L with a hole: concave, so that it is cut into convex parts.
        corners = ((-1.0, -1.0), (1.0, -1.0), (1.0, -0.3), (-0.3, -0.2), (-0.3, 1.0), (-1.0, 1.0))
        hole = ((-0.8, -0.8), (-0.5, -0.8), (-0.5, -0.5), (-0.8, -0.5))
        return PolygonOutline(
            tuple((x * size, y * size) for x, y in corners), (tuple((x * size, y * size) for x, y in hole),)
        )
    return _convex_outline(rng, size)


def _convex_outline(rng: Generator, size: float) -> Outline:
    choice = rng.integers(3)
    if choice == 0:
        return CircleOutline(size * rng.uniform(0.3, 1.0))
    if choice == 1:
        return EllipseOutline(size * rng.uniform(0.3, 1.0), size * 0.5, exponent=rng.choice([2.0, 3.5]))
    return RoundedRectangle(size * 1.5, size * rng.uniform(0.5, 1.5), size * 0.2)


def _loft(rng: Generator, size: float) -> Solid:
    positions = (-size, -size * rng.uniform(0.0, 0.8), size * rng.uniform(0.1, 1.0))
    return Loft(tuple((p, _convex_outline(rng, size)) for p in positions), rng.choice(["x", "y", "z"]))


def _ring(rng: Generator, size: float) -> Solid:
    arc = None if rng.random() < 0.3 else (float(rng.uniform(-180, 0)), float(rng.uniform(20, 170)))
    return Ring(size * rng.uniform(0.5, 0.9), size * 1.2, *_ends(rng, size * 0.4), arc)


def _ends(rng: Generator, size: float) -> tuple[tuple[float, float, float], tuple[float, float, float]]:
    half = _direction(rng) * size * rng.uniform(0.3, 1.0)
    return _tuple(-half), _tuple(half)


def _placed(rng: Generator, solid: Solid, where: Array) -> Solid:
    matrix = np.eye(4)
    if rng.random() < 0.7:
        matrix[:3, :3] = Rotation.random(random_state=rng).as_matrix()
    matrix[:3, 3] = where
    return Placed(solid, matrix)


def _direction(rng: Generator) -> Array:
    vector = rng.normal(size=3)
    unit: Array = vector / np.linalg.norm(vector)
    return unit


def _point(rng: Generator, within: float) -> Array:
    return rng.uniform(-within, within, 3)


def _tuple(values: Array) -> tuple[float, float, float]:
    x, y, z = (float(value) for value in values)
    return x, y, z
