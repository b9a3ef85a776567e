"""A small room with a small set-up, assessed, for what is written of assessments."""

import datetime
from dataclasses import replace
from functools import cache

from app.files.provenance import Provenance, provenance_of
from geometry.assess import Assessment, Options, assess
from geometry.machine import Axis, Couch, JoinedPair, Mount, Part, Readout, Room, Stage, Survey
from geometry.setup import Component, Isocentre, OnTable, Required, Setup, Surface
from geometry.solids import Box, Cylinder

DAY = datetime.date(2026, 3, 4)
OPTIONS = Options(gantry_step_deg=10.0, couch_step_deg=30.0, edge_deg=1.0)

_LONG = Axis(-5000.0, 5000.0)
_NONE = Axis(0.0, 0.0)

ROOM = Room(
    name="Small room",
    demonstration=True,
    survey=None,
    source_axis_distance_mm=1000.0,
    gantry=Axis(-185.0, 185.0),
    collimator=Axis(-180.0, 180.0),
    couch=Couch(
        turntable=Axis(-95.0, 95.0),
        eccentric=_NONE,
        lateral=Axis(-230.0, 230.0),
        longitudinal=_LONG,
        vertical=_LONG,
        pitch=_NONE,
        roll=_NONE,
    ),
    parts=(
        Part("head", Mount.GANTRY, Cylinder(300.0, (0.0, 0.0, 420.0), (0.0, 0.0, 900.0)), colour="#cfd2d4"),
        Part("drum", Mount.GANTRY, Cylinder(900.0, (0.0, 900.0, 0.0), (0.0, 1000.0, 0.0))),
        Part("table top", Mount.COUCH, Box((530.0, 2200.0, 70.0), (0.0, -1100.0, -35.0))),
        Part(
            "pedestal", Mount.COUCH, Box((400.0, 700.0, 300.0), (0.0, -1500.0, -1000.0)), frozenset({Stage.TURNTABLE})
        ),
        Part("stand", Mount.FIXED, Box((1400.0, 400.0, 2000.0), (0.0, 1200.0, 0.0)), colour="#5f666b"),
        Part("floor", Mount.FIXED, Box((6000.0, 6000.0, 100.0), (0.0, 0.0, -1350.0))),
    ),
    joined=(
        JoinedPair("drum", "stand", "the drum turns in the stand"),
        JoinedPair("pedestal", "floor", "it stands on the floor"),
    ),
)
REQUIRED = Required(
    fixed_mm=20.0,
    reason="the rule of a test",
    k=2.0,
    components=(Component("couch sag", 2.0), Component("patient surface", 5.0, patient_only=True)),
)
SETUP = Setup(
    name="Small set-up",
    room=ROOM,
    patient=Surface(Box((400.0, 250.0, 1700.0)), "a box"),
    patient_position="HFS",
    on_table=OnTable(from_head_end_mm=40.0),
    isocentre=Isocentre(None, dicom_mm=(0.0, 0.0, 600.0)),
    required=REQUIRED,
    demonstration=True,
)
OWN_GANTRY = Axis(-185.0, 185.0, readout=Readout(180.0, -1, 0.1))
OWN_COUCH = Axis(-95.0, 95.0, readout=Readout(180.0, 1, 0.1))


def setup_in(room: Room, **changes: object) -> Setup:
    """Return the small set-up in another room, with other changes."""
    return replace(SETUP, room=room, **changes)  # type: ignore[arg-type]


def room_with(**changes: object) -> Room:
    """Return the small room with changes."""
    return replace(ROOM, **changes)  # type: ignore[arg-type]


@cache
def plain() -> Assessment:
    """Return the small set-up, assessed: contact, short and permitted pairs, and no readouts of its own."""
    return assess(SETUP, OPTIONS)


@cache
def with_readouts() -> Assessment:
    """Return it in a room whose gantry counts backwards from 180, and whose couch counts from 180."""
    couch = replace(ROOM.couch, turntable=OWN_COUCH)
    return assess(setup_in(room_with(gantry=OWN_GANTRY, couch=couch)), OPTIONS)


@cache
def one_couch_angle() -> Assessment:
    """Return it in a room whose couch cannot turn, as in a bore."""
    couch = replace(ROOM.couch, turntable=_NONE)
    return assess(setup_in(room_with(gantry=Axis(-180.0, 180.0), couch=couch)), OPTIONS)


@cache
def without_travel() -> Assessment:
    """Return a set-up to which the couch cannot slide."""
    return assess(replace(SETUP, on_table=OnTable(from_head_end_mm=40.0, lateral_mm=400.0)), OPTIONS)


@cache
def unsurveyed() -> Assessment:
    """Return the set-up in a room that is no demonstration, and that nobody surveyed."""
    return assess(setup_in(room_with(demonstration=False), demonstration=False), OPTIONS)


def named(assessment: Assessment, setup: str, room: str) -> Assessment:
    """Return the assessment under other names, without computing it again."""
    renamed = replace(assessment.scene.setup, name=setup, room=replace(assessment.scene.setup.room, name=room))
    return replace(assessment, scene=replace(assessment.scene, setup=renamed))


def provenance(assessment: Assessment) -> Provenance:
    """Return where an assessment comes from, dated."""
    return provenance_of(assessment.scene, assessment.options, DAY)


SURVEY = Survey("a physicist", "2025-03-14", "tape measure", 3.0)
